"""The number that stands on pins."""

from __future__ import annotations

import pytest

from pulsewright.virtual.pin_number import PinNumber

PINS = (3, 1, 2, 9, 8, 7, 6, 5, 4, 10, 11)  # eleven, so that they come in two parts


@pytest.mark.parametrize("number", [0, 1, 0x80, 0x100, 0x400, 0x2A5, 0x7FF])
def test_pins_give_their_number(number: int) -> None:
    """Bit 0 is the first pin; 2.0 V is high, a millivolt less is low; asked twice the answer is the same."""
    levels = [1_999] * 12
    for bit, pin in enumerate(PINS):
        if number >> bit & 1:
            levels[pin] = 2_000
    pins = PinNumber(PINS, 2_000, floating=False)
    assert (pins.of(levels), pins.of(levels)) == (number, number)


@pytest.mark.parametrize(("floating", "number"), [(True, 0x7FF), (False, 0)])
def test_a_pin_that_nothing_drives_counts_as_told(floating: bool, number: int) -> None:
    """None is 1 or 0, as whoever asks wants it."""
    assert PinNumber(PINS, 2_000, floating=floating).of([None] * 12) == number


def test_many_levels_are_forgotten_again() -> None:
    """Thousands of different levels change nothing in the answer."""
    pins = PinNumber(PINS, 2_000, floating=False)
    for level in range(2_000, 8_000):
        assert pins.of([level] * 12) == 0x7FF
