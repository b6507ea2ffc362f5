"""Blocks: the window of those the host sent, the words in hand, and the replies kept until they are surely heard."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pulsewright.wire.frames import Message, encode_frame
from pulsewright.wire.ops import Header
from pulsewright.wire.tables import BLOCK_BYTES, HISTOGRAM, Fault, Flow, Frame

if TYPE_CHECKING:
    from pulsewright.virtual.machine import Machine

NONE_FAILED = 0xFFFFFFFF
_WRAP = 1 << 16


@dataclass
class Block:
    """A block the host sent: its words by address, with what is to be written there."""

    index: int
    first: int
    count: int
    words: list[tuple[int, int]]


class BadBlock(Exception):
    """A block that the program's header does not allow."""

    def __init__(self, code: Fault) -> None:
        super().__init__(code.name)
        self.code = code


class Blocks:
    """The blocks of one permit. `send` puts an encoded frame on the line, at the rig's present time."""

    def __init__(self, permit: int, header: Header, window: int, send: Callable[[bytes], None]) -> None:
        self.permit = permit
        self.header = header
        self.queue: deque[Block] = deque()
        self.done = 0  # blocks answered
        self.words_done = 0
        self.repeated = 0
        self._window = window
        self._send = send
        self._wanted = 0
        self._promised = 0  # words of all blocks accepted
        self._passes = header.passes  # ends of data still to come
        self._to_end = header.passes  # ends of data still to be taken
        self.over = False  # the last end of data was taken: no block will come any more
        self._kept: dict[int, bytes] = {}
        self._block = Block(0, 0, 0, [])
        self._histogram = [0] * HISTOGRAM
        self._written = 0
        self._worst = (0, 0)  # address, tries

    # ---- from the host --------------------------------------------------------------------------------------------

    def receive(self, message: Message) -> None:
        """A block frame: lower than wanted = the kept reply again, equal = queued, higher = refused; or BadBlock."""
        behind = (self._wanted - message.index) % _WRAP
        if behind == 0 and len(self.queue) < self._window and self._passes > 0:
            self.queue.append(self._checked(message))
            self._wanted = (self._wanted + 1) % _WRAP
            return
        if 0 < behind < _WRAP // 2:
            self.repeated += 1
            reply = self._kept.get(message.index)
            if reply is not None:
                self._send(reply)
            return
        fields = {"wanted": self._wanted}
        self._send(encode_frame(Message(Frame.BLOCK_REFUSED, self.permit, message.index, fields)))

    def _checked(self, message: Message) -> Block:
        header = self.header
        first, count, data = message.fields["first"], message.fields["words"], message.fields["data"]
        if header.flow is Flow.NONE or count > header.block_words or count > BLOCK_BYTES:
            raise BadBlock(Fault.BAD_BLOCK)
        if count and first + count > 1 << len(header.address):
            raise BadBlock(Fault.BAD_BLOCK)
        self._promised += count
        if self._promised > header.words:
            raise BadBlock(Fault.TOO_MANY_WORDS)
        if header.flow is Flow.READ or count == 0:
            if data:
                raise BadBlock(Fault.BAD_BLOCK)
            self._passes -= count == 0
            return Block(message.index, first, count, [(first + at, 0) for at in range(count)])
        mask_bytes = (count + 7) // 8
        mask, words = data[:mask_bytes], data[mask_bytes:]
        if len(mask) != mask_bytes or len(words) != count:
            raise BadBlock(Fault.BAD_BLOCK)
        chosen = [(first + at, words[at]) for at in range(count) if mask[at >> 3] >> (at & 7) & 1]
        over_the_end = first % header.block_words + count > header.block_words  # of a page
        if not chosen or over_the_end:
            raise BadBlock(Fault.BAD_BLOCK)
        return Block(message.index, first, count, chosen)

    # ---- to the program -------------------------------------------------------------------------------------------

    def take(self, m: Machine) -> bool:
        """The next block of the queue becomes the block in hand; whether it is the end of data."""
        block = self._block = self.queue.popleft()
        m.report = bytearray()
        self._histogram = [0] * HISTOGRAM
        self._written, self._worst = 0, (0, 0)
        if block.count:
            return False
        self._to_end -= 1
        self.over = self._to_end <= 0
        return True

    def words_of_block(self) -> Iterator[tuple[int, int]]:
        """Address and word of each word that is not to be left."""
        return iter(self._block.words)

    def count_word(self, address: int, tries: int) -> None:
        """A word was written with so many tries; 0, where no counted loop was around it, is in no histogram."""
        self._written += 1
        if tries == 0:
            return
        self._histogram[min(tries, HISTOGRAM) - 1] += 1
        if tries > self._worst[1]:
            self._worst = (address, tries)

    def finish(self, m: Machine) -> None:
        """Sends and keeps the reply of the block in hand."""
        block = self._block
        self._reply(self._body(m.report, NONE_FAILED))
        self.done += 1
        self.words_done += block.count if self.header.flow is Flow.READ else self._written

    def fail(self, m: Machine, address: int) -> None:
        """A word of the block in hand would not take: its reply says which one."""
        self._reply(self._body(m.report, address))

    def _body(self, report: bytearray, failed: int) -> tuple[Frame, dict[str, object]]:
        if self.header.flow is Flow.READ:
            return Frame.BLOCK_DATA, {"data": bytes(report)}
        histogram = b"".join(entry.to_bytes(2, "little") for entry in self._histogram)
        worst, tries = self._worst
        fields = {"words": self._written, "worst": worst, "worst_tries": tries, "failed": failed}
        return Frame.BLOCK_DONE, {**fields, "histogram": histogram}

    def _reply(self, body: tuple[Frame, dict[str, object]]) -> None:
        kind, fields = body
        index = self._block.index
        reply = encode_frame(Message(kind, self.permit, index, fields))
        self._kept[index] = reply
        self._kept.pop((index - self._window) % _WRAP, None)
        self._send(reply)
