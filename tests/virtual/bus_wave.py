"""Hand-made waveforms at the pins of parts that are written on the bus, for a chip model and a judge.

Pins and good values are typed here once more from the fact table, not taken from the models: 28C256 pins [S2, S16],
39SF020A pins [S25, S70]; commands [S35, S41, S17]. A load is 0.4 us of set-up, 0.2 us of pulse and 1.25 us of pause,
which every maker's table allows.
"""

from __future__ import annotations

from collections.abc import Iterable

from tests.virtual.waveform import MS, US, A, Bus

ENABLE = ((0x5555, 0xAA), (0x2AAA, 0x55), (0x5555, 0xA0))
SIX = ((0x5555, 0xAA), (0x2AAA, 0x55), (0x5555, 0x80), (0x5555, 0xAA), (0x2AAA, 0x55))
DISABLE = (*SIX, (0x5555, 0x20))
ERASE = (*SIX, (0x5555, 0x10))
PROBE = ((0x5555, 0xAA), (0x2AAA, 0x55), (0x5555, 0x90))


class EeBus(Bus):
    """A 28C256: WE on 27, A14 on 1."""

    a: tuple[int, ...] = (*A[:14], 1)
    we = 27
    setup, width, pause = 6, 3, 20  # ticks of a load
    access = 5

    def __init__(self, *watchers: object, **more: object) -> None:
        super().__init__(*watchers, **more)  # type: ignore[arg-type]  # what Bus takes
        self.levels[self.we] = 0

    def power(self, mv: int = 5_000) -> None:
        highs = {pin: mv for pin in (*self.a, self.ce, self.oe, self.we) if (self.levels[pin] or 0) > 0}
        self.ramp({self.vcc: mv, **highs}, MS)
        self.high_mv = mv

    def standby(self) -> None:
        self.set({self.ce: self.high_mv, self.oe: self.high_mv, self.we: self.high_mv})
        self.wait(US)

    def up(self) -> None:
        """Powered, in standby, 20 ms later."""
        self.power()
        self.standby()
        self.wait(20 * MS)

    def down(self) -> None:
        self.address(0)
        self.power(0)
        self.set({self.ce: 0, self.oe: 0, self.we: 0})

    def load(self, at: int, word: int) -> None:
        """One write: CE low, address and data, a WE pulse, a pause; D stays driven."""
        self.set({self.ce: 0})
        self.address(at)
        self.drive(word)
        self.wait(self.setup)
        self.set({self.we: 0})
        self.wait(self.width)
        self.set({self.we: self.high_mv})
        self.wait(self.pause)

    def loads(self, pairs: Iterable[tuple[int, int]]) -> None:
        """Several writes in a row, then D let go and CE high."""
        for at, word in pairs:
            self.load(at, word)
        self.release()
        self.wait(1)
        self.set({self.ce: self.high_mv})
        self.wait(2)

    def page(self, first: int, words: bytes, before: Iterable[tuple[int, int]] = ()) -> None:
        """A page, behind a command perhaps."""
        self.loads((*before, *((first + at, word) for at, word in enumerate(words))))

    def look(self, at: int, access: int | None = None, off: int = 3) -> int:
        """CE and OE low for one read; the outputs off for `off` ticks afterwards."""
        self.address(at)
        self.set({self.ce: 0, self.oe: 0})
        self.wait(access or self.access)
        word = self.sample()
        self.set({self.oe: self.high_mv})
        self.wait(off)
        return word

    def poll(self, at: int, word: int, most: int) -> int:
        """Looks at bit 7 until it is the word's; the ticks it took, `most` when it did not come."""
        began = self.t
        while self.t - began < most:
            if not (self.look(at) ^ word) & 0x80:
                return self.t - began
            self.wait(10 * US)
        return most


class FlashBus(EeBus):
    """A 39SF020A."""

    a = (12, 11, 10, 9, 8, 7, 6, 5, 27, 26, 23, 25, 4, 28, 29, 3, 2, 30)
    d = (13, 14, 15, 17, 18, 19, 20, 21)
    ce, oe, we, a9, gnd, vcc = 22, 24, 31, 26, 16, 32
    pins = 32
    setup, width, pause = 2, 1, 2
    access = 2

    def program(self, at: int, word: int, *_unused: object) -> None:
        """Unlock and one byte."""
        self.loads((*ENABLE, (at, word)))
