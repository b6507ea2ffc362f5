"""The socket of the virtual rig: lines, pulls and supplies as the rig moves them, and what it can see there.

What stands at a chip's pins goes to the chip first and then to the watchers, once for each group of edges. A ramp is
two groups: its begin, which names the pin with the level it still has, and its end.

A chip whose own VCC pin is not where VCC is, or whose GND pin is not on ground, is a net of protection diodes: it
drives nothing, holds weakly pulled lines down, and pulls VCC down when its VCC pin is held low (all `from memory`).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from pulsewright.virtual.board import DATA_POSITIONS, GND_POSITION, POSITIONS
from pulsewright.virtual.contacts import HIGH, LOW, RELEASED, VIH_MV
from pulsewright.virtual.interface import ChipModel, Watcher
from pulsewright.virtual.supplied import Supplied
from pulsewright.wire.tables import Bias

_ALL = range(1, POSITIONS + 1)
_LEVEL_TEXT = ("L", "H", "Z")
_MEMO_LIMIT = 4_096
_Move = tuple[tuple[tuple[int, int], ...], tuple[int, ...]]


class Socket(Supplied):
    """Positions 1..32 and the chip in them. `wiring` maps a position to a chip pin; empty: no chip.

    The rig calls the methods that move something; `t` is the tick at which it happens and never goes back.
    """

    def __init__(
        self,
        chip: ChipModel | None,
        wiring: Mapping[int, int],
        watchers: Sequence[Watcher] = (),
        *,
        gnd_positions: Sequence[int] = (GND_POSITION,),
    ) -> None:
        super().__init__(chip, wiring, watchers, gnd_positions=gnd_positions)
        self._moves: dict[int, _Move] = {}

    # ---- lines, address, data -------------------------------------------------------------------------------------

    def set_address_lines(self, positions: Sequence[int]) -> None:
        """The address bus of the program about to run: position of each bit from bit 0 up. Nothing moves."""
        states = [self._line_state(position) for position in positions]
        for position in self._bit_of:
            self._state[position] = self._line_state(position)
        self._address = tuple(positions)
        self._bit_of = {position: bit for bit, position in enumerate(positions)}
        self._let_go = {position for position, state in zip(positions, states, strict=True) if state == RELEASED}
        self.shown = sum(1 << bit for bit, state in enumerate(states) if state == HIGH)
        self._moves.clear()
        self._retune()

    def set_lines(self, t: int, lines: Iterable[tuple[int, int]]) -> None:
        """Lines (position, level) as one group; no data lines."""
        moved = [position for position, level in lines if self._set_state(position, level)]
        if not moved:
            return
        if self.trace is not None:
            self._note(t, [f"{position}{_LEVEL_TEXT[self._line_state(position)]}" for position in moved])
        self._control_group(t, self._refresh(moved))

    def _set_state(self, position: int, level: int) -> bool:
        """Whether the line was at another level."""
        bit = self._bit_of.get(position)
        if bit is None:
            if self._state[position] == level:
                return False
            self._state[position] = level
            return True
        if self._line_state(position) == level:
            return False
        self._let_go.discard(position)
        self.shown &= ~(1 << bit)
        if level == HIGH:
            self.shown |= 1 << bit
        elif level == RELEASED:
            self._let_go.add(position)
        self._retune_quick()
        return True

    def set_line(self, t: int, position: int, level: int) -> None:
        """One line, as `set_lines`, on a shorter way."""
        if position in self._bit_of or position in self._raised or level == RELEASED or position in self.vcc_at:
            self.set_lines(t, ((position, level),))
            return
        if self._state[position] == level:
            return
        self._state[position] = level
        if self.trace is not None:
            self._note(t, [f"{position}{_LEVEL_TEXT[level]}"])
        if pin := self._pin_at[position]:
            self.levels[pin] = self._high if level else 0
            self._control_group(t, (pin,))

    def set_address(self, t: int, address: int) -> None:
        """All address lines to the bits of `address`, as one group."""
        moved = address ^ self.shown
        if self._let_go:
            moved |= sum(1 << self._bit_of[position] for position in self._let_go)
            self._let_go.clear()
            self._retune_quick()
        if not moved:
            return
        self.shown = address
        if self.trace is not None:
            lines = sorted((position, bit) for position, bit in self._bit_of.items() if moved >> bit & 1)
            self._note(t, [f"{position}{_LEVEL_TEXT[address >> bit & 1]}" for position, bit in lines])
        if not self._quick:
            positions = [position for bit, position in enumerate(self._address) if moved >> bit & 1]
            self._control_group(t, self._refresh(positions))
            return
        entry = self._moves.get(moved)
        if entry is None:
            entry = self._move_of(moved)
        high, levels = self._high, self.levels
        for bit, pin in entry[0]:
            levels[pin] = high if address & bit else 0
        chip = self.chip
        if chip is not None and entry[1]:
            chip.pins_changed(t, levels)
            for watcher in self.watchers:
                watcher.edges(t, levels, entry[1])

    def _move_of(self, moved: int) -> _Move:
        """For a set of address bits: (bit, chip pin) of those that reach a pin, and those pins."""
        pairs = tuple(
            (1 << bit, self._pin_at[position])
            for bit, position in enumerate(self._address)
            if moved >> bit & 1 and self._pin_at[position]
        )
        if len(self._moves) >= _MEMO_LIMIT:
            self._moves.clear()
        entry = self._moves[moved] = (pairs, tuple(pin for _, pin in pairs))
        return entry

    def drive(self, t: int, word: int) -> None:
        """D driven with a word."""
        if self.driving and word == self.word:
            return
        begins = not self.driving
        self.driving = True
        self.word = word
        if self.trace is not None:
            self._note(t, [f"D={word:02X}"])
        driven = self._driven_levels.get(word)
        if driven is None:
            high = self._high
            driven = self._driven_levels[word] = tuple(high if word >> bit & 1 else 0 for bit in range(8))
        self._set_data(driven)
        self._control_group(t, self._wired_data, drives=True if begins else None)

    def release(self, t: int) -> None:
        """D let go."""
        if not self.driving:
            return
        self.driving = False
        if self.trace is not None:
            self._note(t, ["D=Z"])
        self._chip_mask = 0
        self._set_data(self._idle_levels)
        self._control_group(t, self._wired_data, drives=False)

    def _set_data(self, shown: tuple[int | None, ...]) -> None:
        levels = self.levels
        for pin, level in zip(self._data_pins, shown, strict=True):
            levels[pin] = level
        levels[0] = None  # where data lines without a pin went

    def set_high(self, t: int, driven: bool) -> None:
        """What H means: driven, or released to the pull-up."""
        self.high_driven = driven
        self._follow(t)

    def set_bias(self, t: int, positions: Iterable[int], how: int) -> None:
        """The weak pull of some positions."""
        for position in positions:
            self._bias[position] = how
        self._follow(t)

    def all_low(self, t: int) -> None:
        """Every line low, D too, every pull off: how the rig rests. VCC must be off."""
        self.high_driven = False
        self._bias = [int(Bias.OFF)] * (POSITIONS + 1)
        self._state = [LOW] * (POSITIONS + 1)
        self._let_go.clear()
        self.shown = 0
        begins = not self.driving
        self.driving, self.word = True, 0
        if self.trace is not None:
            self._note(t, ["all L"])
        self._retune()
        self._control_group(t, self._refresh(_ALL), drives=True if begins else None)

    def reset_pulls(self, t: int) -> None:
        """What the hardware does at reset: every line goes to its pull, D is let go, raised switches open."""
        self._state = [RELEASED] * (POSITIONS + 1)
        self._let_go = set(self._address)
        self.shown = 0
        self.high_driven = False
        self._bias = [int(Bias.OFF)] * (POSITIONS + 1)
        ends = self.driving
        self.driving = False
        if self.trace is not None:
            self._note(t, ["reset"])
        self._retune()
        self._control_group(t, self._refresh(_ALL), drives=False if ends else None)
        self.set_raised(t, ())

    # ---- what the rig sees ----------------------------------------------------------------------------------------

    def sample(self, t: int) -> int:
        """D as the rig reads it at `t`, and means it."""
        if self.chip is not None:
            for watcher in self.watchers:
                watcher.sampled(t)
        return self.data(t)

    def data(self, t: int) -> int:
        """D as the rig reads it at `t`."""
        if self.driving:
            return self.word
        chip = self.chip
        if chip is None or not self.alive:
            return self._idle
        mask, bits = chip.drive(t)
        if self._aligned:
            if mask == 0xFF:
                return bits
            return bits & mask | self._idle & ~mask & 0xFF
        self._chip_mask, self._chip_bits = mask, bits
        return sum(self.line(t, position) << bit for bit, position in enumerate(DATA_POSITIONS))

    def line(self, t: int, position: int) -> int:
        """A line read back: 1 from 2.0 V up; what floats reads as 0."""
        return int((self._resolve(position) or 0) >= VIH_MV)

    def mv(self, t: int, position: int) -> int:
        """What truly stands at a position, ramps included, in millivolts."""
        ramp = self._raised.get(position)
        if ramp is not None:
            return max(0, ramp.level(t))
        if position in self.vcc_at:
            return self.socket_vcc_mv(t)
        return max(0, self._resolve(position) or 0)
