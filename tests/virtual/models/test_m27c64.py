"""The tests' model of a 27C64, pulsed at PGM, and what the judge says to its waveforms."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from pulsewright.virtual.judge import Judge
from pulsewright.virtual.models import load_model
from pulsewright.virtual.models.uv_eprom import UvEprom
from tests.virtual.test_judge import rules
from tests.virtual.uv_broken import PGM_WAVES
from tests.virtual.uv_wave import PgmBus
from tests.virtual.waveform import CE, OE, US

MODEL = Path(__file__).parents[2] / "models" / "m27c64.py"


def fresh() -> tuple[UvEprom, Judge, PgmBus]:
    """A chip and a judge on one bus, powered and in standby."""
    chip = load_model(MODEL)
    assert isinstance(chip, UvEprom)
    judge = Judge(chip.limits)
    bus = PgmBus(judge, chip=chip)
    bus.up()
    return chip, judge, bus


def test_a_clean_life_programs_and_is_clean() -> None:
    """Identify, words at both ends of the windows, verify with VPP up, a read: all as it must be."""
    chip, judge, bus = fresh()
    assert bus.identify(access=5) == (0x01, 0x15)
    for vcc, vpp, width in ((6_000, 12_500, 95), (6_500, 13_000, 105)):
        bus.enter(vcc, vpp)
        bus.word(0x1ABC, width, width * US)
        assert bus.verify(0x1ABC) == chip.cells[0x1ABC]
        bus.leave()
    assert chip.cells[0x1ABC] == 95 & 105
    assert bus.read(0x1ABC, access=5) == 95 & 105
    bus.down()
    assert judge.violations == []


@pytest.mark.parametrize(("wave", "broken"), PGM_WAVES)
def test_each_rule_fires(wave: Callable[[PgmBus], None], broken: set[str]) -> None:
    """A waveform that breaks one rule gets just that rule reported."""
    _chip, judge, bus = fresh()
    wave(bus)
    assert rules(judge) == broken


def test_with_ce_high_a_pulse_is_inhibited() -> None:
    """CE high is the inhibit row (from memory): PGM low programs nothing, and nobody minds."""
    chip, judge, bus = fresh()
    bus.enter()
    bus.address(5)
    bus.drive(0)
    bus.set({CE: bus.high_mv})
    bus.wait(2 * US)
    bus.give(on=True)
    bus.wait(1_000 * US)
    bus.give(on=False)
    assert chip.cells[5] == 0xFF
    assert judge.violations == []


def test_with_oe_low_a_pulse_programs_nothing() -> None:
    """PGM low needs OE high (from memory): else a note is left, and the judge says so."""
    chip, judge, bus = fresh()
    bus.enter()
    bus.address(5)
    bus.set({OE: 0})
    bus.wait(2 * US)
    bus.give(on=True)
    bus.wait(100 * US)
    bus.give(on=False)
    assert chip.cells[5] == 0xFF
    assert chip.stressed == ["a program pulse with a control pin at the wrong level"]
    assert "pulse control" in rules(judge)


def test_the_pin_that_is_not_connected_does_not_matter() -> None:
    """Pin 26 may be anything up to the maximum of a plain pin."""
    _chip, judge, bus = fresh()
    bus.set({26: 5_000})
    assert bus.read(3, access=5) == 0xFF
    assert judge.violations == []
