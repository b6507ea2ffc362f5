"""Waveforms that each break a rule of the judge, by a tick or a millivolt where it has a number, and which rule."""

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
    D,
    pulse,
    ready_to_erase,
    ready_to_program,
    wind_down,
)


def too_high(bus: Bus) -> None:
    """OE past its absolute maximum."""
    bus.raise_to({OE: 14_501})


def vcc_too_high(bus: Bus) -> None:
    """VCC past its absolute maximum."""
    bus.power(7001)


def too_low(bus: Bus) -> None:
    """A pin more than 0.6 V below ground."""
    bus.set({D[0]: -601})


def above_vcc(bus: Bus) -> None:
    """An address pin 0.301 V above VCC."""
    bus.set({A[3]: 5_301})


def oe_left_above_vcc(bus: Bus) -> None:
    """VCC lowered to a step of its own with OE, a pin that may be raised, driven high as before."""
    bus.ramp({VCC: 3750, CE: 3750}, MS)


def left_above_vcc(bus: Bus) -> None:
    """VCC lowered to a step of its own with a line driven high as before."""
    bus.set({A[3]: HIGH})
    bus.ramp({VCC: 3750, CE: 3750, OE: 3750}, MS)


def raised_without_vcc(bus: Bus) -> None:
    """12 V on OE with VCC off."""
    bus.down()
    bus.raise_to({OE: 12_000})


def raised_beside_vcc(bus: Bus) -> None:
    """OE on its way up while VCC reaches its window."""
    bus.down()
    bus.ramp({VCC: HIGH, CE: HIGH, OE: 12_000}, MS)


def vcc_down_first(bus: Bus) -> None:
    """VCC off with 12 V still on OE."""
    bus.raise_to({OE: 12_000})
    bus.ramp({VCC: 0, CE: 0}, MS)


def vcc_down_meanwhile(bus: Bus) -> None:
    """VCC begins to fall, then OE, and both are down when VCC arrives."""
    bus.raise_to({OE: 12_000})
    for watcher in bus.watchers:
        watcher.edges(bus.t, bus.levels, [VCC])
    bus.wait(US)
    bus.raise_to({OE: 0})
    bus.wait(US)
    bus.set({VCC: 0, CE: 0})


def vcc_step_under_raised(bus: Bus) -> None:
    """VCC moved from a step to another with a raised level standing."""
    bus.raise_to({OE: 12_000})
    bus.ramp({VCC: 3750, CE: 3750}, MS)


def too_steep(bus: Bus) -> None:
    """12 V on OE in no time, without a ramp."""
    bus.set({OE: 12_000})


def no_such_level(bus: Bus) -> None:
    """13 V on OE: neither program nor erase."""
    bus.raise_to({OE: 13_000})


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


def address_hold(bus: Bus) -> None:
    """The address moves one tick less than 2 us after the pulse."""
    ready_to_program(bus)
    pulse(bus)
    bus.wait(2 * US - 1)
    bus.address(6)


def data_hold(bus: Bus) -> None:
    """D moves one tick less than 2 us after the pulse."""
    ready_to_program(bus)
    pulse(bus)
    bus.wait(2 * US - 1)
    bus.drive(0xF0)


def release_hold(bus: Bus) -> None:
    """D is released one tick less than 2 us after the pulse."""
    ready_to_program(bus)
    pulse(bus)
    bus.wait(2 * US - 1)
    bus.release()


def raised_hold(bus: Bus) -> None:
    """OE begins to fall one tick less than 2 us after the pulse."""
    ready_to_program(bus)
    pulse(bus)
    bus.wait(2 * US - 1)
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


def floating(bus: Bus) -> None:
    """A pulse with an address pin that nothing drives."""
    bus.set({A[7]: None})
    bus.drive(0x0F)
    bus.raise_to({OE: 12_000})
    bus.wait(2 * US)
    pulse(bus)


def between_levels(bus: Bus) -> None:
    """A pulse with an address pin that is neither low nor high."""
    bus.set({A[7]: 1_500})
    bus.drive(0x0F)
    bus.raise_to({OE: 12_000})
    bus.wait(2 * US)
    pulse(bus)


def recovery(bus: Bus) -> None:
    """Outputs on one tick less than 2 us after OE came down from 12 V."""
    ready_to_program(bus)
    pulse(bus)
    bus.wait(2 * US)
    bus.raise_to({OE: HIGH})
    bus.release()
    bus.wait(2 * US - 1)
    bus.read(5, access=US)


def access(bus: Bus) -> None:
    """A sample two ticks (125 ns) after the enable."""
    bus.read(5, access=2)


def address_access(bus: Bus) -> None:
    """A sample two ticks after the address moved."""
    bus.set({CE: 0, OE: 0})
    bus.wait(US)
    bus.address(1)
    bus.wait(2)
    bus.sample()


def verify_access(bus: Bus) -> None:
    """A verify after a pulse sampled one tick earlier than 1 us after CE."""
    bus.program(5, 0x0F)
    bus.read(5, access=US - 1)


def low_vcc_access(bus: Bus) -> None:
    """A verify at VCC 3.75 V sampled one tick too early."""
    bus.power(3750)
    bus.read(5, access=US - 1)


def float_time(bus: Bus) -> None:
    """A sample two ticks after the outputs went off: part of it may be theirs."""
    bus.set({CE: 0, OE: 0})
    bus.wait(US)
    bus.set({CE: HIGH})
    bus.wait(2)
    bus.sample()


def identify_level(bus: Bus) -> None:
    """A sample with A9 at the erase level."""
    bus.identify(14_000)


def fight_by_rig(bus: Bus) -> None:
    """The rig drives D while the chip's outputs are on."""
    bus.set({CE: 0, OE: 0})
    bus.wait(US)
    bus.drive(0xFF)


def fight_by_chip(bus: Bus) -> None:
    """The chip's outputs go on while the rig drives D."""
    bus.drive(0xFF)
    bus.set({CE: 0, OE: 0})


def fight_too_soon(bus: Bus) -> None:
    """The rig drives D two ticks after the outputs went off."""
    bus.set({CE: 0, OE: 0})
    bus.wait(US)
    bus.set({OE: HIGH})
    bus.wait(2)
    bus.drive(0xFF)


WAVES: list[tuple[Callable[[Bus], None], set[str]]] = [
    (too_high, {"absolute maximum", "raised window"}),
    (vcc_too_high, {"absolute maximum"}),
    (too_low, {"lowest level"}),
    (above_vcc, {"above VCC"}),
    (left_above_vcc, {"above VCC"}),
    (oe_left_above_vcc, {"raised window"}),
    (raised_without_vcc, {"supply order"}),
    (raised_beside_vcc, {"supply order"}),
    (vcc_down_first, {"supply order"}),
    (vcc_down_meanwhile, {"supply order"}),
    (vcc_step_under_raised, {"supply order"}),
    (too_steep, {"rise time"}),
    (no_such_level, {"raised window"}),
    (unknown_pulse, {"unknown pulse", "raised window"}),
    (erase_without_a9, {"unknown pulse"}),
    (raised_under_ce, {"raised setup"}),
    (too_short, {"pulse width"}),
    (too_long, {"pulse width"}),
    (erase_too_long, {"pulse width"}),
    (wrong_vcc, {"pulse vcc"}),
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
    (recovery, {"recovery"}),
    (access, {"access time"}),
    (address_access, {"access time"}),
    (verify_access, {"access time"}),
    (low_vcc_access, {"access time"}),
    (float_time, {"float time"}),
    (identify_level, {"identify level", "unknown pulse"}),
    (fight_by_rig, {"bus fight"}),
    (fight_by_chip, {"bus fight"}),
    (fight_too_soon, {"bus fight"}),
]
