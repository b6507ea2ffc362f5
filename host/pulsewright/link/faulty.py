"""A line that harms what passes over it, at chosen bytes: for tests, and for trying by hand what a bad cable does."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

from pulsewright.link.transport import Timing, Transport

Way = Literal["to rig", "from rig"]
Kind = Literal["drop", "flip", "zero", "double", "stall", "cut"]


@dataclass(frozen=True)
class Harm:
    """What happens to byte number `at` (from 0) of one direction, counted from the beginning of a part (`begin_part`).

    drop: it is lost. flip: the bits of `mask` are turned over. zero: it becomes a zero, the end of a frame; a zero
    becomes FF. double: it arrives twice. stall: it and all behind it wait for `for_us`. cut: it and all behind it are
    lost for good.
    """

    way: Way
    at: int
    kind: Kind
    mask: int = 0x10
    for_us: int = 0
    part: int = 0


class Faulty:
    """A transport around another one; the same harms always do the same.

    `passed` counts the bytes of each way, `struck` has the harms that met their byte.
    """

    def __init__(self, inner: Transport, harms: Iterable[Harm]) -> None:
        self.name = inner.name
        self.passed: dict[Way, int] = {"to rig": 0, "from rig": 0}
        self._inner = inner
        self.struck: list[Harm] = []
        self._harms = {(harm.part, harm.way, harm.at): harm for harm in harms}
        self._part = 0
        self._begun: dict[Way, int] = {"to rig": 0, "from rig": 0}
        self._cut: set[Way] = set()
        self._held: dict[Way, bytearray] = {"to rig": bytearray(), "from rig": bytearray()}
        self._until_us: dict[Way, int] = {"to rig": 0, "from rig": 0}

    def begin_part(self) -> None:
        """Harms of the next part count from here: what an earlier harm made longer moves none of them."""
        self._part += 1
        self._begun = dict(self.passed)

    def _through(self, way: Way, data: bytes) -> bytes:
        """What of `data` gets on now; the rest is lost or held."""
        now, begun = bytearray(), self.passed[way] - self._begun[way]
        free = way not in self._cut and self._inner.now_us() >= self._until_us[way]
        if free and not any((self._part, way, begun + at) in self._harms for at in range(len(data))):
            self.passed[way] += len(data)
            return data
        for byte in data:
            harm = self._harms.get((self._part, way, self.passed[way] - self._begun[way]))
            self.passed[way] += 1
            if harm is not None:
                self.struck.append(harm)
            if harm is not None and harm.kind == "cut":
                self._cut.add(way)
            if way in self._cut:
                continue
            if harm is not None and harm.kind == "stall":
                self._until_us[way] = self._inner.now_us() + harm.for_us
            copies = 1
            if harm is not None and harm.kind in ("drop", "double"):
                copies = 0 if harm.kind == "drop" else 2
            if harm is not None and harm.kind == "flip":
                byte ^= harm.mask
            if harm is not None and harm.kind == "zero":
                byte = 0 if byte else 0xFF
            target = self._held[way] if self._inner.now_us() < self._until_us[way] else now
            target += bytes([byte]) * copies
        return bytes(now)

    def _release(self, way: Way) -> bytes:
        if self._inner.now_us() < self._until_us[way]:
            return b""
        data = bytes(self._held[way])
        self._held[way].clear()
        return data

    def _release_to_rig(self) -> None:
        if data := self._release("to rig"):
            self._inner.write(data)

    def timing(self, board: str) -> Timing:
        """The inner line's."""
        return self._inner.timing(board)

    def now_us(self) -> int:
        """The inner line's clock."""
        return self._inner.now_us()

    def write(self, data: bytes) -> None:
        """Sends what the harms leave of it."""
        self._release_to_rig()
        if data := self._through("to rig", data):
            self._inner.write(data)

    def read(self, until_us: int) -> bytes:
        """What the harms leave of the next bytes, or b"" at the deadline."""
        while True:
            self._release_to_rig()
            if data := self._release("from rig"):
                return data
            now_us = self._inner.now_us()
            held = [self._until_us[way] for way in self._held if self._held[way] and self._until_us[way] > now_us]
            data = self._through("from rig", self._inner.read(min([until_us, *held])))
            if data:
                return data
            if self._inner.now_us() >= until_us:
                return b""

    def set_baud(self, baud: int) -> None:
        """The inner line's rate."""
        self._inner.set_baud(baud)

    def send_break(self) -> None:
        """A break, unless the way to the rig is cut."""
        if "to rig" not in self._cut:
            self._inner.send_break()

    def close(self) -> None:
        """Closes the inner line."""
        self._inner.close()
