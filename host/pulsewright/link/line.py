"""Frames over a transport: sending, receiving, the time bytes take on the line, and this end's counters."""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.link.transport import Timing, Transport
from pulsewright.wire.frames import FrameReader, Message, encode_frame
from pulsewright.wire.tables import ABORT_RUN, HELLO_BAUD, Frame

_BITS_A_BYTE = 10  # start, eight data, stop


@dataclass(frozen=True)
class RigCounters:
    """What the rig counted since its reset, as far as it has told."""

    damaged: int = 0
    dropped: int = 0
    repeated: int = 0


class Line:
    """A transport with framing. Counts frames sent again, and frames received damaged or unasked for."""

    def __init__(self, transport: Transport) -> None:
        self.transport = transport
        self.timing: Timing = transport.timing("")
        self.baud = HELLO_BAUD
        self.sent_again = 0
        self.dropped = 0
        self._reader = FrameReader()
        self._pending: list[Message] = []
        self._free_us = 0
        self._earlier_damaged = 0

    @property
    def damaged(self) -> int:
        """Stretches that were no frame."""
        return self._earlier_damaged + self._reader.damaged

    @property
    def sent_by_us(self) -> int:
        """When the last byte handed over has left, by the line's rate."""
        return max(self._free_us, self.transport.now_us())

    @property
    def last_sent_us(self) -> int:
        """When the last byte handed over left or will leave."""
        return self._free_us

    def write(self, data: bytes) -> None:
        """Raw bytes: greetings and aborts."""
        start = self.sent_by_us
        self.transport.write(data)
        self._free_us = start + len(data) * _BITS_A_BYTE * 1_000_000 // self.baud

    def send(self, message: Message, *, again: bool = False) -> None:
        """One frame; `again` counts it as repeated.

        A repeat begins with a zero: where the end of the frame before was lost, the two would else run into one.
        """
        if again:
            self.sent_again += 1
        self.write((b"\0" if again else b"") + encode_frame(message))

    def abort(self, permit: int, index: int) -> None:
        """The abort. A keep-alive stands before it, so that its zeros never run on from an earlier abort's."""
        self.write(encode_frame(Message(Frame.KEEP_ALIVE, permit, index)) + bytes(ABORT_RUN))

    def receive(self, until_us: int) -> Message | None:
        """The next valid frame, or None at `until_us`."""
        while not self._pending:
            data = self.transport.read(until_us)
            if not data:
                return None
            for byte in data:
                found = self._reader.feed(byte)
                if isinstance(found, Message):
                    self._pending.append(found)
        return self._pending.pop(0)

    def set_baud(self, baud: int) -> None:
        """Both the transport's rate and this end's idea of it; a frame under way is forgotten."""
        self.transport.set_baud(baud)
        self.baud = baud
        self._earlier_damaged += self._reader.damaged
        self._reader = FrameReader()
        self._pending.clear()
