"""Every refusal of the firmware while a program runs: what it says, and that nothing moved."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from pulsewright.virtual.board import Board
from pulsewright.wire.ops import Instruction, ins, line_byte
from pulsewright.wire.permit import VccStep
from pulsewright.wire.tables import Bias, Fault, Flow, Frame, Group, Identity, Op, Outcome, Rail, Range
from tests.virtual.kit import (
    A9,
    BOTH_HIGH,
    BOTH_LOW,
    CE,
    MS,
    OE,
    US,
    VCC_5V,
    VCC_6V,
    VCC_LOW,
    VH_12V,
    VPP_14V,
    End,
    H,
    Host,
    Item,
    L,
    build,
    lines,
    measure_rail,
    past_gate,
    permit_for,
    power_up,
    pulse,
    raise_oe,
    to_gate,
    vcc,
    vpp,
)

RAISED_RAIL = ins(Op.RAIL, rail=Rail.RAISED, step=VH_12V)
SETTLE = ins(Op.WAIT, ticks=25 * MS)
OE_ON = ins(Op.SWITCHES, on=1 << 2)
A9_ON = ins(Op.SWITCHES, on=1 << 4)
IDENTIFY_LEVEL = [RAISED_RAIL, SETTLE, measure_rail(12_000), ins(Op.ADDRESS, at=1 << 9), A9_ON]
END = ins(Op.END)


def vcc_rail(step: int) -> Instruction:
    """The VCC rail to a step."""
    return ins(Op.RAIL, rail=Rail.VCC, step=step)


def seated() -> list[Item]:
    """VCC up and seated."""
    return [*power_up(), ins(Op.SEATED)]


def ran(items: list[Item], *, board: Board | None = None, **changes: Any) -> tuple[End, Host]:
    """The end of a program, and the host that ran it."""
    host = Host(board=board)
    code = build([*items, END])
    return host.run(code, permit_for(code, **changes)), host


REFUSED: dict[str, tuple[list[Item], Fault]] = {
    "raised rail before the seating check": ([*power_up(), RAISED_RAIL], Fault.NOT_SEATED),
    "switch before the seating check": ([*power_up(), OE_ON], Fault.NOT_SEATED),
    "gate before the seating check": ([*power_up(), ins(Op.GATE, wait=8)], Fault.NOT_SEATED),
    "look before the seating check": ([*power_up(), ins(Op.GATE_LOOK, wait=8)], Fault.NOT_SEATED),
    "seated without VCC": ([ins(Op.SEATED)], Fault.NO_VCC),
    "seated in the probe range": (
        [
            ins(Op.RELEASE),
            vcc_rail(VCC_5V),
            ins(Op.RANGE, which=Range.PROBE),
            ins(Op.WAIT, ticks=7 * MS),
            ins(Op.SEATED),
        ],
        Fault.NO_VCC,
    ),
    "another step than the identify step with the gate shut": (
        [*seated(), ins(Op.RAIL, rail=Rail.RAISED, step=VPP_14V)],
        Fault.GATE_SHUT,
    ),
    "another switch than the identify switch with the gate shut": (
        [*seated(), RAISED_RAIL, SETTLE, measure_rail(12_000), OE_ON],
        Fault.GATE_SHUT,
    ),
    "driving D with the gate shut": ([*seated(), ins(Op.DRIVE, word=0)], Fault.GATE_SHUT),
    "a pulse with the gate shut": ([*seated(), pulse()], Fault.GATE_SHUT),
    "the gate without the identify level": (
        [*seated(), lines((CE, L), (OE, L)), ins(Op.GATE_LOOK, wait=8), ins(Op.GATE, wait=8)],
        Fault.GATE_SHUT,
    ),
    "the gate without a look": (
        [*seated(), *IDENTIFY_LEVEL, ins(Op.GATE, wait=8)],
        Fault.NO_ID_MODE,
    ),
    "a look with the identify level on": (
        [*seated(), *IDENTIFY_LEVEL, ins(Op.GATE_LOOK, wait=8)],
        Fault.LINE_AT_RAISED,
    ),
    "a switch outside the permit": ([*past_gate(), *raise_oe()[:-2], ins(Op.SWITCHES, on=1)], Fault.NOT_IN_PERMIT),
    "a rail step above every ceiling": (
        [*past_gate(), ins(Op.RAIL, rail=Rail.RAISED, step=6)],
        Fault.ABOVE_CEILING,
    ),
    "a step of VCC outside the permit": ([vcc_rail(7)], Fault.NOT_IN_PERMIT),
    "VCC to the socket at no step": ([ins(Op.RANGE, which=Range.FULL)], Fault.NOT_IN_PERMIT),
    "a raised level on a rail not measured since it moved": (
        [*past_gate(), *raise_oe()[:2], OE_ON],
        Fault.NOT_MEASURED,
    ),
    "a raised level on a rail that is off": ([*past_gate(), *raise_oe(), *[ins(Op.SWITCHES, on=0)],
        ins(Op.RAIL, rail=Rail.RAISED, step=0), OE_ON], Fault.NOT_MEASURED),
    "a raised level while VCC is not measured at its new step": (
        [*past_gate(), *raise_oe()[:3], vcc_rail(VCC_6V), OE_ON],
        Fault.NO_VCC,
    ),
    "a raised level on a rail that was measured while it was not there yet": (
        [*past_gate(), ins(Op.RAIL, rail=Rail.RAISED, step=0), ins(Op.WAIT, ticks=100 * MS), *raise_oe()[:1],
         ins(Op.MEASURE, channel=1, low=0, high=500, limit=MS), OE_ON],
        Fault.NOT_MEASURED,
    ),
    "the raised rail while VCC is not measured at its new step": (
        [*past_gate(), vcc_rail(VCC_6V), ins(Op.RAIL, rail=Rail.RAISED, step=VPP_14V)],
        Fault.NO_VCC,
    ),
    "the raised rail moved with a switch closed": (
        [*past_gate(), *raise_oe(), RAISED_RAIL],
        Fault.STILL_RAISED,
    ),
    "VCC moved with a raised level on": ([*past_gate(), *raise_oe(), vcc_rail(VCC_6V)], Fault.STILL_RAISED),
    "VCC taken from the socket with a raised level on": (
        [*past_gate(), *raise_oe(), ins(Op.HIGH, how=0), ins(Op.RANGE, which=Range.OFF)],
        Fault.STILL_RAISED,
    ),
    "a raised level at a line that is low": (
        [*past_gate(), *raise_oe()[:3], lines((OE, L)), OE_ON],
        Fault.LINE_AT_RAISED,
    ),
    "a raised level at an address line that is low": (
        [*seated(), RAISED_RAIL, SETTLE, measure_rail(12_000), A9_ON],
        Fault.LINE_AT_RAISED,
    ),
    "a line pulled low at a raised position": ([*past_gate(), *raise_oe(), lines((OE, L))], Fault.LINE_AT_RAISED),
    "an address that pulls a raised position low": (
        [*seated(), *IDENTIFY_LEVEL, ins(Op.ADDRESS, at=0)],
        Fault.LINE_AT_RAISED,
    ),
    "a line pulled low where VCC is": ([*power_up(), lines((30, L))], Fault.LINE_AT_RAISED),
    "a pulse of a line at a raised position": (
        [*past_gate(), *raise_oe(), ins(Op.PULSE, line=line_byte(OE, L), width=16, max=16)],
        Fault.LINE_AT_RAISED,
    ),
    "driving D while the outputs are on": (
        [*past_gate(), lines((CE, L), (OE, L)), ins(Op.DRIVE, word=1)],
        Fault.BUS_CONFLICT,
    ),
    "outputs on while D is driven": (
        [*past_gate(), ins(Op.DRIVE, word=1), lines((CE, L), (OE, L))],
        Fault.BUS_CONFLICT,
    ),
    "a pulse that turns the outputs on while D is driven": (
        [*past_gate(), lines((OE, L)), ins(Op.DRIVE, word=1), pulse()],
        Fault.BUS_CONFLICT,
    ),
    "a pulse that ends with the outputs on while D is driven": (
        [*past_gate(), lines((OE, L)), ins(Op.DRIVE, word=1), ins(Op.PULSE, line=line_byte(CE, H), width=16, max=16)],
        Fault.BUS_CONFLICT,
    ),
    "a pulse that ends low at a raised position": (
        [*past_gate(), *raise_oe(), ins(Op.PULSE, line=line_byte(OE, H), width=16, max=16)],
        Fault.LINE_AT_RAISED,
    ),
    "VCC to a chip whose outputs would meet a driven D": (
        [vcc_rail(VCC_5V), ins(Op.RANGE, which=Range.FULL)],
        Fault.BUS_CONFLICT,
    ),
    "a look with D driven": (
        [*past_gate(), ins(Op.DRIVE, word=1), ins(Op.GATE_LOOK, wait=8)],
        Fault.BUS_CONFLICT,
    ),
    "H driven with VCC off": ([ins(Op.HIGH, how=1)], Fault.DRIVEN_TOO_LOW),
    "H driven before VCC is measured": (
        [ins(Op.RELEASE), vcc_rail(VCC_5V), ins(Op.RANGE, which=Range.FULL), ins(Op.HIGH, how=1)],
        Fault.DRIVEN_TOO_LOW,
    ),
    "VCC to a low step with H driven": ([*power_up(), vcc_rail(VCC_LOW)], Fault.DRIVEN_TOO_LOW),
    "VCC off the socket with H driven": ([*power_up(), ins(Op.RANGE, which=Range.OFF)], Fault.DRIVEN_TOO_LOW),
    "bias up with VCC off": ([ins(Op.BIAS, groups=Group.DATA, how=Bias.UP)], Fault.BIAS_REFUSED),
    "bias up in the probe range": (
        [ins(Op.RELEASE), vcc_rail(VCC_5V), ins(Op.RANGE, which=Range.PROBE), ins(Op.BIAS, groups=1, how=Bias.UP)],
        Fault.BIAS_REFUSED,
    ),
    "the probe range with bias up": (
        [*power_up(), ins(Op.BIAS, groups=1, how=Bias.UP), ins(Op.HIGH, how=0), ins(Op.RANGE, which=Range.PROBE)],
        Fault.BIAS_REFUSED,
    ),
    "a measure that finds nothing inside its window": (
        [*power_up(), ins(Op.MEASURE, channel=2, low=vcc(6_000), high=vcc(6_500), limit=MS)],
        Fault.MEASURED_OUTSIDE,
    ),
}


@pytest.mark.parametrize(("items", "fault"), REFUSED.values(), ids=REFUSED.keys())
def test_the_firmware_refuses(items: list[Item], fault: Fault) -> None:
    """The op trips with its code and its own place, and the rig is safe afterwards."""
    end, host = ran(items)
    assert (end.outcome, Fault(end.fault["code"])) == (Outcome.TRIPPED, fault)
    last = items[-1]
    assert isinstance(last, Instruction)
    assert end.fault["op"] == last.op
    assert host.socket.range == Range.OFF
    assert [text for text in host.texts()[-3:] if "VCC" not in text][-2:] == ["all L", "rail 0"]


@pytest.mark.parametrize("name", [name for name in REFUSED if "measure" not in name])
def test_what_is_refused_moves_nothing(name: str) -> None:
    """The trace of a refused op holds nothing between the op before it and making safe."""
    items = REFUSED[name][0]
    _, refused = ran(items)
    _, before = ran(items[:-1])
    kept = refused.texts()
    wanted = before.texts()
    assert kept == wanted


@pytest.mark.parametrize("name", [name for name in REFUSED if name.startswith("a pulse that ends")])
def test_a_pulse_with_a_bad_end_is_refused_before_it_begins(name: str) -> None:
    """However wide it would be, the trip comes at the same tick."""
    items = REFUSED[name][0]
    last = items[-1]
    assert isinstance(last, Instruction)
    wide = [*items[:-1], ins(Op.PULSE, **{**last.args, "width": 1_600, "max": 1_600})]
    assert ran(items)[0].fault["tick"] == ran(wide)[0].fault["tick"]


def test_a_level_above_the_permits_ceiling_is_refused() -> None:
    """A switch is not closed when the rail stands above the ceiling of its pair."""
    end, _ = ran([*past_gate(), *raise_oe()], raised=((2, vpp(13_900)), (4, vpp(14_250))))
    assert (end.fault["code"], end.fault["got"], end.fault["high"]) == (Fault.ABOVE_CEILING, vpp(14_000), vpp(13_900))


def test_a_rail_that_stands_too_high_is_refused_by_its_reading() -> None:
    """A rail 0.3 V off is inside its measure's window but above the ceiling that the nominal step keeps."""
    wide = ins(Op.MEASURE, channel=1, low=vpp(13_000), high=vpp(15_000), limit=MS)
    items = [*past_gate(), ins(Op.RAIL, rail=Rail.RAISED, step=VPP_14V), SETTLE, wide, OE_ON]
    assert ran(items)[0].outcome is Outcome.DONE
    # 0.3 V too high, the gate's own level at 12.3 V still fits
    end, _ = ran(_wider(items), board=replace(Board(), raised_offset_mv=300))
    assert end.fault["code"] == Fault.ABOVE_CEILING


def _wider(items: list[Item]) -> list[Item]:
    """The same with room for an offset in each measure of the raised rail."""
    wide = []
    for item in items:
        if isinstance(item, Instruction) and item.op is Op.MEASURE and item.args["channel"] == 1:
            item = ins(Op.MEASURE, **{**item.args, "low": item.args["low"] - 20, "high": item.args["high"] + 20})
        wide.append(item)
    return wide


def test_without_raised_pairs_no_rail_step_is_permitted() -> None:
    """Past the gate a permit that names no pair allows no other step than the identify step."""
    end, _ = ran([*past_gate(), ins(Op.RAIL, rail=Rail.RAISED, step=VPP_14V)], raised=())
    assert end.fault["code"] == Fault.NOT_IN_PERMIT


def test_a_vouched_permit_needs_the_button() -> None:
    """The gate of a vouched permit opens only with the board's button held."""
    items = [*power_up(), ins(Op.SEATED), ins(Op.GATE, wait=0)]
    vouched: dict[str, Any] = {"identity": Identity.VOUCHED_NONE, "alternatives": ()}
    assert ran(items, **vouched)[0].fault["code"] == Fault.GATE_SHUT
    assert ran(items, board=Board(button=True), **vouched)[0].outcome is Outcome.DONE


def test_a_permit_above_14_5_v_needs_the_button() -> None:
    """A ceiling above 14.5 V opens the gate only with the board's button held."""
    high = ((2, vpp(21_500)),)
    assert ran(past_gate(), raised=high)[0].fault["code"] == Fault.GATE_SHUT
    assert ran(past_gate(), board=Board(button=True), raised=high)[0].outcome is Outcome.DONE


def test_the_gate_shuts_at_power_down() -> None:
    """After VCC went and came back the gate is shut and the seating check has to be passed again."""
    off, on = ins(Op.RANGE, which=Range.OFF), ins(Op.RANGE, which=Range.FULL)
    down = [ins(Op.HIGH, how=0), off, ins(Op.WAIT, ticks=MS), on]
    again = [ins(Op.WAIT, ticks=7 * MS), *power_up()[5:6], RAISED_RAIL]
    assert ran([*past_gate(), *down, *again])[0].fault["code"] == Fault.NOT_SEATED


def test_a_commanded_move_of_vcc_keeps_the_gate_open() -> None:
    """From one permitted step to another and back, measured, work goes on."""
    moves: list[Item] = []
    for step, mv in ((VCC_6V, 6_250), (VCC_5V, 5_000)):
        low, high = vcc(mv * 95 // 100), vcc(mv * 105 // 100)
        measured = ins(Op.MEASURE, channel=2, low=low, high=high, limit=9 * MS)
        moves += [vcc_rail(step), ins(Op.WAIT, ticks=6 * MS), measured, ins(Op.DRIVE, word=3), ins(Op.RELEASE)]
    assert ran([*past_gate(), *moves])[0].outcome is Outcome.DONE


def test_blocks_before_the_gate_are_refused() -> None:
    """A loop over blocks is work: it waits for an open gate."""
    code = build([*seated(), ins(Op.READ_RUN, wait=32), END], flow=Flow.READ)
    assert Host().run(code, permit_for(code)).fault["code"] == Fault.GATE_SHUT


@pytest.mark.parametrize(
    ("first", "words", "data", "fault"),
    [
        (0, 65, b"", Fault.TOO_MANY_WORDS),
        (65_500, 64, b"", Fault.BAD_BLOCK),
        (0, 257, b"", Fault.BAD_BLOCK),
        (0, 4, b"\x0f\0\0\0\0", Fault.BAD_BLOCK),
    ],
)
def test_a_block_outside_what_the_header_allows_trips(first: int, words: int, data: bytes, fault: Fault) -> None:
    """More words than promised, words past the last address, a longer block, data in a read: each ends the run."""
    code = build([*past_gate(), ins(Op.READ_RUN, wait=32), END], flow=Flow.READ, words=64)
    end = Host().run(code, permit_for(code), blocks=[(first, words, data)])
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, fault)


def test_vcc_that_leaves_its_window_trips_within_a_millisecond() -> None:
    """A chip that draws more than the rail's limit pulls VCC down: the monitor ends the run, VCC goes 1 ms later."""
    host = Host()
    code = build([*past_gate(), ins(Op.WAIT, ticks=400 * MS), END])
    host.start(code)
    host.pass_time(120 * MS)
    host.chip.draw[28] = 200_000
    begun = host.rig.t
    end = host.end()
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, Fault.VCC_OUTSIDE)
    assert end.fault["got"] < end.fault["low"] == vcc(4_750)
    assert end.fault["tick"] - begun <= MS + 4


def test_a_raised_rail_that_breaks_down_trips() -> None:
    """A load that pulls the raised rail under the window it was measured in is found by the monitor."""
    host = Host(board=Board(raised_limit_ua=1_000))
    code = build([*past_gate(), *raise_oe(), ins(Op.WAIT, ticks=400 * MS), END])
    host.start(code)
    host.pass_time(150 * MS)
    host.chip.draw[22] = 9_000
    end = host.end()
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, Fault.RAISED_OUTSIDE)
    assert end.fault["got"] < end.fault["low"] == measure_rail(14_000).args["low"]


def test_the_first_fault_is_latched_until_it_is_cleared() -> None:
    """After a trip no new permit is taken until `clear`; hello and status tell the fault."""
    end, host = ran([*power_up(), pulse()])
    code = build([END])
    assert host.ask(Frame.PERMIT, permit=permit_for(code, number=2).encode()).fields["outcome"] == Outcome.REFUSED
    assert host.rig.hello().fault == end.fault["code"] == Fault.GATE_SHUT
    host.ask(Frame.CLEAR)
    assert host.ask(Frame.PERMIT, permit=permit_for(code, number=2).encode()).fields["outcome"] == Outcome.DONE


def test_a_permit_without_windows_for_the_step_in_force_is_none() -> None:
    """`seated` wants VCC in the permit's own window, whatever window the measure op was given."""
    narrow = (VccStep(VCC_5V, vcc(5_000), vcc(5_000), 6 * MS),)
    dropped = replace(Board(), vcc_limit_ua=980)  # the chip's standby current pulls VCC to 4.9 V
    items = [*power_up()[:-2], ins(Op.SEATED)]
    end, _ = ran(items, board=dropped, vcc=narrow)
    assert end.fault["code"] in (Fault.NO_VCC, Fault.VCC_OUTSIDE)
    assert ran(items, vcc=narrow)[0].outcome is Outcome.DONE


def test_writes_before_the_gate_are_for_command_identify_alone() -> None:
    """A permit that wants an ID without a level may ask for it by writes, once seated, and passes its gate so."""
    asks = [ins(Op.SEATED), lines((CE, L), (OE, L)), ins(Op.GATE_LOOK, wait=32), ins(Op.LINES, lines=BOTH_HIGH)]
    asks += [ins(Op.DRIVE, word=0x90), ins(Op.RELEASE), ins(Op.LINES, lines=BOTH_LOW), ins(Op.GATE, wait=32)]
    by_command: dict[str, Any] = {"identify_switch": 0xFF, "identify_step": 0, "raised": ()}
    end, _ = ran([*power_up(), *asks], **by_command)
    assert end.fault["code"] == Fault.NO_ID_MODE  # the plain chip takes no commands: its cells read the same
    assert ran([*power_up(), ins(Op.DRIVE, word=0x90)], **by_command)[0].fault["code"] == Fault.GATE_SHUT


def test_the_identify_position_of_the_kit_is_that_of_the_switch() -> None:
    """The tests' own numbers agree: switch 4 sits at A9's position, which is bit 9's line."""
    end, host = ran([*power_up(), *to_gate()])
    assert end.outcome is Outcome.DONE
    assert any(text.startswith(f"{A9} rises") for text in host.texts())
    assert lines((A9, H)).args["lines"] == bytes([line_byte(A9, H)])
    assert US * 1_000 == MS
