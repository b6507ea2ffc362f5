"""Every byte and frame of an undisturbed job, by part and way: where harm can strike, and what stands there."""

from __future__ import annotations

import functools
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, get_args

from pulsewright.link.faulty import Way
from pulsewright.link.transport import Transport
from pulsewright.virtual.rig import VirtualRig
from pulsewright.wire.fields import WireMistake
from pulsewright.wire.frames import decode_frame
from tests.link.whole_job import Table, Work

WAYS: tuple[Way, ...] = get_args(Way)


@dataclass(frozen=True)
class Stretch:
    """Bytes up to a zero: a frame, a zero alone, or a piece of a greeting. `at` counts from the part's beginning,
    `number` the stretches of this part and way; `us` is when its last byte passed, on the rig's clock.
    """

    part: int
    way: Way
    number: int
    at: int
    data: bytes
    us: int

    @property
    def kind(self) -> str:
        """The frame's kind; "hello" for what is none."""
        try:
            return decode_frame(self.data[:-1]).kind.name.lower()
        except WireMistake:
            return "hello"


class Recorder:
    """A line that notes all that passes."""

    def __init__(self, inner: Transport) -> None:
        self._inner = inner
        self._part = 0
        self._stretch: dict[Way, bytearray] = {way: bytearray() for way in WAYS}
        self._counts: dict[tuple[int, Way], list[int]] = {}
        self.stretches: list[Stretch] = []
        self.begun_us: list[int] = [inner.now_us()]

    def __getattr__(self, name: str) -> Any:
        return getattr(self._inner, name)

    def begin_part(self) -> None:
        """The next part."""
        self._part += 1
        self.begun_us.append(self._inner.now_us())
        getattr(self._inner, "begin_part", lambda: None)()

    def _note(self, way: Way, data: bytes) -> None:
        count = self._counts.setdefault((self._part, way), [0, 0])
        stretch = self._stretch[way]
        for byte in data:
            stretch.append(byte)
            if byte == 0:
                at, number = count
                self.stretches.append(
                    Stretch(self._part, way, number, at, bytes(stretch), self._inner.now_us())
                )
                count[:] = at + len(stretch), number + 1
                stretch.clear()

    def write(self, data: bytes) -> None:
        """Noted, and on."""
        self._note("to rig", data)
        self._inner.write(data)

    def read(self, until_us: int) -> bytes:
        """Noted, and on."""
        data = self._inner.read(until_us)
        self._note("from rig", data)
        return data


@functools.cache
def map_of(work: Work, early_us: int) -> Recorder:
    """What passes in an undisturbed job that begins at this time of the rig's clock."""
    lines: list[Recorder] = []

    def recording(line: Transport, rig: VirtualRig) -> Transport:
        lines.append(Recorder(line))
        return lines[0]

    table = Table(work)
    table.pass_time(early_us)
    ended = table.run(recording)
    assert ended.error is None
    return lines[0]


def stretches_of(work: Work, early_us: int = 0) -> tuple[Stretch, ...]:
    """Every stretch, in the order in which they ended."""
    return tuple(map_of(work, early_us).stretches)


def length_of(work: Work, part: int, way: Way) -> int:
    """Bytes of a part in one way."""
    return sum(len(one.data) for one in stretches_of(work) if (one.part, one.way) == (part, way))


def parts_of(work: Work) -> range:
    """The parts: 0 connects, the last closes, each between them is a sequence."""
    return range(max(one.part for one in stretches_of(work)) + 1)


def bytes_of(work: Work) -> Iterator[tuple[int, Way, int, str, int]]:
    """Every byte: part, way, position, the kind of what it stands in, and its value."""
    for one in stretches_of(work):
        kind = one.kind
        for offset, byte in enumerate(one.data):
            yield one.part, one.way, one.at + offset, kind, byte
