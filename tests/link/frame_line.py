"""A line that treats whole frames badly: out of order, repeated, held back; and that lets strange ones in."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, Literal

from pulsewright.link.faulty import Way
from pulsewright.link.transport import Transport
from tests.link.line_map import WAYS

Trick = Literal["swap", "again", "again later", "before", "lose"]


@dataclass(frozen=True)
class Wrong:
    """What happens to stretch `number` of a part and way; a stretch is what ends with a zero.

    swap: it comes behind the next one. again: twice. again later: once more, behind `later` further ones of its way,
    whatever part they are in. before: `data` comes before it. lose: it does not come, nor do the next `later` ones.
    """

    part: int
    way: Way
    number: int
    trick: Trick
    later: int = 0
    data: bytes = b""


@dataclass
class _Flow:
    """One way: the stretch that is coming, those held back, and how many have passed."""

    coming: bytearray = field(default_factory=bytearray)
    number: int = 0
    swapped: bytes = b""
    losing: int = 0
    waiting: list[tuple[int, bytes]] = field(default_factory=list)  # (stretches still to pass, bytes)


class FrameLine:
    """A transport around another one. `at_boundary` is called behind each stretch with its part, way and number."""

    def __init__(
        self, inner: Transport, wrongs: tuple[Wrong, ...] = (),
        at_boundary: Callable[[int, Way, int], None] = lambda part, way, number: None,
    ) -> None:
        self._inner = inner
        self._wrongs = {(wrong.part, wrong.way, wrong.number): wrong for wrong in wrongs}
        self._flow: dict[Way, _Flow] = {way: _Flow() for way in WAYS}
        self._part = 0
        self._at_boundary = at_boundary
        self.struck: list[Wrong] = []

    def __getattr__(self, name: str) -> Any:
        return getattr(self._inner, name)

    def begin_part(self) -> None:
        """The next part: its stretches count from 0."""
        self._part += 1
        for flow in self._flow.values():
            flow.number = 0

    def _pass(self, way: Way, data: bytes, on: Callable[[bytes], None]) -> None:
        """Takes bytes of a way and hands on what goes on now."""
        flow = self._flow[way]
        for byte in data:
            flow.coming.append(byte)
            if byte:
                continue
            stretch = bytes(flow.coming)
            flow.coming.clear()
            number, flow.number = flow.number, flow.number + 1
            for piece in self._become(way, number, stretch):
                on(piece)
            self._at_boundary(self._part, way, number)

    def _become(self, way: Way, number: int, stretch: bytes) -> list[bytes]:
        flow = self._flow[way]
        late = [data for left, data in flow.waiting if left <= 1]
        flow.waiting = [(left - 1, data) for left, data in flow.waiting if left > 1]
        swapped, flow.swapped = flow.swapped, b""
        wrong = self._wrongs.get((self._part, way, number))
        pieces = [stretch]
        if wrong is not None:
            self.struck.append(wrong)
            if wrong.trick == "swap":
                flow.swapped, pieces = stretch, []
            elif wrong.trick == "again":
                pieces = [stretch, stretch]
            elif wrong.trick == "again later":
                flow.waiting.append((wrong.later, stretch))
            elif wrong.trick == "before":
                pieces = [wrong.data, stretch]
            else:
                flow.losing = wrong.later + 1
        if flow.losing:
            flow.losing, pieces = flow.losing - 1, []
        return [piece for piece in (*pieces, swapped, *late) if piece]

    def write(self, data: bytes) -> None:
        """What goes on of it."""
        self._pass("to rig", data, self._inner.write)

    def read(self, until_us: int) -> bytes:
        """Whole stretches, as far as they go on; b"" at the deadline."""
        out = bytearray()
        while not out:
            data = self._inner.read(until_us)
            if not data:
                return b""
            self._pass("from rig", data, out.extend)
        return bytes(out)


class Resetting:
    """A line whose rig is reset: behind a stretch, or at a moment of the rig's clock."""

    def __init__(self, inner: Transport, reset: Callable[[], None], at_us: int) -> None:
        self._inner = inner
        self._reset: Callable[[], None] | None = reset
        self._at_us = at_us

    def __getattr__(self, name: str) -> Any:
        return getattr(self._inner, name)

    def read(self, until_us: int) -> bytes:
        """The inner line's bytes; the reset comes when its time has come."""
        if self._reset is None:
            return self._inner.read(until_us)
        data = self._inner.read(min(until_us, self._at_us))
        if self._inner.now_us() >= self._at_us:
            reset, self._reset = self._reset, None
            reset()
        return data


class Blackout:
    """A line that is away for a while: what comes in it, either way, is lost."""

    def __init__(self, inner: Transport, from_us: int, for_us: int) -> None:
        self._inner = inner
        self._from_us = from_us
        self._until_us = from_us + for_us

    def __getattr__(self, name: str) -> Any:
        return getattr(self._inner, name)

    def _away(self) -> bool:
        return self._from_us <= self._inner.now_us() < self._until_us

    def write(self, data: bytes) -> None:
        """On, or lost."""
        if not self._away():
            self._inner.write(data)

    def send_break(self) -> None:
        """On, or lost."""
        if not self._away():
            self._inner.send_break()

    def read(self, until_us: int) -> bytes:
        """What is not lost."""
        while True:
            data = self._inner.read(until_us)
            if not data or not self._away():
                return data
