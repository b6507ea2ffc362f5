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
    ready_to_program,
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


def raised_at_low_vcc(bus: Bus) -> None:
    """The identify level at VCC 3.75 V, with nothing pulsed."""
    bus.power(3750)
    bus.set({A9: 3750})
    bus.raise_to({A9: 12_000})
    bus.wait(2 * US)
    bus.raise_to({A9: 3750})


def too_steep(bus: Bus) -> None:
    """12 V on OE in no time, without a ramp."""
    bus.set({OE: 12_000})


def no_such_level(bus: Bus) -> None:
    """13 V on OE: neither program nor erase."""
    bus.raise_to({OE: 13_000})


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
    (raised_at_low_vcc, {"raised vcc"}),
    (raised_beside_vcc, {"supply order"}),
    (vcc_down_first, {"supply order"}),
    (vcc_down_meanwhile, {"supply order"}),
    (vcc_step_under_raised, {"supply order"}),
    (too_steep, {"rise time"}),
    (no_such_level, {"raised window"}),
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
