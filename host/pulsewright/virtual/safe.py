"""Making safe, in the order of rule H5, at the end of every sequence however it ends.

Pulsed line to its idle level; switches open and each raised position measured below VCC + 0.3 V; D released, addresses
low, control lines in the permit's safe pattern; a self-timed write waited for; VCC off and measured; then all low.
Each measured wait has a limit: past it the converter is shut down, VCC follows, and the fault tells which it was.
"""

from __future__ import annotations

from pulsewright.units import TICKS_PER_MS, TICKS_PER_US
from pulsewright.virtual.board import POSITIONS, RAISED_FULL_MV, RAISED_POSITIONS, VCC_FULL_MV, count_of
from pulsewright.virtual.contacts import NEVER
from pulsewright.virtual.machine import Machine, Trip, Waiting, until
from pulsewright.virtual.ops_supply import CONVERSION_TICKS, shut
from pulsewright.virtual.supplied import vcc_positions
from pulsewright.wire.ops import line_of
from pulsewright.wire.permit import NO_SWITCH
from pulsewright.wire.tables import CONVERTER_OFF_MS, OP_COST, Bias, Fault, Level, Op, Range

_STEP = OP_COST[Op.LINES]
_HOLD_TICKS = 5 * TICKS_PER_US  # a pulse's raised level stays a little: no part of the fact tables asks for over 2 us
_VCC_CUT_AFTER_TICKS = 1 * TICKS_PER_MS  # a VCC trip: raised levels go this long before
CUTS_VCC_AT_ONCE = (Fault.VCC_OUTSIDE,)


def make_safe(m: Machine, reason: Trip | None) -> Waiting:
    """Everything off, in order; a fault met on the way is kept in `m.safe_fault`. Ends with every line low."""
    m.safe = True
    m.gate = False
    m.forget_approval()
    _end_pulse(m)
    if m.closed:
        yield from until(m, m.edge + _HOLD_TICKS)
    _open_switches(m)
    at_once = reason is not None and reason.code in CUTS_VCC_AT_ONCE
    if at_once:
        yield from until(m, m.t + _VCC_CUT_AFTER_TICKS)
    else:
        yield from _watch_fall(m)
    _safe_pattern(m)
    if not at_once:
        yield from _self_timed(m)
    yield from _power_down(m)
    m.socket.all_low(m.t)
    m.driving = True
    m.socket.set_raised_rail(m.t, 0)
    m.raised_step = 0
    m.monitor_at = m.dead_at = NEVER
    m.t += _STEP
    return 0


def _end_pulse(m: Machine) -> None:
    if m.pulsing is not None:
        line, idle = m.pulsing
        m.socket.set_line(m.t, line, idle)
        if line not in m.address_lines:
            bit = 1 << line
            m.low, m.high = m.low & ~bit, m.high & ~bit
            if idle == Level.LOW:
                m.low |= bit
            else:
                m.high |= bit
        m.pulsing = None
        m.cut = True
        m.edge = m.t
        m.t += _STEP


def _open_switches(m: Machine) -> None:
    m.socket.set_raised(m.t, ())
    m.closed = m.closed_lines = m.closed_bits = 0
    m.ramps_moved()
    m.edge = m.t
    m.t += _STEP


def _permitted_positions(m: Machine) -> list[int]:
    """Every raised position the permit names, in the order of switches."""
    numbers = {switch for switch, _ in m.permit.raised}
    if m.permit.identify_switch != NO_SWITCH:
        numbers.add(m.permit.identify_switch)
    return [RAISED_POSITIONS[number] for number in sorted(numbers)]


def _watch_fall(m: Machine) -> Waiting:
    """Each raised position measured below VCC + 0.3 V; past the limit the converter goes, and VCC after it."""
    for position in _permitted_positions(m):
        limit = m.t + m.board.fall_limit_ticks
        while True:
            yield from until(m, m.t + CONVERSION_TICKS)
            reading = count_of(m.socket.mv(m.t, position), RAISED_FULL_MV)
            allowed = count_of(m.socket.socket_vcc_mv(m.t) + m.board.clear_above_vcc_mv, RAISED_FULL_MV)
            if reading <= allowed:
                break
            if m.t >= limit:
                _keep_fault(m, Trip(Fault.STILL_RAISED, reading, position, allowed))
                m.socket.set_raised_rail(m.t, 0)
                yield from until(m, m.t + CONVERTER_OFF_MS * TICKS_PER_MS)
                return 0
    return 0


def _keep_fault(m: Machine, trip: Trip) -> None:
    if m.safe_fault is None:
        m.safe_fault = trip


def _safe_pattern(m: Machine) -> None:
    """D released, then one group: addresses low, control lines in the safe pattern, or low where VCC is not whole."""
    m.socket.release(m.t)
    m.driving = False
    m.t += _STEP
    whole = m.range is Range.FULL
    pattern = [(line, int(level) if whole else int(Level.LOW)) for line, level in map(line_of, m.permit.safe)]
    named = {line for line, _ in pattern}
    vcc_at = vcc_positions(m.permit.vcc_to) if m.range is not Range.OFF else ()
    pattern += [(line, int(Level.LOW)) for line in m.address_lines if line not in named]
    m.socket.set_lines(m.t, [(line, level) for line, level in pattern if line not in vcc_at])
    m.edge = m.t
    m.t += _STEP


def _self_timed(m: Machine) -> Waiting:
    """What the chip does by itself after a pulse ends before VCC goes; a second interrupt skips it."""
    if not m.pulsed:
        return 0
    end = m.edge + m.permit.self_timed
    while m.t < end and not m.hurry:
        yield end
    return 0


def _power_down(m: Machine) -> Waiting:
    """Pulls off, H released so that lines follow VCC down, VCC off and measured."""
    socket = m.socket
    socket.set_bias(m.t, range(1, POSITIONS + 1), Bias.OFF)
    m.pulled_up = 0
    m.t += _STEP
    if m.high_driven:
        socket.set_high(m.t, False)
        m.high_driven = False
        m.t += _STEP
    shut(m)
    if m.range is not Range.OFF:
        socket.set_range(m.t, Range.OFF, ())
        m.range = Range.OFF
        m.vcc_lines = 0
        m.ramps_moved()
        m.t += _STEP
    socket.set_rail(m.t, 0)
    m.vcc_step = 0
    limit = m.t + m.board.off_limit_ticks
    allowed = count_of(m.board.off_below_mv, VCC_FULL_MV)
    while True:
        yield from until(m, m.t + CONVERSION_TICKS)
        reading = m.vcc_count()
        if reading < allowed:
            return 0
        if m.t >= limit:
            _keep_fault(m, Trip(Fault.STILL_POWERED, reading, 0, allowed))
            return 0
