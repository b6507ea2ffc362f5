"""The model of a 27E512-type chip: held to the published windows, which are typed again from the fact table here."""

from __future__ import annotations

import json

import pytest

from pulsewright.virtual.faults import ChipFaults
from pulsewright.virtual.models.e512 import E512, make_chip
from tests.virtual.waveform import A9, CE, HIGH, MS, OE, US, VCC, A, Bus

LOW_VCC = 3750  # erase verify [S37]


def fresh(contents: int = 0xFF, **faults: object) -> tuple[E512, Bus]:
    """A chip on a bus, full of one byte."""
    chip = make_chip()
    chip.cells[:] = bytes([contents]) * len(chip.cells)
    chip.take_faults(ChipFaults(**faults))  # type: ignore[arg-type]  # the fields of ChipFaults, by name
    return chip, Bus(chip=chip)


def test_a_read_gives_the_cell_after_the_access_time() -> None:
    """150 ns [S38] after address and enable the cell stands on D, and before it something else does."""
    chip, bus = fresh()
    chip.cells[0x1234] = 0x5A
    bus.up()
    assert bus.read(0x1234, access=3) == 0x5A
    assert bus.read(0x1234, access=2) != 0x5A


def test_a_moved_address_needs_its_access_time_too() -> None:
    """With the outputs on, a new address is not valid before 150 ns [S38]."""
    chip, bus = fresh()
    chip.cells[0:2] = b"\x11\x22"
    bus.up()
    bus.set({CE: 0, OE: 0})
    bus.wait(3)
    assert bus.sample() == 0x11
    bus.address(1)
    assert bus.sample() != 0x22
    bus.wait(3)
    assert bus.sample() == 0x22


@pytest.mark.parametrize("line", range(16))
def test_every_address_line_counts(line: int) -> None:
    """Each of the sixteen address pins [S38] selects its own half of the cells."""
    chip, bus = fresh(0)
    chip.cells[1 << line] = 0xA5
    bus.up()
    assert bus.read(1 << line) == 0xA5
    assert bus.read(0) == 0


@pytest.mark.parametrize("pin", [CE, OE])
def test_outputs_float_with_ce_or_oe_high(pin: int) -> None:
    """Standby and output disable leave D free [S37], at most 130 ns after the edge (from memory)."""
    chip, bus = fresh(0)
    bus.up()
    bus.set({CE: 0, OE: 0})
    bus.wait(3)
    assert chip.drive(bus.t) == (0xFF, 0)
    bus.set({pin: HIGH})
    assert chip.drive(bus.t)[0] == 0xFF
    bus.wait(3)
    assert chip.drive(bus.t) == (0, 0)


def test_without_vcc_nothing_is_driven() -> None:
    """A chip without supply drives no pin, whatever CE and OE are."""
    chip, bus = fresh(0)
    bus.set({CE: 0, OE: 0})
    assert chip.drive(bus.t) == (0, 0)


@pytest.mark.parametrize(("level", "answers"), [(11_500, True), (12_000, True), (12_500, True), (11_499, False)])
def test_the_identify_level_gives_the_id(level: int, answers: bool) -> None:
    """DA and 08 [S37] at A9 = 11.5..12.5 V (limits from memory), the cells below it."""
    _chip, bus = fresh(0x33)
    bus.up()
    assert bus.identify(level) == ((0xDA, 0x08) if answers else (0x33, 0x33))


def test_another_makers_id_can_be_given() -> None:
    """The fault wrong-id changes both bytes."""
    _chip, bus = fresh(wrong_id=(0xC2, 0x07))
    bus.up()
    assert bus.identify() == (0xC2, 0x07)


@pytest.mark.parametrize(
    ("width", "vpp", "programs"),
    [
        (95 * US, 12_000, True),
        (105 * US, 12_000, True),
        (95 * US - 1, 12_000, False),
        (100 * US, 11_750, True),
        (100 * US, 12_250, True),
        (100 * US, 11_749, False),
        (100 * US, 12_251, False),
        (100 * US, HIGH, False),
    ],
)
def test_a_program_pulse_needs_time_and_level(width: int, vpp: int, programs: bool) -> None:
    """95 us at 11.75..12.25 V on OE/VPP (from memory) program a cell, less of either does not."""
    chip, bus = fresh()
    bus.up()
    bus.program(0x4321, 0x0F, width, vpp)
    assert chip.cells[0x4321] == (0x0F if programs else 0xFF)
    assert chip.cells.count(0xFF) == 65_536 - programs


def test_programming_only_clears_bits() -> None:
    """A bit goes from 1 to 0 and never back by a program pulse [S11, S12]."""
    chip, bus = fresh()
    bus.up()
    bus.program(7, 0x0F)
    bus.program(7, 0xF3)
    assert chip.cells[7] == 0x03


def test_short_pulses_add_up() -> None:
    """Two half pulses with the same data program what one whole pulse does (invented), other data begins anew."""
    chip, bus = fresh()
    bus.up()
    bus.program(7, 0x0F, 48 * US)
    bus.program(7, 0xF0, 48 * US)
    assert chip.cells[7] == 0xFF
    bus.program(7, 0xF0, 48 * US)
    assert chip.cells[7] == 0xF0


def test_a_longer_pulse_leaves_a_note() -> None:
    """More than 105 us (from memory) is stress, and named."""
    chip, bus = fresh()
    bus.up()
    bus.program(7, 0, 105 * US)
    assert chip.stressed == []
    bus.program(7, 0, 105 * US + 1)
    assert chip.stressed == ["a program pulse longer than 105 us"]


def test_an_address_that_moves_inside_a_pulse_hits_both_cells() -> None:
    """Each of the two cells gets its part of the pulse, and a note is left."""
    chip, bus = fresh()
    bus.up()
    bus.address(1)
    bus.drive(0)
    bus.raise_to({OE: 12_000})
    with bus.low(CE, 200 * US):
        bus.address(2)
    assert (chip.cells[1], chip.cells[2]) == (0, 0)
    assert "address moved" in chip.stressed[0]


def test_a_verify_needs_a_microsecond() -> None:
    """After a raised level CE low to data takes 1 us (from memory); 150 ns are too early."""
    _chip, bus = fresh()
    bus.up()
    bus.program(7, 0x0F)
    assert bus.read(7, access=15) != 0x0F
    assert bus.read(7, access=16) == 0x0F


@pytest.mark.parametrize(
    ("width", "vpe", "a9", "erases"),
    [
        (95 * MS, 14_000, 14_000, True),
        (105 * MS, 14_000, 14_000, True),
        (95 * MS - 1, 14_000, 14_000, False),
        (100 * MS, 13_750, 14_250, True),
        (100 * MS, 14_250, 13_750, True),
        (100 * MS, 13_749, 14_000, False),
        (100 * MS, 14_000, 13_749, False),
        (100 * MS, 14_251, 14_000, False),
        (100 * MS, 12_000, 14_000, False),
        (100 * MS, 14_000, HIGH, False),
    ],
)
def test_an_erase_pulse_needs_time_and_both_levels(width: int, vpe: int, a9: int, erases: bool) -> None:
    """95 ms at 13.75..14.25 V on OE/VPP and A9 (levels S37, limits and widths from memory) erase the chip."""
    chip, bus = fresh(0)
    bus.up()
    bus.erase(width, vpe, a9)
    assert chip.cells.count(0xFF) == (65_536 if erases else 0)
    assert not chip.damaged


@pytest.mark.parametrize("pin", [pin for pin in A if pin != A9])
def test_an_erase_pulse_needs_every_other_address_low(pin: int) -> None:
    """With an address pin high [S37: all low] the pulse erases nothing."""
    chip, bus = fresh(0)
    bus.up()
    bus.drive(0xFF)
    bus.set({A9: HIGH, pin: HIGH})
    bus.raise_to({OE: 14_000, A9: 14_000})
    with bus.low(CE, 100 * MS):
        pass
    assert chip.cells.count(0) == 65_536


def test_an_erase_pulse_needs_d_high() -> None:
    """D driven low during erase [S37: driven high] erases nothing."""
    chip, bus = fresh(0)
    bus.up()
    bus.drive(0xFE)
    bus.set({A9: HIGH})
    bus.raise_to({OE: 14_000, A9: 14_000})
    with bus.low(CE, 100 * MS):
        pass
    assert chip.cells.count(0) == 65_536


def test_a_slow_chip_looks_erased_at_5_v_before_it_is() -> None:
    """A slow cell after one of three pulses reads 1 at 5 V and its old 0 at 3.75 V: hence the lowered VCC."""
    chip, bus = fresh(0, slow_percent=10, slow_pulses=3)
    bus.up()
    bus.erase()
    slow = [at for at in range(65_536) if chip.cells[at] == 0]
    assert 5_900 < len(slow) < 7_200
    assert bus.read(slow[0], access=16) == 0xFF
    bus.power(LOW_VCC)
    assert bus.read(slow[0], access=16) == 0
    bus.power(HIGH)
    bus.erase()
    assert chip.cells.count(0) == len(slow)
    bus.erase()
    assert chip.cells.count(0xFF) == 65_536


def test_slow_cells_need_more_program_pulses() -> None:
    """With all cells slow, the third of three pulses programs."""
    chip, bus = fresh(slow_percent=100, slow_pulses=3)
    bus.up()
    for wanted in (0xFF, 0xFF, 0x42):
        bus.program(9, 0x42)
        assert chip.cells[9] == wanted


def test_a_program_pulse_undoes_a_half_finished_erase() -> None:
    """Programming in the middle of a slow erase starts the erase anew (invented)."""
    chip, bus = fresh(0, slow_percent=100, slow_pulses=2)
    bus.up()
    bus.erase()
    bus.program(9, 0)
    bus.erase()
    assert chip.cells.count(0) == 65_536
    bus.erase()
    assert chip.cells.count(0xFF) == 65_536


def test_stuck_bits_never_change() -> None:
    """Bits under the mask keep their value through program and erase; the others work."""
    chip, bus = fresh(stuck=((5, 0x11, 0x10),))
    bus.up()
    assert bus.read(5) == 0xFE
    bus.program(5, 0x00)
    assert bus.read(5, access=16) == 0x10
    bus.erase()
    assert bus.read(5, access=16) == 0xFE
    assert chip.cells[6] == 0xFF


@pytest.mark.parametrize(
    ("pin", "level", "damaged"),
    [
        (OE, 14_500, False),
        (OE, 14_501, True),
        (A9, 14_500, False),
        (A9, 14_501, True),
        (CE, 7_000, False),
        (CE, 7_001, True),
        (VCC, 7_000, False),
        (VCC, 7_001, True),
        (A[15], 12_000, True),
    ],
)
def test_levels_past_the_maximum_destroy_the_chip(pin: int, level: int, damaged: bool) -> None:
    """14.5 V on OE/VPP and A9, 7.0 V elsewhere (from memory): above, the chip is damaged and its cells are lost."""
    chip, bus = fresh(0x77)
    bus.up()
    bus.set({pin: level})
    assert chip.damaged is damaged
    assert chip.cells.count(0x77) == (0 if damaged else 65_536)


def test_currents_stay_within_the_published_ones() -> None:
    """30 mA at most on VCC and VPP, 1 mA in standby [S38]; 200 uA on A9, as a 28F020 takes it [S40]."""
    chip, bus = fresh()
    bus.up()
    assert 0 < chip.draw_ua(bus.t, VCC) <= 1_000
    bus.drive(0xFF)
    bus.set({A9: HIGH})
    assert chip.draw_ua(bus.t, A9) == 0
    bus.raise_to({OE: 14_000, A9: 14_000})
    before = chip.draw_ua(bus.t, OE)
    with bus.low(CE, 100 * MS):
        assert before < chip.draw_ua(bus.t, OE) <= 30_000
        assert 1_000 < chip.draw_ua(bus.t, VCC) <= 30_000
        assert chip.draw_ua(bus.t, A9) == 200


def test_what_a_bench_file_keeps_goes_on_where_it_stopped() -> None:
    """State through JSON and back: counters, stress, and an erase that is half done."""
    chip, bus = fresh(0, slow_percent=100, slow_pulses=2)
    bus.up()
    bus.program(1, 0, 200 * US)
    bus.program(2, 1, 40 * US)
    bus.erase()
    again, other = fresh(0, slow_percent=100, slow_pulses=2)
    again.restore(json.loads(json.dumps(chip.state())))
    assert again.state() == chip.state()
    other.up()
    other.erase()
    assert again.cells.count(0xFF) == 65_536
