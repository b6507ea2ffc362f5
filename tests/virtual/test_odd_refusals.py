"""Refusals that only an odd program or permit meets, and trips on the way to a new level of VCC."""

from __future__ import annotations

import pytest

from pulsewright.wire.ops import Label, ins
from pulsewright.wire.permit import NO_SWITCH, VccStep
from pulsewright.wire.tables import Fault, Flow, Identity, Op, Outcome, Range
from tests.virtual.kit import (
    BOTH_HIGH,
    BOTH_LOW,
    MS,
    VCC_5V,
    VCC_6V,
    Host,
    Item,
    build,
    code_of,
    past_gate,
    permit_for,
    raise_oe,
    vcc,
)
from tests.virtual.test_refusals import END, ran, seated, vcc_rail

LOOK = ins(Op.GATE_LOOK, wait=32)


def test_a_look_needs_vcc_measured_at_its_step() -> None:
    """After a move of VCC nothing is looked at before VCC was measured again."""
    assert ran([*seated(), vcc_rail(VCC_6V), LOOK])[0].fault["code"] == Fault.NO_VCC


def test_a_look_without_cells_in_the_permit_is_refused() -> None:
    """A permit that wants no identity names no cell to look at."""
    end, _ = ran([*seated(), LOOK], identity=Identity.NONE, alternatives=(), identify_switch=NO_SWITCH, raised=())
    assert end.fault["code"] == Fault.NOT_IN_PERMIT


@pytest.mark.parametrize(("lines", "fault"), [(BOTH_LOW, Fault.LINE_AT_RAISED), (BOTH_HIGH, Fault.NONE)])
def test_a_look_keeps_the_line_at_the_identify_switch_high(lines: bytes, fault: Fault) -> None:
    """Where the identify level comes to a control line, that line is high at the look, as it must be at the gate."""
    end, _ = ran([*seated(), ins(Op.LINES, lines=lines), LOOK], identify_switch=2)
    assert end.fault["code"] == fault


def test_a_word_that_takes_the_raised_line_low_is_refused() -> None:
    """Words are written under a level at A9 only where A9 is high in them."""
    for first, fault in ((0x200, Fault.NONE), (0x000, Fault.LINE_AT_RAISED)):
        raised: list[Item] = [*raise_oe()[:3], ins(Op.ADDRESS, at=0x200), ins(Op.SWITCHES, on=1 << 4)]
        loop: list[Item] = [
            ins(Op.EACH_BLOCK, to="end"),
            ins(Op.EACH_WORD, to="block"),
            ins(Op.ADDRESS_WORD),
            ins(Op.NEXT_WORD),
        ]
        code = build([*past_gate(), *raised, *loop, Label("block"), ins(Op.NEXT_BLOCK), Label("end"), END], Flow.WRITE)
        end = Host().run(code, permit_for(code), blocks=[(first, 1, b"\x01\xff"), (0, 0, b"")])
        assert end.fault["code"] == fault


@pytest.mark.parametrize("data", [b"\x0f\1\2\3", b"\x0f\1\2\3\4\5", b""])
def test_a_block_with_too_little_or_too_much_to_write_trips(data: bytes) -> None:
    """A mask and one byte a word, no more and no less."""
    loop: list[Item] = [ins(Op.EACH_BLOCK, to="end"), ins(Op.EACH_WORD, to="block"), ins(Op.NEXT_WORD), Label("block")]
    code = build([*past_gate(), *loop, ins(Op.NEXT_BLOCK), Label("end"), END], Flow.WRITE)
    end = Host().run(code, permit_for(code), blocks=[(0, 4, data)])
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, Fault.BAD_BLOCK)


@pytest.mark.parametrize(("first", "data"), [(0, b"\x00\1\2\3\4"), (254, b"\x0f\1\2\3\4")])
def test_a_block_with_nothing_to_write_or_over_a_pages_end_trips(first: int, data: bytes) -> None:
    """A load without a word would poll for a word of before; one over a page's end would write another page's bytes."""
    loop: list[Item] = [ins(Op.EACH_BLOCK, to="end"), ins(Op.EACH_WORD, to="block"), ins(Op.NEXT_WORD), Label("block")]
    code = build([*past_gate(), *loop, ins(Op.NEXT_BLOCK), Label("end"), END], Flow.WRITE)
    end = Host().run(code, permit_for(code), blocks=[(first, 4, data)])
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, Fault.BAD_BLOCK)


def test_vcc_above_every_window_trips_before_it_has_settled() -> None:
    """Nothing in the permit is as high: the monitor does not wait for the settling time to be over."""
    narrow = (VccStep(VCC_5V, vcc(4_750), vcc(5_000), 200 * MS),)
    up: list[Item] = [ins(Op.HIGH, how=0), ins(Op.RELEASE), vcc_rail(VCC_5V), ins(Op.RANGE, which=Range.FULL)]
    assert ran([*up, ins(Op.WAIT, ticks=100 * MS)], vcc=narrow)[0].outcome is Outcome.DONE
    host = Host()
    code = build([*up, ins(Op.WAIT, ticks=100 * MS), END])
    host.start(code, permit_for(code, vcc=narrow))
    host.pass_time(20 * MS)
    begun = host.rig.t
    host.socket.set_rail(begun, 6_250)  # the rail runs away by itself
    end = host.end()
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, Fault.VCC_OUTSIDE)
    assert end.fault["tick"] - begun < 10 * MS


def test_vcc_under_3_v_past_the_gate_trips_before_it_has_settled() -> None:
    """A commanded move keeps the gate open, a collapse on the way does not."""
    host = Host()
    slow = (VccStep(VCC_5V, vcc(4_750), vcc(5_250), 6 * MS), VccStep(VCC_6V, vcc(6_000), vcc(6_500), 300 * MS))
    code = build([*past_gate(), ins(Op.HIGH, how=0), vcc_rail(VCC_6V), ins(Op.WAIT, ticks=250 * MS), END])
    host.start(code, permit_for(code, vcc=slow))
    while f"VCC full {6_250}" not in host.texts():
        host.pass_time(MS)
    host.pass_time(20 * MS)
    host.chip.draw[28] = 600_000
    begun = host.rig.t
    end = host.end()
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, Fault.VCC_OUTSIDE)
    assert end.fault["tick"] - begun <= MS + 4


def test_a_writing_flow_is_a_write_to_a_permit_that_wants_no_identity() -> None:
    """With an identify step and without identity even a program that only takes in words to write is refused."""
    loop: list[Item] = [ins(Op.EACH_BLOCK, to="end"), ins(Op.EACH_WORD, to="block"), ins(Op.NEXT_WORD), Label("block")]
    for flow, fault in ((Flow.WRITE, Fault.BAD_PERMIT), (Flow.READ, Fault.NONE)):
        code = build([*seated(), *loop, ins(Op.NEXT_BLOCK), Label("end"), END], flow)
        changes = {"identity": Identity.NONE, "alternatives": (), "raised": ()}
        answer = Host().seal(code, permit_for(code, **changes))
        assert code_of(answer) == fault
