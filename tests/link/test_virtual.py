"""The session on the virtual rig: real ops, a modelled chip, and the judge at its pins."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace

import pytest

from pulsewright.chip.load import load
from pulsewright.errors import Interrupted, RigRestarted
from pulsewright.link.faulty import Faulty, Harm, Kind, Way
from pulsewright.link.inprocess import InProcess
from pulsewright.link.results import Block, RunResult
from pulsewright.link.session import Session
from pulsewright.link.transport import Timing
from pulsewright.rig.file import load_rig
from pulsewright.sequence.compile import compile_blank, compile_burn, compile_erase, compile_identify, compile_read
from pulsewright.sequence.types import Sequence
from pulsewright.virtual.bench import Bench
from pulsewright.virtual.rig import VirtualRig
from pulsewright.wire.tables import Outcome

PART = "27e512"
IMAGE = bytes(range(0x40, 0x50))
KINDS: tuple[Kind, ...] = ("drop", "flip", "double")


class Attentive(InProcess):
    """A line on which the session looks at the interrupt every 100 us."""

    def timing(self, board: str) -> Timing:
        return replace(super().timing(board), slice_us=100)


class Desk:
    """A bench with the part, a harmed line to it, and a session."""

    def __init__(self, contents: bytes | str = "blank", harms: tuple[Harm, ...] = ()) -> None:
        self.bench = Bench.fresh(PART, contents)
        self.rig: VirtualRig = self.bench.rig()
        self.line = Faulty(Attentive(self.rig), harms)
        self.stop: Callable[[], int] = lambda: 0
        self.session = Session(self.line, interrupted=self._interrupts)

    def _interrupts(self) -> int:
        return self.stop()

    def stop_at(self, at_us: int) -> None:
        """Ctrl-C at a time of the rig's clock."""
        self.stop = lambda: int(self.line.now_us() >= at_us)

    def clean(self) -> bool:
        """Whether the judge has nothing to say and nothing stands."""
        return self.bench.report()["violations"] == [] and self.rig.socket.socket_vcc_mv(self.rig.t) < 500

    def clean_but_for_a_cut_pulse(self, facts: tuple[str, ...]) -> bool:
        """The same, where the one thing forbidden may be a pulse that is too short, and was told as cut."""
        seen = [violation["rule"] for violation in self.bench.report()["violations"]]
        told = any("its pulse was cut" in fact for fact in facts)
        return seen in ([], ["pulse width"] * told) and self.rig.socket.socket_vcc_mv(self.rig.t) < 500

    def driven(self) -> list[int]:
        """Every word that the rig drove onto the data lines, in order."""
        assert self.rig.trace is not None
        notes = [note for _, text in self.rig.trace for note in text.split()]
        return [int(note.partition("=")[2], 16) for note in notes if note.startswith("D=") and note != "D=Z"]


@pytest.fixture(scope="module")
def burn() -> Sequence:
    """A burn of sixteen words; the hash is of no interest to a session."""
    return compile_burn(load(PART), load_rig(), 0, 15, "0" * 64)


@pytest.fixture(scope="module")
def read() -> Sequence:
    """A read of sixteen words."""
    return compile_read(load(PART), load_rig(), 0, 15)


def burn_blocks() -> list[Block]:
    """The image in two blocks."""
    return [Block(0, 8, None, IMAGE[:8]), Block(8, 8, None, IMAGE[8:])]


def test_identify_read_blank_erase_and_burn() -> None:
    """Each kind of sequence runs on one chip and brings what it is for; the judge finds nothing."""
    desk, definition, rig = Desk("noise"), load(PART), load_rig()
    before = bytes(desk.bench.chip.cells)
    desk.session.connect()
    assert desk.session.run(compile_identify(definition, rig)).id_bytes == b"\xda\x08"
    assert desk.session.run(compile_read(definition, rig, 100, 699)).data == before[100:700]
    blank = desk.session.run(compile_blank(definition, rig, 0, 65_535))
    assert (blank.outcome, blank.trouble is not None) == (Outcome.FAILED, True)
    assert desk.session.run(compile_erase(definition, rig)).outcome is Outcome.DONE
    image = bytes(range(256))
    result = desk.session.run(compile_burn(definition, rig, 512, 767, "0" * 64), [Block(512, 256, None, image)])
    assert sum(result.blocks[0].histogram) == 256
    assert bytes(desk.bench.chip.cells[512:768]) == image
    assert desk.clean()


def test_a_clean_job_repeats_nothing(burn: Sequence) -> None:
    """With nobody harming the line, neither end counts damage, drops or repeats."""
    desk = Desk()
    desk.session.connect()
    counters = desk.session.run(burn, burn_blocks()).counters
    assert (counters.sent_again, counters.damaged, counters.dropped) == (0, 0, 0)
    assert counters.rig is not None
    assert (counters.rig.damaged, counters.rig.dropped, counters.rig.repeated) == (0, 0, 0)


def _harmed(
    sequence: Sequence, blocks: list[Block] | None, harm: Harm, contents: bytes | str
) -> tuple[Desk, RunResult]:
    desk = Desk(contents, (harm,))
    desk.session.connect()
    desk.rig.trace = []
    return desk, desk.session.run(sequence, blocks)


def _positions(sequence: Sequence, blocks: list[Block] | None, way: Way, step: int) -> range:
    desk = Desk()
    desk.session.connect()
    first = desk.line.passed[way]
    desk.session.run(sequence, blocks)
    return range(first, desk.line.passed[way], step)


@pytest.mark.parametrize("way", ["to rig", "from rig"])
def test_a_harmed_burn_pulses_each_word_once(way: Way, burn: Sequence) -> None:
    """With a byte harmed anywhere in the run, every word is driven once, in order, and the judge finds nothing."""
    for number, at in enumerate(_positions(burn, burn_blocks(), way, 5)):
        desk, result = _harmed(burn, burn_blocks(), Harm(way, at, KINDS[number % 3]), "blank")
        assert result.outcome is Outcome.DONE, at
        assert desk.driven() == list(IMAGE), at
        assert [block.words for block in result.blocks] == [8, 8]
        assert bytes(desk.bench.chip.cells[:16]) == IMAGE
        assert desk.clean()


@pytest.mark.parametrize("way", ["to rig", "from rig"])
def test_a_harmed_read_brings_the_same_words(way: Way, read: Sequence) -> None:
    """With a byte harmed anywhere in the run, the words are those of the chip."""
    for number, at in enumerate(_positions(read, None, way, 5)):
        desk, result = _harmed(read, None, Harm(way, at, KINDS[number % 3]), IMAGE)
        assert (result.outcome, result.data) == (Outcome.DONE, IMAGE), at
        assert desk.clean()


def _cut_in_a_burn(burn: Sequence) -> tuple[Desk, RunResult]:
    """A desk on which the host's way to the rig was lost with the second block of a burn."""
    at = _positions(burn, burn_blocks(), "to rig", 1)[-80]
    desk = Desk("blank", (Harm("to rig", at, "cut"),))
    desk.session.connect()
    return desk, desk.session.run(burn, burn_blocks())


def test_a_cut_cable_ends_by_the_dead_man(burn: Sequence) -> None:
    """The rig makes itself safe 500 ms after the last frame it heard, and says so."""
    desk, result = _cut_in_a_burn(burn)
    assert result.outcome is Outcome.TRIPPED
    assert result.trouble is not None
    assert result.trouble.name == "dead_man"
    assert desk.rig.machine is None
    assert desk.clean()


def test_an_interrupt_at_any_moment_is_safe(burn: Sequence) -> None:
    """Stopped all through a burn, closely while words are pulsed: nothing stands, and at the pins a pulse was at most
    too short.
    """
    probe = Desk()
    probe.session.connect()
    probe.session.run(burn, burn_blocks())
    cut = 0
    coarse, fine = range(0, 150_000, 1_500), range(150_000, probe.line.now_us(), 83)
    for at in [*coarse, *fine]:
        desk = Desk()
        desk.stop_at(at)
        with pytest.raises(Interrupted) as caught:
            _burn(desk, burn)
        assert desk.clean_but_for_a_cut_pulse(caught.value.facts), at
        cut += any("its pulse was cut" in fact for fact in caught.value.facts)
    assert cut > 5


def _burn(desk: Desk, burn: Sequence) -> None:
    desk.session.connect()
    desk.session.run(burn, burn_blocks())


def test_an_interrupt_inside_an_erase_pulse_tells_of_it() -> None:
    """A pulse of 100 ms that is cut is told, and the session waits until the rig says that it is safe."""
    desk = Desk("noise")
    desk.session.connect()
    at = desk.line.now_us() + 120_000
    desk.stop_at(at)
    with pytest.raises(Interrupted) as caught:
        desk.session.run(compile_erase(load(PART), load_rig()))
    assert "the whole chip is undefined: its pulse was cut" in caught.value.facts
    assert desk.clean_but_for_a_cut_pulse(caught.value.facts)


def test_a_reset_in_a_burn_is_told(burn: Sequence) -> None:
    """The rig's supply fails while blocks are under way: another boot number, and nothing resumes."""
    desk = Desk()
    desk.session.connect()
    boot = desk.rig.boot

    def pull_the_plug() -> int:
        if desk.rig.machine is not None and desk.rig.machine.gate and desk.rig.boot == boot:
            desk.rig.restart()
        return 0

    desk.stop = pull_the_plug
    with pytest.raises(RigRestarted) as caught:
        desk.session.run(burn, burn_blocks())
    assert caught.value.got == f"boot number {boot + 1}"
    assert desk.clean()


def test_an_earlier_session_at_a_high_rate_is_no_hindrance(read: Sequence) -> None:
    """A host that went away without a word left the rig at its top rate; the next one is heard all the same."""
    desk = Desk(IMAGE)
    assert desk.session.connect().baud > 38_400
    again = Session(InProcess(desk.rig))
    again.connect()
    assert again.run(read).data == IMAGE


def test_a_fault_that_was_latched_is_told_once(burn: Sequence) -> None:
    """A dead-man of the last session is in the facts of this one, not of the one after."""
    desk, _ = _cut_in_a_burn(burn)
    facts = Session(InProcess(desk.rig)).connect()
    assert facts.earlier is not None
    assert facts.earlier.name == "dead_man"
    assert Session(InProcess(desk.rig)).connect().earlier is None


def test_a_fault_on_this_end_stops_the_rig_first() -> None:
    """Blocks that fail to come, or a progress view that breaks: the rig is safe before the error goes on."""
    desk = Desk()
    sequence = compile_burn(load(PART), load_rig(), 0, 0xFFFF, "")

    def failing() -> Iterator[Block]:
        for at in range(0, 0x800, 0x100):
            yield Block(at, 0x100, None, bytes(0x100))
        raise OSError("the image went away")

    desk.session.connect()
    begun_us = desk.line.now_us()
    with pytest.raises(OSError, match="went away"):
        desk.session.run(sequence, failing())
    assert desk.rig.socket.socket_vcc_mv(desk.rig.t) < 500
    assert desk.rig.socket.mv(desk.rig.t, 24) < 800
    assert desk.line.now_us() - begun_us < 1_000_000  # the abort, not the wait for a dead-man on top of eight blocks
