"""Fused ops against programs written by hand, and time passed in pieces: equal traces."""

from __future__ import annotations

from typing import Any

import pytest

from pulsewright.wire.frames import Message
from pulsewright.wire.ops import Instruction, Label, ins, line_byte
from pulsewright.wire.tables import Fail, Flow, Frame, Op, Outcome, PollKind
from tests.virtual.gated import ENABLE, END, work
from tests.virtual.kit import (
    BOTH_HIGH,
    BOTH_LOW,
    CE,
    Host,
    Item,
    L,
    PlainChip,
    build,
    past_gate,
    permit_for,
    power_up,
    raise_oe,
    write_block,
)

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
    op = ins(Op.WRITE_POLL, strobe=line_byte(CE, L), setup=S, width=16, hold=HD, kind=PollKind.EQUAL,
             enable=BOTH_LOW, access=AC, disable=BOTH_HIGH, gap=FL, mantissa=50, exponent=4)
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
