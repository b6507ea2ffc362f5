"""Ops that move VCC, the raised rail, bias and what H means; and measurements (H1, H4, H8, H11)."""

from __future__ import annotations

from typing import Final

from pulsewright.sequence.proof.modes import Raised
from pulsewright.sequence.proof.state import (
    ADDRESS,
    BIAS,
    CONTROL,
    DATA,
    HIGH,
    IDLE,
    LOW,
    NOT_LOOKED,
    OFF,
    ON,
    PULSE,
    RAIL_MOVED,
    RELEASED,
    VCC,
    VCC_MOVED,
    WRITING,
    Clocks,
    State,
    edge,
    elapsed,
    started,
)
from pulsewright.sequence.proof.tables import SEAT_DEAD, SEAT_OFF, SEAT_POSITION, SEAT_PROBE, Tables
from pulsewright.sequence.proof.timing import at_least
from pulsewright.units import show_mv
from pulsewright.wire.ops import Instruction
from pulsewright.wire.tables import Bias, Channel, Group, Rail, Range

Result = tuple[State, Clocks]
_PROBE_LEAST_MV: Final = 1500  # design, seating check: less means turned or short
_GONE_MV: Final = 500  # H5: VCC that is off
_PATIENCE: Final = 1_600_000  # 100 ms: what H5 gives a converter that will not go down
_STANDS_LOW_MV: Final = 800  # TTL low: a raised position under it does not stand up


def still(t: Tables, state: State, clocks: Clocks, what: str) -> None:
    """Raised levels are off and gone: nothing of the supplies may move otherwise (H4)."""
    t.need(not state.on, "H4", f"{what} with raised switches closed", 0, f"{state.on:b}")
    fall = t.timing.fall_ticks(state.opened)
    t.need(elapsed(clocks, OFF) >= fall, "H4", f"{what} while a raised level falls", fall, elapsed(clocks, OFF))
    hold = t.timing.hold_ticks("vcc", state.last, state)
    t.need(elapsed(clocks, PULSE) >= hold, "H7", f"{what} too soon after a pulse", hold, elapsed(clocks, PULSE))
    at_rest(t, state, clocks, what)


def at_rest(t: Tables, state: State, clocks: Clocks, what: str) -> None:
    """The chip does not work by itself: it was polled until done, or its longest time is over."""
    if state.busy == IDLE:
        return
    if state.busy == WRITING:
        longest = t.timing.busy_ps()
        text = f"{what} while the chip may still be writing"
    else:
        command = t.definition.identify_command
        longest = t.timing.begun_ps() + (command.settle_ps if command else 0)
        text = f"{what} before the identify command has settled"
    if longest is None:
        t.find("H7", text, "a poll")
        return
    need, since = at_least(longest), elapsed(clocks, PULSE)
    t.need(since >= need, "H7", text, f"{need} ticks", since)


def _low_vcc(t: Tables, step: int) -> bool:
    known = [one for one in t.rig.vcc.steps if one.number == step]
    return not known or known[0].mv - known[0].error_mv < t.rig.driven_from_mv


def rail(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """A rail to a step."""
    step = ins.args["step"]
    if ins.args["rail"] == Rail.VCC:
        still(t, state, clocks, "VCC is moved")
        t.need(step in t.vcc_permit, "H3", "VCC to a step that is not in the permit", sorted(t.vcc_permit), step)
        t.used_vcc.add(step)
        if not state.gate:
            t.need(step in t.quiet_vcc(), "H2", "VCC before the gate at another step than the one to read at",
                   sorted(t.quiet_vcc()), step)  # fmt: skip
        if state.driven and (_low_vcc(t, step) or _low_vcc(t, state.vcc)):
            t.find(
                "H11",
                "VCC moves below what driven lines need, and H is driven",
                f"from {show_mv(t.rig.driven_from_mv)}",
                step,
            )
        return state._replace(vcc=step, vcc_good=False), edge(clocks, VCC_MOVED)
    if not t.need(ins.args["rail"] == Rail.RAISED, "H3", "a rail that is not known", "", ins.args["rail"]):
        return state, clocks
    t.need(not state.on, "H4", "the raised rail moves with switches closed", 0, f"{state.on:b}")
    if step:
        t.need(state.range == Range.FULL and state.vcc_good, "H4", "the raised rail rises before VCC stands")
        _raised_step(t, state, step)
    return state._replace(rail=step, rail_window=None, positions=()), edge(clocks, RAIL_MOVED)


def _raised_step(t: Tables, state: State, step: int) -> None:
    t.need(state.seated, "H1", "the raised rail rises before seating is checked")
    if not state.gate:
        t.need(step == t.permit.identify_step and t.identify_row is not None, "H2",
               "before the gate only the identify step", t.permit.identify_step, step)  # fmt: skip
        return
    serves = {one for row in t.rows for want in row.raised.values() for one in want.steps}
    t.need(step in serves, "H3", "a raised step that no mode wants", sorted(serves), step)


def range_(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """VCC to the socket: off, probe, full - in this order."""
    which = ins.args["which"]
    still(t, state, clocks, "VCC is switched")
    if which == Range.OFF:
        t.need(not state.driven, "H11", "VCC goes and H is driven")
        after = state._replace(range=0, vcc_good=False, facts=0, seated=False, gate=False, looked=NOT_LOOKED)
        return after, edge(clocks)
    if which == Range.PROBE:
        wanted = SEAT_OFF | SEAT_DEAD
        for one in t.rig.switches:
            wanted |= SEAT_POSITION << one.number
        t.need(state.range == Range.OFF, "H1", "the probe range does not come from VCC off")
        t.need(state.facts & wanted == wanted, "H1", "VCC rises before the look with VCC off is done",
               f"{wanted:b}", f"{state.facts & wanted:b}")  # fmt: skip
        t.need(state.vcc in t.vcc_permit, "H3", "VCC through the probe at no step of the permit")
    elif t.need(which == Range.FULL, "H1", "a range that is not known", "", which):
        t.need(state.range == Range.PROBE and bool(state.facts & SEAT_PROBE), "H1",
               "full VCC before it was measured through the probe resistor")  # fmt: skip
    return state._replace(range=min(which, 2), vcc_good=False), edge(clocks, VCC_MOVED)


def high(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """What H means from now on."""
    how = ins.args["how"]
    t.need(how in (0, 1), "H11", "a meaning of H that is not known", "0 or 1", how)
    if how:
        right = state.range == Range.FULL and state.vcc_good and not _low_vcc(t, state.vcc)
        t.need(right, "H11", "H is driven while VCC is low or unmeasured", f"VCC from {show_mv(t.rig.driven_from_mv)}",
               f"step {state.vcc}")  # fmt: skip
    # every line at H changes its source: its edge counts anew
    return state._replace(driven=bool(how)), edge(clocks, ADDRESS, CONTROL, DATA)


def bias(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """A weak pull of groups of lines."""
    groups, how = ins.args["groups"], ins.args["how"]
    known = (
        groups and not groups & ~(Group.DATA | Group.ADDRESS | Group.POWER) and how in (Bias.OFF, Bias.DOWN, Bias.UP)
    )
    if not t.need(bool(known), "H11", "a bias that is not known", "", f"groups {groups}, how {how}"):
        return state, clocks
    if how == Bias.UP:
        right = state.range == Range.FULL and state.vcc_good
        t.need(right, "H11", "bias up without full VCC", "VCC full", f"range {state.range}")
        t.need(not groups & Group.POWER, "H11", "bias up at supply positions")
    now = [how if groups >> bit & 1 else old for bit, old in enumerate(state.bias)]
    return state._replace(bias=(now[0], now[1], now[2])), edge(clocks, BIAS)


# ---- measuring ------------------------------------------------------------------------------------------------------


def measure(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """A reading inside a window; past it, that is known."""
    channel, low, high_ = ins.args["channel"], ins.args["low"], ins.args["high"]
    if not t.need(low <= high_, "H8", "a window with nothing inside", "", f"{low}..{high_}"):
        return state, clocks
    patience = ins.args["limit"]
    t.need(patience <= _PATIENCE, "H8", "a measurement that may take for ever", f"{_PATIENCE} ticks", patience)
    if channel == Channel.SOCKET_VCC:
        return _measure_vcc(t, state, clocks, low, high_)
    if channel == Channel.RAISED_RAIL:
        return _measure_rail(t, state, clocks, low, high_), clocks
    if channel >= Channel.POSITION:
        return _measure_position(t, state, clocks, channel - Channel.POSITION, low, high_), clocks
    t.need(channel == Channel.VCC_RAIL, "H8", "a channel that is not known", "", channel)
    return state, clocks


def _measure_vcc(t: Tables, state: State, clocks: Clocks, low: int, high_: int) -> Result:
    if state.range == Range.OFF:
        gone = high_ <= t.rig.socket_vcc.count_at_most(_GONE_MV)
        return (state._replace(facts=state.facts | SEAT_DEAD) if gone else state), clocks
    if state.range == Range.PROBE:
        stands = t.rig.socket_vcc.count_at_least(_PROBE_LEAST_MV)
        return (state._replace(facts=state.facts | SEAT_PROBE) if low >= stands else state), clocks
    window = t.vcc_permit.get(state.vcc)
    inside = window is not None and window.low <= low and high_ <= window.high
    t.need(inside, "H8", "VCC is measured against another window than its step's",
           f"{window.low}..{window.high}" if window else "a step of the permit", f"{low}..{high_}")  # fmt: skip
    if state.vcc_good:
        return state, clocks
    _settled(t, clocks, VCC_MOVED, "VCC", at_least(t.rig.vcc.settle_ps))
    return state._replace(vcc_good=True), started(clocks, VCC)


def _settled(t: Tables, clocks: Clocks, since: int, what: str, need: int) -> None:
    """A level on its way may lie in the window of the step it comes from, or pass through it."""
    passed = elapsed(clocks, since)
    t.need(passed >= need, "H8", f"{what} is measured before it has settled", f"{need} ticks", passed)


def _measure_rail(t: Tables, state: State, clocks: Clocks, low: int, high_: int) -> State:
    scaling = t.rig.raised.scaling
    wants = [want for row in t.rows for want in row.raised.values() if state.rail in want.steps]
    inside = any(
        scaling.count_at_least(want.supply.min_mv) <= low and high_ <= scaling.count_at_most(want.top_mv)
        for want in wants
    )
    if not state.rail:
        return state
    t.need(inside, "H8", "the raised rail is measured against a window that no supply has", "", f"{low}..{high_}")
    _settled(t, clocks, RAIL_MOVED, "the raised rail", at_least(t.rig.raised.settle_ps))
    return state._replace(rail_window=(low, high_))


def _measure_position(t: Tables, state: State, clocks: Clocks, number: int, low: int, high_: int) -> State:
    switch = next((one for one in t.rig.switches if one.number == number), None)
    if switch is None:
        t.find("H8", f"the rig has no raised switch {number} to measure at")
        return state
    if not state.on >> number & 1:
        looks = state.range == Range.OFF and high_ <= switch.scaling.count_at_most(_STANDS_LOW_MV)
        return state._replace(facts=state.facts | SEAT_POSITION << number) if looks else state
    wants = [row.raised[number] for row in t.rows if number in row.raised and state.rail in row.raised[number].steps]
    scaling = switch.scaling
    inside = any(
        scaling.count_at_least(want.supply.min_mv) <= low and high_ <= scaling.count_at_most(want.top_mv)
        for want in wants
    )
    t.need(
        inside,
        "H8",
        f"the level at switch {number} is measured against a window that no supply has",
        "",
        f"{low}..{high_}",
    )
    _settled(t, clocks, ON, f"the level at switch {number}", at_least(switch.rise_ps))
    return state._replace(positions=tuple(sorted({*state.positions, (number, low, high_)})))


def measured_for(state: State, want: Raised) -> bool:
    """Whether the level was measured at its position inside the window of this very supply."""
    scaling = want.switch.scaling
    least, most = scaling.count_at_least(want.supply.min_mv), scaling.count_at_most(want.top_mv)
    return any(number == want.switch.number and least <= low and high <= most for number, low, high in state.positions)


def rail_measured_for(t: Tables, state: State, want: Raised) -> bool:
    """Whether the raised rail was measured inside the window of this supply: the monitor holds it where it was."""
    scaling = t.rig.raised.scaling
    least, most = scaling.count_at_least(want.supply.min_mv), scaling.count_at_most(want.top_mv)
    return state.rail_window is not None and least <= state.rail_window[0] and state.rail_window[1] <= most


# ---- what must hold whatever was done -------------------------------------------------------------------------------


def invariants(t: Tables, state: State) -> None:
    """What every state between two ops must keep (H11, and lines at raised positions)."""
    if state.range != Range.FULL:
        risen = [line for line, level in enumerate(state.levels) if level not in (LOW, RELEASED, "?")]
        t.need(not risen, "H11", "lines above a socket without VCC", "low or released", risen)
        t.need(state.data in (RELEASED, 0), "H11", "D is driven without VCC", "released", state.data)
        unset = state.range and [line for line in t.pins.inputs if state.levels[line] == "?"]
        t.need(not unset, "H11", "VCC rises while lines were never set", "all set", unset)
    for one in t.rig.switches if state.on else ():
        position = t.rig.site.positions.get(one.position)
        if state.on >> one.number & 1 and position is not None and position.line is not None:
            level = state.levels[position.line]
            t.need(
                level in (HIGH, RELEASED), "H3", f"the line at raised position {one.position}", "H or released", level
            )


def out_of_pulse(t: Tables, state: State, clocks: Clocks) -> None:
    """No pulse's own levels stand outside a pulse, while its raised levels are up, rising or falling (H7)."""
    if state.range == Range.OFF:
        return
    up = state.on
    if state.opened and elapsed(clocks, OFF) < t.timing.fall_ticks(state.opened):
        up |= state.opened
    for one in t.actives:
        if one.raised & up != one.raised or (not one.raised and state.range != Range.FULL):
            continue
        if all(state.levels[line] not in (LOW, HIGH) or state.levels[line] == level
               for line, level in one.lines.items()):  # fmt: skip
            t.find("H7", f"the levels of the pulse of {one.mode} stand outside a pulse")
