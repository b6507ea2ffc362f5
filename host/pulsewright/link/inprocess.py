"""The way to a virtual rig in this process: virtual time, ten bits a byte, and host computing that costs none of it."""

from __future__ import annotations

from typing import Protocol

from pulsewright.link.transport import Timing
from pulsewright.units import TICKS_PER_S, TICKS_PER_US
from pulsewright.wire.tables import HELLO_BAUD

_BITS_A_BYTE = 10


class RigInProcess(Protocol):
    """What this transport wants of a rig. Times are ticks of 62.5 ns since the rig's start."""

    @property
    def t(self) -> int:
        """The rig's clock."""

    def receive(self, data: bytes, at_tick: int) -> None:
        """Bytes that arrive at a time, not before the rig's clock."""

    def run(self, until_tick: int) -> None:
        """On to the next byte sent, or to the time."""

    def take_output(self) -> bytes:
        """What was sent up to now, once."""

    def line_break(self, at_tick: int) -> None:
        """A line break at a time."""


class InProcess:
    """A transport around a rig object. Reading runs the rig to its next byte or to the deadline, and no further."""

    def __init__(self, rig: RigInProcess, name: str = "virtual") -> None:
        self.name = name
        self._rig = rig
        self._baud = HELLO_BAUD
        self._free_tick = 0  # when the last byte handed over has arrived

    def timing(self, board: str) -> Timing:
        """The wire's own times: the clock is the rig's."""
        return Timing()

    def now_us(self) -> int:
        """Virtual microseconds since the rig's start."""
        return self._rig.t // TICKS_PER_US

    def write(self, data: bytes) -> None:
        """Bytes one behind the other, each ten bits long at the line's rate."""
        at = max(self._free_tick, self._rig.t)
        per_byte = TICKS_PER_S * _BITS_A_BYTE // self._baud
        for byte in data:
            at += per_byte
            self._rig.receive(bytes([byte]), at)
        self._free_tick = at

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
        self._baud = baud

    def send_break(self) -> None:
        """A line break behind what was sent."""
        self._rig.line_break(max(self._free_tick, self._rig.t))

    def close(self) -> None:
        """Nothing to give back."""
