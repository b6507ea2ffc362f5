"""What each op does, seen in the trace; fused ops against programs written by hand; and time passed in pieces."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import pytest

from pulsewright.wire.frames import Message
from pulsewright.wire.ops import Instruction, Label, ins, line_byte
from pulsewright.wire.tables import Bias, Fail, Fault, Flow, Frame, Group, Op, Outcome, PollKind
from tests.virtual.kit import (
    BOTH_HIGH,
    BOTH_LOW,
    CE,
    MS,
    OE,
    US,
    VCC_LOW,
    End,
    Host,
    Item,
    L,
    PlainChip,
    build,
    lines,
    measure_vcc,
    past_gate,
    permit_for,
    power_up,
    pulse,
    raise_oe,
    write_block,
)

END = ins(Op.END)
ENABLE, DISABLE = lines((CE, L), (OE, L)), ins(Op.LINES, lines=BOTH_HIGH)


def work(
    items: Sequence[Item], *, chip: Any = None, flow: Flow = Flow.NONE, blocks: Any = (), **changes: Any
) -> tuple[End, Host]:
    """Runs ops behind an open gate; the trace that is kept begins with them."""
    host = Host(chip)
    code = build([*past_gate(), *items, END], flow=flow)
    end = host.run(code, permit_for(code, **changes), blocks=blocks)
    texts = host.texts()
    begin = min(place for place, text in enumerate(texts) if text == f"{CE}H {OE}H" and "26 falls" in texts[:place])
    host.rig.trace = host.trace[begin + 1 :]
    return end, host


def flag_of(items: Sequence[Item], *, chip: Any = None) -> bool:
    """What the flag is behind these ops."""
    end, _ = work([*items, ins(Op.BRANCH, when=1, depth=0, to="set"), ins(Op.FAIL, why=99), Label("set")], chip=chip)
    return end.outcome is Outcome.DONE


# ---- lines, address, data -----------------------------------------------------------------------------------------


def test_lines_move_as_one_group_and_only_what_differs() -> None:
    """Two lines set together are one group; setting them again is none."""
    _, host = work([ENABLE, ENABLE, DISABLE])
    assert host.texts()[:2] == [f"{CE}L {OE}L", f"{CE}H {OE}H"]


def test_address_and_step_move_only_the_bits_that_change() -> None:
    """The address register counts on, and the lines follow it; a step back wraps inside the bus."""
    items = [ins(Op.ADDRESS, at=0x00FF), ins(Op.STEP, by=1), ins(Op.ADDRESS, at=0), ins(Op.STEP, by=-1)]
    _, host = work(items)
    # the gate left address 1 with A9 high: bits 0 and 9
    assert host.texts()[0] == "5H 6H 7H 8H 9H 10H 11H 26L"
    assert host.texts()[1] == "5L 6L 7L 8L 9L 10L 11L 12L 27H"
    assert host.texts()[2] == "27L"
    assert host.texts()[3].count("H") == 16


def test_drive_and_release_are_told_to_the_watchers() -> None:
    """D is driven with the constant and let go; the watchers hear when the rig begins and ends to drive."""
    _, host = work([ins(Op.DRIVE, word=0xA5), ins(Op.DRIVE, word=0x11), ins(Op.RELEASE)])
    assert host.texts()[:3] == ["D=A5", "D=11", "D=Z"]
    assert [driving for _, driving in host.log.driving][1:3] == [True, False]


def test_h_means_what_the_last_high_op_said() -> None:
    """With H released lines follow the pull-up to a low VCC; at rest again they are low."""
    items = [ins(Op.HIGH, how=0), ins(Op.RAIL, rail=0, step=VCC_LOW), ins(Op.WAIT, ticks=6 * MS), measure_vcc(3_750)]
    _, host = work(items)
    assert 3_750 in [level for _, level in host.log.levels_of(20)]


def test_bias_pulls_what_nobody_drives() -> None:
    """With the outputs off D follows the bias both ways, and with them on it does not."""
    chip = PlainChip(b"\x3c")
    for how, word in ((Bias.UP, 0xFF), (Bias.DOWN, 0x00)):
        pulled = [ins(Op.BIAS, groups=Group.DATA, how=how), ins(Op.SAMPLE), ins(Op.COMPARE, word=word, mask=0xFF)]
        assert flag_of(pulled)
        held = [ins(Op.ADDRESS, at=0), ENABLE, *pulled]
        assert not flag_of(held, chip=chip)


def test_sense_reads_a_line() -> None:
    """A high line senses as 1 and a low one as 0."""
    assert flag_of([ins(Op.SENSE, line=CE, **{"is": 1})])
    assert not flag_of([lines((CE, L)), ins(Op.SENSE, line=CE, **{"is": 1})])


# ---- time ---------------------------------------------------------------------------------------------------------


def test_a_wait_counts_from_the_last_edge() -> None:
    """Ops without edges between edge and wait cost nothing; two edges with a wait stand exactly that far apart."""
    _, host = work([lines((CE, L)), ins(Op.SAMPLE), ins(Op.KEEP), ins(Op.WAIT, ticks=500), DISABLE])
    assert host.trace[1][0] - host.trace[0][0] == 500


def test_a_wait_that_has_passed_costs_its_own_ticks_only() -> None:
    """A wait shorter than what has passed lets the next op follow at once."""
    _, host = work([lines((CE, L)), ins(Op.SAMPLE), ins(Op.SAMPLE), ins(Op.WAIT, ticks=1), DISABLE])
    assert host.trace[1][0] - host.trace[0][0] == 16  # lines, two samples and the wait, four ticks each


@pytest.mark.parametrize("width", [1, 16, 1_600, 1_600_000])
def test_a_pulse_is_exact(width: int) -> None:
    """From 62.5 ns to 100 ms, whatever is due meanwhile, a pulse is as wide as the op says."""
    _, host = work([*raise_oe(), pulse(width)])
    edges = [(t, text) for t, text in host.trace if text in (f"{CE}L", f"{CE}H")]
    assert edges[1][0] - edges[0][0] == width
    assert host.chip.pulses == [(edges[0][0], width)]


def test_over_pulse_is_a_multiple_of_the_tries_up_to_its_maximum() -> None:
    """The width is unit x factor x tries, cut at max."""
    over = ins(Op.OVER_PULSE, line=line_byte(CE, L), unit=100, factor=3, max=1_000)
    items = [*raise_oe(), ins(Op.LOOP, count=5), over, ins(Op.NEXT)]
    _, host = work(items)
    assert [width for _, width in host.chip.pulses] == [300, 600, 900, 1_000, 1_000]


# ---- flag, registers, flow ----------------------------------------------------------------------------------------


def test_compare_looks_under_its_mask() -> None:
    """Only the masked bits count."""
    read = [ins(Op.ADDRESS, at=0), ENABLE, ins(Op.SAMPLE)]
    assert flag_of([*read, ins(Op.COMPARE, word=0x0C, mask=0x0F)], chip=PlainChip(b"\x3c"))
    assert not flag_of([*read, ins(Op.COMPARE, word=0x0D, mask=0x0F)], chip=PlainChip(b"\x3c"))


def test_compare_kept_finds_a_change_under_its_mask() -> None:
    """Two samples that differ in one bit are equal where the mask leaves that bit out."""
    read = [ins(Op.ADDRESS, at=0), ENABLE, ins(Op.SAMPLE), ins(Op.KEEP), ins(Op.STEP, by=1), ins(Op.SAMPLE)]
    assert flag_of([*read, ins(Op.COMPARE_KEPT, mask=0xFE)], chip=PlainChip(b"\x10\x11"))
    assert not flag_of([*read, ins(Op.COMPARE_KEPT, mask=0x01)], chip=PlainChip(b"\x10\x11"))


def test_loops_nest_and_count() -> None:
    """Two loops of 3 and 4 turns step the address twelve times."""
    step = [ins(Op.ADDRESS, at=0), ins(Op.LOOP, count=3), ins(Op.LOOP, count=4), ins(Op.STEP, by=1)]
    end, _ = work([*step, ins(Op.NEXT), ins(Op.NEXT), ins(Op.FAIL, why=1)])
    assert end.fault["address"] == 12


def test_a_loop_of_zero_is_65536_turns() -> None:
    """Count 0 stands for 65536."""
    end, _ = work([ins(Op.ADDRESS, at=0), ins(Op.LOOP, count=0), ins(Op.STEP, by=1), ins(Op.NEXT), ins(Op.FAIL, why=1)])
    assert end.fault["address"] == 65_536


@pytest.mark.parametrize(("when", "taken"), [(0, True), (1, False), (2, True)])
def test_a_branch_goes_when_the_flag_is_so(when: int, taken: bool) -> None:
    """0 on a clear flag, 1 on a set one, 2 always; the flag is clear here."""
    clear = [ins(Op.SAMPLE), ins(Op.COMPARE, word=1, mask=0)]
    end, _ = work([*clear, ins(Op.BRANCH, when=when, depth=0, to="there"), ins(Op.FAIL, why=5), Label("there")])
    assert (end.outcome is Outcome.DONE) is taken


def test_the_answer_tells_the_turn_in_which_the_last_loop_was_left() -> None:
    """A branch out of a loop around a scan brings back that loop's turn: the pulses of an erase."""
    chip = PlainChip(b"\x00" * 3)
    turns: list[Item] = [ins(Op.LOOP, count=9), ENABLE, ins(Op.SCAN, first=0, count=8, word=0xFF, wait=16), DISABLE,
             ins(Op.BRANCH, when=1, depth=0, to="done"), ins(Op.DRIVE, word=0xFF), *turn_of_erase(), ins(Op.NEXT),
             ins(Op.FAIL, why=Fail.ERASE), Label("done")]

    class Erasing(PlainChip):
        def pins_changed(self, t: int, levels: Any) -> None:
            before = len(self.pulses)
            super().pins_changed(t, levels)
            if len(self.pulses) > before:
                self.cells[len(self.pulses) - 1] = 0xFF

    erasing = Erasing(bytes(chip.cells[:3]))
    end, _ = work(turns, chip=erasing)
    assert (end.outcome, end.done["tries"], len(erasing.pulses)) == (Outcome.DONE, 4, 3)


def test_a_loop_used_up_around_a_scan_tells_all_its_turns() -> None:
    """A scan left early in the last turn does not hide how often the loop around it ran."""
    turns: list[Item] = [ins(Op.LOOP, count=3), ENABLE, ins(Op.SCAN, first=0, count=90, word=0xFF, wait=16), DISABLE,
                         ins(Op.BRANCH, when=1, depth=0, to="done"), ins(Op.NEXT), ins(Op.FAIL, why=Fail.ERASE),
                         Label("done")]
    end, _ = work(turns, chip=PlainChip(b"\xff" * 40 + b"\x00"))
    assert (end.outcome, end.fault["address"], end.done["tries"]) == (Outcome.FAILED, 40, 3)


def turn_of_erase() -> list[Item]:
    """A pulse with OE raised, and the level gone again."""
    gone = [ins(Op.SWITCHES, on=0), ins(Op.WAIT, ticks=20 * US), ins(Op.RELEASE)]
    return [*raise_oe(), pulse(), *gone]


def test_readings_of_measure_ops_come_with_the_answer() -> None:
    """Each measure op's last reading, by its byte offset, in raw counts."""
    end, _ = work([])
    assert sorted(end.readings.values()) == [414, 625]  # 12.0 V of 29.696 V and 5.0 V of 8.192 V in 1024 counts


def test_the_rail_answers_with_the_level_at_the_position() -> None:
    """A measure at the raised position sees the level there, once it has risen."""
    at_position = ins(Op.MEASURE, channel=16 + 2, low=470, high=490, limit=MS)
    end, _ = work([*raise_oe(), at_position])
    assert end.outcome is Outcome.DONE
    assert 483 in end.readings.values()  # 14.0 V


# ---- polls --------------------------------------------------------------------------------------------------------


def polled(kind: PollKind, chip: PlainChip, *, mantissa: int = 200, exponent: int = 4) -> End:
    """Polls word 0x81 at address 0 in a word loop; fails where the limit passes."""
    body: list[Item] = [ins(Op.EACH_BLOCK, to="end"), ins(Op.EACH_WORD, to="block"), ins(Op.ADDRESS_WORD), ENABLE,
            ins(Op.POLL, kind=kind, mantissa=mantissa, exponent=exponent), DISABLE,
            ins(Op.BRANCH, when=1, depth=2, to="good"), ins(Op.FAIL, why=Fail.POLL), Label("good"),
            ins(Op.NEXT_WORD), Label("block"), ins(Op.NEXT_BLOCK), Label("end")]
    return work(body, chip=chip, flow=Flow.WRITE, blocks=[(0, 1, write_block(b"\x81"))])[0]


@pytest.mark.parametrize("kind", [PollKind.DATA_BIT_7, PollKind.TOGGLE_6, PollKind.EQUAL])
def test_a_poll_ends_when_its_kind_is_met(kind: PollKind) -> None:
    """A chip that is busy for a while and then gives its data is waited for."""
    chip = PlainChip(b"\x81")
    chip.toggles = 30
    assert polled(kind, chip).outcome is Outcome.DONE
    assert chip.toggles == 0 or kind is PollKind.TOGGLE_6


def test_a_poll_ends_at_its_limit() -> None:
    """A chip that never gets ready is given mantissa x 2^exponent ticks."""
    chip = PlainChip(b"\x01")
    end = polled(PollKind.EQUAL, chip, mantissa=100, exponent=5)
    assert (end.outcome, end.fault["got"]) == (Outcome.FAILED, Fail.POLL)


def test_a_poll_that_reads_the_chips_own_time_limit_trips() -> None:
    """Bit 6 toggling with bit 5 set: the chip says that it failed."""
    chip = PlainChip(b"\xa1")
    chip.toggles = 500
    end = polled(PollKind.TOGGLE_6_LIMIT_5, chip)
    assert (end.outcome, end.fault["code"], end.fault["got"]) == (Outcome.TRIPPED, Fault.FAILED, Fail.POLL)


# ---- fused ops ----------------------------------------------------------------------------------------------------

CYCLES = ((0x5555, 0xAA), (0x2AAA, 0x55))
W, S, P, HD, F, R, AC, FL = 40, 100, 1_600, 64, 200, 96, 32, 24


def pulse_verify(factor: int) -> list[Item]:
    """The fused burn loop."""
    return [
        ins(Op.PULSE_VERIFY, tries=4, switches=1 << 2, setup=S, line=line_byte(CE, L), width=P, max=P, hold=HD, fall=F,
            recover=R, enable=BOTH_LOW, access=AC, disable=BOTH_HIGH, float=FL, factor=factor, over_max=5 * P)
    ]


def pulse_verify_by_hand(factor: int) -> list[Item]:
    """The same loop in primitives, written down apart from the expansion."""

    def wait(ticks: int) -> Instruction:
        return ins(Op.WAIT, ticks=ticks)

    on, off = ins(Op.SWITCHES, on=4), ins(Op.SWITCHES, on=0)
    items: list[Item] = [
        ins(Op.EACH_BLOCK, to="over"), ins(Op.EACH_WORD, to="answer"), ins(Op.LOOP, count=4), ins(Op.ADDRESS_WORD),
        ins(Op.DRIVE_WORD), on, wait(S), ins(Op.PULSE, line=line_byte(CE, L), width=P, max=P), wait(HD), off, wait(F),
        ins(Op.RELEASE), wait(R), ins(Op.LINES, lines=BOTH_LOW), wait(AC), ins(Op.SAMPLE),
        ins(Op.LINES, lines=BOTH_HIGH), wait(FL), ins(Op.COMPARE_WORD), ins(Op.BRANCH, when=1, depth=2, to="took"),
        ins(Op.NEXT), ins(Op.FAIL, why=Fail.PROGRAM), Label("took"),
    ]
    if factor:
        over = ins(Op.OVER_PULSE, line=line_byte(CE, L), unit=P, factor=factor, max=5 * P)
        items += [ins(Op.DRIVE_WORD), on, wait(S), over, wait(HD), off, wait(F), ins(Op.RELEASE), wait(R)]
    return [*items, ins(Op.NEXT_WORD), Label("answer"), ins(Op.NEXT_BLOCK), Label("over")]


def read_by_hand() -> list[Item]:
    """`read_run` in primitives."""
    return [ins(Op.EACH_BLOCK, to="over"), ins(Op.EACH_WORD, to="answer"), ins(Op.ADDRESS_WORD), ins(Op.WAIT, ticks=W),
            ins(Op.SAMPLE), ins(Op.REPORT), ins(Op.NEXT_WORD), Label("answer"), ins(Op.NEXT_BLOCK), Label("over")]


def scan_by_hand(count: int) -> list[Item]:
    """`scan` over a few words in primitives."""
    return [ins(Op.ADDRESS, at=3), ins(Op.LOOP, count=1), ins(Op.LOOP, count=count), ins(Op.WAIT, ticks=W),
            ins(Op.SAMPLE),
            ins(Op.COMPARE, word=0xFF, mask=0xFFFF), ins(Op.BRANCH, when=0, depth=0, to="out"), ins(Op.STEP, by=1),
            ins(Op.NEXT), ins(Op.NEXT), Label("out")]


def writes_by_hand() -> list[Item]:
    """`bus_writes` of two cycles in primitives."""
    items: list[Item] = []
    for at, word in CYCLES:
        strobe = ins(Op.PULSE, line=line_byte(CE, L), width=16, max=16)
        items += [ins(Op.ADDRESS, at=at), ins(Op.DRIVE, word=word), ins(Op.WAIT, ticks=S)]
        items += [strobe, ins(Op.WAIT, ticks=HD)]
    return [*items, ins(Op.RELEASE)]


RAIL_READY = raise_oe()[:3]
BURN = [(0, 4, write_block(b"\x00\x5a\xff\x33", leave=[2])), (9, 2, write_block(b"\x77\x01"))]
READ = [(0, 5, b""), (7, 3, b"")]
WRITES = ins(Op.BUS_WRITES, strobe=line_byte(CE, L), setup=S, width=16, hold=HD, cycles=CYCLES)
PAIRS: dict[str, tuple[list[Item], list[Item], Flow, Any]] = {
    "pulse_verify": ([*RAIL_READY, *pulse_verify(0)], [*RAIL_READY, *pulse_verify_by_hand(0)], Flow.WRITE, BURN),
    "with over-program": ([*RAIL_READY, *pulse_verify(3)], [*RAIL_READY, *pulse_verify_by_hand(3)], Flow.WRITE, BURN),
    "read_run": ([ENABLE, ins(Op.READ_RUN, wait=W)], [ENABLE, *read_by_hand()], Flow.READ, READ),
    "scan": (
        [ENABLE, ins(Op.SCAN, first=3, count=70, word=0xFF, wait=W)], [ENABLE, *scan_by_hand(70)], Flow.NONE, ()),
    "bus_writes": ([WRITES], writes_by_hand(), Flow.NONE, ()),
}


def traced(items: list[Item], flow: Flow, blocks: Any, *, piece: int = 0, deaf: int = 1) -> tuple[Any, ...]:
    """Everything that can be told apart: trace, end, replies, the watcher's log, cells. Times count from the run."""
    chip = PlainChip(bytes([0xFF, 0x5A, 0x00]) + b"\xff" * 40 + b"\x01")
    chip.deaf = deaf
    host = Host(chip)
    code = build([*past_gate(), *items, END], flow=flow)
    host.seal(code)
    start = host.rig.t
    assert host.rig.trace is not None
    host.rig.trace.clear()
    host.index += 1
    host.send(Message(Frame.RUN, host.number, host.index))
    for index, (first, words, data) in enumerate(blocks):
        host.block(index, first, words, data)
    if blocks:
        host.block(len(blocks), 0, 0, b"")
    host.slice = 4_999 if piece else 0
    while host.slice and "26 falls" not in host.texts():
        host.pass_time(4_999)
    host.slice = piece
    end = host.end()
    groups = [(t - start, text) for t, text in host.trace]
    replies = [(m.index, dict(m.fields)) for m in host.replies(Frame.BLOCK_DATA) + host.replies(Frame.BLOCK_DONE)]
    samples = [t - start for t in host.log.samples]
    pulses = [(t - start, width) for t, width in chip.pulses]
    done = {**end.done}
    return groups, end.outcome, done, replies, samples, pulses, bytes(chip.cells[:50])


@pytest.mark.parametrize(("fused", "by_hand", "flow", "blocks"), PAIRS.values(), ids=PAIRS.keys())
def test_a_fused_op_is_what_it_is_in_primitives(
    fused: list[Item], by_hand: list[Item], flow: Flow, blocks: Any
) -> None:
    """Same groups at the same ticks, same samples and pulses, same replies."""
    one, other = traced(fused, flow, blocks), traced(by_hand, flow, blocks)
    assert one == other
    assert one[1] is Outcome.DONE


@pytest.mark.parametrize(("fused", "by_hand", "flow", "blocks"), PAIRS.values(), ids=PAIRS.keys())
def test_a_change_in_the_program_shows_in_the_trace(
    fused: list[Item], by_hand: list[Item], flow: Flow, blocks: Any
) -> None:
    """The comparison of traces can fail: with one wait longer it does."""
    place = max(n for n, item in enumerate(by_hand) if isinstance(item, Instruction) and item.op is Op.WAIT)
    item = by_hand[place]
    assert isinstance(item, Instruction)
    longer = [*by_hand[:place], ins(Op.WAIT, ticks=item.args["ticks"] + 1), *by_hand[place + 1 :]]
    assert traced(fused, flow, blocks)[0] != traced(longer, flow, blocks)[0]


@pytest.mark.parametrize("name", ["pulse_verify", "read_run"])
@pytest.mark.parametrize("piece", [1, 7, 160, 4_001])
def test_it_makes_no_difference_in_which_pieces_time_passes(name: str, piece: int) -> None:
    """A tick at a time or in long pieces: every edge, sample, pulse and reply falls on the same tick."""
    fused, _, flow, blocks = PAIRS[name]
    assert traced(fused, flow, blocks, piece=piece) == traced(fused, flow, blocks)


def test_the_reply_of_a_written_block_tells_the_tries() -> None:
    """Words, worst word and its tries, and how many words took how many tries; a word that is to be left is left."""
    chip = PlainChip()
    chip.deaf = 2  # the first word needs three pulses
    _, host = work([*RAIL_READY, *pulse_verify(0)], chip=chip, flow=Flow.WRITE, blocks=BURN)
    done = host.replies(Frame.BLOCK_DONE)
    fields = done[0].fields
    histogram = [int.from_bytes(fields["histogram"][at : at + 2], "little") for at in range(0, 64, 2)]
    assert (fields["words"], fields["worst"], fields["worst_tries"], fields["failed"]) == (3, 0, 3, 0xFFFFFFFF)
    assert histogram == [2, 0, 1] + [0] * 29
    assert chip.cells[:4] == b"\x00\x5a\xff\x33"
    assert done[1].fields["words"] == 2


def test_a_word_that_does_not_take_ends_the_burn() -> None:
    """After the last try the run fails; the reply of its block names the word."""
    chip = PlainChip()
    chip.deaf = 9
    end, host = work([*RAIL_READY, *pulse_verify(0)], chip=chip, flow=Flow.WRITE, blocks=BURN[1:])
    assert (end.outcome, end.fault["got"], end.fault["address"]) == (Outcome.FAILED, Fail.PROGRAM, 9)
    assert host.replies(Frame.BLOCK_DONE)[0].fields["failed"] == 9
    assert len(chip.pulses) == 4


def test_page_load_writes_the_block_back_to_back() -> None:
    """Each word of the block gets its address, its data and a strobe; then D is let go."""
    load = ins(Op.PAGE_LOAD, strobe=line_byte(CE, L), setup=S, width=16, hold=HD)
    items: list[Item] = [ins(Op.EACH_BLOCK, to="end"), load, ins(Op.NEXT_BLOCK), Label("end")]
    _, host = work(items, flow=Flow.WRITE, blocks=[(0, 3, write_block(b"\x01\x02\x03"))])
    kept = [text for text in host.texts() if text[0] == "D" or text in (f"{CE}L", f"{CE}H")]
    assert kept[:10] == ["D=01", "22L", "22H", "D=02", "22L", "22H", "D=03", "22L", "22H", "D=Z"]


def test_write_poll_waits_for_the_chip_and_fails_without_it() -> None:
    """The word in hand is written at its address and polled with the outputs on."""
    op = ins(Op.WRITE_POLL, strobe=line_byte(CE, L), setup=S, width=16, hold=HD, enable=BOTH_LOW, disable=BOTH_HIGH,
             float=FL, kind=PollKind.EQUAL, mantissa=50, exponent=4)
    items: list[Item] = [ins(Op.EACH_BLOCK, to="end"), ins(Op.EACH_WORD, to="block"), op, ins(Op.NEXT_WORD),
                         Label("block"), ins(Op.NEXT_BLOCK), Label("end")]
    block = [(0, 1, write_block(b"\x42"))]
    assert work(items, chip=PlainChip(b"\x42"), flow=Flow.WRITE, blocks=block)[0].outcome is Outcome.DONE
    end, _ = work(items, chip=PlainChip(b"\x43"), flow=Flow.WRITE, blocks=block)
    assert (end.outcome, end.fault["got"]) == (Outcome.FAILED, Fail.POLL)


def test_the_program_starts_from_rest_whatever_ran_before() -> None:
    """A second run on the same rig gives the same trace as the first."""
    host = Host()
    texts = []
    for number in (1, 2):
        code = build([*power_up(), END])
        host.run(code, permit_for(code, number=number))
        texts.append(host.texts())
    assert texts[0] == texts[1]
