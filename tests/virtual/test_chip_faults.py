"""Faults of the chip itself that a bench gives it: a dead cell, protection from the start."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.errors import UsageMistake
from pulsewright.virtual.bench import Bench
from pulsewright.virtual.models.ee256 import Ee256
from tests.virtual.waveform import US, Bus


def test_a_dead_address_outside_the_chip_is_refused() -> None:
    """The chip has no such word."""
    with pytest.raises(UsageMistake, match="a dead address outside"):
        Bench.fresh("27e512", "blank", faults=["dead=0x10000"])


def test_a_dead_cell_never_changes() -> None:
    """Neither a program pulse nor an erase moves it, while its neighbour follows both."""
    bench = Bench.fresh("27e512", b"\x5a\xff", faults=["dead=0", "dead=1"])
    bus = Bus(chip=bench.chip)
    bus.up()
    for at in range(3):
        bus.program(at, 0x00)
    assert [bus.read(at, access=US) for at in range(3)] == [0x5A, 0xFF, 0x00]
    bus.erase()
    assert [bus.read(at, access=US) for at in range(3)] == [0x5A, 0xFF, 0xFF]


def test_protection_is_no_fault_of_a_part_without() -> None:
    """An EPROM has no software protection that could be on."""
    with pytest.raises(UsageMistake, match="no software protection"):
        Bench.fresh("27e512", "blank", faults=["protected"])


def test_protection_and_dead_bytes_are_kept_in_the_file(tmp_path: Path) -> None:
    """A bench that is loaded again has the chip's faults; protection that was taken off stays off."""
    path = tmp_path / "tower.bench"
    bench = Bench.new(path, "28c256", faults=["protected", "dead=0x40"], maker="xicor")
    chip = Bench.load(path).chip
    assert isinstance(chip, Ee256)
    assert chip.protected
    assert isinstance(bench.chip, Ee256)
    bench.chip.protected = False
    bench.save()
    assert Bench.load(path).chip.state()["protected"] is False
