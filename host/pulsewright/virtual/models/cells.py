"""What our models share: cells that pulses change, what can be wrong with them, damage, and what a bench file keeps.

A model builds on `CellChip` and adds what its pins mean. Words are bytes here. "Invented" marks what no sheet says and
a model must still do somehow.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pulsewright.errors import UsageMistake
from pulsewright.virtual.faults import ChipFaults
from pulsewright.virtual.interface import Limits

Weak = tuple[int, int, bool]  # mask, crossover VCC in mV, and which way: see ChipFaults.weak


class CellChip:
    """A chip of byte-wide cells whose erased state is FF and which pulses change from 1 to 0.

    `pulse_ticks` is what a good cell needs; a slow one needs it `slow_pulses` times, shorter pulses with the same data
    add up (invented).
    """

    protects = False  # whether the part has a software protection

    def __init__(self, name: str, limits: Limits, size: int, own_id: tuple[int, int], pulse_ticks: int) -> None:
        self.name = name
        self.pins = int(limits.package.rpartition("-")[2])
        self.outputs: tuple[int, ...] = limits.data_pins
        self.limits = limits
        self.cells = bytearray(b"\xff" * size)
        self.erased_word = 0xFF
        self.damaged = False
        self.stressed: list[str] = []
        self.program_pulses = 0
        self._id = own_id
        self._pulse_ticks = pulse_ticks
        self._stuck: dict[int, tuple[int, int]] = {}  # address -> mask, bits
        self._weak: dict[int, list[Weak]] = {}
        self._dead: frozenset[int] = frozenset()  # cells that never change
        self._slow_percent = 0
        self._slow_pulses = 1
        self._begun: dict[int, tuple[int, int]] = {}  # address -> ticks at the program level so far, with which data
        self._harmless: set[int | None] = {None}  # levels that no pin minds

    def take_faults(self, faults: ChipFaults) -> None:
        """Makes this a faulty chip: another ID, cells that are stuck, slow, weak or dead; protected at the start.

        UsageMistake for protection that the part does not have.
        """
        if faults.protected and not self.protects:
            raise UsageMistake(f"a {self.name} has no software protection", got="--fault protected")
        if faults.wrong_id is not None:
            self._id = (faults.wrong_id[0] & 0xFF, faults.wrong_id[1] & 0xFF)
        size = len(self.cells)
        self._stuck = {at % size: (mask & 0xFF, bits & 0xFF) for at, mask, bits in faults.stuck}
        self._weak = {}
        for at, mask, mv, slow_one in faults.weak:
            self._weak.setdefault(at % size, []).append((mask & 0xFF, mv, slow_one))
        self._dead = frozenset(at % size for at in faults.dead)
        self._slow_percent, self._slow_pulses = faults.slow_percent, faults.slow_pulses
        self._keep_stuck()

    def state(self) -> dict[str, object]:
        """What a bench file keeps besides the cells; a model with more of its own adds to it."""
        return {
            "damaged": self.damaged,
            "stressed": list(self.stressed),
            "program_pulses": self.program_pulses,
            "begun": {str(at): list(begun) for at, begun in self._begun.items()},
        }

    def restore(self, state: Mapping[str, Any]) -> None:
        """The reverse of `state`; keys that are missing are as on a fresh chip."""
        self.damaged = bool(state.get("damaged", False))
        self.stressed = [str(text) for text in state.get("stressed", [])]
        self.program_pulses = int(state.get("program_pulses", 0))
        self._begun = {int(at): (int(begun[0]), int(begun[1])) for at, begun in state.get("begun", {}).items()}

    # ---- cells ----

    def _seen(self, at: int, word: int, vcc_mv: int) -> int:
        """How a cell that holds `word` reads at this VCC."""
        for mask, crossover_mv, slow_one in self._weak.get(at, ()):
            if slow_one:
                if vcc_mv < crossover_mv:
                    word &= ~mask
            elif vcc_mv > crossover_mv:
                word |= mask
        if at in self._stuck:
            mask, bits = self._stuck[at]
            word = word & ~mask | bits
        return word

    def _pulsed(self, at: int, data: int, width: int) -> None:
        """A program pulse of `width` ticks with `data` at D: bits that are 0 in it become 0, given time enough."""
        self.program_pulses += 1
        if at in self._dead:
            return
        needed = self._pulse_ticks
        slow = self._is_slow(at)
        if width >= needed and not slow:
            self.cells[at] &= data
        else:
            ticks, begun = self._begun.get(at, (0, data))
            ticks = ticks + width if begun == data else width
            if ticks >= needed * (self._slow_pulses if slow else 1):
                self.cells[at] &= data
                self._begun.pop(at, None)
            else:
                self._begun[at] = (ticks, data)
        if at in self._stuck:
            self._keep_stuck()

    def _blank(self, *, slow_too: bool = True) -> None:
        """Every cell erased; with `slow_too` false, those that the fault "slow" struck keep what they hold."""
        self._begun.clear()
        cells = self.cells
        dead = {at: cells[at] for at in self._dead}
        if slow_too or self._slow_percent == 0:
            cells[:] = b"\xff" * len(cells)
        else:
            for at in range(len(cells)):
                if not self._is_slow(at):
                    cells[at] = 0xFF
        for at, word in dead.items():
            cells[at] = word
        self._keep_stuck()

    def _is_slow(self, address: int) -> bool:
        """Whether the fault "slow" struck this cell: the same ones each time, spread over the chip by a hash."""
        if self._slow_percent == 0:
            return False
        return ((address * 2_654_435_761 & 0xFFFFFFFF) >> 12) % 100 < self._slow_percent

    def _keep_stuck(self) -> None:
        for at, (mask, bits) in self._stuck.items():
            self.cells[at] = self.cells[at] & ~mask | bits

    # ---- what must not happen ----

    def _look_at_levels(self, levels: list[int | None]) -> None:
        """Some level was not seen before: is it past the absolute maximum of a plain pin? Raised pins are not in it."""
        most = self.limits.maxima_mv[0]
        for pin in range(1, self.pins + 1):
            level = levels[pin]
            if level is not None and level > most:
                self._destroy(pin, level)
            else:
                self._harmless.add(level)

    def _destroy(self, pin: int, level: int) -> None:
        if not self.damaged:
            self.damaged = True
            self.stressed.append(f"pin {pin} stood at {level} mV: the cells are lost")
        self.cells[:] = bytes(len(self.cells))

    def _stress(self, what: str) -> None:
        if what not in self.stressed:
            self.stressed.append(what)
