"""The supplies of the virtual socket: VCC with its ranges, the raised rail and its switches, their ramps and loads.

A ramp is two groups of edges: its begin, which names the pin with the level it still has, and its end.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from pulsewright.virtual.board import GND_POSITION, POSITIONS, VCC_POSITIONS
from pulsewright.virtual.contacts import NEVER, RELEASED, Contacts
from pulsewright.virtual.interface import ChipModel, Watcher
from pulsewright.virtual.rails import Ramp
from pulsewright.wire.tables import Range

THROUGH_DIODES_UA = 2_000  # what a chip fed through its input diodes takes: from memory
SAGS_TO_MV = 7_500  # a little above a chip's own 7 V: below, it takes what an input takes; invented
_ALL = range(1, POSITIONS + 1)


class Supplied(Contacts):
    """Contacts with supplies: the rig sets rails, ranges and switches, and time ends their ramps."""

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

    # ---- supplies -------------------------------------------------------------------------------------------------

    def set_rail(self, t: int, mv: int) -> None:
        """The VCC rail to another level; the socket follows when it is connected."""
        mv += self.board.vcc_offset_mv if mv else 0
        self.rail.move(t, mv, self.board.vcc_settle_ticks)
        if self.range != Range.OFF:
            self._ramp_vcc(t, mv, self.board.vcc_settle_ticks)

    def set_range(self, t: int, which: int, positions: Iterable[int]) -> None:
        """VCC to the socket at these positions: off, through the probe resistor, full."""
        board = self.board
        before, self.range = self.range, which
        if which == Range.OFF:
            self._ramp_vcc(t, 0, board.vcc_off_ticks + board.vcc_fall_more_ticks)
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
            rail = self._sagged(t, rail)
        if position == self.board.limiter_position and self._asked_ua(t, position) > self.board.limiter_ua * 10:
            return self._plain(position) or 0  # a short behind the limiter: nothing is left of the level
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
        return self._sagged(t, level) if self._sag and self._closed else level

    def _sagged(self, t: int, level: int) -> int:
        """The raised rail at its limit. It sinks no lower than to where a chip takes nothing more from the pin."""
        load = max(1, self._load_of_rail(t))
        return max(level * min(load, self.board.raised_limit_ua) // load, min(level, SAGS_TO_MV))

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

    def _asked_ua(self, t: int, position: int) -> int:
        pin = self._pin_at[position]
        return 0 if not pin or self.chip is None or self._miswired else self.chip.draw_ua(t, pin)

    def load_ua(self, t: int, position: int) -> int:
        """What the chip takes at a position, microamperes; the limiter's share at most where there is one."""
        load = self._asked_ua(t, position)
        return min(load, self.board.limiter_ua) if position == self.board.limiter_position else load


def vcc_positions(mask: int) -> tuple[int, ...]:
    """The positions of a mask of VCC switches."""
    return tuple(position for number, position in enumerate(VCC_POSITIONS) if mask >> number & 1)
