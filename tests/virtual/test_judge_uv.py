"""The waveform judge on EPROMs with a VPP pin of their own: VPP stands over many words, and D is read under it."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from pulsewright.virtual.judge import Judge
from pulsewright.virtual.models.c256_limits import MAKERS, limits_of
from tests.virtual.test_judge import rules
from tests.virtual.uv_broken import UV_WAVES
from tests.virtual.uv_wave import VPP, UvBus
from tests.virtual.waveform import A9, CE, HIGH, MS, OE, US, VCC

# maker: VCC and VPP of program, verify and inhibit, most pulses of a word, typed again from the fact table: S11 and
# S15; S17; S30 and from memory; S27, S66 and from memory; from memory
WINDOWS = {
    "st": ((6_000, 6_500), (12_500, 13_000), 25),
    "atmel": ((6_250, 6_750), (12_750, 13_250), 11),
    "ti": ((6_250, 6_750), (12_750, 13_250), 10),
    "national": ((6_000, 6_500), (12_500, 13_000), 25),
    "amd": ((6_000, 6_500), (12_500, 13_000), 25),
}


def watched(maker: str = "st") -> tuple[Judge, UvBus]:
    """A judge of a maker's chip and a bus that it watches, powered and in standby."""
    judge = Judge(limits_of(MAKERS[maker]))
    bus = UvBus(judge)
    bus.up()
    return judge, bus


@pytest.mark.parametrize("maker", WINDOWS)
@pytest.mark.parametrize("end", [0, 1])
def test_a_clean_life_is_clean(maker: str, end: int) -> None:
    """Identify, program and verify at an end of every published window, as often as allowed: nothing to report."""
    judge, bus = watched(maker)
    vcc, vpp, pulses = WINDOWS[maker]
    bus.identify(11_500 + 1_000 * end, access=4)
    bus.enter(vcc[end], vpp[end])
    for _ in range(pulses):
        for at in (5, 6):
            bus.word(at, 0x0F, (95 + 10 * end) * US)
            bus.verify(at)
    bus.leave()
    bus.aside_mv = (600, -300)[end]
    bus.power(4_750 + 500 * end)
    bus.read(5, access=4)
    bus.down()
    assert judge.violations == []


@pytest.mark.parametrize("vcc", [6_000, 4_200])
def test_the_final_reads_of_st_are_clean(vcc: int) -> None:
    """All words are read at VCC 6 V, then 4.2 V, VPP following [S15 sibling]."""
    judge, bus = watched()
    bus.one(5, 0x0F)
    bus.power(vcc)
    bus.read(5)
    bus.power(HIGH)
    bus.down()
    assert judge.violations == []


@pytest.mark.parametrize(("wave", "broken"), UV_WAVES)
def test_each_rule_fires(wave: Callable[[UvBus], None], broken: set[str]) -> None:
    """A waveform that breaks one rule gets just that rule reported."""
    judge, bus = watched()
    assert judge.violations == []
    wave(bus)
    assert rules(judge) == broken


def test_the_set_up_after_vpp_counts_once() -> None:
    """VPP rises once: the first pulse waits 2 us for it, later ones have it since long ago."""
    judge, bus = watched()
    bus.enter()
    bus.t -= 1  # a tick less than 2 us since VPP; the word brings its own 2 us
    bus.word(5, 0x0F)
    bus.word(6, 0x0F)
    bus.leave()
    assert judge.violations == []
    assert judge.seen()["program raised setup"] == (4 * US - 1, 4 * US - 1 + 106 * US, 2)
    assert judge.seen()["rise"] == (5 * US, 5 * US, 1)
    judge, bus = watched()
    bus.power(6_250)
    bus.address(5)
    bus.drive(0x0F)
    bus.raise_to({VPP: 12_750})
    bus.wait(2 * US - 1)
    bus.give(on=True)
    bus.wait(100 * US)
    bus.give(on=False)
    assert rules(judge) == {"raised setup"}


@pytest.mark.parametrize("maker", WINDOWS)
def test_one_pulse_more_than_the_maker_allows_is_too_many(maker: str) -> None:
    """25 pulses a word (ST, National, AMD), one and 10 more (Atmel), 10 (TI); the next one is reported."""
    judge, bus = watched(maker)
    vcc, vpp, pulses = WINDOWS[maker]
    bus.enter(vcc[0], vpp[0])
    for _ in range(pulses + 1):
        bus.word(5, 0x0F)
    assert [violation.rule for violation in judge.violations] == ["too many pulses"]


def test_vpp_on_its_way_up_before_vcc_has_its_step_is_out_of_order() -> None:
    """VCC leaves the 6 V read for 6.1 V while VPP rises already: where it came from does not count."""
    judge, bus = watched()
    bus.power(5_900)
    judge.edges(bus.t, bus.levels, [VPP])
    bus.wait(US)
    bus.set({VCC: 6_100})
    bus.wait(US)
    bus.set({VPP: 12_750})
    assert rules(judge) == {"supply order"}


@pytest.mark.parametrize("what", ["sample", "edge"])
def test_a_pulse_that_does_not_end_is_reported_while_it_runs(what: str) -> None:
    """Past 105 us the next thing that happens at the pins brings the report, once, and the end adds nothing."""

    def happens(vcc: int) -> None:
        if what == "sample":
            bus.sample()
        else:
            bus.set({VCC: vcc})

    judge, bus = watched()
    bus.enter()
    bus.address(5)
    bus.drive(0x0F)
    bus.wait(2 * US)
    bus.give(on=True)
    bus.wait(105 * US)
    happens(6_240)
    assert judge.violations == []
    bus.wait(1)
    happens(6_230)
    assert [(violation.rule, violation.got) for violation in judge.violations] == [
        ("pulse width", "still on after 105.0625 us")
    ]
    bus.give(on=False)
    bus.wait(2 * US)
    bus.word(5, 0x0F)
    assert judge.count == 1


def test_pulses_are_counted_anew_after_power_down() -> None:
    """A second job may give each word its 25 pulses again; VCC moved to 5 V and back is no power-down."""
    for between, broken in ((UvBus.down, set[str]()), (UvBus.leave, {"too many pulses"})):
        judge, bus = watched()
        for _ in range(2):
            bus.enter()
            for _ in range(25):
                bus.word(5, 0x0F)
            bus.leave()
            if between is UvBus.down:
                bus.down()
                bus.up()
        assert rules(judge) == broken


def test_a_verify_with_ce_low_is_one_makers_right() -> None:
    """CE does not matter in Atmel's verify row [S17]; ST wants it high [S11], and takes it low for a pulse."""
    for maker, broken in (("atmel", set[str]()), ("st", {"pulse control", "data not driven", "floating input"})):
        judge, bus = watched(maker)
        bus.enter(*(window[1] for window in WINDOWS[maker][:2]))
        bus.set({OE: 0})
        bus.set({CE: 0})
        bus.wait(100 * US)
        bus.sample()
        bus.set({CE: bus.high_mv})
        bus.set({OE: bus.high_mv})
        bus.leave()
        assert rules(judge) == broken


def test_with_vpp_up_oe_alone_switches_the_outputs() -> None:
    """In the verify row CE is high and the outputs are on [S11]: whoever drives D then, fights."""
    judge, bus = watched()
    bus.enter()
    bus.set({OE: 0})
    bus.wait(US)
    bus.drive(0xFF)
    assert rules(judge) == {"bus fight"}


def test_without_vpp_ce_switches_the_outputs_too() -> None:
    """In standby OE low switches nothing [S11]: the rig may drive D."""
    judge, bus = watched()
    bus.set({OE: 0})
    bus.wait(US)
    bus.drive(0xFF)
    assert judge.violations == []


def test_vcc_that_sags_across_an_overlapping_window_is_no_step() -> None:
    """6.31 to 6.29 V under VPP enters the window of the 6 V read and stays in that of programming: no event."""
    judge, bus = watched()
    bus.enter(vcc=6_310)
    bus.set({VCC: 6_290})
    bus.word(5, 0x0F)
    bus.leave()
    assert judge.violations == []


def test_vcc_of_the_final_read_is_no_program_step() -> None:
    """At 5.9 V VCC stands where words are read, and not where VPP may be up."""
    judge, bus = watched()
    bus.power(5_900)
    bus.raise_to({VPP: 12_750})
    assert rules(judge) == {"raised vcc"}


def test_the_vcc_set_up_is_that_of_its_own_window() -> None:
    """VCC from the 6 V read to 6.25 V a tick less than 2 us before the pulse: too late, whatever it was before."""
    judge, bus = watched()
    bus.power(5_900)
    bus.address(5)
    bus.drive(0x0F)
    bus.wait(MS)
    bus.set({VCC: 6_100, CE: 6_100})
    bus.ramp({VPP: 12_750}, 1)
    bus.wait(2 * US - 2)
    bus.give(on=True)
    assert rules(judge) == {"vcc setup", "raised setup"}


def test_the_identify_level_needs_the_read_vcc() -> None:
    """A9 at 12 V with VCC at its program step is no row of the mode table [S11]."""
    judge, bus = watched()
    bus.power(6_250)
    bus.set({A9: bus.high_mv})
    bus.raise_to({A9: 12_000})
    assert rules(judge) == {"raised vcc"}
