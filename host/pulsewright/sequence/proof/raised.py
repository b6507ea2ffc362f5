"""Raised switches, the looks before the gate and the gate (H1 to H4, H8)."""

from __future__ import annotations

from pulsewright.sequence.proof.algorithm import AFTER, FAILED, THE_GATE, Event
from pulsewright.sequence.proof.lines import held
from pulsewright.sequence.proof.modes import Row, lines_fit
from pulsewright.sequence.proof.permit import check_ceiling
from pulsewright.sequence.proof.power import at_rest, measured_for, rail_measured_for
from pulsewright.sequence.proof.state import (
    ADDRESS,
    CONTROL,
    EITHER,
    NOT_LOOKED,
    OFF,
    ON,
    RELEASED,
    Clocks,
    State,
    edge,
    elapsed,
    started,
)
from pulsewright.sequence.proof.steps import advance, in_phase
from pulsewright.sequence.proof.tables import (
    SEAT_DOWN,
    SEAT_HELD,
    SEAT_OFF,
    SEAT_POSITION,
    SEAT_POWER,
    SEAT_PROBE,
    SEAT_UP,
    Tables,
)
from pulsewright.sequence.proof.timing import at_least
from pulsewright.wire.ops import Instruction
from pulsewright.wire.permit import NO_SWITCH
from pulsewright.wire.tables import Identity, Range

Result = tuple[State, Clocks]


def switches(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Raised switches, all at once."""
    on = ins.args["on"]
    rising, falling = on & ~state.on, state.on & ~on
    if on:
        _may_close(t, state, on)
    if rising:
        t.need(not in_phase(t, state, AFTER, FAILED), "H3", "a level is raised in the steps that end a method")
        at_rest(t, state, clocks, "a level is raised")
    if rising or falling:
        held(t, state, clocks, "raised")
    others = state.opened & ~on
    if rising and others:
        fall, since = t.timing.fall_ticks(others), elapsed(clocks, OFF)
        t.need(since >= fall, "H3", "a raised level rises while another still falls", f"{fall} ticks", since)
    kinds = ([ON] if rising else []) + ([OFF] if falling else [])
    opened = state.opened & ~on
    if falling:
        fallen = elapsed(clocks, OFF) >= t.timing.fall_ticks(opened)
        opened = falling | (0 if fallen else opened)
    return state._replace(on=on, opened=opened, must_drop=False), edge(clocks, *kinds)


def _may_close(t: Tables, state: State, on: int) -> None:
    t.need(state.seated, "H1", "a raised level before the seating check has passed")
    t.need(
        state.range == Range.FULL and state.vcc_good, "H1", "a raised level before VCC stands measured in its window"
    )
    measured = state.rail != 0 and state.rail_window is not None
    t.need(measured, "H8", "a raised level whose rail was not measured since it moved")
    if state.gate:
        allowed = {number for number, _ in t.permit.raised}
        wrong = [number for number in range(8) if on >> number & 1 and number not in allowed]
        t.need(not wrong, "H3", "past the gate a switch that is not in the permit", sorted(allowed), wrong)
        return
    single = t.permit.identify_switch != NO_SWITCH and on == 1 << t.permit.identify_switch
    t.need(single, "H2", "before the gate another switch than the identify switch", t.permit.identify_switch, f"{on:b}")
    t.need(state.rail == t.permit.identify_step, "H2", "before the gate another step than the identify step",
           t.permit.identify_step, state.rail)  # fmt: skip
    t.need(state.data == RELEASED, "H2", "D is driven under the identify level", "released", state.data)


def standing(t: Tables, state: State) -> None:
    """Raised levels that stand belong to a row of the mode table that the lines are in (H2, H3)."""
    t.need(state.range == Range.FULL and state.vcc_good, "H4", "a raised level without VCC measured in its window")
    rows = t.matching(state)
    if state.gate and not state.must_drop:
        if t.need(bool(rows), "H3", "raised levels that no mode wants at these lines", *_sums(t, state)):
            for number, want in rows[0].raised.items():
                check_ceiling(t, rows[0], number, state.rail)
                t.need(rail_measured_for(t, state, want), "H8",
                       f"the raised rail was measured in another window than {want.supply.name}'s",
                       want.sums[state.rail].wanted, state.rail_window)  # fmt: skip
        return
    row = t.identify_row
    if row is None or not t.need(
        row.raised.keys() == {t.permit.identify_switch}, "H2", "no identify mode to raise for"
    ):
        return
    want = row.raised[t.permit.identify_switch]
    t.need(state.rail in want.steps and state.on == 1 << want.switch.number, "H2",
           "another level than the identify step before the gate", *_sums(t, state))  # fmt: skip
    quiet = row in rows or any(one.data == "Z" and not one.raised and _only_lines(one, row, state) for one in t.rows)
    t.need(quiet, "H2", "the identify level stands in no mode that is quiet or identifies")
    t.need(all(one is row for one in rows), "H2", "the identify level is another mode's",
           row.name, ", ".join(one.name for one in rows))  # fmt: skip
    t.need(t.vcc_serves(row, state), "H2", "VCC is not the identify mode's", row.vcc, f"step {state.vcc}")


def _only_lines(quiet: Row, identify: Row, state: State) -> bool:
    """Whether the lines are in a quiet row, the line at the raised pin aside (it must be H, which is judged apart)."""
    return not quiet.unreachable and lines_fit(quiet, state.levels)


def _sums(t: Tables, state: State) -> tuple[str, str]:
    """Windows and levels of the switches that stand, for the rows that want just these switches."""
    wanted, got = [], []
    for row in t.rows:
        if state.on == sum(1 << number for number in row.raised) and state.on:
            for want in row.raised.values():
                if state.rail in want.sums:
                    wanted.append(f"{want.supply.name} {want.sums[state.rail].wanted}")
                    got.append(f"{want.role} {want.sums[state.rail].got}")
    return " or ".join(dict.fromkeys(wanted)), ", ".join(
        dict.fromkeys(got)
    ) or f"switches {state.on:b} at step {state.rail}"


# ---- seating and gate -----------------------------------------------------------------------------------------------


def seated(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """The seating check has passed - if everything that makes it one was done."""
    missing = [
        text
        for bit, text in (
            (SEAT_OFF, "the look at D with VCC off"), (SEAT_PROBE, "VCC through the probe resistor"),
            (SEAT_UP, "outputs off, bias up"), (SEAT_DOWN, "outputs off, bias down"),
            (SEAT_HELD, "outputs on, both ways"),
        )
        if not state.facts & bit
    ]  # fmt: skip
    missing += [
        f"position {one.position} with VCC off"
        for one in t.rig.switches
        if not state.facts & SEAT_POSITION << one.number
    ]
    missing += [
        f"supply position at line {line}" for line in t.pins.power_lines if not state.facts & SEAT_POWER << line
    ]
    t.need(not missing, "H1", "seating counts as passed without its looks", "", "; ".join(missing))
    t.need(state.range == Range.FULL and state.vcc_good, "H1", "seating counts as passed without VCC in its window")
    t.need(not state.on and state.data == RELEASED, "H1", "seating counts as passed with something driven")
    return state._replace(seated=True), clocks


def _identifies(t: Tables, state: State, clocks: Clocks, wait: int) -> None:
    row = t.identify_row or t.command_row
    t.need(wait <= t.timing.longest_ticks, "H7", "a wait longer than anything asks for", t.timing.longest_ticks, wait)
    if not t.need(row is not None, "H2", "the gate reads an ID that the definition does not have") or row is None:
        return
    address_ps, control_ps = t.timing.access_ps(row)
    need = at_least(address_ps + t.timing.line_ps(state))
    t.need(wait >= need, "H7", "access time of the ID cells", f"{need} ticks", wait)
    since = elapsed(clocks, CONTROL) + wait  # every cell is sampled a whole wait after its address
    need = at_least(control_ps + t.timing.line_ps(state))
    t.need(since >= need, "H7", "time from the enabling edge to the first ID cell", f"{need} ticks", since)
    if state.opened:  # an address line may be at its position
        need, since = t.timing.fall_ticks(state.opened), elapsed(clocks, OFF)
        t.need(since >= need, "H7", "ID cells are read while a raised level falls", f"{need} ticks", since)
    t.need(state.data == RELEASED, "H2", "D is driven at the gate", "released", state.data)
    t.need(lines_fit(row, _free_address(t, row, state)), "H2", "the lines at the gate are not the identify mode's")
    t.need(t.vcc_serves(row, state), "H2", "VCC at the gate is not the identify mode's", row.vcc, f"step {state.vcc}")


def _free_address(t: Tables, row: Row, state: State) -> tuple[str, ...]:
    """Levels with the address lines set: the gate ops set them themselves, and keep the identify switch's line high."""
    raised = {one.position for one in t.rig.switches if one.number in row.raised}
    lines = {t.rig.site.positions[at].line for at in raised}
    return tuple(
        ("H" if line in lines else EITHER) if line in t.pins.address else level
        for line, level in enumerate(state.levels)
    )


def gate_look(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """The look at the ID cells without the identify level."""
    t.need(state.seated, "H1", "a look at the ID cells before the seating check has passed")
    t.need(not state.on, "H2", "the look before the gate is done under a raised level")
    asked = state.pos != frozenset({t.course.start})
    t.need(not asked, "H2", "the look before the gate comes after a command")
    _identifies(t, state, clocks, ins.args["wait"])
    after = _with_free_address(t, state)
    return after._replace(looked=ins.args["wait"]), started(clocks, ADDRESS)


def _with_free_address(t: Tables, state: State) -> State:
    levels = tuple(EITHER if at in t.pins.address else level for at, level in enumerate(state.levels))
    return state._replace(levels=levels, register=EITHER, sample="")


def gate(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """The gate itself."""
    t.need(state.seated, "H1", "the gate before the seating check has passed")
    t.need(not state.gate, "H2", "the gate is passed twice")
    if t.permit.identity is not Identity.WANTED:
        t.need(not state.on, "H2", "a raised level at a gate that wants no identity")
        return state._replace(gate=True), clocks
    wait, number = ins.args["wait"], t.permit.identify_switch
    t.need(state.looked != NOT_LOOKED, "H2", "the gate without the look before it")
    t.need(state.looked == wait, "H2", "look and gate wait differently", state.looked, wait)
    _identifies(t, state, clocks, wait)
    if t.definition.identify == "command":
        t.need(not state.on, "H2", "a raised level at a gate that asks by command")
        at_rest(t, state, clocks, "the gate")
        after = advance(t, state, Event(THE_GATE))
        return _with_free_address(t, after)._replace(gate=True), started(clocks, ADDRESS)
    t.need(
        number != NO_SWITCH and state.on == 1 << number,
        "H2",
        "the gate without the identify level alone",
        number,
        f"{state.on:b}",
    )
    want = None if t.identify_row is None else t.identify_row.raised.get(number)
    measured = want is not None and measured_for(state, want)
    t.need(measured, "H8", "the identify level was not measured at its position")
    rise = at_least(t.timing.rise_ps(state.on))
    t.need(
        elapsed(clocks, ON) >= rise, "H7", "the identify level has not risen yet", f"{rise} ticks", elapsed(clocks, ON)
    )
    levels = _free_address(t, t.identify_row, state) if t.identify_row else state.levels
    after = state._replace(gate=True, must_drop=bool(state.on), levels=levels, register=EITHER, sample="")
    return after, started(clocks, ADDRESS)
