"""Pulses that each break a rule of the judge, by a tick where it has a number, and which rule."""

from __future__ import annotations

from collections.abc import Callable

from tests.virtual.waveform import (
    A9,
    CE,
    HIGH,
    MS,
    OE,
    US,
    VCC,
    A,
    Bus,
    pulse,
    ready_to_erase,
    ready_to_program,
    wind_down,
)


def unknown_pulse(bus: Bus) -> None:
    """CE low while OE stands between the windows."""
    ready_to_program(bus, vpp=13_000)
    pulse(bus)


def erase_without_a9(bus: Bus) -> None:
    """CE low with OE at 14 V and A9 at TTL."""
    ready_to_program(bus, vpp=14_000)
    pulse(bus)


def raised_under_ce(bus: Bus) -> None:
    """OE raised while CE is low already: the pulse begins with the ramp's end."""
    bus.address(5)
    bus.drive(0x0F)
    bus.set({CE: 0})
    bus.raise_to({OE: 12_000})
    bus.wait(100 * US)
    bus.set({CE: HIGH})
    wind_down(bus)


def too_short(bus: Bus) -> None:
    """A pulse one tick short."""
    ready_to_program(bus)
    pulse(bus, 95 * US - 1)


def too_long(bus: Bus) -> None:
    """A pulse one tick long."""
    ready_to_program(bus)
    pulse(bus, 105 * US + 1)


def erase_too_long(bus: Bus) -> None:
    """An erase pulse one tick long."""
    ready_to_erase(bus)
    pulse(bus, 105 * MS + 1)


def wrong_vcc(bus: Bus) -> None:
    """A program pulse at VCC 3.75 V."""
    bus.power(3750)
    ready_to_program(bus)
    pulse(bus)


def erase_data(bus: Bus) -> None:
    """An erase pulse with D0 low."""
    ready_to_erase(bus, 0xFE)
    pulse(bus, 100 * MS)


def erase_address(bus: Bus) -> None:
    """An erase pulse with an address pin high."""
    ready_to_erase(bus)
    bus.set({A[4]: HIGH})
    bus.wait(2 * US)
    pulse(bus, 100 * MS)


def address_setup(bus: Bus) -> None:
    """The address moves one tick less than 2 us before the pulse."""
    ready_to_program(bus)
    bus.address(6)
    bus.wait(2 * US - 1)
    pulse(bus)


def data_setup(bus: Bus) -> None:
    """D moves one tick less than 2 us before the pulse."""
    ready_to_program(bus)
    bus.drive(0x3C)
    bus.wait(2 * US - 1)
    pulse(bus)


def raised_setup(bus: Bus) -> None:
    """OE reaches its level one tick less than 2 us before the pulse."""
    bus.address(5)
    bus.drive(0x0F)
    bus.raise_to({OE: 12_000})
    bus.wait(2 * US - 1)
    pulse(bus)


def vcc_setup(bus: Bus) -> None:
    """VCC reaches its window too late before the pulse, raised levels with it."""
    bus.power(3750)
    bus.address(5)
    bus.drive(0x0F)
    bus.wait(US)
    bus.set({VCC: HIGH, CE: HIGH})
    bus.ramp({OE: 12_000}, US)
    pulse(bus)


def almost_held(bus: Bus) -> None:
    """A pulse, and one tick less than the hold time after it."""
    ready_to_program(bus)
    pulse(bus)
    bus.wait(2 * US - 1)


def address_hold(bus: Bus) -> None:
    """The address moves one tick less than 2 us after the pulse."""
    almost_held(bus)
    bus.address(6)


def data_hold(bus: Bus) -> None:
    """D moves one tick less than 2 us after the pulse."""
    almost_held(bus)
    bus.drive(0xF0)


def release_hold(bus: Bus) -> None:
    """D is released one tick less than 2 us after the pulse."""
    almost_held(bus)
    bus.release()


def raised_hold(bus: Bus) -> None:
    """OE begins to fall one tick less than 2 us after the pulse."""
    almost_held(bus)
    bus.raise_to({OE: HIGH})


def a9_hold(bus: Bus) -> None:
    """A9 begins to fall too early after an erase pulse; it is an address pin as well."""
    ready_to_erase(bus)
    pulse(bus, 100 * MS)
    bus.wait(2 * US - 1)
    bus.raise_to({A9: HIGH})


def raised_cut(bus: Bus) -> None:
    """OE falls inside the pulse, which ends it."""
    ready_to_program(bus)
    bus.set({CE: 0})
    bus.wait(96 * US)
    bus.raise_to({OE: HIGH})
    bus.set({CE: HIGH})


def address_in_pulse(bus: Bus) -> None:
    """The address moves in the middle of a pulse."""
    ready_to_program(bus)
    with bus.low(CE, 100 * US):
        bus.address(6)


def data_in_pulse(bus: Bus) -> None:
    """D moves in the middle of a pulse."""
    ready_to_program(bus)
    with bus.low(CE, 100 * US):
        bus.drive(0xF0)


def not_driven(bus: Bus) -> None:
    """A pulse with D released: its pins float as well."""
    bus.address(5)
    bus.raise_to({OE: 12_000})
    bus.wait(2 * US)
    pulse(bus)


def pulse_with_a7(bus: Bus, level: int | None) -> None:
    """A pulse with address pin A7 at some level."""
    bus.set({A[7]: level})
    bus.drive(0x0F)
    bus.raise_to({OE: 12_000})
    bus.wait(2 * US)
    pulse(bus)


def floating(bus: Bus) -> None:
    """A pulse with an address pin that nothing drives."""
    pulse_with_a7(bus, None)


def between_levels(bus: Bus) -> None:
    """A pulse with an address pin that is neither low nor high."""
    pulse_with_a7(bus, 1_500)


def too_many_for_a_word(bus: Bus) -> None:
    """A 26th program pulse at one address."""
    for _ in range(26):
        bus.program(5, 0x0F)


def too_many_erases(bus: Bus) -> None:
    """A 21st erase pulse, VCC having been at 3.75 V between them."""
    for _ in range(21):
        bus.erase()
        bus.power(3750)
        bus.power(HIGH)


PULSES: list[tuple[Callable[[Bus], None], set[str]]] = [
    (unknown_pulse, {"unknown pulse", "raised window"}),
    (erase_without_a9, {"unknown pulse"}),
    (raised_under_ce, {"raised setup"}),
    (too_short, {"pulse width"}),
    (too_long, {"pulse width"}),
    (erase_too_long, {"pulse width"}),
    (wrong_vcc, {"pulse vcc", "raised vcc"}),
    (erase_data, {"pulse data"}),
    (erase_address, {"pulse address"}),
    (address_setup, {"address setup"}),
    (data_setup, {"data setup"}),
    (raised_setup, {"raised setup"}),
    (vcc_setup, {"vcc setup", "raised setup"}),
    (address_hold, {"address hold"}),
    (data_hold, {"data hold"}),
    (release_hold, {"data hold"}),
    (raised_hold, {"raised hold"}),
    (a9_hold, {"raised hold", "address hold"}),
    (raised_cut, {"raised hold"}),
    (address_in_pulse, {"address in pulse"}),
    (data_in_pulse, {"data in pulse"}),
    (not_driven, {"data not driven", "floating input"}),
    (floating, {"floating input"}),
    (between_levels, {"floating input"}),
    (too_many_for_a_word, {"too many pulses"}),
    (too_many_erases, {"too many pulses"}),
]
