"""The tests' model of a 39SF020A: held to the published numbers, which are typed again from the fact table."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.virtual.faults import ChipFaults
from pulsewright.virtual.judge import Judge
from pulsewright.virtual.models import load_model
from pulsewright.virtual.models.bus_written import BusWritten
from tests.virtual.bus_wave import ENABLE, ERASE, PROBE, SIX, FlashBus
from tests.virtual.test_judge import rules
from tests.virtual.waveform import HIGH, MS, US

MODEL = Path(__file__).parents[2] / "models" / "m39sf020.py"
WORDS = 262_144
LEAVE = ((0x5555, 0xAA), (0x2AAA, 0x55), (0x5555, 0xF0))


def fresh(contents: int = 0xFF, **faults: object) -> tuple[BusWritten, Judge, FlashBus]:
    """A chip full of one byte and a judge on one bus, powered and in standby."""
    chip = load_model(MODEL)
    assert isinstance(chip, BusWritten)
    chip.cells[:] = bytes([contents]) * WORDS
    chip.take_faults(ChipFaults(**faults))  # type: ignore[arg-type]  # the fields of ChipFaults, by name
    judge = Judge(chip.limits, busy=chip.is_busy)
    bus = FlashBus(judge, chip=chip)
    bus.up()
    return chip, judge, bus


@pytest.mark.parametrize("line", range(18))
def test_every_address_line_counts(line: int) -> None:
    """Each of the eighteen address pins [S25, S70] selects its own half of the cells, 70 ns [S70] after it moved."""
    chip, _judge, bus = fresh(0)
    chip.cells[1 << line] = 0xA5
    assert bus.look(1 << line) == 0xA5
    assert bus.look(1 << line, access=1) != 0xA5
    assert bus.look(0) == 0


def test_a_byte_takes_20_us_and_only_clears_bits() -> None:
    """AA 55 A0 and the byte [S17]; busy for 20 us [S50b, S70]; a 0 stays a 0."""
    chip, judge, bus = fresh()
    for word, holds in ((0x5A, 0x5A), (0xF0, 0x50)):
        bus.load(*ENABLE[0])
        bus.load(*ENABLE[1])
        bus.load(*ENABLE[2])
        bus.load(0x12345, word)
        bus.wait(20 * US - bus.pause - 1)
        assert chip.is_busy(bus.t)
        bus.wait(1)
        assert not chip.is_busy(bus.t)
        assert chip.cells[0x12345] == holds
    assert chip.cells.count(0xFF) == WORDS - 1
    assert judge.violations == []


def test_a_sector_is_erased_in_25_ms() -> None:
    """4 KB, at any address in it [S50, S17, S70]; neighbours stay."""
    chip, judge, bus = fresh(0x11)
    bus.loads((*SIX, (0x23FFF, 0x30)))
    bus.wait(25 * MS - 2 * US)
    assert chip.is_busy(bus.t)
    bus.wait(2 * US)
    assert not chip.is_busy(bus.t)
    assert bytes(chip.cells[0x23000:0x24000]) == b"\xff" * 4_096
    assert chip.cells.count(0x11) == WORDS - 4_096
    assert judge.violations == []


def test_the_chip_is_erased_in_100_ms() -> None:
    """AA 55 80 AA 55 10 [S17, S70]."""
    chip, judge, bus = fresh(0x11)
    bus.loads(ERASE)
    bus.wait(100 * MS - 2 * US)
    assert chip.is_busy(bus.t)
    bus.wait(2 * US)
    assert not chip.is_busy(bus.t)
    assert chip.cells.count(0xFF) == WORDS
    assert judge.violations == []


@pytest.mark.parametrize("leave", [LEAVE, ((0x12345, 0xF0),)])
def test_the_id_is_entered_and_left_by_command(leave: tuple[tuple[int, int], ...]) -> None:
    """BF B6 [S17] 150 ns [S17, S70] after AA 55 90; a lone F0 anywhere, or AA 55 F0, brings the cells back."""
    _chip, judge, bus = fresh(0x11)
    bus.loads(PROBE)
    assert (bus.look(0), bus.look(1)) == (0xBF, 0xB6)
    bus.loads(leave)
    assert (bus.look(0), bus.look(1)) == (0x11, 0x11)
    assert judge.violations == []


def test_the_id_wants_its_150_ns() -> None:
    """A look sooner shows something else."""
    _chip, _judge, bus = fresh(0x11)
    for at, word in PROBE[:2]:
        bus.load(at, word)
    bus.pause = 0
    bus.load(*PROBE[2])
    bus.release()
    assert bus.look(0, access=2) != 0xBF
    assert bus.look(0) == 0xBF


def test_the_id_mode_is_lost_at_power_off() -> None:
    """Off and on again: cells [S17]."""
    _chip, _judge, bus = fresh(0x11)
    bus.loads(PROBE)
    bus.down()
    bus.up()
    assert bus.look(0) == 0x11


def test_another_id_can_be_given() -> None:
    """The fault wrong-id."""
    _chip, _judge, bus = fresh(0x11, wrong_id=(0x1F, 0x07))
    bus.loads(PROBE)
    assert (bus.look(0), bus.look(1)) == (0x1F, 0x07)


def test_bits_7_and_6_tell_of_a_program() -> None:
    """Bit 7 the complement at that address, bit 6 toggling [S50]; then the byte."""
    _chip, judge, bus = fresh()
    bus.program(0x400, 0x80)
    looks = [bus.look(0x400) for _ in range(3)]
    assert [look & 0x80 for look in looks] == [0, 0, 0]
    assert looks[0] & 0x40 == looks[2] & 0x40 != looks[1] & 0x40
    assert bus.poll(0x400, 0x80, MS) < MS
    assert bus.look(0x400) == 0x80
    assert judge.violations == []


def test_bit_7_is_low_in_an_erase() -> None:
    """0 until the erase is over [S50]."""
    _chip, _judge, bus = fresh(0xFF)
    bus.loads((*SIX, (0x1000, 0x30)))
    assert bus.look(0x1000) & 0x80 == 0
    bus.wait(25 * MS)
    assert bus.look(0x1000) == 0xFF


@pytest.mark.parametrize(
    "row",
    [
        ((0x5555, 0xAA), (0x2AAA, 0x55), (0x5554, 0xA0), (0x10, 0x00)),
        ((0x5555, 0xAB), (0x2AAA, 0x55), (0x5555, 0xA0), (0x10, 0x00)),
        ((0x5555, 0xAA), (0x2AAB, 0x55), (0x5555, 0xA0), (0x10, 0x00)),
        (*SIX[:4], (0x2AAA, 0x56), (0x5555, 0x10)),
        (*SIX, (0x5554, 0x10)),
        (*SIX, (0x5555, 0x20)),
        ((0x555, 0xAA), (0x2AA, 0x55), (0x555, 0xA0), (0x10, 0x00)),
        ((0x10, 0x00),),
    ],
)
def test_a_row_that_is_no_command_does_nothing(row: tuple[tuple[int, int], ...]) -> None:
    """Each address and byte counts, A14..A0 of it [S17]; afterwards a right command is understood."""
    chip, _judge, bus = fresh(0x11)
    bus.loads(row)
    assert not chip.is_busy(bus.t)
    assert chip.cells.count(0x11) == WORDS
    bus.program(0x20, 0x10)
    assert chip.is_busy(bus.t)


def test_upper_address_lines_do_not_matter_to_a_command() -> None:
    """A17..A15 are not decoded in the unlocks [S17]."""
    chip, _judge, bus = fresh()
    bus.loads(((0x3D555, 0xAA), (0x12AAA, 0x55), (0x25555, 0xA0), (0x77, 0x01)))
    bus.wait(20 * US)
    assert not chip.is_busy(bus.t)
    assert chip.cells[0x77] == 0x01


def test_what_comes_while_busy_is_not_heard() -> None:
    """A byte 5 us after the last one began is lost; chip and judge say so."""
    chip, judge, bus = fresh()
    bus.program(0x10, 0x01)
    bus.look(0x10)
    bus.program(0x11, 0x02)
    bus.wait(MS)
    assert not chip.is_busy(bus.t)
    assert (chip.cells[0x10], chip.cells[0x11]) == (0x01, 0xFF)
    assert rules(judge) == {"write while busy"}
    assert chip.stressed == ["a write while the chip was busy"]


@pytest.mark.parametrize("late", [0, 1])
def test_the_first_access_waits_100_us(late: int) -> None:
    """100 us after power-up to the first read and to the first write [S70]."""
    chip = load_model(MODEL)
    judge = Judge(chip.limits)
    bus = FlashBus(judge, chip=chip)
    bus.power()
    bus.standby()
    bus.wait(100 * US - US - bus.access - 1 + late)
    bus.look(0)
    assert rules(judge) == (set() if late else {"power-up"})
    chip = load_model(MODEL)
    judge = Judge(chip.limits)
    bus = FlashBus(judge, chip=chip)
    bus.power()
    bus.standby()
    bus.wait(100 * US - US - bus.setup - 1 + late)
    bus.load(0x5555, 0xAA)
    assert rules(judge) == (set() if late else {"power-up"})


def test_power_lost_in_an_erase_leaves_something_else() -> None:
    """The sector under way is neither what it was nor blank."""
    chip, _judge, bus = fresh(0x11)
    bus.loads((*SIX, (0, 0x30)))
    bus.wait(MS)
    bus.down()
    assert set(chip.cells[:4_096]).isdisjoint({0x11, 0xFF})
    assert chip.cells.count(0x11) == WORDS - 4_096
    assert len(chip.stressed) == 1


def test_stuck_dead_and_slow_cells() -> None:
    """A stuck bit and a dead byte stay through an erase; a slow chip outlasts 20 us."""
    chip, _judge, bus = fresh(0x11, stuck=((5, 0x80, 0),), dead=(6,), slow_percent=100, slow_pulses=2)
    bus.loads(ERASE)
    bus.wait(150 * MS)
    assert chip.is_busy(bus.t)
    bus.wait(60 * MS)
    assert not chip.is_busy(bus.t)
    assert list(chip.cells[4:8]) == [0xFF, 0x7F, 0x11, 0xFF]
    bus.program(0x10, 0x01)
    bus.wait(21 * US)
    assert chip.is_busy(bus.t)


@pytest.mark.parametrize(("mv", "dies"), [(6_000, False), (6_001, True), (12_000, True)])
def test_a9_is_a_pin_like_others(mv: int, dies: bool) -> None:
    """No mode of this sheet raises A9 [S70]: what stands above VDD + 0.5 V is taken as damage."""
    chip, judge, bus = fresh(0x11)
    bus.set({bus.a9: mv})
    assert chip.damaged is dies
    assert ("absolute maximum" in rules(judge)) is dies


@pytest.mark.parametrize(
    ("setup", "width", "pause", "broken"),
    [
        (2, 1, 2, set()),
        (1, 1, 1, set()),
        (0, 1, 2, {"address setup"}),
    ],
)
def test_the_bus_times_of_the_sheet(setup: int, width: int, pause: int, broken: set[str]) -> None:
    """TAS 0, tWP 40, tWPH 30, tDS 40 ns [S70]: a tick each is enough, none is not."""
    _chip, judge, bus = fresh()
    bus.setup, bus.width, bus.pause = setup, width, pause
    bus.set({bus.ce: 0})
    bus.load(0x5555, 0xAA)
    bus.load(0x2AAA, 0x55)
    assert rules(judge) == broken


def test_a_hold_of_nothing_is_too_short() -> None:
    """The address moves with the tick of WE's fall: 30 ns wanted [S70]."""
    _chip, judge, bus = fresh()
    bus.set({bus.ce: 0})
    bus.address(0x100)
    bus.drive(0x33)
    bus.wait(2)
    bus.set({bus.we: 0})
    bus.set({bus.a[0]: HIGH})
    bus.wait(1)
    bus.set({bus.we: HIGH})
    assert rules(judge) == {"address hold"}
