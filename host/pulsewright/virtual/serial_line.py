"""The serial line in virtual time: bytes with ten bits each, both ways, and the rate they go at."""

from __future__ import annotations

from collections import deque

from pulsewright.units import TICKS_PER_S
from pulsewright.virtual.contacts import NEVER
from pulsewright.wire.tables import HELLO_BAUD

_BITS = 10
LOWEST_BAUD = 1_200


def byte_ticks(baud: int) -> int:
    """Ticks of a byte: start, eight bits, stop."""
    return (_BITS * TICKS_PER_S + baud // 2) // baud


class SerialLine:
    """Bytes under way. `leaves_at`: when the next one to the host is whole; `arrives_at`: when the next zero from the
    host is, or the last byte before a pause, since no other byte means anything by itself. NEVER: none is on its way.
    """

    def __init__(self) -> None:
        self.baud = HELLO_BAUD
        self.host_baud: int | None = None  # None: the host is always at the rig's rate
        self.arrives_at = NEVER
        self.leaves_at = NEVER
        self.sent = bytearray()  # bytes that have left, for the host to take
        self._ticks = byte_ticks(HELLO_BAUD)
        self._coming: deque[tuple[bytes, int, int]] = deque()  # data, tick of its first start bit, ticks of a byte
        self._at = 0  # index in the first of them
        self._until = 0  # what arrives next ends there
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
        self._coming.append((data, start, ticks))
        if len(self._coming) == 1:
            self._plan()

    def _plan(self) -> None:
        if not self._coming:
            self.arrives_at = NEVER
            return
        data, start, ticks = self._coming[0]
        zero = data.find(0, self._at)
        self._until = zero + 1 if zero >= 0 else len(data)
        self.arrives_at = start + self._until * ticks

    def take(self) -> bytes:
        """The bytes that have arrived since the last: up to a zero or a pause."""
        data = self._coming[0][0]
        taken = data[self._at : self._until]
        self._at = self._until
        if self._at == len(data):
            self._coming.popleft()
            self._at = 0
        self._plan()
        return taken

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
