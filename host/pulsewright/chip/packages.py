"""Packages: how many pins, where the supply pins are, and which position of the byte-wide site a pin meets.

Supply pins by the JEDEC byte-wide and word-wide pin-outs (common practice): the corner pins of DIP-24, -28 and -32;
DIP-40 word-wide parts have VCC at 40 and two grounds, 11 and 30.
"""

from __future__ import annotations

from collections.abc import Mapping

from pulsewright.chip.model import PACKAGE_PINS

SITE_POSITIONS = 32

POWER_PINS: Mapping[str, Mapping[str, tuple[int, ...]]] = {
    "DIP-24": {"VCC": (24,), "GND": (12,)},
    "DIP-28": {"VCC": (28,), "GND": (14,)},
    "DIP-32": {"VCC": (32,), "GND": (16,)},
    "DIP-40": {"VCC": (40,), "GND": (11, 30)},
}


def pin_count(package: str) -> int:
    """Pins of a package; 0 for one that is not known."""
    return PACKAGE_PINS.get(package, 0)


def position_of(pin: int, package: str, positions: int = SITE_POSITIONS) -> int:
    """The position a pin meets when the package sits at the bottom of a site, both numbered round from pin 1.

    Sites and packages are dual in line, so a package with n pins fewer leaves n/2 positions free on each side above it.
    ValueError: the package does not fit (a 40-pin part needs an adapter), or has no such pin.
    """
    pins = pin_count(package)
    if not 0 < pins <= positions:
        raise ValueError(f"{package} does not fit a site of {positions} positions")
    if not 1 <= pin <= pins:
        raise ValueError(f"{package} has no pin {pin}")
    return pin + (positions - pins) // 2


def pin_at(position: int, package: str, positions: int = SITE_POSITIONS) -> int | None:
    """The pin that meets a position; None for a position that stays free."""
    pin = position - (positions - pin_count(package)) // 2
    return pin if 1 <= pin <= pin_count(package) else None
