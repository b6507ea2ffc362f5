"""The tests' model of a 2716: a pulse up at CE/PGM, 25 V on VPP, and no level that may be held there for long."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.virtual.judge import Judge
from pulsewright.virtual.models import load_model
from pulsewright.virtual.models.uv_eprom import UvEprom
from tests.virtual.test_judge import rules
from tests.virtual.uv_wave import HighPulseBus
from tests.virtual.waveform import HIGH, MS, US

MODEL = Path(__file__).parents[2] / "models" / "m2716.py"
CE, OE, VPP, VCC, A9 = 18, 20, 21, 24, 22


def fresh() -> tuple[UvEprom, Judge, HighPulseBus]:
    """A chip and a judge on one bus, powered and in standby."""
    chip = load_model(MODEL)
    assert isinstance(chip, UvEprom)
    judge = Judge(chip.limits)
    bus = HighPulseBus(judge, chip=chip)
    bus.up()
    return chip, judge, bus


def test_a_clean_life_programs_and_is_clean() -> None:
    """Words at both ends of 45..55 ms and of 24..26 V (limits from memory), verified with VPP up, read after it."""
    chip, judge, bus = fresh()
    for at, vpp, width in ((0x401, 24_000, 45), (0x2FE, 26_000, 55)):
        bus.enter(vpp=vpp)
        bus.word(at, 0x5A, width * MS)
        assert bus.verify(at, access=4) == 0x5A
        bus.leave()
        assert bus.read(at, access=8) == 0x5A
    bus.down()
    assert chip.cells.count(0xFF) == 2_046
    assert judge.violations == []


@pytest.mark.parametrize(
    ("vpp", "width", "programs"),
    [
        (24_000, 45 * MS, True),
        (23_999, 50 * MS, False),
        (26_001, 50 * MS, False),
        (25_000, 45 * MS - 1, False),
        (12_750, 50 * MS, False),
    ],
)
def test_a_pulse_needs_time_and_level(vpp: int, width: int, programs: bool) -> None:
    """45 ms at 24..26 V on VPP (from memory) program a word, less of either, or more volts, does not."""
    chip, _judge, bus = fresh()
    bus.enter(vpp=vpp)
    bus.word(7, 0, width)
    assert chip.cells[7] == (0 if programs else 0xFF)


def test_ce_held_high_is_reported_while_it_stands() -> None:
    """CE/PGM high with VPP at 25 V for more than 55 ms (from memory): a violation before it ends, a note after."""
    chip, judge, bus = fresh()
    bus.enter()
    bus.address(7)
    bus.drive(0)
    bus.wait(2 * US)
    bus.give(on=True)
    bus.wait(55 * MS + 1)
    bus.sample()
    assert rules(judge) == {"pulse width"}
    bus.give(on=False)
    assert judge.count == 1
    assert chip.stressed == ["a program pulse longer than 55 ms"]


def test_vpp_that_comes_up_over_standby_is_a_pulse() -> None:
    """CE and OE high are standby at 5 V and program at 25 V: nothing was set up for it."""
    _chip, judge, bus = fresh()
    bus.address(7)
    bus.drive(0)
    bus.raise_to({VPP: 25_000})
    bus.wait(60 * MS)
    bus.raise_to({VPP: HIGH})
    assert rules(judge) == {"raised setup", "pulse width", "raised hold"}


def test_ce_high_counts_with_oe_low_as_well() -> None:
    """A level held at CE/PGM harms the array whatever OE is (from memory)."""
    chip, judge, bus = fresh()
    bus.enter()
    bus.address(7)
    bus.set({OE: 0})
    bus.wait(2 * US)
    bus.give(on=True)
    bus.wait(56 * MS)
    bus.give(on=False)
    assert {"pulse width", "pulse control"} <= rules(judge)
    assert "a program pulse longer than 55 ms" in chip.stressed
    assert chip.cells[7] == 0xFF


def test_a_second_pulse_at_a_word_is_too_many() -> None:
    """One 50 ms pulse is the limit (from memory), other words between them or not."""
    _chip, judge, bus = fresh()
    bus.enter()
    for at in (7, 8, 7):
        bus.word(at, 0, 50 * MS)
    assert [violation.rule for violation in judge.violations] == ["too many pulses"]


@pytest.mark.parametrize(
    ("pin", "level", "damaged", "broken"),
    [
        (VCC, 5_251, False, {"vcc window"}),
        (VCC, 6_000, False, {"vcc window"}),
        (VCC, 6_001, True, {"vcc window", "absolute maximum"}),
        (VPP, 26_500, False, {"raised window"}),
        (VPP, 26_501, True, {"raised window", "absolute maximum"}),
        (A9, 12_000, True, {"absolute maximum"}),
        (A9, 5_301, False, {"above VCC"}),
    ],
)
def test_levels_past_the_maximum_destroy_the_chip(pin: int, level: int, damaged: bool, broken: set[str]) -> None:
    """6 V everywhere, A9 as well, and 26.5 V on VPP [S1]; VCC is never above 5.25 V (from memory)."""
    chip, judge, bus = fresh()
    bus.set({CE: 0})
    bus.ramp({pin: level}, 5 * US)
    assert chip.damaged is damaged
    assert rules(judge) == broken


def test_it_has_no_identify_mode() -> None:
    """Nothing at A9 brings an ID: 5 V read the cell."""
    chip, _judge, bus = fresh()
    chip.cells[0x200] = 0x42
    assert bus.read(0x200, access=8) == 0x42


def test_currents_stay_within_the_published_ones() -> None:
    """525 mW active and 132 mW standby at 5.25 V [S1]; 30 mA in the pulse and 5 mA beside it (from memory)."""
    chip, _judge, bus = fresh()
    assert 0 < chip.draw_ua(bus.t, VCC) <= 25_143
    bus.enter()
    assert 0 < chip.draw_ua(bus.t, VPP) <= 5_000
    bus.give(on=True)
    assert 5_000 < chip.draw_ua(bus.t, VPP) <= 30_000
    assert 25_143 < chip.draw_ua(bus.t, VCC) <= 100_000
