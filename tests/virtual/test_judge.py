"""The waveform judge: silent on what the sheet allows, and each rule fires on a waveform that breaks just it."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from pulsewright.virtual.judge import KEPT, RULES, Judge
from pulsewright.virtual.models.e512_limits import LIMITS
from tests.virtual.broken_pulses import PULSES
from tests.virtual.broken_waves import WAVES
from tests.virtual.uv_broken import PGM_WAVES, UV_WAVES
from tests.virtual.waveform import A9, CE, HIGH, MS, OE, US, VCC, A, Bus, pulse, ready_to_program, wind_down


def watched() -> tuple[Judge, Bus]:
    """A judge of the part and a bus that it watches, powered and in standby."""
    judge = Judge(LIMITS)
    bus = Bus(judge)
    bus.up()
    return judge, bus


def rules(judge: Judge) -> set[str]:
    """The rules that were broken."""
    return {violation.rule for violation in judge.violations}


def test_a_clean_life_is_clean() -> None:
    """Identify, program at both ends of every window, erase, verify at low VCC, power-down: nothing to report."""
    judge, bus = watched()
    bus.identify(11_500)
    bus.identify(12_500)
    for word, (width, vpp) in enumerate([(95 * US, 11_750), (105 * US, 12_250)]):
        bus.program(word, 0x55, width, vpp)
        bus.read(word, access=US)
    for width, level in ((95 * MS, 13_750), (105 * MS, 14_250)):
        bus.erase(width, level, level)
    bus.power(3750)
    bus.read(0xFFFF, access=US)
    bus.power(HIGH)
    bus.down()
    assert judge.violations == []
    assert judge.count == 0


def test_it_keeps_what_each_pin_has_seen() -> None:
    """Highest and lowest level of each pin that ever left 0 V."""
    judge, bus = watched()
    bus.identify(12_100)
    bus.erase()
    bus.set({A[0]: -300})
    assert (judge.pins[OE].max_mv, judge.pins[A9].max_mv, judge.pins[VCC].max_mv) == (14_000, 14_000, HIGH)
    assert (judge.pins[A[0]].max_mv, judge.pins[A[0]].min_mv) == (HIGH, -300)
    assert 14 not in judge.pins


def test_it_tells_the_widths_and_set_up_times_it_saw() -> None:
    """Least, most and number of pulses and of their set-up times, in ticks, to be held against the sheet."""
    judge, bus = watched()
    bus.program(1, 0x55, 96 * US)
    bus.program(2, 0x55, 104 * US)
    bus.erase(100 * MS)
    bus.read(0, access=US)
    seen = judge.seen()
    assert seen["program pulse"] == (96 * US, 104 * US, 2)
    assert seen["erase pulse"] == (100 * MS, 100 * MS, 1)
    assert seen["program raised setup"] == (2 * US, 2 * US, 2)
    assert seen["program address setup"] == (7 * US, 7 * US, 2)
    assert seen["rise"] == (5 * US, 5 * US, 4)
    assert seen["recovery"] == (2 * US, 2 * US, 1)


@pytest.mark.parametrize(("wave", "broken"), [*WAVES, *PULSES])
def test_each_rule_fires(wave: Callable[[Bus], None], broken: set[str]) -> None:
    """A waveform that breaks one rule gets just that rule reported."""
    judge, bus = watched()
    assert judge.violations == []
    wave(bus)
    assert rules(judge) == broken


def test_each_rule_of_the_list_was_seen_to_fire() -> None:
    """Every rule that the judge knows is one that a test sees fire, and none fires that has no name.

    The others' waveforms stand beside the chips that they need: a VPP pin of its own, a program pin.
    """
    seen = [broken for waves in (WAVES, PULSES, UV_WAVES, PGM_WAVES) for _wave, broken in waves]
    assert set().union(*seen) == set(RULES)


def test_a_violation_says_where_and_when() -> None:
    """Rule, pin, microseconds since the rig's start, what was wanted and what was got."""
    judge, bus = watched()
    ready_to_program(bus)
    pulse(bus, 94 * US)
    (violation,) = judge.violations
    assert (violation.rule, violation.pin, violation.at_us) == ("pulse width", CE, bus.t // US)
    assert (violation.wanted, violation.got) == ("95 us to 105 us", "94 us")


def test_a_long_list_is_cut_and_counted() -> None:
    """The first violations are kept in full, all are counted."""
    judge, bus = watched()
    for level in range(250):
        bus.set({A[0]: 6_000 + level})
    assert len(judge.violations) == KEPT
    assert judge.count == 250


def test_a_small_droop_is_no_event() -> None:
    """OE and VCC that move inside their windows, in a pulse or before it, break no set-up or hold time."""
    judge, bus = watched()
    ready_to_program(bus)
    bus.raise_to({OE: 11_900})
    bus.set({VCC: 4_950})
    with bus.low(CE, 100 * US):
        bus.set({OE: 11_800})
        bus.set({VCC: 4_900})
    wind_down(bus)
    assert judge.violations == []


def test_a_level_that_leaves_its_window_in_a_pulse_ends_it() -> None:
    """OE that sags below 11.75 V inside the pulse: no such level, no such pulse, and the pulse was too short."""
    judge, bus = watched()
    ready_to_program(bus)
    with bus.low(CE, 100 * US):
        bus.set({OE: 11_700})
    assert rules(judge) == {"raised window", "unknown pulse", "pulse width"}


def test_a_misplaced_chip_is_judged_by_its_maxima_only() -> None:
    """Of a chip that sits turned only what can destroy it is reported, and every level is kept."""
    judge = Judge(LIMITS, misplaced=True)
    bus = Bus(judge)
    bus.set({A[15]: 1_400, CE: 0, OE: 0})
    bus.drive(0xFF)
    bus.sample()
    assert judge.violations == []
    bus.set({A[15]: 7_100})
    assert rules(judge) == {"absolute maximum"}
    assert judge.pins[A[15]].max_mv == 7_100
