"""Ops that move supplies, raised levels and pulls, and that measure: where most of what the firmware refuses stands."""

from __future__ import annotations

from pulsewright.units import TICKS_PER_MS
from pulsewright.virtual.board import (
    DATA_POSITIONS,
    POWER_POSITIONS,
    RAISED_FULL_MV,
    RAISED_POSITIONS,
    RAISED_STEPS_MV,
    VCC_FULL_MV,
    VCC_STEPS_MV,
    count_of,
)
from pulsewright.virtual.contacts import NEVER
from pulsewright.virtual.machine import Machine, Trip, Waiting, until
from pulsewright.virtual.ops import Args, Step
from pulsewright.virtual.supplied import vcc_positions
from pulsewright.wire.permit import NO_SWITCH
from pulsewright.wire.tables import DEAD_MAN_MS, MONITOR_MS, OP_COST, Bias, Channel, Fault, Group, Op, Rail, Range

_COST = OP_COST[Op.RAIL]
CONVERSION_TICKS = OP_COST[Op.MEASURE]  # one reading
_ADDRESS_GROUP, _DATA_GROUP, _POWER_GROUP = int(Group.ADDRESS), int(Group.DATA), int(Group.POWER)


def _moved(m: Machine) -> None:
    """A supply moved at `m.t`: the ends of ramps are events, and nothing approved before counts any more."""
    m.ramps_moved()
    m.edge = m.t
    m.t += _COST


# ---- rails and range ----------------------------------------------------------------------------------------------


def rail(m: Machine, a: Args, after: int) -> Step:
    """A rail to a step."""
    number = a["step"]
    move = _vcc_rail if a["rail"] == Rail.VCC else _raised_rail

    def step() -> int:
        if m.closed:
            raise Trip(Fault.STILL_RAISED, got=m.closed)
        m.forget_approval()
        move(m, number)
        _moved(m)
        return after

    return step


def _vcc_rail(m: Machine, number: int) -> None:
    if number and number not in m.vcc_windows:
        raise Trip(Fault.NOT_IN_PERMIT, got=number)
    floor = m.board.driven_from_mv
    if m.high_driven and min(VCC_STEPS_MV[number], VCC_STEPS_MV[m.vcc_step]) < floor:
        raise Trip(Fault.DRIVEN_TOO_LOW, got=number)
    m.socket.set_rail(m.t, VCC_STEPS_MV[number])
    m.vcc_step = number
    m.vcc_measured = False
    m.vcc_settled_at = m.t + (m.vcc_windows[number].settle if number else 0)
    if number == 0:
        shut(m)


def _raised_rail(m: Machine, number: int) -> None:
    if number:
        if not m.seated:
            raise Trip(Fault.NOT_SEATED)
        if not _vcc_stands(m):
            raise Trip(Fault.NO_VCC)
        nominal = count_of(RAISED_STEPS_MV[number], RAISED_FULL_MV)
        is_identify = m.permit.identify_switch != NO_SWITCH and number == m.permit.identify_step
        if not is_identify:
            if not m.gate:
                raise Trip(Fault.GATE_SHUT, got=number)
            ceilings = [ceiling for _, ceiling in m.permit.raised]
            if not ceilings:
                raise Trip(Fault.NOT_IN_PERMIT, got=number)
            if nominal > max(ceilings):
                raise Trip(Fault.ABOVE_CEILING, got=nominal, high=max(ceilings))
    m.socket.set_raised_rail(m.t, RAISED_STEPS_MV[number])
    m.raised_step = number
    m.raised_measured = False
    m.raised_low = m.raised_strikes = 0


def _vcc_stands(m: Machine) -> bool:
    return m.range is Range.FULL and m.vcc_measured


def shut(m: Machine) -> None:
    """Power-down: seating, look and gate are to be passed again."""
    m.seated = False
    m.look = None
    m.gate = False
    m.forget_approval()


def set_range(m: Machine, a: Args, after: int) -> Step:
    """VCC to the socket: off, through the probe resistor, full."""
    which = Range(a["which"])
    positions = vcc_positions(m.permit.vcc_to)
    their_lines = sum(1 << position for position in positions)

    def step() -> int:
        if m.closed:
            raise Trip(Fault.STILL_RAISED, got=m.closed)
        if which is Range.OFF:
            if m.high_driven:
                raise Trip(Fault.DRIVEN_TOO_LOW)
            shut(m)
        else:
            _connect(m, which)
        rises = m.range is Range.OFF and which is not Range.OFF
        m.range = which
        m.vcc_measured = False
        m.forget_approval()
        m.socket.set_range(m.t, which, positions)
        if rises:
            m.vcc_lines = their_lines
            m.low &= ~their_lines
            m.high &= ~their_lines
            m.vcc_settled_at = max(m.vcc_settled_at, m.t + m.vcc_windows[m.vcc_step].settle)
            m.monitor_at = m.t + MONITOR_MS * TICKS_PER_MS
            m.dead_at = m.t + DEAD_MAN_MS * TICKS_PER_MS
            m.next_is_no_later_than(m.monitor_at)
        elif which is Range.OFF:
            m.vcc_lines = 0
            m.monitor_at = m.dead_at = NEVER
        _moved(m)
        return after

    return step


def _connect(m: Machine, which: Range) -> None:
    if m.vcc_step not in m.vcc_windows:
        raise Trip(Fault.NOT_IN_PERMIT, got=m.vcc_step)
    if m.driving and m.may_drive:
        raise Trip(Fault.BUS_CONFLICT)
    if which is Range.PROBE:
        if m.pulled_up:
            raise Trip(Fault.BIAS_REFUSED)
        if m.high_driven:
            raise Trip(Fault.DRIVEN_TOO_LOW)
        shut(m)


# ---- raised levels ------------------------------------------------------------------------------------------------


def switches(m: Machine, a: Args, after: int) -> Step:
    """The raised switches, all at once. What was approved stays so until a supply, the gate or a reading changes."""
    on = a["on"]
    positions = tuple(position for number, position in enumerate(RAISED_POSITIONS) if on >> number & 1)
    their_lines = sum(1 << position for position in positions)
    bits = sum(1 << m.address_lines.index(position) for position in positions if position in m.address_lines)
    control = sum(1 << position for position in positions if position not in m.address_lines)
    socket = m.socket

    def step() -> int:
        if on:
            if on not in m.approved:
                _approve(m, on)
            if m.low & control or bits & ~socket.shown:
                raise Trip(Fault.LINE_AT_RAISED, got=on)
        m.closed, m.closed_lines, m.closed_bits = on, their_lines, bits
        t = m.t
        socket.set_raised(t, positions)
        m.next_event = min(m.next_event, socket.next_end)
        m.edge = t
        m.t = t + _COST
        return after

    return step


def _approve(m: Machine, on: int) -> None:
    """Whether these switches may be closed now; Trip with the first reason why not."""
    if not m.seated:
        raise Trip(Fault.NOT_SEATED, got=on)
    if not _vcc_stands(m):
        raise Trip(Fault.NO_VCC, got=on)
    if not m.raised_step or not m.raised_measured:
        raise Trip(Fault.NOT_MEASURED, got=on)
    permitted = dict(m.permit.raised) if m.gate else {}
    if m.permit.identify_switch != NO_SWITCH and m.raised_step == m.permit.identify_step:
        permitted.setdefault(m.permit.identify_switch, m.permit.identify_ceiling)
    nominal = count_of(RAISED_STEPS_MV[m.raised_step], RAISED_FULL_MV)
    level = max(nominal, m.raised_reading)
    for number in range(len(RAISED_POSITIONS)):
        if not on >> number & 1:
            continue
        if number not in permitted:
            raise Trip(Fault.NOT_IN_PERMIT if m.gate else Fault.GATE_SHUT, got=number)
        ceiling = min(permitted[number], count_of(m.board.ceilings_mv[number], RAISED_FULL_MV))
        if level > ceiling:
            raise Trip(Fault.ABOVE_CEILING, got=level, high=ceiling)
    m.approved.add(on)


# ---- pulls --------------------------------------------------------------------------------------------------------


def bias(m: Machine, a: Args, after: int) -> Step:
    """A weak pull of line groups: off, down, up."""
    groups, how = a["groups"], Bias(a["how"])

    def step() -> int:
        if how is Bias.UP and m.range is not Range.FULL:
            raise Trip(Fault.BIAS_REFUSED)
        positions: set[int] = set()
        if groups & _DATA_GROUP:
            positions.update(DATA_POSITIONS)
        if groups & _ADDRESS_GROUP:
            positions.update(m.address_lines)
        if groups & _POWER_GROUP:
            positions.update(POWER_POSITIONS)
        m.pulled_up = m.pulled_up & ~groups | (groups if how is Bias.UP else 0)
        m.socket.set_bias(m.t, positions, how)
        m.edge = m.t
        m.t += _COST
        return after

    return step


# ---- measuring ----------------------------------------------------------------------------------------------------


def count_at(m: Machine, channel: int) -> int:
    """A converter's count now."""
    if channel == Channel.VCC_RAIL:
        return count_of(m.socket.rail.level(m.t), VCC_FULL_MV)
    if channel == Channel.RAISED_RAIL:
        return m.rail_count()
    if channel == Channel.SOCKET_VCC:
        return m.vcc_count()
    return count_of(m.socket.mv(m.t, RAISED_POSITIONS[channel - Channel.POSITION]), RAISED_FULL_MV)


def measure(m: Machine, a: Args, after: int) -> Step:
    """Converts until the reading lies inside low..high, at most limit ticks from now; else trips."""
    channel, low, high, limit = a["channel"], a["low"], a["high"], a["limit"]

    def step() -> int:
        m.slow = _measure_on(m, channel, (low, high), limit, after)
        return -1

    return step


def _measure_on(m: Machine, channel: int, window: tuple[int, int], limit: int, after: int) -> Waiting:
    begun = m.t
    while True:
        yield from until(m, m.t + CONVERSION_TICKS)
        reading = count_at(m, channel)
        if window[0] <= reading <= window[1]:
            break
        if m.t - begun >= limit:
            m.keep_reading(m.offsets[m.pc], reading)
            raise Trip(Fault.MEASURED_OUTSIDE, reading, *window)
    m.keep_reading(m.offsets[m.pc], reading)
    _learn(m, channel, reading, window[0])
    return after


def _learn(m: Machine, channel: int, reading: int, low: int) -> None:
    """What a reading that was inside its window says about a supply."""
    if channel == Channel.SOCKET_VCC:
        learn_vcc(m, reading)
    elif channel == Channel.RAISED_RAIL and m.raised_step:
        if reading >= half_of(m.raised_step):
            m.raised_measured = True
            m.raised_reading = reading
            m.raised_low = low
            m.forget_approval()


def learn_vcc(m: Machine, reading: int) -> bool:
    """Whether VCC, whole, is in the permit's window of the step in force; remembers that it was measured there."""
    window = m.vcc_windows.get(m.vcc_step)
    inside = m.range is Range.FULL and window is not None and window.low <= reading <= window.high
    if inside:
        m.vcc_measured = True
    return inside


def half_of(step: int) -> int:
    """Half the nominal count of a raised step: below, the rail is not there."""
    return count_of(RAISED_STEPS_MV[step] // 2, RAISED_FULL_MV)


def seated(m: Machine, a: Args, after: int) -> Step:
    """The seating check has passed."""

    def step() -> int:
        if not _vcc_stands(m):
            raise Trip(Fault.NO_VCC)
        m.seated = True
        m.t += _COST
        return after

    return step
