"""Cells with a fault, whatever chip they are in: those that read otherwise from some VCC on."""

from __future__ import annotations

import pytest

from pulsewright.virtual.faults import ChipFaults
from pulsewright.virtual.models.e512 import E512
from tests.virtual.waveform import US, Bus

AT = 0x123


def weak(contents: int, mask: int, crossover_mv: int, *, slow_one: bool) -> tuple[E512, Bus]:
    """A chip full of one byte, with one weak cell."""
    chip = E512()
    chip.cells[:] = bytes([contents]) * len(chip.cells)
    chip.take_faults(ChipFaults(weak=((AT, mask, crossover_mv, slow_one),)))
    return chip, Bus(chip=chip)


@pytest.mark.parametrize(("vcc", "reads"), [(4_800, 0x50), (4_900, 0x50), (4_901, 0x53), (5_250, 0x53)])
def test_a_fading_zero_reads_1_above_its_crossover(vcc: int, reads: int) -> None:
    """A 0 that has lost charge shows first at high VCC (common practice); only the bits under the mask fade."""
    _chip, bus = weak(0x50, 0x03, 4_900, slow_one=False)
    bus.power(vcc)
    bus.standby()
    assert bus.read(AT) == reads
    assert bus.read(AT + 1) == 0x50


@pytest.mark.parametrize(("vcc", "reads"), [(3_750, 0xF0), (4_899, 0xF0), (4_900, 0xFF), (5_250, 0xFF)])
def test_an_under_erased_one_reads_0_below_its_crossover(vcc: int, reads: int) -> None:
    """A 1 that was erased too little shows first at low VCC (common practice)."""
    _chip, bus = weak(0xFF, 0x0F, 4_900, slow_one=True)
    bus.power(vcc)
    bus.standby()
    assert bus.read(AT, access=US) == reads
    assert bus.read(AT + 1, access=US) == 0xFF


def test_a_weak_bit_matters_only_where_it_holds_its_value() -> None:
    """A fading bit that holds 1 reads 1 at any VCC, a slow one that holds 0 reads 0: nothing to see."""
    for contents, slow_one in ((0xFF, False), (0x00, True)):
        _chip, bus = weak(contents, 0xFF, 4_900, slow_one=slow_one)
        for vcc in (4_750, 5_250):
            bus.power(vcc)
            bus.standby()
            assert bus.read(AT) == contents


def test_weak_cells_keep_what_they_hold() -> None:
    """What reads wrongly is not lost: the cell itself, which a dump of the bench shows, stays."""
    chip, bus = weak(0x00, 0xFF, 4_900, slow_one=False)
    bus.up()
    assert bus.read(AT) == 0xFF
    assert chip.cells[AT] == 0x00


def test_two_weak_spots_of_one_cell_add_up() -> None:
    """Several weak bits of a cell may have crossovers of their own."""
    chip, bus = weak(0x00, 0x01, 4_900, slow_one=False)
    chip.take_faults(ChipFaults(weak=((AT, 0x01, 4_900, False), (AT, 0x80, 5_100, False))))
    for vcc, reads in ((4_850, 0x00), (5_000, 0x01), (5_200, 0x81)):
        bus.power(vcc)
        bus.standby()
        assert bus.read(AT) == reads
