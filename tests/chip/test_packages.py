"""Packages in the byte-wide site: bottom-aligned, so that ground and the low data pins are shared."""

from __future__ import annotations

import pytest

from pulsewright.chip.packages import POWER_PINS, pin_at, pin_count, position_of


@pytest.mark.parametrize(
    ("package", "pin", "position"),
    [
        ("DIP-32", 1, 1),
        ("DIP-32", 32, 32),
        ("DIP-28", 1, 3),
        ("DIP-28", 14, 16),
        ("DIP-28", 15, 17),
        ("DIP-28", 28, 30),
        ("DIP-24", 1, 5),
        ("DIP-24", 12, 16),
        ("DIP-24", 24, 28),
    ],
)
def test_positions(package: str, pin: int, position: int) -> None:
    """Corners of each package, counted on a drawing: ground is 16 for all, VCC 28, 30 or 32 (JEDEC byte-wide)."""
    assert position_of(pin, package) == position
    assert pin_at(position, package) == pin


def test_ground_is_shared_and_vcc_is_not() -> None:
    """All byte-wide packages have ground at position 16, and VCC at 28, 30 or 32."""
    packages = ("DIP-24", "DIP-28", "DIP-32")
    assert [position_of(POWER_PINS[one]["GND"][0], one) for one in packages] == [16, 16, 16]
    assert [position_of(POWER_PINS[one]["VCC"][0], one) for one in packages] == [28, 30, 32]


@pytest.mark.parametrize(("pin", "package"), [(1, "DIP-40"), (29, "DIP-28"), (0, "DIP-28"), (1, "SO-8")])
def test_what_does_not_fit_is_refused(pin: int, package: str) -> None:
    """A package too large, a pin it does not have, a package nobody knows."""
    with pytest.raises(ValueError, match="does not fit|has no pin"):
        position_of(pin, package)


def test_free_positions_have_no_pin() -> None:
    """Above a smaller package positions stay free on both sides."""
    assert [pin_at(position, "DIP-24") for position in (4, 29)] == [None, None]
    assert sum(pin_at(position, "DIP-28") is not None for position in range(1, 33)) == pin_count("DIP-28")
