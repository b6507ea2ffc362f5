"""The socket of the virtual rig: lines, pulls and supplies as the rig moves them, and what it can see there.

What stands at a chip's pins goes to the chip first and then to the watchers, once for each group of edges. A ramp is
two groups: its begin, which names the pin with the level it still has, and its end.

A chip whose own VCC pin is not where VCC is, or whose GND pin is not on ground, is a net of protection diodes: it
drives nothing, holds weakly pulled lines down, and pulls VCC down when its VCC pin is held low (all `from memory`).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from pulsewright.virtual.board import DATA_POSITIONS, GND_POSITION, POSITIONS, VCC_POSITIONS
from pulsewright.virtual.contacts import HIGH, LOW, NEVER, RELEASED, VIH_MV, Contacts
from pulsewright.virtual.interface import ChipModel, Watcher
from pulsewright.virtual.rails import Ramp
from pulsewright.wire.tables import Bias, Range

THROUGH_DIODES_UA = 2_000  # what a chip fed through its input diodes takes: from memory
_LEVEL_TEXT = ("L", "H", "Z")
_MEMO_LIMIT = 4_096
_ALL = range(1, POSITIONS + 1)
_Move = tuple[tuple[tuple[int, int], ...], tuple[int, ...]]


class Socket(Contacts):
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
        self.next_end = NEVER  # tick at which the next ramp ends
        self._closed: set[int] = set()  # positions whose raised switch is closed
        self._sag = False
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

    # ---- supplies -------------------------------------------------------------------------------------------------

    def set_rail(self, t: int, mv: int) -> None:
        """The VCC rail to another level; the socket follows when it is connected."""
        self.rail.move(t, mv, self.board.vcc_settle_ticks)
        if self.range != Range.OFF:
            self._ramp_vcc(t, mv, self.board.vcc_settle_ticks)

    def set_range(self, t: int, which: int, positions: Iterable[int]) -> None:
        """VCC to the socket at these positions: off, through the probe resistor, full."""
        board = self.board
        before, self.range = self.range, which
        if which == Range.OFF:
            self._ramp_vcc(t, 0, board.vcc_off_ticks)
            return
        self.vcc_at = frozenset(positions)
        for position in self.vcc_at:
            if position not in self._bit_of:
                self._state[position] = RELEASED
        self._look_at_wiring()
        if before == Range.OFF:
            self._ramp_vcc(t, self.rail.to_mv, max(board.vcc_on_ticks, self.rail.end - t))
        else:
            self._note_vcc(t, self.vcc.to_mv)
            self._follow(t)

    def _note_vcc(self, t: int, mv: int) -> None:
        if self.trace is not None:
            self._note(t, [f"VCC {('off', 'probe', 'full')[self.range]} {mv}"])

    def _ramp_vcc(self, t: int, mv: int, ticks: int) -> None:
        mv = min(mv, self._clamp_mv())
        self.vcc.move(t, mv, ticks)
        self._note_vcc(t, mv)
        self._plan()
        pins = [pin for position in self.vcc_at if (pin := self._pin_at[position])]
        self._control_group(t, pins)

    def set_raised_rail(self, t: int, mv: int) -> None:
        """The raised rail to another level, every switch open."""
        self.raised_rail.move(t, mv + (self.board.raised_offset_mv if mv else 0), self.board.raised_settle_ticks)
        if self.trace is not None:
            self._note(t, [f"rail {mv}"])

    def set_raised(self, t: int, positions: Iterable[int]) -> None:
        """Exactly these raised switches closed; the others open."""
        wanted = set(positions)
        if wanted == self._closed:
            return
        board, touched, notes = self.board, [], []
        for position in sorted(self._closed - wanted):
            ramp = self._raised[position]
            now = ramp.level(t)
            self._closed.discard(position)
            ramp.move(t, self._plain(position) or 0, board.fall_ticks(position, now))
            touched.append(position)
            notes.append(f"{position} falls")
        for position in sorted(wanted - self._closed):
            ramp = self._raised.get(position) or Ramp(self._resolve(position) or 0)
            self._raised[position] = ramp
            self._closed.add(position)
            to_mv = self._raised_mv(t, position)
            ramp.move(t, to_mv, board.rise_ticks(to_mv))
            touched.append(position)
            notes.append(f"{position} rises {to_mv}")
        if self.trace is not None:
            self._note(t, notes)
        self._plan()
        self._retune_quick()
        self._control_group(t, [pin for position in touched if (pin := self._pin_at[position])])

    def _raised_mv(self, t: int, position: int) -> int:
        """The level of a closed raised switch at its load, the rail sagging where the load is above its limit."""
        rail = self.raised_rail.level(t)
        if self._sag:
            load = max(1, self._load_of_rail(t))
            rail = rail * min(load, self.board.raised_limit_ua) // load
        drop = self.board.drop_mv(position, self.load_ua(t, position))
        return max(rail - drop, self._plain(position) or 0)

    def _load_of_rail(self, t: int) -> int:
        return sum(self.load_ua(t, position) for position in self._closed)

    def weigh(self, t: int, *, always: bool = False) -> None:
        """After an edge with a raised level on: does the rail's limit hold it up? `always`: the drops are seen anew."""
        sags = self._load_of_rail(t) > self.board.raised_limit_ua
        if not (sags or self._sag or always):
            return
        self._sag = sags
        touched = []
        for position in self._closed:
            ramp, mv = self._raised[position], self._raised_mv(t, position)
            if t >= ramp.end and mv != ramp.to_mv:
                ramp.move(t, mv, 0)
                touched.append(position)
        if touched:
            if self.trace is not None:
                self._note(t, [f"{position} sags {self._raised[position].to_mv}" for position in touched])
            self._control_group(t, self._refresh(touched))

    def rail_mv(self, t: int) -> int:
        """The raised rail as its converter sees it."""
        level = self.raised_rail.level(t)
        if self._sag and self._closed:
            load = max(1, self._load_of_rail(t))
            level = level * min(load, self.board.raised_limit_ua) // load
        return level

    # ---- ramps' ends ----------------------------------------------------------------------------------------------

    def _plan(self) -> None:
        ends = [ramp.end for ramp in self._raised.values() if ramp.end > ramp.begin]
        if self.vcc.end > self.vcc.begin:
            ends.append(self.vcc.end)
        self.next_end = min(ends, default=NEVER)

    def end_ramps(self, t: int) -> None:
        """The groups of every ramp that ends by `t`."""
        while self.next_end <= t:
            at = self.next_end
            if self.vcc.end == at > self.vcc.begin:
                self.vcc.begin = at
                self._vcc_stands(at)
            ended = [position for position, ramp in self._raised.items() if ramp.end == at > ramp.begin]
            for position in ended:
                self._raised[position].begin = at
                self.peak_mv[position] = max(self.peak_mv[position], self._raised[position].to_mv)
                if position not in self._closed:
                    del self._raised[position]
            self._plan()
            if ended:
                if self.trace is not None:
                    self._note(at, [f"{position} stands {self._resolve(position) or 0}" for position in sorted(ended)])
                self._retune_quick()
                self._control_group(at, self._refresh(ended))
                if self._closed:
                    self.weigh(at, always=True)

    def _vcc_stands(self, t: int) -> None:
        """VCC has arrived; what hangs on it comes after it when it rose, and before it when it fell."""
        rose = self.vcc.to_mv > self.vcc_mv
        if self.trace is not None:
            self._note(t, [f"VCC stands {self.vcc.to_mv}"])
        self.vcc_mv = self.vcc.to_mv
        own = sorted(self.vcc_at)
        rest = [position for position in _ALL if position not in self.vcc_at]
        self._retune()
        for position in own:
            self.peak_mv[position] = max(self.peak_mv[position], self.vcc_mv)
        for positions in (own, rest) if rose else (rest, own):
            if changed := self._refresh(positions):
                self._control_group(t, changed)
        if self.range == Range.OFF:
            self.vcc_at = frozenset()
            self._look_at_wiring()

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

    def socket_vcc_mv(self, t: int) -> int:
        """VCC behind its range switch: less what the load loses in the probe resistor, or past the limit."""
        level = self.vcc.level(t)
        if self.range == Range.OFF:
            return level
        if self.chip is not None and self._miswired:
            load = 0 if self._clamp_mv() != NEVER else THROUGH_DIODES_UA
        else:
            load = sum(self.load_ua(t, position) for position in self.vcc_at)
        if load > self.board.vcc_limit_ua:
            level = level * self.board.vcc_limit_ua // load
        return max(0, level - load * self.board.probe_ohm // 1_000) if self.range == Range.PROBE else level

    def load_ua(self, t: int, position: int) -> int:
        """What the chip takes at a position, microamperes; the limiter's share at most where there is one."""
        pin = self._pin_at[position]
        if not pin or self.chip is None or self._miswired:
            return 0
        load = self.chip.draw_ua(t, pin)
        return min(load, self.board.limiter_ua) if position == self.board.limiter_position else load


def vcc_positions(mask: int) -> tuple[int, ...]:
    """The positions of a mask of VCC switches."""
    return tuple(position for number, position in enumerate(VCC_POSITIONS) if mask >> number & 1)
