"""Contacts that are not as they should be, between the socket and a chip: lifted pins, and pins that touch each other.

It stands in the chip's place: the socket sees a chip whose pins behave as these contacts make them. What a part does
with an open input no sheet says; here (all `common practice` unless a line says otherwise):

- an open input reads as the chip model takes `None` (the models here: high); an open output reaches nobody;
- without its VCC or GND contact a chip drives nothing and takes nothing (powered through its inputs: not modelled);
- where two pins touch, ground holds against all, then VCC, then a low, then a high; two outputs that differ read low;
- a supply that touches ground, or a raised pin that touches a pin held low, is asked for far more than it can give.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from pulsewright.virtual.interface import ChipModel, Levels

SHORT_UA = 10_000_000  # what a supply is asked for by a short
LINE_UA = 15_000  # what a line that is low takes from VCC through its 330 ohm [calc]
_VIL_MV = 800
_RAISED_MV = 7_000  # no plain level stands so high


class BadContacts:
    """A chip behind bad contacts; everything not named here is the chip's own."""

    def __init__(
        self, chip: ChipModel, lifted: Sequence[int] = (), touching: Sequence[tuple[int, int]] = ()
    ) -> None:
        self.chip = chip
        limits = chip.limits
        self._lifted = frozenset(lifted)
        self._dead = bool(self._lifted & {limits.vcc_pin, *limits.gnd_pins})
        self._pairs = tuple((a, b) for a, b in touching if not {a, b} & self._lifted)
        self._mate = {pin: other for a, b in self._pairs for pin, other in ((a, b), (b, a))}
        self._bit = {pin: bit for bit, pin in enumerate(chip.outputs)}
        self._gnd = frozenset(limits.gnd_pins)
        self._vcc = limits.vcc_pin
        self._outer: list[int | None] = [None] * (chip.pins + 1)

    def __getattr__(self, name: str) -> Any:
        return getattr(self.chip, name)

    def pins_changed(self, t: int, levels: Levels) -> None:
        """The chip sees what its contacts let through."""
        self._outer = list(levels)
        if self._dead:
            self.chip.pins_changed(t, [None] * len(self._outer))
            return
        inner = list(self._outer)
        for pin in self._lifted:
            inner[pin] = None
        for a, b in self._pairs:
            inner[a] = inner[b] = self._joined(a, b)
        self.chip.pins_changed(t, inner)

    def _joined(self, a: int, b: int) -> int | None:
        """The level of two pins that touch, as far as the rig holds them."""
        levels = [level for level in (self._outer[a], self._outer[b]) if level is not None]
        if self._gnd & {a, b}:
            return 0
        raised = [level for level in levels if level > _RAISED_MV]
        if raised:
            return raised[0] if min(levels) > _VIL_MV else min(levels)
        if self._vcc in (a, b):
            return self._outer[self._vcc]
        return min(levels) if levels else None

    def drive(self, t: int) -> tuple[int, int]:
        """What reaches the socket of the outputs."""
        mask, bits = (0, 0) if self._dead else self.chip.drive(t)
        for pin in self._lifted:
            if pin in self._bit:
                mask &= ~(1 << self._bit[pin])
        for a, b in self._pairs:
            for pin, other in ((a, b), (b, a)):
                if pin in self._bit:
                    mask, bits = self._touched(pin, other, mask, bits)
        return mask, bits & mask

    def _touched(self, pin: int, other: int, mask: int, bits: int) -> tuple[int, int]:
        """An output that touches another pin: what stands there joins in."""
        bit = 1 << self._bit[pin]
        own = bits & bit if mask & bit else None
        if other in self._gnd:
            return mask | bit, bits & ~bit
        if other == self._vcc:
            stands = (self._outer[other] or 0) > _VIL_MV
            return (mask | bit, bits | bit) if stands else (mask, bits)
        if other in self._bit:
            mate = 1 << self._bit[other]
            theirs = bits & mate if mask & mate else None
        else:
            level = self._outer[other]
            theirs = None if level is None else int(level > _VIL_MV)
        seen = [value for value in (own, theirs) if value is not None]
        if not seen:
            return mask & ~bit, bits
        return mask | bit, bits | bit if all(seen) else bits & ~bit

    def draw_ua(self, t: int, pin: int) -> int:
        """The chip's own current, and what a short takes on top."""
        own = 0 if self._dead or pin in self._lifted else self.chip.draw_ua(t, pin)
        mate = self._mate.get(pin)
        if mate is None:
            return own
        level, other = self._outer[pin], self._outer[mate]
        if pin == self._vcc:
            low = other is not None and other <= _VIL_MV
            return SHORT_UA if mate in self._gnd else own + LINE_UA * low
        raised = level is not None and level > _RAISED_MV
        held_low = mate in self._gnd or (other is not None and other <= _VIL_MV) or mate == self._vcc
        return SHORT_UA if raised and held_low else own

    def take_faults(self, faults: Any) -> None:
        """Those of the chip itself."""
        take = getattr(self.chip, "take_faults", None)
        if take is not None:
            take(faults)

    def restore(self, state: Mapping[str, object]) -> None:
        """The chip's own."""
        self.chip.restore(state)
