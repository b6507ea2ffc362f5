"""The way to a virtual rig in this process: virtual time, ten bits a byte, and host computing that costs none of it."""

from __future__ import annotations

from typing import Protocol

from pulsewright.link.transport import Timing
from pulsewright.units import TICKS_PER_S, TICKS_PER_US
from pulsewright.wire.tables import HELLO_BAUD

_BITS_A_BYTE = 10
_SLICE_US = 5_000


class RigInProcess(Protocol):
    """What this transport wants of a rig. Times are ticks of 62.5 ns since the rig's start.

    `host_baud` is the host's rate: where it is not the rig's, only noise gets through.
    """

    host_baud: int | None

    @property
    def t(self) -> int:
        """The rig's clock."""

    def receive(self, data: bytes, at: int, /) -> None:
        """Bytes from the host; the start bit of the first one stands at tick `at`, the others follow at line rate."""

    def run(self, until: int, /) -> None:
        """Goes on to `until`, or until a byte to the host has left."""

    def take_output(self) -> bytes:
        """The bytes that have left since the last call."""

    def line_break(self, at: int, /) -> None:
        """A line break from the host."""


class InProcess:
    """A transport around a rig object. Reading runs the rig to its next byte or to the deadline, and no further."""

    def __init__(self, rig: RigInProcess, name: str = "virtual") -> None:
        self.name = name
        self._rig = rig
        self._baud = rig.host_baud = HELLO_BAUD
        self._free_tick = 0  # when the last byte handed over has left

    def timing(self, board: str) -> Timing:
        """The wire's own times: the clock is the rig's. A stretch of it takes longer here than there: short slices."""
        return Timing(slice_us=_SLICE_US)

    def now_us(self) -> int:
        """Virtual microseconds since the rig's start."""
        return self._rig.t // TICKS_PER_US

    def write(self, data: bytes) -> None:
        """Bytes one behind the other, each ten bits long at the line's rate."""
        start = max(self._free_tick, self._rig.t)
        self._rig.receive(data, start)
        self._free_tick = start + len(data) * TICKS_PER_S * _BITS_A_BYTE // self._baud

    def read(self, until_us: int) -> bytes:
        """The rig's next bytes, or b"" at the deadline."""
        until_tick = until_us * TICKS_PER_US
        data = self._rig.take_output()
        while not data and self._rig.t < until_tick:
            self._rig.run(until_tick)
            data = self._rig.take_output()
        return data

    def set_baud(self, baud: int) -> None:
        """The rate of what is sent from now on."""
        self._baud = self._rig.host_baud = baud

    def send_break(self) -> None:
        """A line break behind what was sent."""
        self._rig.line_break(max(self._free_tick, self._rig.t))

    def close(self) -> None:
        """Nothing to give back."""
