"""What each op does, seen in the trace; fused ops against programs written by hand; and time passed in pieces."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import pytest

from pulsewright.wire.ops import Label, ins, line_byte
from pulsewright.wire.tables import Bias, Fail, Fault, Flow, Group, Op, Outcome, PollKind
from tests.virtual.gated import DISABLE, ENABLE, work
from tests.virtual.kit import (
    CE,
    MS,
    OE,
    US,
    VCC_LOW,
    End,
    Item,
    L,
    PlainChip,
    lines,
    measure_vcc,
    pulse,
    raise_oe,
    write_block,
)


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
    body: list[Item] = [ins(Op.EACH_BLOCK, to="end"), ins(Op.EACH_WORD, to="block"), ins(Op.ADDRESS_WORD),
            ins(Op.POLL, kind=kind, enable=ENABLE.args["lines"], access=16, disable=DISABLE.args["lines"], gap=8,
                mantissa=mantissa, exponent=exponent),
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
