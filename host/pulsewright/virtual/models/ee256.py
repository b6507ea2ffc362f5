"""A 28C256 of one of three makers: 32K x 8 EEPROM, written by pages of 64 bytes; numbers in `ee256_limits`.

The sheets leave open, and this model makes up ("invented"):
- a byte whose page is not that of the window's first byte is lost;
- the window closes at the longest load time to the tick, counted from the fall of the last load, but never in a write;
- until the window closes a read shows the last byte, as if all were done, but for a maker that lets it be polled then;
- the write cycle takes `cycle_percent` of its longest time from the rise of the last load, each time;
- VCC that falls in a write cycle leaves neither the old bytes nor the new ones, and the protection as it was;
- WE low with OE low drives nothing.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pulsewright.virtual.faults import ChipFaults
from pulsewright.virtual.models.bus_written import NEVER, BusWritten
from pulsewright.virtual.models.ee256_limits import (
    A9,
    CHIP_ERASE,
    DISABLE,
    ENABLE,
    ERASE,
    HARD_ERASE,
    MAKERS,
    OE,
    PAGE,
    SIZE,
    USER,
    VCC,
    VH,
    Maker,
    limits_of,
)

_USER_BIT = SIZE  # set in the address of a load that goes to the user bytes
_UNLOCKS = (((0x5555, 0xAA), (0x2AAA, 0x55)), ((0x555, 0xAA), (0x2AA, 0x55)))  # how flash commands begin


class Ee256(BusWritten):
    """The model. A window of loads, then a write cycle; cells change when the cycle is over."""

    protects = True

    def __init__(self, maker: Maker) -> None:
        super().__init__("28c256", limits_of(maker), SIZE, (0xFF, 0xFF), sense_mv=maker.sense)
        self._maker = maker
        self.cycle_percent = 100  # of the longest write cycle
        self.protected = False  # as they leave the factory [S4b]
        self.user = bytearray(b"\xff" * USER[1])  # content when new: invented
        self.probe_wrote: list[str] = []
        self.write_cycles = 0
        self._loads: list[tuple[int, int]] = []
        self._risen = 0  # the end of the last load
        self._will: dict[int, int] = {}  # what the write cycle stores
        self._protect_next = False

    def take_faults(self, faults: ChipFaults) -> None:
        super().take_faults(faults)
        self.protected = self.protected or faults.protected

    def state(self) -> dict[str, object]:
        return {
            **super().state(),
            "protected": self.protected,
            "user": self.user.hex(),
            "probe_wrote": list(self.probe_wrote),
            "write_cycles": self.write_cycles,
        }

    def restore(self, state: Mapping[str, Any]) -> None:
        super().restore(state)
        self.protected = bool(state.get("protected", False))
        self.user = bytearray.fromhex(state.get("user", "ff" * USER[1]))
        self.probe_wrote = [str(text) for text in state.get("probe_wrote", [])]
        self.write_cycles = int(state.get("write_cycles", 0))

    def draw_ua(self, t: int, pin: int) -> int:
        if pin != VCC or not self._vcc:
            return 0
        return self._maker.icc if self._ce_low or self.is_busy(t) else self._maker.standby

    # ---- reads ----

    def word_at(self, at: int) -> int:
        if self._opens_user(at):
            return self.user[at - USER[0]]
        return super().word_at(at)

    def status(self, at: int) -> int | None:
        if not self._loads:
            return None
        last_at, last = self._loads[-1]
        if not self._polled():
            return last
        last ^= 0x80 if at == last_at % SIZE else 0
        return last & 0x80 | self._toggle | ~last & 0x3F

    def _polled(self) -> bool:
        return self._busy or (self._maker.polls_at_once and bool(self._loads))

    def _opens_user(self, at: int) -> bool:
        """A maker whose A9 stands no such level has no such bytes: there it is not raised but past its maximum."""
        return VH[0] <= self._raised.get(A9, 0) <= VH[1] and USER[0] <= at < USER[0] + USER[1]

    # ---- loads, and what they come to ----

    def written(self, t: int, began: int, at: int, word: int) -> None:
        if OE in self._raised:
            self._hard_erase(t - began)
            return
        if self._opens_user(at):
            at |= _USER_BIT
        self._loads.append((at, word))
        self._risen = t
        self._due = max(t, began + self._maker.load[1] + 1)

    def _end(self, t: int, *, whole: bool) -> None:
        super()._end(t, whole=whole)
        if self._loads and self._due == NEVER:
            self._due = t  # the window would have closed meanwhile

    def due(self, t: int) -> None:
        if self._busy:
            self._finish()
        elif not self._writing:
            self._start(t)

    def _hard_erase(self, ticks: int) -> None:
        """OE far above VCC in a write: the chip is erased when it lasts; Atmel only, the others are damaged by then."""
        if ticks >= HARD_ERASE:
            self._stress("a hardware erase: OE at 12 V in a write")
            self._blank()
        else:
            self._stress("OE at 12 V in a write, too short for a hardware erase")

    def _start(self, t: int) -> None:
        """The window closes: what was loaded is understood, and the write cycle begins."""
        loads = tuple(self._loads)
        self._busy = True
        self._protect_next, cycle = self.protected, self._maker.cycle
        if self._maker.erases and loads[:6] == ERASE:
            self._will = dict.fromkeys(range(SIZE), 0xFF)
            cycle = CHIP_ERASE
        elif loads[:6] == DISABLE:
            self._protect_next = False
            self._will = self._page(loads[6:])
        elif loads[:3] == ENABLE:
            self._protect_next = True
            self._will = self._page(loads[3:])
        else:
            self._will = {} if self.protected else self._page(loads)
            self._note_probe(loads)
        cycle = cycle * self.cycle_percent // 100
        if self._slow_percent and any(self._is_slow(at // PAGE) for at in self._will):
            cycle *= self._slow_pulses
        self._due = max(t + 1, self._risen + cycle)

    def _page(self, loads: tuple[tuple[int, int], ...]) -> dict[int, int]:
        """The bytes of the first one's page, each as it was loaded last."""
        if not loads:
            return {}
        page = loads[0][0] // PAGE
        if any(at // PAGE != page for at, _ in loads) and not self._is_probe(loads):
            self._stress("a byte of another page was loaded with a page")
        return {at: word for at, word in loads if at // PAGE == page}

    def _finish(self) -> None:
        self._busy = False
        self._loads.clear()
        self.protected = self._protect_next
        self.write_cycles += 1
        for at, word in self._will.items():
            self._keep(at, word)
        self._will = {}

    def _keep(self, at: int, word: int) -> None:
        if at < SIZE:
            self._store(at, word)
            return
        at -= _USER_BIT
        user = at - USER[0]
        if self.user[user] != word:
            self.probe_wrote.append(f"user byte {at:04X}: {self.user[user]:02X} is now {word:02X}")
        self.user[user] = word

    def cut(self) -> None:
        if self._busy:
            self._stress("VCC fell in a write cycle")
            for at, word in self._will.items():
                self._keep(at, word ^ 0x5A)
        self._loads.clear()
        self._will = {}

    # ---- what a question for an ID did ----

    def _is_probe(self, loads: tuple[tuple[int, int], ...]) -> bool:
        return loads[:2] in _UNLOCKS

    def _note_probe(self, loads: tuple[tuple[int, int], ...]) -> None:
        """Flash commands are plain bytes to this part: which cells did they change?"""
        if self._is_probe(loads):
            self._note_writes()

    def _note_writes(self) -> None:
        for at, word in self._will.items():
            if at < SIZE and self.cells[at] != word:
                self.probe_wrote.append(f"{at:04X}: {self.cells[at]:02X} is now {word:02X}")

    def unheard(self, at: int, word: int) -> None:
        """A command sent slowly: its first byte is being stored as such when the second comes."""
        before = tuple(self._loads)
        if len(before) == 1 and (*before, (at, word)) in _UNLOCKS:
            self._note_writes()
        super().unheard(at, word)


def make_chip(maker: str = "") -> Ee256:
    """A fresh, erased, unprotected chip of a maker in `MAKERS`; Atmel's when none is named."""
    return Ee256(MAKERS[maker or "atmel"])
