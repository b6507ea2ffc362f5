"""Contacts that are not as they should be, between the socket and a chip: lifted pins, and pins that touch each other.

It stands in the chip's place: the socket sees a chip whose pins behave as these contacts make them. What a part does
with an open pin no sheet says, so each rule names where it comes from:

- an open input reads as the chip model takes `None` (the models here: high); an open output reaches nobody: invented;
- where pins touch, ground holds against all; then a raised rail, whose switch has 0.5 ohm, against everything a line
  can do [sim]; then VCC; then a line that is low, which takes 10 mA at most [calc]; then a line that is high; then the
  chip's own outputs, of which a low holds against a high: common practice. A9's raised level comes through a limiter
  of 1 mA and gives way to VCC and to a low line [sim];
- a chip without its GND contact is fed all the same: through its input diodes to the lines that are low. Its ground
  stands a diode and the drop in those lines above the rig's: from memory. What is left of VCC must be enough for it;
- a chip without its VCC contact is fed by the inputs that are high, a diode below them: from memory. A pin that takes
  a raised level has no such diode: common practice.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

from pulsewright.virtual.interface import ChipModel, Levels, Watcher

SHORT_UA = 10_000_000  # what a supply is asked for by a short
LINE_UA = 10_000  # what a line that is low takes at most: its FET's gate at 5 V, 330 ohm at its source [calc]
LINE_OHM = 330  # a line's resistor [sim]
DIODE_MV = 700  # over an input's protection diode: from memory
POWERED_MV = 3_000  # below, a chip drives nothing: invented
_VIL_MV, _VIH_MV = 800, 2_000
_RAISED_MV = 7_000  # no plain level stands so high


class BadContacts:
    """A chip behind bad contacts; everything not named here is the chip's own."""

    def __init__(self, chip: ChipModel, lifted: Iterable[int] = (), touching: Iterable[tuple[int, int]] = ()) -> None:
        self.chip = chip
        limits = chip.limits
        self._lifted = frozenset(lifted)
        self._bit = {pin: bit for bit, pin in enumerate(chip.outputs)}
        self._gnd, self._vcc = frozenset(limits.gnd_pins), limits.vcc_pin
        self._limited = limits.identify_pin or 0
        self._no_gnd, self._no_vcc = self._gnd <= self._lifted, self._vcc in self._lifted
        self._nets = _nets((a, b) for a, b in touching if not {a, b} & self._lifted)
        self._mates = {pin: [other for other in net if other != pin] for net in self._nets for pin in net}
        apart = {*self._bit, *self._gnd, *self._lifted, self._vcc}
        self._inputs = [pin for pin in range(1, chip.pins + 1) if pin not in apart]
        self._feeding = [pin for pin in self._inputs if pin not in limits.raised_pins]
        self._outer: list[int | None] = [None] * (chip.pins + 1)
        self._pins = self._outer

    def __getattr__(self, name: str) -> Any:
        return getattr(self.chip, name)

    # ---- what stands at the pins ----

    def pins_changed(self, t: int, levels: Levels) -> None:
        """The chip sees what its contacts let through."""
        self._outer = list(levels)
        self._pins = self.at_pins(levels)
        self.chip.pins_changed(t, self._inside(t))

    def at_pins(self, levels: Levels) -> list[int | None]:
        """The levels at the chip's own pins, with those that the rig has at its positions."""
        pins = list(levels)
        for pin in self._lifted:
            pins[pin] = None
        for net in self._nets:
            level = self._joined(net, levels)
            for pin in net:
                pins[pin] = level
        return pins

    def _joined(self, net: Sequence[int], levels: Levels) -> int | None:
        """The level of pins that touch: the strongest of what the rig has there."""
        if not self._gnd.isdisjoint(net):
            return 0
        lines = [(pin, level) for pin in net if pin not in self._bit and (level := levels[pin]) is not None]
        held = lines or [(pin, level) for pin in net if (level := levels[pin]) is not None]
        if not held:
            return None
        raised = [level for pin, level in held if level > _RAISED_MV and pin != self._limited]
        fed = [level for pin, level in held if pin == self._vcc and level > _VIL_MV]
        if raised or fed:
            return max(raised or fed)
        least = min(level for _, level in held)
        return least if least <= _VIL_MV else max(level for _, level in held)

    def _inside(self, t: int) -> Levels:
        """What the chip makes of its pins, counted from its own ground."""
        pins = self._pins
        if self._no_vcc:
            feeding = () if self._no_gnd else self._high()
            if not feeding:
                return [None] * len(pins)
            return [*pins[: self._vcc], max(feeding) - DIODE_MV, *pins[self._vcc + 1 :]]
        if not self._no_gnd:
            return pins
        if not self._low():
            return [None] * len(pins)
        ground = self._ground(t)
        return [None if level is None else max(0, level - ground) for level in pins]

    def _high(self) -> list[int]:
        return [level for pin in self._feeding if (level := self._pins[pin]) is not None and level >= _VIH_MV]

    def _low(self) -> list[int]:
        return [pin for pin in self._inputs if (level := self._pins[pin]) is not None and level <= _VIL_MV]

    def _taken_ua(self, t: int) -> int:
        return sum(self.chip.draw_ua(t, pin) for pin in {self._vcc, *self.chip.limits.raised_pins})

    def _ground(self, t: int) -> int:
        """How high a ground without contact stands, by what the chip takes and the lines that are low."""
        return DIODE_MV + self._taken_ua(t) * LINE_OHM // max(1, len(self._low())) // 1_000

    # ---- what the rig sees of it ----

    def drive(self, t: int) -> tuple[int, int]:
        """What reaches the socket of the outputs."""
        mask, bits = self._driven(t)
        for pin in self._lifted:
            if pin in self._bit:
                mask &= ~(1 << self._bit[pin])
        for net in self._nets:
            ours = sum(1 << self._bit[pin] for pin in net if pin in self._bit)
            if ours:
                mask, bits = self._touched(net, ours, mask, bits)
        return mask, bits & mask

    def _driven(self, t: int) -> tuple[int, int]:
        """The chip's outputs, as far as it is fed."""
        mask, bits = self.chip.drive(t)
        if not mask or not (self._no_gnd or self._no_vcc):
            return mask, bits
        if self._no_vcc:
            high = [] if self._no_gnd else self._high()
            drop = self._taken_ua(t) * LINE_OHM // max(1, len(high)) // 1_000
            return (mask, bits) if high and max(high) - DIODE_MV - drop >= POWERED_MV else (0, 0)
        ground = self._ground(t)
        if not self._low() or (self._pins[self._vcc] or 0) - ground < POWERED_MV:
            return 0, 0
        return mask, bits if ground < _VIH_MV else mask  # its low is no low any more

    def _touched(self, net: Sequence[int], ours: int, mask: int, bits: int) -> tuple[int, int]:
        """Outputs (bits `ours`) that touch each other or another pin: what stands there holds them."""
        others = [pin for pin in net if pin not in self._bit]
        level = self._joined(others, self._outer) if others else None
        if level is not None:
            return mask | ours, bits | ours if level > _VIL_MV else bits & ~ours
        if not mask & ours:
            return mask, bits
        high = bits & mask & ours == mask & ours
        return mask | ours, bits | ours if high else bits & ~ours

    def draw_ua(self, t: int, pin: int) -> int:
        """The chip's own current, and what touching pins take on top."""
        own = 0 if pin in self._lifted or self._no_vcc else self.chip.draw_ua(t, pin)
        mates, level = self._mates.get(pin), self._outer[pin]
        if mates is None or level is None or level <= _VIL_MV:
            return own
        raised = level > _RAISED_MV
        if not (raised or pin == self._vcc):
            return own
        if not self._gnd.isdisjoint(mates) or (raised and self._vcc in mates):
            return SHORT_UA
        there = [self._outer[mate] for mate in mates if mate not in self._bit]
        lows = sum(mv is not None and mv <= _VIL_MV for mv in there)
        return SHORT_UA if lows and raised and pin == self._limited else own + LINE_UA * lows

    def take_faults(self, faults: Any) -> None:
        """Those of the chip itself."""
        take = getattr(self.chip, "take_faults", None)
        if take is not None:
            take(faults)


class AtPins:
    """Shows a watcher the levels at the chip's own pins instead of those at the socket's positions."""

    def __init__(self, watcher: Watcher, contacts: BadContacts) -> None:
        self._watcher = watcher
        self._contacts = contacts
        self._before: list[int | None] = [None] * (contacts.chip.pins + 1)

    def edges(self, t: int, levels: Levels, changed: Sequence[int], driven: Sequence[int] | None = None) -> None:
        pins = self._contacts.at_pins(levels)
        moved = {pin for pin, (now, was) in enumerate(zip(pins, self._before, strict=True)) if now != was}
        self._before = pins
        self._watcher.edges(t, pins, (*{*changed, *moved},), driven)

    def sampled(self, t: int) -> None:
        self._watcher.sampled(t)

    def rig_drives(self, t: int, driving: bool) -> None:
        self._watcher.rig_drives(t, driving)


def _nets(pairs: Iterable[tuple[int, int]]) -> list[tuple[int, ...]]:
    """Pairs of pins that touch, joined to sets where they share one."""
    nets: list[set[int]] = []
    for pair in pairs:
        mine = set(pair)
        for net in [net for net in nets if net & mine]:
            mine |= net
            nets.remove(net)
        nets.append(mine)
    return [tuple(sorted(net)) for net in nets]
