"""The look at the standing rails, once a millisecond: when it trips, and when not yet."""

from __future__ import annotations

import pytest

from pulsewright.virtual.board import Board
from pulsewright.wire.ops import ins
from pulsewright.wire.tables import Fault, Op, Outcome
from tests.virtual.kit import MS, Host, build, past_gate, raise_oe


def standing(limit_ua: int) -> tuple[Host, int]:
    """A host whose rig holds OE at 14 V for long, just after a look of the monitor; and the tick."""
    host = Host(board=Board(raised_limit_ua=limit_ua))
    host.start(build([*past_gate(), *raise_oe(), ins(Op.WAIT, ticks=400 * MS), ins(Op.END)]))
    host.pass_time(150 * MS)
    machine = host.rig.machine
    assert machine is not None
    host.pass_time(machine.monitor_at - host.rig.t + MS // 4)
    return host, host.rig.t


def test_a_rail_that_stays_low_trips_at_the_second_look() -> None:
    """One look may have met a dip; the second one trips, within two milliseconds of the fall."""
    host, fell = standing(8_000)
    host.chip.draw[22] = 9_000  # 12.4 V, under the window and above half of the step
    end = host.end()
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, Fault.RAISED_OUTSIDE)
    assert MS < end.fault["tick"] - fell < 2 * MS


def test_a_dip_that_one_look_met_does_not_trip() -> None:
    """A rail that is back at the next look goes on."""
    host, _ = standing(8_000)
    host.chip.draw[22] = 9_000
    host.pass_time(MS)
    host.chip.draw[22] = 100
    assert host.end().outcome is Outcome.DONE


@pytest.mark.parametrize("pause", [MS, 5 * MS])
def test_a_good_look_between_two_low_ones_clears_nothing(pause: int) -> None:
    """Between pulses a rail that sags under them looks well: the second low look trips, whatever lay between."""
    host, _ = standing(8_000)
    for _ in range(2):
        host.chip.draw[22] = 9_000
        host.pass_time(MS)
        host.chip.draw[22] = 100
        host.pass_time(pause)
    end = host.end()
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, Fault.RAISED_OUTSIDE)
