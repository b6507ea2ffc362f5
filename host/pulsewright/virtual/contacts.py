"""The contacts of the virtual socket: what stands at each position, and who is told when it changes.

Strong before weak: a raised level, then VCC, then a line that is low or high, then the chip's output, then the bias,
then the pull-up from the switched copy of VCC. `socket` moves what this file resolves.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from pulsewright.virtual.board import DATA_POSITIONS, GND_POSITION, POSITIONS, POWER_POSITIONS, Board
from pulsewright.virtual.interface import ChipModel, Watcher
from pulsewright.virtual.rails import Ramp
from pulsewright.wire.tables import Bias, Level, Range

LOW, HIGH, RELEASED = int(Level.LOW), int(Level.HIGH), int(Level.RELEASED)
VIH_MV = 2_000
POWERED_MV = 3_000  # a chip's outputs work from here up
STRAY_HIGH_MV = 1_700  # a line driven high with VCC off lifts its position so far [sim]
NEVER = 1 << 62
_DATA_BIT = {position: bit for bit, position in enumerate(DATA_POSITIONS)}
_ALL = range(1, POSITIONS + 1)


class Contacts:
    """Positions 1..32 and the chip in them; see Socket, which is the one to make."""

    def __init__(
        self,
        chip: ChipModel | None,
        wiring: Mapping[int, int],
        watchers: Sequence[Watcher] = (),
        *,
        gnd_positions: Sequence[int] = (GND_POSITION,),
    ) -> None:
        self.board = Board()
        self.trace: list[tuple[int, str]] | None = None
        self.fights = 0  # groups in which rig and chip drove the same data pin
        self.watchers = tuple(watchers)
        self._place(chip, wiring)
        self._gnd = frozenset(gnd_positions)
        # lines and pulls
        self._state = [LOW] * (POSITIONS + 1)  # of lines that are no data line and no address line
        self._bias = [int(Bias.OFF)] * (POSITIONS + 1)
        self.high_driven = False
        self.driving = True  # D, with `word`: at rest every line is low
        self.word = 0
        self._address: tuple[int, ...] = ()
        self._bit_of: dict[int, int] = {}
        self.shown = 0  # address bits whose line is high
        self._let_go: set[int] = set()  # address positions that `set_lines` released
        # supplies
        self.range = int(Range.OFF)
        self.rail = Ramp()  # the VCC rail
        self.vcc = Ramp()  # VCC at the socket
        self.vcc_mv = 0  # the same, as the pins have it: moves at the end of a ramp
        self.vcc_at: frozenset[int] = frozenset()
        self.raised_rail = Ramp()
        self._raised: dict[int, Ramp] = {}
        self._touching: dict[int, tuple[int, ...]] = {}  # position -> those it touches at the chip
        self.peak_mv = [0] * (POSITIONS + 1)  # highest level of each position that was raised or a supply
        # what follows from all that, kept at hand
        self.alive = False  # the chip's own VCC and GND pins have VCC and ground
        self._miswired = False
        self._high: int | None = None  # what H is worth
        self._idle = 0  # D as it reads when nobody drives it
        self._idle_levels: tuple[int | None, ...] = ()
        self._quick = False  # the address lines are plain lines now
        self._driven_levels: dict[int, tuple[int | None, ...]] = {}  # by word
        self._output_levels: dict[int, tuple[int | None, ...]] = {}  # by mask and bits of the chip's outputs
        self._chip_mask = 0
        self._chip_bits = 0
        self._retune()
        for position in _ALL:
            if pin := self._pin_at[position]:
                self.levels[pin] = self._resolve(position)

    def _place(self, chip: ChipModel | None, wiring: Mapping[int, int]) -> None:
        self.chip = chip if wiring else None
        self.wiring = dict(wiring) if chip is not None else {}
        self._pin_at = [self.wiring.get(position, 0) for position in range(POSITIONS + 1)]
        self._position_of = {pin: position for position, pin in self.wiring.items()}
        size = 1 + max([*self.wiring.values(), self.chip.pins if self.chip else 0, 0])
        self.levels: list[int | None] = [None] * size  # millivolts by chip pin
        self._data_pins = tuple(self._pin_at[position] for position in DATA_POSITIONS)
        self._wired_data = tuple(pin for pin in self._data_pins if pin)
        outputs = self.chip.outputs if self.chip else ()
        self._output_bit = {pin: bit for bit, pin in enumerate(outputs)}
        self._aligned = tuple(outputs) == self._data_pins  # output n is data line n, and all eight are there

    # ---- what stands where ----------------------------------------------------------------------------------------

    def _line_state(self, position: int) -> int:
        bit = self._bit_of.get(position)
        if bit is None:
            return self._state[position]
        return RELEASED if position in self._let_go else self.shown >> bit & 1

    def _resolve(self, position: int) -> int | None:
        """Millivolts at a position, None where nothing holds it."""
        ramp = self._raised.get(position)
        if ramp is not None:
            return ramp.from_mv if ramp.begin < ramp.end else ramp.to_mv
        return self._plain(position)

    def _plain(self, position: int) -> int | None:
        """The same, but for a raised level."""
        if position in self._gnd:
            return 0
        if position in self.vcc_at:
            return max(0, self.vcc_mv - (0 if position in POWER_POSITIONS else self.board.vcc_aside_drop_mv))
        bit = _DATA_BIT.get(position)
        if bit is not None:
            if self.driving:
                return self._high if self.word >> bit & 1 else 0
            return self._weak(position)
        state = self._line_state(position)
        if state == LOW:
            return 0
        return self._high if state == HIGH else self._weak(position)

    def touch(self, pairs: Iterable[tuple[int, int]]) -> None:
        """These pins of the chip touch: a line that is let go shows what its neighbour is held at."""
        for a, b in pairs:
            one, other = self._position_of[a], self._position_of[b]
            for position, mate in ((one, other), (other, one)):
                self._touching[position] = (*self._touching.get(position, ()), mate)

    def _touched(self, position: int) -> int | None:
        """The level that the neighbours of a let-go line are held at; ground, then supplies, then low before high."""
        held = []
        for mate in self._touching.get(position, ()):
            supply = mate in self._gnd or mate in self.vcc_at or mate in self._raised
            if not supply and (mate in _DATA_BIT or self._line_state(mate) == RELEASED):
                continue  # held weakly at most
            level = self._resolve(mate)
            if level is not None:
                held.append((mate not in self._gnd, not supply, level))
        return min(held)[2] if held else None

    def _weak(self, position: int) -> int | None:
        """The level of a position that the rig lets go."""
        if self._touching and position not in _DATA_BIT and (held := self._touched(position)) is not None:
            return held
        pin = self._pin_at[position]
        output = self._output_bit.get(pin) if pin else None
        if output is not None and self.alive and self._chip_mask >> output & 1:
            return self.vcc_mv if self._chip_bits >> output & 1 else 0
        return self._pulled(position)

    def _pulled(self, position: int) -> int | None:
        """The level that pulls alone give; a chip that is a net of diodes holds them down."""
        bias = self._bias[position]
        if bias == Bias.DOWN:
            return 0
        if bias == Bias.UP or self.range == Range.FULL:
            if self._pin_at[position] and self._miswired and self.vcc_mv >= VIH_MV:
                return 0
            return self.vcc_mv if self.range != Range.OFF else None
        return None

    def _look_at_wiring(self) -> None:
        """Is the chip's own VCC pin where VCC is, and its GND on ground?"""
        chip = self.chip
        if chip is None:
            return
        powered = self._position_of.get(chip.limits.vcc_pin) in self.vcc_at
        grounded = all(self._position_of.get(pin) in self._gnd for pin in chip.limits.gnd_pins)
        self._miswired = bool(self.vcc_at) and not (powered and grounded)

    def _clamp_mv(self) -> int:
        """How far a misplaced chip lets VCC rise."""
        chip = self.chip
        if chip is None or not self._miswired or not any(self._pin_at[position] for position in self.vcc_at):
            return NEVER
        at = self._position_of.get(chip.limits.vcc_pin)
        if at is None or at in self.vcc_at:
            return NEVER
        held_low = at in self._gnd or (at not in _DATA_BIT and self._line_state(at) == LOW)
        return self.board.diode_mv if held_low else NEVER

    # ---- what follows, kept at hand -------------------------------------------------------------------------------

    def _retune(self) -> None:
        """After a change of range, VCC, bias, wiring or of what H means."""
        if self.range == Range.FULL or (self.range == Range.PROBE and self.high_driven):
            self._high = self.vcc_mv
        else:
            self._high = STRAY_HIGH_MV if self.high_driven else None
        chip = self.chip
        self.alive = chip is not None and not self._miswired and bool(self.vcc_at) and self.vcc_mv >= POWERED_MV
        if not self.alive:
            self._chip_mask = 0
        self._driven_levels.clear()
        self._output_levels.clear()
        self._idle_levels = tuple(self._pulled(position) for position in DATA_POSITIONS)
        self._idle = sum((level or 0) >= VIH_MV and 1 << bit for bit, level in enumerate(self._idle_levels))
        self._retune_quick()

    def _retune_quick(self) -> None:
        """Whether the address lines are plain lines now: none raised, let go or under a supply."""
        bits = self._bit_of.keys()
        self._quick = not self._let_go and bits.isdisjoint(self._raised) and bits.isdisjoint(self.vcc_at)

    def _show_outputs(self) -> None:
        """Sets the levels of D, which the rig lets go, to what the chip drives and the pulls give."""
        levels = self.levels
        if not self._aligned:
            self._refresh(DATA_POSITIONS)
            return
        mask, bits = self._chip_mask, self._chip_bits
        key = mask << 8 | bits
        shown = self._output_levels.get(key)
        if shown is None:
            high, idle = self.vcc_mv, self._idle_levels
            shown = self._output_levels[key] = tuple(
                (high if bits >> bit & 1 else 0) if mask >> bit & 1 else idle[bit] for bit in range(8)
            )
        for pin, level in zip(self._data_pins, shown, strict=True):
            levels[pin] = level

    def _refresh(self, positions: Iterable[int]) -> list[int]:
        """Sets the levels of these positions' pins anew; those pins that changed."""
        changed, levels = [], self.levels
        for position in positions:
            pin = self._pin_at[position]
            if pin:
                mv = self._resolve(position)
                if mv != levels[pin]:
                    levels[pin] = mv
                    changed.append(pin)
        return changed

    def _follow(self, t: int) -> None:
        """After a change that may move many positions."""
        self._retune()
        if changed := self._refresh(_ALL):
            self._control_group(t, changed)

    # ---- to the chip and the watchers -----------------------------------------------------------------------------

    def _control_group(self, t: int, changed: Sequence[int], drives: bool | None = None) -> None:
        """One group: the chip sees it, its outputs follow, the watchers see both. `drives`: the rig begins or ends."""
        chip = self.chip
        if chip is None:
            return
        fight: tuple[int, ...] | None = None
        levels = self.levels
        chip.pins_changed(t, levels)
        if self.alive:
            mask, bits = chip.drive(t)
            if self.driving:
                self._chip_mask = mask
                if mask:
                    fight = self._fight(mask)
            elif mask != self._chip_mask or (mask and bits != self._chip_bits):
                self._chip_mask, self._chip_bits = mask, bits
                self._show_outputs()
                changed = (*changed, *self._wired_data)
        for watcher in self.watchers:
            if drives is not None:
                watcher.rig_drives(t, drives)
            watcher.edges(t, levels, changed, fight)

    def _fight(self, mask: int) -> tuple[int, ...] | None:
        """Data pins that rig and chip drive both, if any."""
        pins = tuple(pin for pin, bit in self._output_bit.items() if mask >> bit & 1 and pin in self._wired_data)
        if not pins:
            return None
        self.fights += 1
        return pins

    def _note(self, t: int, notes: Sequence[str]) -> None:
        if self.trace is not None and notes:
            self.trace.append((t, " ".join(notes)))
