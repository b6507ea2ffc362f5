"""Stop and wait with exactly one closing answer for each command, whatever the line loses, damages or repeats.

A command accepted is acknowledged by a heartbeat with its index at once and then four times a second. Nothing heard in
time: the same frame with the same index goes out again; the rig answers it with a heartbeat (still running) or with the
answer it kept (done), and never does the work twice.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from pulsewright.link.line import Line
from pulsewright.wire.frames import Message
from pulsewright.wire.tables import Frame


class Silent(Exception):
    """No valid frame for as long as the session is willing to wait. Internal: callers make a LinkFault of it."""


class Exchange:
    """One command under way: what was sent, whether it was accepted, its closing answer, what is due next."""

    def __init__(self, line: Line, message: Message) -> None:
        self._line = line
        self.message = message
        self.accepted = False
        self.answer: Message | None = None
        self.repeats = 0
        line.send(message)
        self._heard_us = line.sent_by_us
        self._again_us = self._heard_us + line.timing.first_answer_us

    def deadline_us(self) -> int:
        """When `tick` has something to do next, or the interrupt is to be looked at."""
        line = self._line
        next_us = min(self._again_us, line.transport.now_us() + line.timing.slice_us)
        return min(next_us, self._keep_alive_us()) if self.accepted else next_us

    def _keep_alive_us(self) -> int:
        return self._line.last_sent_us + self._line.timing.keep_alive_us

    def tick(self) -> None:
        """Sends again what is overdue; Silent when the rig was not heard for too long."""
        line, now = self._line, self._line.transport.now_us()
        if now >= self._again_us:
            if now - self._heard_us >= line.timing.give_up_us:
                raise Silent
            self.repeats += 1
            line.send(self.message, again=True)
            self._again_us = line.sent_by_us + line.timing.first_answer_us
        elif self.accepted and now >= self._keep_alive_us():
            self.keep_alive()

    def keep_alive(self) -> None:
        """The one frame besides blocks and abort that may be sent while a command runs."""
        self._line.send(Message(Frame.KEEP_ALIVE, self.message.permit, self.message.index))

    def heard(self) -> None:
        """A frame came that belongs to the work of this command."""
        self._heard_us = self._line.transport.now_us()

    def take(self, message: Message) -> bool:
        """Whether the frame belongs to this command; a heartbeat is answered, a closing answer kept once."""
        if message.index != self.message.index:
            return False
        if message.kind is Frame.ANSWER and self.answer is None:
            self.answer = message
            self.heard()
            return True
        if message.kind is Frame.HEARTBEAT:
            self.accepted = True
            self.heard()
            self.keep_alive()
            self._again_us = self._line.sent_by_us + self._line.timing.late_us
            return True
        return False


class Commands:
    """Numbers commands and sees each to its closing answer."""

    def __init__(self, line: Line, look: Callable[[], None] = lambda: None) -> None:
        self._line = line
        self._look = look  # called a few times a second while an answer is awaited
        # A rig may still keep the answer to the last command of another session: not the same index as that, please.
        self._index = line.transport.now_us() // 977 % 0xFFFF

    def number_on(self, by: int) -> None:
        """The next index is so many further on."""
        self._index = (self._index + by) % 0xFFFF

    def begin(self, kind: Frame, under: int = 0, **fields: Any) -> Exchange:
        """Sends a command under the next index, carrying the number of the permit that is in force."""
        self._index = self._index % 0xFFFF + 1
        return Exchange(self._line, Message(kind, under, self._index, fields))

    def finish(self, exchange: Exchange) -> Message:
        """The closing answer; Silent if none comes."""
        while exchange.answer is None:
            message = self._line.receive(exchange.deadline_us())
            if message is None:
                exchange.tick()
            elif not exchange.take(message):
                self._line.dropped += 1
            self._look()
        return exchange.answer

    def ask(self, kind: Frame, under: int = 0, **fields: Any) -> Message:
        """Sends a command and waits for its closing answer; Silent if none comes."""
        return self.finish(self.begin(kind, under, **fields))
