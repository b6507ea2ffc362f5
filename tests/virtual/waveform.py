"""Hand-made waveforms at the pins of a 28-pin chip with a shared OE/VPP, for a chip model and a judge.

The pin numbers and the good values are typed here once more from the fact table of a 27E512-type part, not taken from
the model: pins S38; program 12 V on OE/VPP, erase 14 V on OE/VPP and A9 with addresses low and D high, identify 12 V on
A9, erase verify at VCC 3.75 V: S37; pulse widths 95..105 us and 95..105 ms, the 2 us class of set-up, hold and
recovery, 1 us from CE to data while verifying: from memory.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager

from pulsewright.virtual.interface import ChipModel, Watcher

A = (10, 9, 8, 7, 6, 5, 4, 3, 25, 24, 21, 23, 2, 26, 27, 1)
D = (11, 12, 13, 15, 16, 17, 18, 19)
CE, OE, A9, GND, VCC = 20, 22, 24, 14, 28
US = 16  # ticks
MS = 16_000
HIGH = 5000


class Bus:
    """The pins, the time, and who watches; each method is one thing a rig does, at `t` ticks."""

    a: tuple[int, ...] = A
    d: tuple[int, ...] = D
    ce, oe, a9, gnd, vcc = CE, OE, A9, GND, VCC
    pins = 28

    def __init__(self, *watchers: Watcher, chip: ChipModel | None = None) -> None:
        self.watchers = watchers
        self.chip = chip
        self.t = 1000
        self.levels: list[int | None] = [None] * (self.pins + 1)
        for pin in (*self.a, self.ce, self.oe, self.gnd, self.vcc):
            self.levels[pin] = 0
        self.high_mv = HIGH
        for watcher in watchers:
            watcher.rig_drives(self.t, False)

    def set(self, pins: dict[int, int | None]) -> None:
        """One group of edges; pins whose level stays are not named."""
        changed = [pin for pin, level in pins.items() if self.levels[pin] != level]
        for pin in changed:
            self.levels[pin] = pins[pin]
        if changed:
            self._tell(changed)

    def ramp(self, pins: dict[int, int | None], ticks: int) -> None:
        """A ramp of several pins: its begin, `ticks` later its end."""
        self._tell(list(pins))
        self.t += ticks
        for pin, level in pins.items():
            self.levels[pin] = level
        self._tell(list(pins))

    def _tell(self, changed: list[int]) -> None:
        for watcher in self.watchers:
            watcher.edges(self.t, self.levels, changed)
        if self.chip is not None:
            self.chip.pins_changed(self.t, self.levels)

    def wait(self, ticks: int) -> None:
        """Nothing moves for so long."""
        self.t += ticks

    def address(self, at: int) -> None:
        """The address lines, one group."""
        self.set({pin: self.high_mv if at >> bit & 1 else 0 for bit, pin in enumerate(self.a)})

    def drive(self, word: int) -> None:
        """The rig drives D."""
        for watcher in self.watchers:
            watcher.rig_drives(self.t, True)
        self.set({pin: self.high_mv if word >> bit & 1 else 0 for bit, pin in enumerate(self.d)})

    def release(self) -> None:
        """The rig lets go of D."""
        for watcher in self.watchers:
            watcher.rig_drives(self.t, False)
        self.set(dict.fromkeys(self.d))

    def sample(self) -> int:
        """What stands on D, a pin that the chip does not drive as 1."""
        for watcher in self.watchers:
            watcher.sampled(self.t)
        mask, bits = (0, 0) if self.chip is None else self.chip.drive(self.t)
        return bits & mask | 0xFF & ~mask

    # ---- the mode table's rows ----

    def power(self, mv: int = HIGH) -> None:
        """VCC up or down to a level, the control lines along with it."""
        highs = {pin: mv for pin in (*self.a, self.ce, self.oe) if (self.levels[pin] or 0) > 0}
        self.ramp({self.vcc: mv, **highs}, MS)
        self.high_mv = mv
        self.wait(MS)

    def standby(self) -> None:
        """CE and OE high, the outputs off."""
        self.set({self.ce: self.high_mv, self.oe: self.high_mv})
        self.wait(US)

    def up(self) -> None:
        """Powered, in standby."""
        self.power()
        self.standby()

    def down(self) -> None:
        """All lines low, VCC off."""
        self.address(0)
        self.power(0)
        self.set({self.ce: 0, self.oe: 0})

    def read(self, at: int, access: int = 3) -> int:
        """The read row: one word, its outputs off afterwards."""
        self.address(at)
        self.set({self.ce: 0, self.oe: 0})
        self.wait(access)
        word = self.sample()
        self.standby()
        return word

    def raise_to(self, pins: dict[int, int | None]) -> None:
        """Raised levels on, in 5 us."""
        self.ramp(pins, 5 * US)

    @contextmanager
    def low(self, pin: int, ticks: int) -> Iterator[None]:
        """A low pulse of exactly `ticks`; the body happens in its middle and takes no time."""
        self.set({pin: 0})
        self.wait(ticks // 2)
        yield
        self.wait(ticks - ticks // 2)
        self.set({pin: self.high_mv})

    def program(self, at: int, word: int, width: int = 100 * US, vpp: int = 12_000) -> None:
        """The program row: one pulse, then OE/VPP down and D released."""
        self.address(at)
        self.drive(word)
        self.raise_to({OE: vpp})
        self.wait(2 * US)
        with self.low(CE, width):
            pass
        self.wait(2 * US)
        self.raise_to({OE: self.high_mv})
        self.release()
        self.wait(2 * US)

    def erase(self, width: int = 100 * MS, vpe: int = 14_000, a9: int = 14_000) -> None:
        """The erase row: one pulse."""
        self.address(0)
        self.drive(0xFF)
        self.set({self.a9: self.high_mv})
        self.raise_to({OE: vpe, A9: a9})
        self.wait(2 * US)
        with self.low(CE, width):
            pass
        self.wait(2 * US)
        self.raise_to({OE: self.high_mv, A9: self.high_mv})
        self.release()
        self.wait(2 * US)

    def identify(self, level: int = 12_000, access: int = 3) -> tuple[int, int]:
        """The identify row: the bytes at A0 low and high."""
        self.address(0)
        self.set({self.a9: self.high_mv})
        self.raise_to({self.a9: level})
        self.wait(2 * US)
        self.set({self.ce: 0, self.oe: 0})
        self.wait(access)
        first = self.sample()
        self.set({self.a[0]: self.high_mv})
        self.wait(access)
        second = self.sample()
        self.set({self.a[0]: 0})
        self.standby()
        self.raise_to({self.a9: self.high_mv})
        self.wait(2 * US)
        return first, second


def ready_to_program(bus: Bus, at: int = 5, word: int = 0x0F, vpp: int = 12_000) -> None:
    """Everything as it must stand before a program pulse."""
    bus.address(at)
    bus.drive(word)
    bus.raise_to({OE: vpp})
    bus.wait(2 * US)


def ready_to_erase(bus: Bus, word: int = 0xFF) -> None:
    """Everything as it must stand before an erase pulse."""
    bus.address(0)
    bus.drive(word)
    bus.set({A9: HIGH})
    bus.raise_to({OE: 14_000, A9: 14_000})
    bus.wait(2 * US)


def pulse(bus: Bus, ticks: int = 100 * US) -> None:
    """A CE pulse."""
    with bus.low(CE, ticks):
        pass


def wind_down(bus: Bus) -> None:
    """After a pulse: hold, raised levels down, D released, recovery."""
    bus.wait(2 * US)
    bus.raise_to({pin: HIGH for pin in (OE, A9) if (bus.levels[pin] or 0) > HIGH})
    bus.release()
    bus.wait(2 * US)
