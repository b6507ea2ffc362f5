"""Waveforms at a 27C256 of ST, and at a part with a program pin, that each break a rule of the judge.

They break it by a tick or a millivolt where it has a number.
"""

from __future__ import annotations

from collections.abc import Callable

from tests.virtual.uv_wave import VPP, PgmBus, UvBus
from tests.virtual.waveform import A9, CE, HIGH, MS, OE, US, VCC


def vpp_at_5_v(bus: UvBus) -> None:
    """VPP up with VCC at its read step."""
    bus.raise_to({VPP: 12_750})


def vpp_without_vcc(bus: UvBus) -> None:
    """VPP up with VCC off."""
    bus.down()
    bus.raise_to({VPP: 12_750})


def vcc_down_first(bus: UvBus) -> None:
    """VCC off with VPP up."""
    bus.enter()
    bus.ramp({VCC: 0, CE: 0, OE: 0}, MS)


def vcc_back_under_vpp(bus: UvBus) -> None:
    """VCC back to its read step with VPP still up."""
    bus.enter()
    bus.ramp({VCC: HIGH, CE: HIGH, OE: HIGH}, MS)


def vpp_before_the_step(bus: UvBus) -> None:
    """VPP up at 5 V, and VCC to its program step after it."""
    bus.raise_to({VPP: 12_750})
    bus.ramp({VCC: 6_250, CE: 6_250, OE: 6_250}, MS)


def vpp_too_steep(bus: UvBus) -> None:
    """VPP up in no time."""
    bus.power(6_250)
    bus.set({VPP: 12_750})


def vpp_of_another_maker(bus: UvBus) -> None:
    """VPP a millivolt above 13.0 V."""
    bus.enter(vpp=13_001)


def vcc_above_every_step(bus: UvBus) -> None:
    """VCC a millivolt above 6.5 V, with nothing raised."""
    bus.power(6_501)


def vpp_too_low_in_read(bus: UvBus) -> None:
    """A read with VPP 0.601 V below VCC."""
    bus.set({VPP: HIGH - 601})
    bus.read(5)


def vpp_open_in_read(bus: UvBus) -> None:
    """A read with nothing at VPP."""
    bus.set({VPP: None})
    bus.read(5)


def vpp_low_in_identify(bus: UvBus) -> None:
    """The ID read with VPP at ground."""
    bus.set({VPP: 0})
    bus.identify()


def vpp_sags_in_verify(bus: UvBus) -> None:
    """A verify with VPP a millivolt below 12.5 V."""
    bus.enter()
    bus.set({VPP: 12_499})
    bus.verify(5)


def verify_at_5_v(bus: UvBus) -> None:
    """A verify with VPP up and VCC at its read step."""
    bus.enter(vcc=HIGH)
    bus.verify(5)


def identify_under_vpp(bus: UvBus) -> None:
    """D read with VPP and A9 both raised."""
    bus.enter()
    bus.set({A9: bus.high_mv})
    bus.raise_to({A9: 12_000})
    bus.set({OE: 0, CE: 0})
    bus.wait(US)
    bus.sample()


def verify_too_soon(bus: UvBus) -> None:
    """A verify sampled one tick after OE; 100 ns are asked for."""
    bus.enter()
    bus.verify(5, access=1)


def released_late(bus: UvBus) -> None:
    """OE low one tick less than 2 us after D was released."""
    bus.enter()
    bus.word(5, 0x0F)
    bus.drive(0x0F)
    bus.release()
    bus.wait(2 * US - 1)
    bus.verify(5)


def released_early(bus: UvBus) -> None:
    """D released one tick less than 2 us after the pulse."""
    bus.enter()
    bus.address(5)
    bus.drive(0x0F)
    bus.wait(2 * US)
    bus.give(on=True)
    bus.wait(100 * US)
    bus.give(on=False)
    bus.wait(2 * US - 1)
    bus.release()


def float_time(bus: UvBus) -> None:
    """A sample two ticks, 125 ns, after OE went high under VPP; 130 ns are asked for."""
    bus.enter()
    bus.set({OE: 0})
    bus.wait(US)
    bus.set({OE: bus.high_mv})
    bus.wait(2)
    bus.sample()


def below_ground(bus: UvBus) -> None:
    """A pin more than 0.5 V below ground."""
    bus.set({CE: -501})


def pulse_with_oe_low(bus: UvBus) -> None:
    """CE low in the verify row; nothing drives D."""
    bus.enter()
    bus.set({OE: 0})
    bus.give(on=True)
    bus.wait(100 * US)
    bus.give(on=False)


def oe_low_in_a_pulse(bus: UvBus) -> None:
    """OE falls in the middle of a pulse, and the chip drives against the rig."""
    bus.enter()
    bus.address(5)
    bus.drive(0x0F)
    bus.wait(2 * US)
    bus.give(on=True)
    bus.wait(50 * US)
    bus.set({OE: 0})
    bus.wait(50 * US)
    bus.set({OE: bus.high_mv})
    bus.give(on=False)


def too_many_in_all(bus: UvBus) -> None:
    """26 pulses at a word, others at another word between them."""
    bus.enter()
    for _ in range(26):
        bus.word(5, 0x0F)
        bus.word(6, 0x0F)
    bus.leave()


def pulse_at_5_v(bus: UvBus) -> None:
    """A pulse with VPP up and VCC at its read step."""
    bus.enter(vcc=HIGH)
    bus.word(5, 0x0F)


UV_WAVES: list[tuple[Callable[[UvBus], None], set[str]]] = [
    (vpp_at_5_v, {"raised vcc"}),
    (vpp_without_vcc, {"supply order"}),
    (vcc_down_first, {"supply order"}),
    (vcc_back_under_vpp, {"supply order"}),
    (vpp_before_the_step, {"raised vcc", "supply order"}),
    (vpp_too_steep, {"rise time"}),
    (vpp_of_another_maker, {"raised window"}),
    (vcc_above_every_step, {"vcc window"}),
    (vpp_too_low_in_read, {"supply at rest"}),
    (vpp_open_in_read, {"supply at rest"}),
    (vpp_low_in_identify, {"supply at rest"}),
    (vpp_sags_in_verify, {"raised window", "raised read"}),
    (verify_at_5_v, {"raised vcc", "raised read"}),
    (released_early, {"data hold"}),
    (float_time, {"float time"}),
    (below_ground, {"lowest level"}),
    (identify_under_vpp, {"raised vcc", "raised read", "unknown pulse"}),
    (verify_too_soon, {"access time"}),
    (released_late, {"data release"}),
    (pulse_with_oe_low, {"pulse control", "data not driven", "floating input"}),
    (oe_low_in_a_pulse, {"control in pulse", "bus fight"}),
    (too_many_in_all, {"too many pulses"}),
    (pulse_at_5_v, {"raised vcc", "pulse vcc"}),
]


# ---- a part with a program pin, the pulse on PGM and CE low for it ----


def enabled_late(bus: PgmBus) -> None:
    """CE low one tick less than 2 us before PGM."""
    bus.enter()
    bus.address(5)
    bus.drive(0x0F)
    bus.set({CE: bus.high_mv})
    bus.wait(2 * US)
    bus.set({CE: 0})
    bus.wait(2 * US - 1)
    bus.give(on=True)
    bus.wait(100 * US)
    bus.give(on=False)


def ce_high_in_a_pulse(bus: PgmBus) -> None:
    """CE rises in the middle of a pulse, which ends it."""
    bus.enter()
    bus.address(5)
    bus.drive(0x0F)
    bus.wait(2 * US)
    bus.give(on=True)
    bus.wait(50 * US)
    bus.set({CE: bus.high_mv})
    bus.give(on=False)


def oe_low_too_soon(bus: PgmBus) -> None:
    """OE falls one tick less than 2 us after the pulse; D, which is held so long as well, is still driven."""
    bus.enter()
    bus.address(5)
    bus.drive(0x0F)
    bus.wait(2 * US)
    bus.give(on=True)
    bus.wait(100 * US)
    bus.give(on=False)
    bus.wait(2 * US - 1)
    bus.set({OE: 0})


PGM_WAVES: list[tuple[Callable[[PgmBus], None], set[str]]] = [
    (enabled_late, {"control setup"}),
    (ce_high_in_a_pulse, {"control in pulse", "pulse width"}),
    (oe_low_too_soon, {"control hold", "bus fight"}),
]
