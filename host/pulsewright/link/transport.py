"""What a way to a rig is: bytes out, bytes in by a deadline, and the clock that deadlines are counted on."""

from __future__ import annotations

from typing import Protocol


class Transport(Protocol):
    """A line to a rig. Times are integers of microseconds on the transport's own clock (virtual, or the host's)."""

    name: str

    def now_us(self) -> int:
        """The transport's clock."""

    def write(self, data: bytes) -> None:
        """Sends bytes; returns when they are handed over. LinkFault if the line is gone."""

    def read(self, until_us: int) -> bytes:
        """At least one byte as soon as there is one, or b"" at `until_us`. LinkFault if the line is gone."""

    def set_baud(self, baud: int) -> None:
        """The line's rate from now on."""

    def send_break(self) -> None:
        """A line break: the abort when nothing else gets through."""

    def close(self) -> None:
        """Gives the line back; never raises."""
