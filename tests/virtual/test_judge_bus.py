"""The judge on writes on the bus: silent on what each maker's sheet allows, and each rule fires on what breaks it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import pytest

from pulsewright.virtual.bench import Bench
from pulsewright.virtual.interface import BusLimit, Limits
from pulsewright.virtual.judge import Judge
from pulsewright.virtual.judge_bus import RULES
from pulsewright.virtual.models.ee256 import make_chip
from tests.virtual.bus_broken import BUS_WAVES, SILENT, Wave, ready, strobe
from tests.virtual.bus_wave import DISABLE, ENABLE, EeBus
from tests.virtual.test_judge import rules
from tests.virtual.waveform import A9, CE, HIGH, MS, OE, US

WE = 27


def watched(maker: str = "atmel", change: Callable[[BusLimit], BusLimit] | None = None) -> tuple[Judge, EeBus]:
    """A judge, a chip that tells it when it is busy, and a bus, powered and in standby."""
    chip = make_chip(maker)
    limits: Limits = chip.limits
    assert limits.bus is not None
    if change is not None:
        limits = replace(limits, bus=change(limits.bus))
    judge = Judge(limits, busy=chip.is_busy)
    bus = EeBus(judge, chip=chip)
    bus.up()
    return judge, bus


@pytest.mark.parametrize("maker", ["atmel", "xicor", "catalyst"])
def test_a_clean_life_is_clean(maker: str) -> None:
    """Read, pages with a poll between them, protection on and off, power off and on: nothing to report."""
    judge, bus = watched(maker)
    bus.look(0x7FFF)
    bus.wait(US)
    for first, before in ((0x100, ()), (0x140, ENABLE), (0x140, DISABLE), (0x7FC0, ())):
        bus.page(first, bytes(range(64)), before)
        bus.wait(150 * US)
        assert bus.poll(first + 63, 63, 20 * MS) < 20 * MS
        assert bus.look(first + 5) == 5
        bus.wait(10 * US)
    bus.loads(ENABLE)
    bus.wait(20 * MS)
    bus.loads(DISABLE)
    bus.wait(20 * MS)
    bus.down()
    bus.up()
    bus.page(0x200, b"\x33" * 64)
    assert judge.violations == []
    assert judge.count == 0


# ---- what lies at the very end of a window, by maker ----


def tightest_write(bus: EeBus) -> None:
    """Set-up, pulse, hold and pause as short as the maker allows: by its own limits, tick for tick."""
    limits = bus.chip.limits.bus if bus.chip is not None else None
    assert limits is not None
    bus.setup = max(1, limits.setup_ticks["oe"])
    bus.width = max(limits.width_ticks[0], limits.hold_ticks["address"])
    bus.pause = max(1, limits.high_ticks, limits.hold_ticks["data"])
    for at in range(3):
        bus.load(0x100 + at, at)
        bus.wait(max(0, limits.load_ticks[0] - bus.setup - bus.width - bus.pause))


def slowest_loads(bus: EeBus) -> None:
    """Loads at 100 us from fall to fall, the shortest of the longest."""
    for at in range(3):
        bus.load(0x100 + at, at)
        bus.wait(100 * US - bus.setup - bus.width - bus.pause)


def at_once_after_power_up(bus: EeBus) -> None:
    """A write 10 ms after VCC came, Catalyst's time; a read after 100 us."""
    bus.down()
    bus.wait(MS)
    bus.power()
    bus.standby()
    bus.wait(100 * US - US)
    bus.look(0)
    bus.wait(10 * MS)
    bus.load(0x100, 0x33)


def both_ends_of_vcc(bus: EeBus) -> None:
    """Writes at VCC 4.5 and 5.5 V."""
    for mv in (4_500, 5_500):
        bus.power(mv)
        bus.wait(20 * MS)
        bus.load(0x100, 0x33)


def just_after_the_command(bus: EeBus) -> None:
    """WE high for 1 us, Xicor's time, after the last byte of the command."""
    bus.pause = 16 - bus.setup
    bus.loads((*ENABLE, (0x100, 0x33)))


def oe_high_a_tick_before(bus: EeBus) -> None:
    """OE high 62.5 ns before WE falls: 10 ns are wanted."""
    bus.set({CE: 0, OE: 0})
    bus.address(0x100)
    bus.wait(6)
    bus.set({OE: HIGH})
    bus.wait(1)
    bus.set({WE: 0})
    bus.drive(0x33)
    bus.wait(3)
    bus.set({WE: HIGH})


def power_lost_in_a_page(bus: EeBus) -> None:
    """A load, VCC off and on within a write cycle's time: the next load is a first one."""
    bus.load(0x100, 0x33)
    bus.release()
    bus.down()
    bus.power()
    bus.standby()
    bus.wait(5 * MS)
    bus.load(0x101, 0x33)


def strobe_without_select(bus: EeBus) -> None:
    """WE pulsed with CE high, addresses moving and nothing driven: no write, no rule."""
    bus.set({WE: 0})
    bus.address(0x1234)
    bus.set({WE: HIGH})


def at_rest_with_vcc(bus: EeBus) -> None:
    """Every line low, D too, as VCC comes: no write."""
    bus.down()
    bus.drive(0)
    bus.power()
    bus.set({OE: HIGH, CE: HIGH, WE: HIGH})


# ---- the tests ----


@pytest.mark.parametrize("maker", ["atmel", "xicor", "catalyst"])
@pytest.mark.parametrize(
    "wave",
    [
        tightest_write,
        slowest_loads,
        at_once_after_power_up,
        both_ends_of_vcc,
        just_after_the_command,
        oe_high_a_tick_before,
        strobe_without_select,
    ],
)
def test_what_the_sheets_allow_is_clean(maker: str, wave: Wave) -> None:
    """The ends of every window are inside it."""
    judge, bus = watched(maker)
    wave(bus)
    assert judge.violations == []


def test_nothing_is_remembered_over_a_power_down() -> None:
    """What was written before VCC went binds nothing after it."""
    judge, bus = watched()
    power_lost_in_a_page(bus)
    assert judge.violations == []


@pytest.mark.parametrize(("maker", "wave", "broken"), BUS_WAVES)
def test_each_rule_fires(maker: str, wave: Wave, broken: set[str]) -> None:
    """A waveform that breaks one rule of a maker's table gets just that rule reported."""
    judge, bus = watched(maker)
    assert judge.violations == []
    wave(bus)
    assert rules(judge) == broken


@pytest.mark.parametrize(("maker", "wave"), SILENT)
def test_a_number_binds_only_where_the_sheet_has_it(maker: str, wave: Wave) -> None:
    """What breaks another maker's table is nothing here."""
    judge, bus = watched(maker)
    wave(bus)
    assert judge.violations == []


def test_each_rule_of_the_list_was_seen_to_fire() -> None:
    """Every rule of a write is one that a test sees fire; the others that fire are older and not of the bus."""
    seen = set().union(*(broken for _maker, _wave, broken in BUS_WAVES))
    assert seen - {"bus fight", "above VCC", "absolute maximum"} == set(RULES)


def byte_written(limit: BusLimit) -> BusLimit:
    """A part whose write pulse has a maximum: 1000 ns on the byte-written 28C16 and 28C64 [S71, S72]."""
    return replace(limit, width_ticks=(limit.width_ticks[0], 16))


def test_a_pulse_has_a_longest_width_where_the_sheet_has_one() -> None:
    """1000 ns pass, a tick more does not, and one that never ends is reported once, at the next edge or sample."""
    judge, bus = watched(change=byte_written)
    ready(bus)
    strobe(bus, 16)
    assert judge.violations == []
    bus.wait(20 * MS)
    strobe(bus, 17)
    assert rules(judge) == {"write width"}
    assert judge.count == 1
    bus.wait(20 * MS)
    bus.set({WE: 0})
    bus.wait(17)
    bus.sample()
    assert judge.count == 2
    bus.wait(US)
    bus.set({WE: HIGH})
    assert judge.count == 2


def test_a_pulse_may_last_where_the_sheet_has_no_longest() -> None:
    """A millisecond of WE."""
    judge, bus = watched()
    ready(bus)
    strobe(bus, MS)
    assert judge.violations == []


def test_a_misplaced_chip_is_judged_by_its_maxima_only() -> None:
    """No bus rule for a chip that sits turned."""
    chip = make_chip()
    judge = Judge(chip.limits, misplaced=True)
    bus = EeBus(judge, chip=chip)
    bus.power()
    bus.load(0, 1)
    bus.set({A9: 13_600})
    assert rules(judge) == {"absolute maximum"}


def test_lines_at_rest_are_no_write() -> None:
    """VCC that comes over lines and D all low finds outputs on against D, and a write that OE shuts out."""
    judge, bus = watched()
    at_rest_with_vcc(bus)
    assert rules(judge) == {"bus fight", "pulse control"}


def test_a_violation_says_where_and_when() -> None:
    """Rule, pin, microseconds, wanted and got."""
    judge, bus = watched()
    ready(bus)
    strobe(bus, 1)
    (violation,) = judge.violations
    assert (violation.rule, violation.pin, violation.at_us) == ("write width", WE, bus.t // US)
    assert violation.wanted == "at least 125 ns"
    assert violation.got.startswith("62")


def test_it_tells_what_it_saw() -> None:
    """Least, most and number of write pulses and pauses, to hold against the sheet."""
    judge, bus = watched()
    bus.loads([(1, 1), (2, 2), (3, 3)])
    seen = judge.seen()
    assert seen["write pulse"] == (bus.width, bus.width, 3)
    assert seen["write high"] == (bus.pause + bus.setup, bus.pause + bus.setup, 2)
    assert seen["write address setup"] == (bus.setup, bus.setup, 3)


def test_the_bench_lets_the_judge_ask_the_chip() -> None:
    """A rig's judge knows when the chip that sits in it is busy; an empty seat is never busy."""
    bench = Bench.fresh("28c256", "blank")
    bench.rig()
    judge = bench.judge
    assert judge is not None
    bus = EeBus(judge, chip=bench.chip)
    bus.up()
    bus.loads([(0x100, 0x33)])
    bus.wait(MS)
    bus.look(0x100)
    bus.wait(US)
    bus.loads([(0x140, 0x33)])
    assert rules(judge) == {"write while busy"}
    Bench.fresh("28c256", "blank", faults=["absent"]).rig()


def test_ce_may_give_the_pulse() -> None:
    """CE strobed for each byte inside a longer WE: the shorter of both is the write."""
    judge, bus = watched()
    for at in range(4):
        bus.address(0x100 + at)
        bus.drive(at)
        bus.wait(6)
        bus.set({WE: 0})
        bus.wait(1)
        bus.set({CE: 0})
        bus.wait(3)
        bus.set({CE: HIGH})
        bus.wait(2)
        bus.set({WE: HIGH})
        bus.wait(2)
    assert judge.violations == []
    assert judge.seen()["write pulse"] == (3, 3, 4)
