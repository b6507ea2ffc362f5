"""The socket of the virtual rig: what stands at each position, from lines, pulls, supplies and the chip itself.

Strong before weak: a raised level, then VCC, then a line that is low or driven, then the chip's output, then the bias,
then the pull-up from the switched copy of VCC. What stands at a chip's pins goes to the chip first and then to the
watchers, once for each group of edges. A ramp is two groups: its begin, which names the pin with the level it still has,
and its end.

A chip whose own VCC pin is not where VCC is, or whose GND pin is not on ground, is a net of protection diodes: it drives
nothing, holds weakly pulled lines down, and pulls VCC down when its VCC pin is held low (all `from memory`).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from pulsewright.virtual.board import DATA_POSITIONS, GND_POSITION, POSITIONS, POWER_POSITIONS, VCC_POSITIONS, Board
from pulsewright.virtual.interface import ChipModel, Watcher
from pulsewright.virtual.rails import Ramp
from pulsewright.wire.tables import Bias, Level, Range

LOW, HIGH, RELEASED = int(Level.LOW), int(Level.HIGH), int(Level.RELEASED)
VIH_MV = 2_000
POWERED_MV = 3_000  # a chip's outputs work from here up
STRAY_HIGH_MV = 1_700  # a line driven high with VCC off lifts its position so far [sim]
THROUGH_DIODES_UA = 2_000  # what a chip fed through its input diodes takes: from memory
NEVER = 1 << 62
_LEVEL_TEXT = ("L", "H", "Z")
_MEMO_LIMIT = 4_096


class Socket:
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
        self.chip = chip if wiring else None
        self.wiring = dict(wiring) if chip is not None else {}
        self.watchers = tuple(watchers)
        self.board = Board()
        self.trace: list[tuple[int, str]] | None = None
        self.fights = 0  # groups in which rig and chip drove the same data pin
        self.peak_mv = [0] * (POSITIONS + 1)  # highest level of each position that was raised or a supply
        self._gnd = frozenset(gnd_positions)
        self._pin_at = [self.wiring.get(position, 0) for position in range(POSITIONS + 1)]
        self._position_of = {pin: position for position, pin in self.wiring.items()}
        size = 1 + max([*self.wiring.values(), self.chip.pins if self.chip else 0, 0])
        self.levels: list[int | None] = [None] * size
        self._state = [LOW] * (POSITIONS + 1)  # of lines that are no data line and no address line
        self._bias = [int(Bias.OFF)] * (POSITIONS + 1)
        self.high_driven = False
        self.driving = True  # D, with `word`: at rest every line is low
        self.word = 0
        self.range = int(Range.OFF)
        self.rail = Ramp()  # the VCC rail
        self.vcc = Ramp()  # VCC at the socket
        self.vcc_mv = 0  # the same, as the pins have it: moves at the end of a ramp
        self.vcc_at: frozenset[int] = frozenset()
        self.raised_rail = Ramp()
        self._raised: dict[int, Ramp] = {}
        self._closed: set[int] = set()  # positions whose raised switch is closed
        self._sag = False
        self.next_end = NEVER  # tick at which the next ramp ends
        self._address: tuple[int, ...] = ()
        self._bit_of: dict[int, int] = {}
        self.shown = 0  # address bits whose line is high
        self._let_go: set[int] = set()  # address positions that `lines` released
        self._moves: dict[int, tuple[tuple[tuple[int, int], ...], tuple[int, ...]]] = {}
        self._chip_mask = 0
        self._chip_bits = 0
        self.alive = False
        self._miswired = False
        self._data_pins = tuple(self._pin_at[position] for position in DATA_POSITIONS)
        self._wired_data = tuple(pin for pin in self._data_pins if pin)
        outputs = self.chip.outputs if self.chip else ()
        self._output_bit = {pin: bit for bit, pin in enumerate(outputs)}
        self._aligned = tuple(outputs) == self._data_pins
        self._words: dict[int, tuple[int | None, ...]] = {}
        self._high: int | None = None
        self._idle = 0
        self._quick = False
        self._retune()
        for position in range(1, POSITIONS + 1):
            if pin := self._pin_at[position]:
                self.levels[pin] = self._resolve(position)

    # ---- what the program header and the permit say ---------------------------------------------------------------

    def set_address_lines(self, positions: Sequence[int]) -> None:
        """The address bus of the program about to run: position of each bit from bit 0 up. Nothing moves."""
        states = [self._line_state(position) for position in positions]
        for position, bit in self._bit_of.items():
            self._state[position] = RELEASED if position in self._let_go else HIGH if self.shown >> bit & 1 else LOW
        self._address = tuple(positions)
        self._bit_of = {position: bit for bit, position in enumerate(positions)}
        self._let_go = {position for position, state in zip(positions, states, strict=True) if state == RELEASED}
        self.shown = sum(1 << bit for bit, state in enumerate(states) if state == HIGH)
        self._moves.clear()
        self._retune()

    def _line_state(self, position: int) -> int:
        bit = self._bit_of.get(position)
        if bit is None:
            return self._state[position]
        return RELEASED if position in self._let_go else self.shown >> bit & 1

    # ---- lines, address, data -------------------------------------------------------------------------------------

    def set_lines(self, t: int, lines: Iterable[tuple[int, int]]) -> None:
        """Lines (position, level) as one group; a data line can only be let go."""
        touched, notes = [], []
        for position, level in lines:
            if self._line_state(position) == level:
                continue
            touched.append(position)
            notes.append(position)
            bit = self._bit_of.get(position)
            if bit is None:
                self._state[position] = level
                continue
            self._let_go.discard(position)
            self.shown &= ~(1 << bit)
            if level == HIGH:
                self.shown |= 1 << bit
            elif level == RELEASED:
                self._let_go.add(position)
        if not touched:
            return
        if self.trace is not None:
            self._note(t, [f"{position}{_LEVEL_TEXT[self._line_state(position)]}" for position in touched])
        self._retune_quick()
        self._control_group(t, self._refresh(touched))

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
            self._control_group(t, [pin])

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
            lines = [(p, b) for p, b in self._bit_of.items() if moved >> b & 1]
            self._note(t, [f"{position}{'H' if address >> bit & 1 else 'L'}" for position, bit in sorted(lines)])
        if not self._quick:
            self._control_group(t, self._refresh([self._address[b] for b in range(len(self._address)) if moved >> b & 1]))
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

    def _move_of(self, moved: int) -> tuple[tuple[tuple[int, int], ...], tuple[int, ...]]:
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
        levels = self.levels
        values = self._words.get(word)
        if values is None:
            high = self._high
            values = self._words[word] = tuple(high if word >> bit & 1 else 0 for bit in range(8))
        for pin, level in zip(self._data_pins, values, strict=True):
            levels[pin] = level
        levels[0] = None
        self._control_group(t, self._wired_data, drives=True if begins else None)

    def release(self, t: int) -> None:
        """D let go."""
        if not self.driving:
            return
        self.driving = False
        if self.trace is not None:
            self._note(t, ["D=Z"])
        for position in DATA_POSITIONS:
            if pin := self._pin_at[position]:
                self.levels[pin] = self._resolve(position)
        self._control_group(t, self._wired_data, drives=False)

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
        self._control_group(t, self._refresh(range(1, POSITIONS + 1)), drives=True if begins else None)

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
        self._control_group(t, self._refresh(range(1, POSITIONS + 1)), drives=False if ends else None)
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
            ramp.move(t, self._resolve(position, bare=True) or 0, board.fall_ticks(position, now))
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
        return max(rail - drop, self._resolve(position, bare=True) or 0)

    def _load_of_rail(self, t: int) -> int:
        return sum(self.load_ua(t, position) for position in self._closed)

    def weigh(self, t: int) -> None:
        """After an edge with a raised level on: does the rail's limit hold it up?"""
        sags = self._load_of_rail(t) > self.board.raised_limit_ua
        if not sags and not self._sag:
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
                    self.weigh(at)

    def _vcc_stands(self, t: int) -> None:
        """VCC has arrived; what hangs on it comes after it when it rose, and before it when it fell."""
        rose = self.vcc.to_mv > self.vcc_mv
        if self.trace is not None:
            self._note(t, [f"VCC stands {self.vcc.to_mv}"])
        self.vcc_mv = self.vcc.to_mv
        own = sorted(self.vcc_at)
        rest = [position for position in range(1, POSITIONS + 1) if position not in self.vcc_at]
        self._retune()
        for position in own:
            self.peak_mv[position] = max(self.peak_mv[position], self.vcc_mv)
        for positions in (own, rest) if rose else (rest, own):
            if changed := self._refresh(positions):
                self._control_group(t, changed)
        if self.range == Range.OFF:
            self.vcc_at = frozenset()
            self._look_at_wiring()

    # ---- what stands where ----------------------------------------------------------------------------------------

    def _resolve(self, position: int, *, bare: bool = False) -> int | None:
        """Millivolts at a position, None where nothing holds it; `bare` leaves a raised level out."""
        if not bare:
            ramp = self._raised.get(position)
            if ramp is not None:
                return ramp.from_mv if ramp.begin < ramp.end else ramp.to_mv
        if position in self._gnd:
            return 0
        if position in self.vcc_at:
            return self._vcc_level(position)
        bit = self._data_bit(position)
        if bit is not None and self.driving:
            return self._high if self.word >> bit & 1 else 0
        state = RELEASED if bit is not None else self._line_state(position)
        if state == LOW:
            return 0
        if state == HIGH:
            return self._high
        return self._weak(position)

    def _weak(self, position: int) -> int | None:
        """The level of a position that the rig lets go."""
        pin = self._pin_at[position]
        output = self._output_bit.get(pin) if pin else None
        if output is not None and self.alive and self._chip_mask >> output & 1:
            return self.vcc_mv if self._chip_bits >> output & 1 else 0
        if self._bias[position] == Bias.DOWN:
            return 0
        if self._bias[position] == Bias.UP or self.range == Range.FULL:
            if pin and self._miswired and self.vcc_mv >= VIH_MV:
                return 0
            return self.vcc_mv if self.range != Range.OFF else None
        return None

    def _vcc_level(self, position: int) -> int:
        aside = 0 if position in POWER_POSITIONS else self.board.vcc_aside_drop_mv
        return max(0, self.vcc_mv - aside)

    @staticmethod
    def _data_bit(position: int) -> int | None:
        return DATA_POSITIONS.index(position) if position in DATA_POSITIONS else None

    def _look_at_wiring(self) -> None:
        """Is the chip's own VCC pin where VCC is, and its GND on ground?"""
        chip = self.chip
        if chip is None:
            return
        limits = chip.limits
        at = self._position_of.get(limits.vcc_pin)
        grounds = [self._position_of.get(pin) for pin in limits.gnd_pins]
        self._miswired = bool(self.vcc_at) and (at not in self.vcc_at or any(ground not in self._gnd for ground in grounds))

    def _clamp_mv(self) -> int:
        """How far a misplaced chip lets VCC rise."""
        chip = self.chip
        if chip is None or not self._miswired or not any(self._pin_at[position] for position in self.vcc_at):
            return NEVER
        at = self._position_of.get(chip.limits.vcc_pin)
        if at is None or at in self.vcc_at:
            return NEVER
        held_low = at in self._gnd or (self._data_bit(at) is None and self._line_state(at) == LOW)
        return self.board.diode_mv if held_low else NEVER

    def _retune(self) -> None:
        """What follows from range, VCC, bias and the meaning of H, kept at hand for the short ways."""
        if self.range == Range.FULL or (self.range == Range.PROBE and self.high_driven):
            self._high = self.vcc_mv
        else:
            self._high = STRAY_HIGH_MV if self.high_driven else None
        self._words.clear()
        chip = self.chip
        self.alive = chip is not None and not self._miswired and bool(self.vcc_at) and self.vcc_mv >= POWERED_MV
        if not self.alive:
            self._chip_mask = 0
        self._idle = 0
        for bit, position in enumerate(DATA_POSITIONS):
            up = self._bias[position] == Bias.UP or (self._bias[position] == Bias.OFF and self.range == Range.FULL)
            if up and not (self._miswired and self._pin_at[position]) and self.vcc_mv >= VIH_MV:
                self._idle |= 1 << bit
        self._retune_quick()

    def _retune_quick(self) -> None:
        """Whether the address lines are plain lines now: none raised, let go or under a supply."""
        special = self._raised.keys() | self._let_go | self.vcc_at
        self._quick = not any(position in special for position in self._address)

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
        if changed := self._refresh(range(1, POSITIONS + 1)):
            self._control_group(t, changed)

    # ---- to the chip and the watchers -----------------------------------------------------------------------------

    def _control_group(self, t: int, changed: Sequence[int], drives: bool | None = None) -> None:
        """One group: the chip sees it, its outputs follow, the watchers see both."""
        chip = self.chip
        if chip is None:
            return
        fight: tuple[int, ...] | None = None
        chip.pins_changed(t, self.levels)
        if self.alive:
            mask, bits = chip.drive(t)
            if self.driving:
                self._chip_mask = mask
                if mask:
                    fight = self._fight(mask, bits)
            elif mask or self._chip_mask:
                self._chip_mask, self._chip_bits = mask, bits
                changed = [*changed, *(pin for pin in self._refresh(DATA_POSITIONS) if pin not in changed)]
        for watcher in self.watchers:
            if drives is not None:
                watcher.rig_drives(t, drives)
            watcher.edges(t, self.levels, changed, fight)

    def _fight(self, mask: int, bits: int) -> tuple[int, ...] | None:
        """Data pins that rig and chip drive both, if any."""
        pins = tuple(pin for pin, bit in self._output_bit.items() if mask >> bit & 1 and pin in self._wired_data)
        if not pins:
            return None
        self.fights += 1
        return pins

    def _note(self, t: int, notes: list[str]) -> None:
        if self.trace is not None and notes:
            self.trace.append((t, " ".join(notes)))

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
        """VCC behind its range switch, in millivolts: less what the load loses in the probe resistor."""
        level = self.vcc.level(t)
        if self.range != Range.PROBE:
            return level
        if self.chip is not None and self._miswired:
            load = 0 if self._clamp_mv() != NEVER else THROUGH_DIODES_UA
        else:
            load = sum(self.load_ua(t, position) for position in self.vcc_at)
        return max(0, level - load * self.board.probe_ohm // 1_000)

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
