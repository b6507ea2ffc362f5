"""What a way to a rig is: bytes out, bytes in by a deadline, and the clock that deadlines are counted on."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

from pulsewright.wire.tables import FIRST_ANSWER_MS, HEARTBEAT_MS


@dataclass(frozen=True)
class Timing:
    """How long the session waits, in microseconds of the transport's clock.

    `first_answer_us`: no heartbeat by then: the same frame again. `late_us`: so long after the last heartbeat of a
    running command it counts as lost, and the command is sent again (which only asks for another heartbeat).
    `keep_alive_us`: nothing was sent for so long while a command runs: a keep-alive of its own, so that one lost frame
    does not meet the rig's dead-man. `give_up_us`: no valid frame for so long: the link is lost. `slice_us`: longest
    time without a look at the operator's interrupt. `hello_us`: how long a greeting is waited for in all.
    """

    first_answer_us: int = FIRST_ANSWER_MS * 1000
    late_us: int = (HEARTBEAT_MS + FIRST_ANSWER_MS) * 1000
    keep_alive_us: int = 150_000
    give_up_us: int = 3_000_000
    slice_us: int = 50_000
    hello_us: int = 4_000_000

    @classmethod
    def net(cls, patience_us: int) -> Timing:
        """Only a net: for a rig whose clock is not the transport's (the virtual rig served behind a port)."""
        return cls(patience_us, patience_us, patience_us, 2 * patience_us, hello_us=max(patience_us, cls.hello_us))


class Transport(Protocol):
    """A line to a rig. Times are integers of microseconds on the transport's own clock (virtual, or the host's)."""

    name: str

    def timing(self, board: str) -> Timing:
        """How long the session waits on this way to a rig; `board` is the rig's own name, "" before it is known."""

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
