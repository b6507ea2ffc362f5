"""Hand-made waveforms at the pins of an EPROM with a VPP pin of its own, for a chip model and a judge.

The pin numbers and the good values are typed here once more from the fact table of the 27C256, not taken from the
model: pins, mode table, 2 us set-up and hold, 95..105 us [S11, S17].
"""

from __future__ import annotations

from tests.virtual.waveform import CE, HIGH, MS, OE, US, A, Bus

VPP = 1


class UvBus(Bus):
    """A 27C256: VPP at about VCC in read, raised once for a whole program job; CE pulsed low; verify with OE low.

    `ready` are the control pins between pulses, and whether they are high. `aside_mv`: what VPP lacks of VCC at rest.
    """

    a: tuple[int, ...] = A[:15]
    vpp = VPP
    pulse_pin, active_high = CE, False
    ready: tuple[tuple[int, bool], ...] = ((CE, True), (OE, True))
    aside_mv = 250
    vcc_mv, vpp_mv = 6_250, 12_750  # ST, National, AMD

    def power(self, mv: int = HIGH) -> None:
        highs = {pin: mv for pin in (*self.a, self.ce, self.oe, self.pulse_pin) if (self.levels[pin] or 0) > 0}
        self.ramp({self.vcc: mv, self.vpp: max(0, mv - self.aside_mv), **highs}, MS)
        self.high_mv = mv
        self.wait(MS)

    def standby(self) -> None:
        self.set({self.ce: self.high_mv, self.oe: self.high_mv, self.pulse_pin: self.high_mv})
        self.wait(US)

    def enter(self, vcc: int | None = None, vpp: int | None = None) -> None:
        """The inhibit row: VCC to its program step, then VPP."""
        self.power(vcc or self.vcc_mv)
        self.set({pin: self.high_mv if high else 0 for pin, high in self.ready})
        self.raise_to({self.vpp: vpp or self.vpp_mv})
        self.wait(2 * US)

    def leave(self) -> None:
        """VPP down, then VCC to its read step, in standby."""
        self.raise_to({self.vpp: self.high_mv - self.aside_mv})
        self.standby()
        self.power()

    def give(self, on: bool) -> None:
        """The pulse pin to its active level, or back to idle."""
        self.set({self.pulse_pin: self.high_mv if on is self.active_high else 0})

    def word(self, at: int, word: int, width: int = 100 * US) -> None:
        """The program row: one pulse, VPP staying up, D released and gone for its 2 us."""
        self.address(at)
        self.drive(word)
        self.wait(2 * US)
        self.give(on=True)
        self.wait(width)
        self.give(on=False)
        self.wait(2 * US)
        self.release()
        self.wait(2 * US)

    def verify(self, at: int, access: int = 3) -> int:
        """The verify row: OE low with VPP up."""
        self.address(at)
        self.set({self.oe: 0})
        self.wait(access)
        word = self.sample()
        self.set({self.oe: self.high_mv})
        self.wait(3)
        return word

    def one(self, at: int, word: int, width: int = 100 * US, vcc: int | None = None, vpp: int | None = None) -> None:
        """A whole job for one word: VCC and VPP up, one pulse, both down."""
        self.enter(vcc, vpp)
        self.word(at, word, width)
        self.leave()


class PgmBus(UvBus):
    """A 27C64: as above, with the pulse on PGM and CE low for it."""

    a = A[:13]
    pulse_pin = 27
    ready = ((CE, False), (OE, True), (27, True))


class HighPulseBus(UvBus):
    """A 2716: 24 pins, VPP 25 V, VCC 5 V throughout, CE/PGM low between pulses of 50 ms and high in them."""

    a = (8, 7, 6, 5, 4, 3, 2, 1, 23, 22, 19)
    d = (9, 10, 11, 13, 14, 15, 16, 17)
    ce, oe, a9, gnd, vcc, vpp = 18, 20, 22, 12, 24, 21
    pins = 24
    pulse_pin, active_high = 18, True
    ready = ((18, False), (20, True))
    vcc_mv, vpp_mv = 5_000, 25_000
