"""The serial line in virtual time: bytes with ten bits each, both ways, and the rate they go at."""

from __future__ import annotations

from collections import deque

from pulsewright.units import TICKS_PER_S
from pulsewright.virtual.socket import NEVER
from pulsewright.wire.tables import HELLO_BAUD

_BITS = 10
LOWEST_BAUD = 1_200


def byte_ticks(baud: int) -> int:
    """Ticks of a byte: start, eight bits, stop."""
    return (_BITS * TICKS_PER_S + baud // 2) // baud


class SerialLine:
    """`arrives_at` and `leaves_at` are the ticks at which the next byte is whole, NEVER when none is on its way."""

    def __init__(self) -> None:
        self.baud = HELLO_BAUD
        self.host_baud: int | None = None  # None: the host is always at the rig's rate
        self.arrives_at = NEVER
        self.leaves_at = NEVER
        self.sent = bytearray()  # bytes that have left, for the host to take
        self._ticks = byte_ticks(HELLO_BAUD)
        self._coming: deque[tuple[bytes, int, int]] = deque()  # data, tick of the first byte's end, ticks of a byte
        self._at = 0  # index in the first of them
        self._free_from = 0
        self._going = bytearray()
        self._gone = 0
        self._next_baud = 0

    def receive(self, data: bytes, at: int) -> None:
        """Bytes from the host, the first start bit at tick `at` or as soon as the line is free."""
        if not data:
            return
        ticks = self._ticks
        if self.host_baud is not None and self.host_baud != self.baud:
            ticks = byte_ticks(self.host_baud)
            data = bytes((byte ^ 0x5A) | 1 for byte in data)  # at another rate bits fall together: noise
        start = max(at, self._free_from)
        self._free_from = start + len(data) * ticks
        self._coming.append((data, start + ticks, ticks))
        if len(self._coming) == 1:
            self.arrives_at = start + ticks

    def take_byte(self) -> int:
        """The byte that has arrived."""
        data, first, ticks = self._coming[0]
        byte = data[self._at]
        self._at += 1
        if self._at < len(data):
            self.arrives_at = first + self._at * ticks
            return byte
        self._coming.popleft()
        self._at = 0
        self.arrives_at = self._coming[0][1] if self._coming else NEVER
        return byte

    def send(self, data: bytes, t: int) -> None:
        """Bytes to the host, behind those that wait already."""
        self._going += data
        if self.leaves_at == NEVER:
            self.leaves_at = t + self._ticks

    def byte_left(self) -> bool:
        """The byte on the line has left; True when that was the last before a change of rate."""
        byte = self._going[self._gone]
        if self.host_baud is not None and self.host_baud != self.baud:
            byte = (byte ^ 0x5A) | 1
        self.sent.append(byte)
        self._gone += 1
        if self._gone < len(self._going):
            self.leaves_at += self._ticks
            return False
        self._going.clear()
        self._gone = 0
        self.leaves_at = NEVER
        if self._next_baud:
            self.set_baud(self._next_baud)
            return True
        return False

    def change_after_answer(self, baud: int) -> None:
        """The rate from when all that waits has left."""
        self._next_baud = baud

    def set_baud(self, baud: int) -> None:
        """The rate from now on."""
        self.baud = baud
        self._ticks = byte_ticks(baud)
        self._next_baud = 0

    def reset(self) -> None:
        """What waits to leave is lost."""
        self._going.clear()
        self._gone = 0
        self.leaves_at = NEVER
        self._coming.clear()
        self._at = 0
        self.arrives_at = NEVER
        self.set_baud(HELLO_BAUD)
