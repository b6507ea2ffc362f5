"""A session on a rig that keeps the wire's manners: good runs, refusals, restarts, lost links, interrupts."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise, product

import pytest

from pulsewright.errors import Interrupted, LinkFault, OtherFirmware, RigFault, RigRestarted
from pulsewright.link.faulty import Harm, Kind, Way
from pulsewright.link.line import Line
from pulsewright.link.results import Block, LinkProgress
from pulsewright.link.session import Session
from pulsewright.wire.frames import Message
from pulsewright.wire.tables import Fault, Flow, Frame, Outcome, State
from tests.link.fake_rig import MS, FakeRig, fault
from tests.link.kit import IMAGE, WORDS, Desk, image_blocks, sequence

ONCE = dict.fromkeys(range(WORDS), 1)


def test_connect_tells_the_boards_tables() -> None:
    """The facts are those of hello and of all four pages of describe, and the rate is the rig's top rate."""
    facts = Desk().session.connect()
    assert (facts.boot, facts.board, facts.window_blocks, facts.baud) == (7, "fake", 3, 1_000_000)
    assert facts.nominal == ((0x0100, 0x0302, 0x0504), (0x0706, 0x0908, 0x0B0A))
    assert facts.ceilings == (0x0201, 0x0403)
    assert facts.cost_ticks == {1: 4, 2: 4}


def test_a_read_brings_the_words_in_order() -> None:
    """A reading sequence without blocks of its own asks for its whole range, and each word is read once."""
    desk = Desk()
    desk.rig.cells[:WORDS] = IMAGE
    desk.session.connect()
    result = desk.session.run(sequence(Flow.READ))
    assert (result.outcome, result.data, result.trouble) == (Outcome.DONE, IMAGE, None)
    assert (result.id_bytes, result.readings) == (b"\x8f\x0d", ((10, 0x0201),))
    assert desk.rig.touched == ONCE


def test_a_write_applies_each_word_and_tells_of_each_block() -> None:
    """Each block is answered once, with its histogram, and the cells hold the image."""
    desk = Desk()
    desk.session.connect()
    result = desk.session.run(sequence(Flow.WRITE), image_blocks())
    assert bytes(desk.rig.cells[:WORDS]) == IMAGE
    assert [(block.index, block.first, block.words, block.failed) for block in result.blocks] == [
        (0, 0, 8, None),
        (1, 8, 8, None),
    ]
    assert result.blocks[0].histogram[0] == 8
    assert desk.rig.touched == ONCE


def test_words_that_the_mask_leaves_are_left() -> None:
    """A 0 bit of the mask keeps its word as it was; bit 0 is the first word."""
    desk = Desk()
    desk.session.connect()
    desk.session.run(sequence(Flow.WRITE), [Block(0, 8, b"\x05", bytes(8))])
    assert bytes(desk.rig.cells[:8]) == b"\x00\xff\x00\xff\xff\xff\xff\xff"


def test_a_sequence_without_blocks_gets_none() -> None:
    """Flow none ends by itself; no frame of a block reaches the rig."""
    desk = Desk()
    desk.session.connect()
    assert desk.session.run(sequence(Flow.NONE)).outcome is Outcome.DONE
    assert desk.rig.touched == {}


def test_a_clean_run_repeats_nothing() -> None:
    """On a good line no frame is sent again, damaged, or unasked for, at either end."""
    desk = Desk()
    desk.session.connect()
    desk.session.run(sequence(Flow.READ))
    counters = desk.session.run(sequence(Flow.WRITE), image_blocks()).counters
    assert (counters.sent_again, counters.damaged, counters.dropped) == (0, 0, 0)
    assert counters.rig is not None
    assert (counters.rig.dropped, counters.rig.repeated) == (0, 0)


def test_many_sequences_each_have_a_permit_of_their_own() -> None:
    """The number of a permit is never used again in a boot."""
    desk, numbers = Desk(), set()
    desk.session.connect()
    for _ in range(5):
        desk.session.run(sequence(Flow.READ))
        assert desk.rig.permit is not None
        numbers.add(desk.rig.permit.number)
    assert len(numbers) == 5


def test_more_blocks_than_the_window_go_through() -> None:
    """Forty blocks pass a window of three, each word once."""
    desk = Desk(FakeRig(words=320))
    desk.session.connect()
    image = bytes(at % 251 for at in range(320))
    result = desk.session.run(sequence(Flow.WRITE, words=320), image_blocks(image))
    assert bytes(desk.rig.cells) == image
    assert [block.index for block in result.blocks] == list(range(40))
    assert desk.rig.touched == dict.fromkeys(range(320), 1)


def test_progress_counts_words_up_to_all() -> None:
    """Progress never goes back and ends at the number of words."""
    seen: list[LinkProgress] = []
    desk = Desk(on_progress=seen.append)
    desk.session.connect()
    desk.session.run(sequence(Flow.READ))
    words = [progress.words for progress in seen]
    assert words == sorted(words)
    assert words[-1] == WORDS


def test_a_word_that_fails_is_a_result() -> None:
    """A sequence that fails is returned with the fault's numbers, and the latched fault is cleared for the next one."""
    desk = Desk(FakeRig(fail_at=9))
    desk.session.connect()
    result = desk.session.run(sequence(Flow.WRITE), image_blocks())
    assert result.outcome is Outcome.FAILED
    assert result.trouble is not None
    assert (result.trouble.name, result.trouble.address) == ("failed", 9)
    desk.rig.fail_at = None
    assert desk.session.run(sequence(Flow.READ)).outcome is Outcome.DONE


def test_a_slow_block_is_waited_for() -> None:
    """A block that takes seconds is answered in the end, applied once, while the rig's dead-man is kept fed."""
    desk = Desk(FakeRig(word_ticks=400 * MS))
    desk.session.connect()
    result = desk.session.run(sequence(Flow.WRITE), image_blocks())
    assert result.outcome is Outcome.DONE
    assert result.counters.elapsed_us > 6_000_000
    assert desk.rig.touched == ONCE


def test_another_wire_table_is_another_firmware() -> None:
    """A fingerprint that is not this program's ends the session before any command."""
    desk = Desk(FakeRig(fingerprint=0x12345678))
    with pytest.raises(OtherFirmware) as caught:
        desk.session.connect()
    assert "12345678" in caught.value.got
    assert desk.line.passed["to rig"] == 6


def test_an_earlier_fault_is_told_and_cleared() -> None:
    """A fault latched before the session is in the facts, and does not stop the next sequence."""
    desk = Desk()
    desk.rig.latched = fault(Fault.DEAD_MAN, op=12)
    facts = desk.session.connect()
    assert facts.earlier is not None
    assert (facts.earlier.name, facts.earlier.op) == ("dead_man", 12)
    assert desk.session.run(sequence(Flow.READ)).outcome is Outcome.DONE


@pytest.mark.parametrize(("holds", "baud"), [(500_000, 500_000), (300_000, 250_000), (38_400, 38_400)])
def test_a_rate_that_does_not_hold_is_left(holds: int, baud: int) -> None:
    """The session works at the highest rate at which the test pattern came back, down to that of greetings."""
    rig = FakeRig()
    rig.deaf_above = holds
    desk = Desk(rig)
    assert desk.session.connect().baud == baud
    assert desk.session.run(sequence(Flow.READ)).data == b"\xff" * WORDS


def test_a_rate_at_which_only_the_rig_hears_is_left() -> None:
    """A rig that hears the host at the new rate stays there; it is brought back by a break, and the session goes on."""
    rig = FakeRig()
    rig.mute_above = 500_000
    desk = Desk(rig)
    assert desk.session.connect().baud == 500_000
    assert desk.session.run(sequence(Flow.READ)).data == b"\xff" * WORDS


def test_every_heartbeat_is_answered_at_once(monkeypatch: pytest.MonkeyPatch) -> None:
    """The next frame after a heartbeat is a keep-alive with its index, before the session waits for anything else."""
    log: list[Message] = []
    send, receive = Line.send, Line.receive

    def sending(line: Line, message: Message, *, again: bool = False) -> None:
        log.append(message)
        send(line, message, again=again)

    def receiving(line: Line, until_us: int) -> Message | None:
        message = receive(line, until_us)
        log.extend([message] if message else [])
        return message

    monkeypatch.setattr(Line, "send", sending)
    monkeypatch.setattr(Line, "receive", receiving)
    desk = Desk(FakeRig(word_ticks=100 * MS))
    desk.session.connect()
    desk.session.run(sequence(Flow.WRITE), image_blocks())
    pairs = [(now, then) for now, then in pairwise(log) if now.kind is Frame.HEARTBEAT]
    assert len(pairs) > 10
    assert all(then.kind is Frame.KEEP_ALIVE and then.index == now.index for now, then in pairs)


def test_a_closed_session_leaves_the_rig_at_the_rate_of_greetings() -> None:
    """The next session is heard."""
    desk = Desk()
    desk.session.connect()
    desk.session.close()
    assert desk.rig.baud == 38_400


def test_a_rig_left_at_a_high_rate_is_brought_back() -> None:
    """A session that ended without a word leaves a rig that the next one still reaches, by a break."""
    desk = Desk()
    desk.session.connect()
    again = Desk(desk.rig)
    assert again.session.connect().baud == 1_000_000


def test_a_refusal_names_the_fault() -> None:
    """A command that the rig refuses is a RigFault with the fault's name."""
    desk = Desk()
    desk.session.connect()
    wrong = sequence(Flow.READ)
    wrong = replace(wrong, permit=replace(wrong.permit, crc32=1))
    with pytest.raises(RigFault, match="bad crc"):
        desk.session.run(wrong)
    assert desk.rig.runs == 0


def test_silence_is_a_link_fault() -> None:
    """A port with nothing behind it is told after some seconds, as silence."""
    desk = Desk(harms=[Harm("to rig", 0, "cut")])
    with pytest.raises(LinkFault, match="no answer") as caught:
        desk.session.connect()
    assert caught.value.got == "silence"


def test_noise_is_told_from_silence() -> None:
    """Bytes that are no greeting are shown."""
    harms = [Harm("from rig", at, "flip", 0xFF) for at in range(0, 4096, 4)]
    desk = Desk(harms=harms)
    with pytest.raises(LinkFault, match="no rig") as caught:
        desk.session.connect()
    assert "other bytes" in caught.value.got


def _cut_while_working(way: Way) -> Desk:
    """A desk on which one way is cut while the first block is burned."""
    probe = Desk()
    probe.session.connect()
    at = {"to rig": probe.line.passed["to rig"] + 150, "from rig": probe.line.passed["from rig"] + 160}
    desk = Desk(FakeRig(word_ticks=10 * MS), [Harm(way, at[way], "cut")])
    desk.session.connect()
    return desk


def test_a_deaf_host_is_a_link_fault_with_counters() -> None:
    """Nothing comes from the rig any more: LinkFault, the counters of this end, and the rig is safe."""
    desk = _cut_while_working("from rig")
    with pytest.raises(LinkFault) as caught:
        desk.session.run(sequence(Flow.WRITE), image_blocks())
    assert caught.value.facts[0].startswith("frames here")
    assert "not known" in caught.value.facts[1]
    assert not desk.rig.powered


def test_a_deaf_rig_trips_by_its_dead_man() -> None:
    """Nothing reaches the rig any more: it says itself what it did, and the result is kept without its counters."""
    desk = _cut_while_working("to rig")
    result = desk.session.run(sequence(Flow.WRITE), image_blocks())
    assert result.outcome is Outcome.TRIPPED
    assert result.trouble is not None
    assert result.trouble.name == "dead_man"
    assert result.counters.rig is None
    assert not desk.rig.powered


@pytest.mark.parametrize("when_ms", [1, 8, 30, 70])
@pytest.mark.parametrize("deaf_above", [None, 38_400])
def test_a_reset_under_a_job_is_told(when_ms: int, deaf_above: int | None) -> None:
    """Another boot number in the middle of a sequence is RigRestarted, at a high rate and at that of greetings."""
    rig = FakeRig(word_ticks=10 * MS)
    rig.deaf_above = deaf_above
    desk = Desk(rig)
    desk.session.connect()
    rig.reset_at = rig.t + when_ms * MS
    with pytest.raises(RigRestarted) as caught:
        desk.session.run(sequence(Flow.WRITE), image_blocks())
    assert (caught.value.wanted, caught.value.got) == ("boot number 7", "boot number 8")
    assert rig.runs <= 1


def test_a_reset_between_sequences_is_told() -> None:
    """A rig that was reset since the last sequence is not sent a permit of the boot before."""
    desk = Desk()
    desk.session.connect()
    desk.session.run(sequence(Flow.READ))
    desk.rig.reset_at = desk.rig.t + 1
    with pytest.raises(RigRestarted):
        desk.session.run(sequence(Flow.READ))
    assert desk.rig.runs == 1


def _write_job(desk: Desk) -> None:
    desk.session.connect()
    desk.session.run(sequence(Flow.WRITE), image_blocks())


def _job_us() -> tuple[int, int]:
    """When a write job of some length connects and when it ends."""
    desk = Desk(FakeRig(word_ticks=2 * MS))
    desk.session.connect()
    begun = desk.line.now_us()
    desk.session.run(sequence(Flow.WRITE), image_blocks())
    return begun, desk.line.now_us()


def test_an_interrupt_at_any_moment_ends_safe() -> None:
    """Stopped at every half millisecond of connecting and working, the session says Interrupted and nothing stands."""
    begun, end = _job_us()
    stages = set()
    for at in range(0, end, 500):
        desk = Desk(FakeRig(word_ticks=2 * MS), interrupts=[at])
        with pytest.raises(Interrupted) as caught:
            _write_job(desk)
        assert not desk.rig.powered
        assert desk.rig.state is not State.RUNNING
        assert caught.value.did
        stages.add((at >= begun, desk.rig.runs))
    assert stages == {(False, 0), (True, 0), (True, 1)}


def test_an_interrupt_waits_for_self_timed_work() -> None:
    """One interrupt: the rig's own wait is not cut short, and it is kept alive meanwhile."""
    begun, end = _job_us()
    at = (begun + end) // 2
    desk = Desk(FakeRig(word_ticks=2 * MS, self_timed_ticks=3_000 * MS), interrupts=[at])
    desk.session.connect()
    with pytest.raises(Interrupted):
        desk.session.run(sequence(Flow.WRITE), image_blocks())
    assert desk.line.now_us() >= at + 3_000_000


def test_a_second_interrupt_skips_the_wait() -> None:
    """The second interrupt makes the rig end at once."""
    begun, end = _job_us()
    at = (begun + end) // 2
    desk = Desk(FakeRig(word_ticks=2 * MS, self_timed_ticks=3_000 * MS), interrupts=[at, at + 400_000])
    desk.session.connect()
    with pytest.raises(Interrupted):
        desk.session.run(sequence(Flow.WRITE), image_blocks())
    assert at + 400_000 <= desk.line.now_us() < at + 600_000


def test_a_rig_that_will_not_stop_is_kept_alive_no_longer() -> None:
    """After some seconds of telling it, the session gives it up to its dead-man: LinkFault, and nothing stands."""
    desk = Desk(FakeRig(word_ticks=60 * MS), interrupts=[200_000])
    desk.rig.stubborn = True
    desk.session.connect()
    with pytest.raises(LinkFault) as caught:
        desk.session.run(sequence(Flow.WRITE), image_blocks())
    assert "same boot number" in caught.value.did
    assert "dead man" in caught.value.facts[-1]
    assert not desk.rig.powered


def _stopped_late(harms: list[Harm], marks: list[int]) -> tuple[Desk, int]:
    """A write job with slow words, stopped 200 ms after it began; `marks` gets the bytes sent up to the interrupt."""
    desk = Desk(FakeRig(word_ticks=60 * MS, self_timed_ticks=1_000 * MS), harms)
    at = 1 << 40

    def interrupted() -> int:
        if desk.line.now_us() < at:
            marks[:] = [desk.line.passed["to rig"]]
            return 0
        return 1

    desk.session = Session(desk.line, interrupted=interrupted)
    desk.session.connect()
    at = desk.line.now_us() + 200_000
    with pytest.raises(Interrupted):
        desk.session.run(sequence(Flow.WRITE), image_blocks())
    return desk, at


def test_a_lost_abort_is_sent_again() -> None:
    """Whichever byte of the abort is harmed, the rig is stopped, and its self-timed wait is not skipped."""
    marks: list[int] = []
    _stopped_late([], marks)
    each: tuple[Kind, ...] = ("drop", "flip", "double")
    for lost, kind in product(range(marks[0], marks[0] + 40), each):
        desk, at = _stopped_late([Harm("to rig", lost, kind)], [])
        assert not desk.rig.powered
        assert at + 1_000_000 <= desk.line.now_us() < at + 1_500_000
        assert len(desk.rig.touched) < WORDS
