"""The model of a 28C256, maker by maker: held to the published numbers, which are typed again from the fact table."""

from __future__ import annotations

import random

import pytest

from pulsewright.errors import UsageMistake
from pulsewright.virtual import models
from pulsewright.virtual.faults import ChipFaults
from pulsewright.virtual.judge import Judge
from pulsewright.virtual.models.ee256 import Ee256, make_chip
from tests.virtual.bus_wave import EeBus
from tests.virtual.waveform import CE, HIGH, MS, OE, US

WORDS, PAGE = 32_768, 64
WE = 27
# maker: tWC most in ms, tBLC most in us, wait after power-up in ms [S74, S78b, S79, S4, S9]
MAKER_ROWS = {"atmel": (10, 150, 5), "xicor": (10, 100, 5), "catalyst": (5, 100, 10)}
makers = pytest.mark.parametrize("maker", MAKER_ROWS)


def fresh(contents: int = 0xFF, maker: str = "", **faults: object) -> tuple[Ee256, EeBus]:
    """A chip and a judge on a bus, full of one byte, powered and in standby."""
    chip = make_chip(maker)
    chip.cells[:] = bytes([contents]) * WORDS
    chip.take_faults(ChipFaults(**faults))  # type: ignore[arg-type]  # the fields of ChipFaults, by name
    bus = EeBus(Judge(chip.limits, busy=chip.is_busy), chip=chip)
    bus.up()
    return chip, bus


def judge_of(bus: EeBus) -> Judge:
    """The bus's judge."""
    (judge,) = bus.watchers
    assert isinstance(judge, Judge)
    return judge


def settle(chip: Ee256, bus: EeBus, ms: int = 50) -> None:
    """Long enough for anything to be over."""
    bus.wait(ms * MS)
    assert not chip.is_busy(bus.t)


# ---- read ----


@makers
def test_a_read_gives_the_cell_after_the_access_time(maker: str) -> None:
    """250, 300 and 150 ns [S1f, S78b, S79] after the enable the cell stands on D; a tick before, something else."""
    chip, bus = fresh(maker=maker)
    chip.cells[0x1234] = 0x5A
    ticks = {"atmel": 4, "xicor": 5, "catalyst": 3}[maker]
    assert bus.look(0x1234, ticks) == 0x5A
    assert bus.look(0x1234, ticks - 1) != 0x5A


@pytest.mark.parametrize("line", range(15))
def test_every_address_line_counts(line: int) -> None:
    """Each of the fifteen address pins selects its own half of the cells, A14 on pin 1 [S2, S16]."""
    chip, bus = fresh(0)
    chip.cells[1 << line] = 0xA5
    assert bus.look(1 << line) == 0xA5
    assert bus.look(0) == 0


@pytest.mark.parametrize("pins", [{CE: HIGH}, {OE: HIGH}, {WE: 0}])
def test_outputs_are_off_in_standby_disable_and_write(pins: dict[int, int]) -> None:
    """D floats with CE high, OE high [S3] or WE low, at most 60 ns after the edge [S1f]."""
    chip, bus = fresh(0)
    bus.set({CE: 0, OE: 0})
    bus.wait(4)
    assert chip.drive(bus.t) == (0xFF, 0)
    bus.set(dict(pins))
    bus.wait(1)
    assert chip.drive(bus.t) == (0, 0)


# ---- pages ----


@makers
def test_a_page_is_stored_when_its_write_cycle_is_over(maker: str) -> None:
    """64 bytes, then at most 10, 10 or 5 ms [S1, S78b, S79]: old bytes until then, new ones after; nothing reported."""
    chip, bus = fresh(0x11, maker)
    page = random.Random(3).randbytes(PAGE)
    bus.page(0x1240, page)
    bus.wait(MAKER_ROWS[maker][0] * MS - 100 * US)
    assert chip.is_busy(bus.t)
    assert bytes(chip.cells[0x1240:0x1280]) == bytes([0x11]) * PAGE
    bus.wait(100 * US)
    assert not chip.is_busy(bus.t)
    assert bytes(chip.cells[0x1240:0x1280]) == page
    assert chip.cells.count(0x11) >= WORDS - PAGE
    assert judge_of(bus).violations == []
    assert (chip.stressed, chip.probe_wrote) == ([], [])


def test_a_byte_of_a_page_leaves_the_others() -> None:
    """Bytes that were not loaded keep what they hold; a byte loaded twice keeps the second."""
    chip, bus = fresh(0x22)
    bus.loads([(0x105, 0x33), (0x13F, 0x44), (0x105, 0x55)])
    settle(chip, bus)
    want = bytearray(b"\x22" * PAGE)
    want[0x05], want[0x3F] = 0x55, 0x44
    assert chip.cells[0x100:0x140] == want


def test_both_directions_are_written() -> None:
    """1 to 0 and 0 to 1 in the same page: no erase is needed."""
    chip, bus = fresh(0x0F)
    bus.loads([(0, 0xF0), (1, 0xFF), (2, 0x00)])
    settle(chip, bus)
    assert list(chip.cells[:3]) == [0xF0, 0xFF, 0x00]


def test_a_byte_of_another_page_is_lost() -> None:
    """A load whose page is not the first one's changes nothing (invented) and is noted."""
    chip, bus = fresh(0x22)
    bus.loads([(0x13F, 0x33), (0x140, 0x44)])
    settle(chip, bus)
    assert (chip.cells[0x13F], chip.cells[0x140]) == (0x33, 0x22)
    assert chip.stressed == ["a byte of another page was loaded with a page"]


@makers
@pytest.mark.parametrize("late", [0, 1])
def test_the_load_window_closes_at_its_longest_time(maker: str, late: int) -> None:
    """A byte at most 150 or 100 us after the last [S1, S78b, S79] is loaded; a tick later it is not heard."""
    chip, bus = fresh(0x22, maker)
    bus.load(0x100, 0x33)
    cycle = MAKER_ROWS[maker][1] * US + late
    bus.wait(cycle - bus.width - bus.pause - bus.setup)
    bus.load(0x101, 0x44)
    settle(chip, bus)
    assert (chip.cells[0x100], chip.cells[0x101]) == (0x33, 0x22 if late else 0x44)
    rules = [violation.rule for violation in judge_of(bus).violations]
    assert rules == (["load gap"] if late else [])
    assert chip.stressed == (["a write while the chip was busy"] if late else [])


def test_address_at_the_fall_and_data_at_the_rise() -> None:
    """What the address does after the fall, and D before the rise, does not matter [S1, S6, S10]."""
    chip, bus = fresh(0x22)
    bus.set({CE: 0})
    bus.address(0x100)
    bus.drive(0x99)
    bus.wait(6)
    bus.set({WE: 0})
    bus.wait(1)
    bus.address(0x2FF)
    bus.drive(0x33)
    bus.wait(1)
    bus.set({WE: HIGH})
    bus.wait(1)
    bus.drive(0x77)
    settle(chip, bus)
    assert (chip.cells[0x100], chip.cells[0x2FF]) == (0x33, 0x22)
    assert judge_of(bus).violations == []


def test_the_later_fall_and_the_earlier_rise_count() -> None:
    """CE pulsed under WE: the address stands at CE's fall, the data at CE's rise."""
    chip, bus = fresh(0x22)
    bus.address(0x2FF)
    bus.set({WE: 0})
    bus.wait(6)
    bus.address(0x100)
    bus.drive(0x33)
    bus.wait(6)
    bus.set({CE: 0})
    bus.wait(3)
    bus.set({CE: HIGH})
    bus.wait(1)
    bus.address(0x200)
    bus.drive(0x44)
    bus.wait(1)
    bus.set({WE: HIGH})
    settle(chip, bus)
    assert (chip.cells[0x100], chip.cells[0x200], chip.cells[0x2FF]) == (0x33, 0x22, 0x22)
    assert judge_of(bus).violations == []


@pytest.mark.parametrize(
    ("pins", "width"), [({OE: 0}, 3), ({CE: HIGH}, 3), ({}, 1)], ids=["OE low", "CE high", "62.5 ns"]
)
def test_what_shuts_a_write_out(pins: dict[int, int], width: int) -> None:
    """OE low or CE high inhibit [S3, S4, S9]; so does a pulse under 100 ns [S74]."""
    chip, bus = fresh(0x22)
    bus.set({CE: 0})
    bus.address(0x100)
    bus.drive(0x33)
    bus.wait(6)
    bus.set(dict(pins))
    bus.wait(2)
    bus.set({WE: 0})
    bus.wait(width)
    bus.set({WE: HIGH})
    bus.wait(MS)
    assert not chip.is_busy(bus.t)
    assert chip.cells.count(0x22) == WORDS


def test_oe_that_falls_in_a_write_cuts_it() -> None:
    """OE low in the pulse inhibits the write that runs."""
    chip, bus = fresh(0x22)
    bus.set({CE: 0})
    bus.address(0x100)
    bus.drive(0x33)
    bus.wait(6)
    bus.set({WE: 0})
    bus.wait(3)
    bus.set({OE: 0})
    bus.wait(3)
    bus.set({WE: HIGH})
    settle(chip, bus)
    assert chip.cells.count(0x22) == WORDS


def test_the_window_closes_behind_a_write_that_was_cut() -> None:
    """A write that outlasts the window and is cut by OE: the load before it is stored all the same."""
    chip, bus = fresh(0x22)
    bus.load(0x100, 0x33)
    bus.set({WE: 0})
    bus.wait(200 * US)
    bus.set({OE: 0})
    bus.set({WE: HIGH, OE: HIGH})
    bus.wait(MS)
    assert chip.is_busy(bus.t)
    settle(chip, bus)
    assert chip.cells[0x100] == 0x33


@makers
def test_no_write_is_taken_after_power_up(maker: str) -> None:
    """For 5 or 10 ms after VCC came [S4, S78b, S79] writes change nothing; then they do."""
    wait = MAKER_ROWS[maker][2] * MS
    for early in (1, 0):
        chip = make_chip(maker)
        bus = EeBus(Judge(chip.limits, busy=chip.is_busy), chip=chip)
        bus.power()
        stands = bus.t
        bus.standby()
        bus.wait(wait - early - bus.setup - (bus.t - stands))
        bus.load(0x100, 0x33)
        settle(chip, bus)
        assert chip.cells[0x100] == (0xFF if early else 0x33)
        assert [violation.rule for violation in judge_of(bus).violations] == ["power-up"] * early
        assert chip.stressed == ["a write too soon after power-up"] * early


@pytest.mark.parametrize(("mv", "stored"), [(3_799, False), (3_800, True)])
def test_no_write_is_taken_at_low_vcc(mv: int, stored: bool) -> None:
    """Below about 3.8 V [S4, S9] nothing is written."""
    chip, bus = fresh()
    bus.power(mv)
    bus.wait(20 * MS)
    bus.load(0x100, 0x33)
    settle(chip, bus)
    assert (chip.cells[0x100] == 0x33) is stored
    assert {violation.rule for violation in judge_of(bus).violations} == {"power-up"}


def test_vcc_that_falls_in_a_write_cycle_leaves_neither_old_nor_new() -> None:
    """The page under way is undefined; the rest of the chip is as it was."""
    chip, bus = fresh(0x22)
    bus.loads([(0x100, 0x33)])
    bus.wait(5 * MS)
    bus.down()
    assert chip.cells[0x100] not in (0x22, 0x33)
    assert chip.cells.count(0x22) == WORDS - 1
    assert chip.stressed == ["VCC fell in a write cycle"]


# ---- faults ----


def test_a_stuck_bit_and_a_dead_byte_stay() -> None:
    """Both take part in a page and do not follow it."""
    chip, bus = fresh(0x22, stuck=((0x101, 0x0F, 0x05),), dead=(0x102,))
    bus.page(0x100, b"\xb7" * 4)
    settle(chip, bus)
    assert list(chip.cells[0x100:0x104]) == [0xB7, 0xB5, 0x22, 0xB7]


def test_a_slow_page_outlasts_the_poll() -> None:
    """Pages that the fault struck take the cycle as often as it says, past the 10 ms that the sheet gives at most."""
    chip, bus = fresh(0x22, slow_percent=100, slow_pulses=3)
    bus.loads([(0x100, 0x81)])
    assert bus.poll(0x100, 0x81, 12 * MS) == 12 * MS
    assert bus.poll(0x100, 0x81, 30 * MS) < 19 * MS
    assert chip.cells[0x100] == 0x81


def test_a_weak_cell_reads_by_vcc() -> None:
    """A fading 0 reads 1 above its crossover."""
    _chip, bus = fresh(0x22, weak=((0x100, 0x01, 5_000, False),))
    assert bus.look(0x100) == 0x22
    bus.power(5_400)
    assert bus.look(0x100) == 0x23


# ---- whose it is ----


@makers
def test_the_registry_makes_each_maker(maker: str) -> None:
    """`--maker` chooses; Atmel is what is made when none is named."""
    assert models.make_model("28C256", maker).limits == make_chip(maker).limits
    assert models.make_model("28c256").limits == make_chip("atmel").limits
    with pytest.raises(UsageMistake, match="of the maker xicorr"):
        models.make_model("28c256", "xicorr")


def test_currents() -> None:
    """Active while selected or writing, standby otherwise, none without VCC and none from other pins."""
    chip, bus = fresh()
    assert (chip.draw_ua(bus.t, 28), chip.draw_ua(bus.t, 1)) == (200, 0)
    bus.loads([(0, 1)])
    bus.wait(MS)
    assert chip.draw_ua(bus.t, 28) == 50_000
    bus.down()
    assert chip.draw_ua(bus.t, 28) == 0
