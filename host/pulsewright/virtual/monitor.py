"""The look at the standing rails, once a millisecond: VCC against the permit, the raised rail against its
ceilings and the window it was measured in."""

from __future__ import annotations

from pulsewright.virtual.board import RAISED_POSITIONS, VCC_FULL_MV, count_of
from pulsewright.virtual.machine import Machine, Trip
from pulsewright.virtual.ops_supply import half_of, learn_vcc
from pulsewright.wire.tables import Fault, Range

_GATE_SHUTS_MV = 3_000
_STRIKES = 2


def look(m: Machine) -> Trip | None:
    """What is wrong with the rails now, if anything; shuts the gate where VCC is too low for it."""
    trip = _look_at_vcc(m)
    if trip is None and m.closed:
        trip = _look_at_raised(m)
    if trip is not None:
        m.gate = False
        m.forget_approval()
    return trip


def _look_at_vcc(m: Machine) -> Trip | None:
    window = m.vcc_windows.get(m.vcc_step)
    if m.range is Range.OFF or window is None:
        return None
    reading = m.vcc_count()
    if m.range is Range.FULL and m.t >= m.vcc_settled_at:
        if not learn_vcc(m, reading):
            return Trip(Fault.VCC_OUTSIDE, reading, window.low, window.high)
    elif reading > max(entry.high for entry in m.vcc_windows.values()):
        return Trip(Fault.VCC_OUTSIDE, reading, window.low, window.high)
    if m.gate and reading < count_of(_GATE_SHUTS_MV, VCC_FULL_MV):
        return Trip(Fault.VCC_OUTSIDE, reading, window.low, window.high)
    return None


def _look_at_raised(m: Machine) -> Trip | None:
    low = max(half_of(m.raised_step), m.raised_low)
    permitted = dict(m.permit.raised)
    permitted.setdefault(m.permit.identify_switch, m.permit.identify_ceiling)
    closed = [number for number in range(len(RAISED_POSITIONS)) if m.closed >> number & 1]
    high = min(permitted[number] for number in closed)
    reading = m.rail_count()
    if low <= reading <= high:
        return None
    m.raised_strikes += 1
    m.strike = (reading, low, high)
    if half_of(m.raised_step) <= reading < low and m.raised_strikes < _STRIKES:
        # Once may be a dip at a load step. Between pulses a sagging rail looks well, so a good look clears nothing.
        return None
    return Trip(Fault.RAISED_OUTSIDE, reading, low, high)
