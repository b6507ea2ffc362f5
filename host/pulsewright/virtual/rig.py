"""The virtual rig: bytes in, bytes out, in virtual time."""

from __future__ import annotations

from pulsewright.virtual.board import Board
from pulsewright.virtual.socket import Socket


class VirtualRig:
    """Reference firmware on the virtual board. All times are ticks of 62.5 ns on the rig's own clock."""

    def __init__(self, socket: Socket, *, boot: int, board: Board | None = None) -> None:
        self.socket = socket
        self.boot = boot
        self.board = board or Board()
        self.trace: list[tuple[int, str]] | None = None

    @property
    def t(self) -> int:
        """Now."""
        return 0

    def receive(self, data: bytes, at: int) -> None:
        """Bytes from the host, the first one's start bit at tick `at`, queued at the line's rate."""

    def run(self, until: int) -> None:
        """Goes on to `until`, or until a byte to the host has completely left."""

    def take_output(self) -> bytes:
        """The bytes that have left since the last call."""
        return b""

    def line_break(self, at: int) -> None:
        """A line break from the host."""

    def power_cut(self) -> None:
        """The supply goes: only the hardware acts."""

    def restart(self) -> None:
        """Reset and start, with the next boot number."""
