"""The window of blocks: which to send, which to send again, which replies count. No input or output happens here."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from itertools import islice

from pulsewright.errors import RigFault
from pulsewright.link.results import Block, BlockDone
from pulsewright.wire.frames import Message
from pulsewright.wire.ops import Header
from pulsewright.wire.tables import BLOCK_BYTES, Flow, Frame

_WRAP = 1 << 16
_NONE_FAILED = 0xFFFFFFFF
_LONGEST_BACK_OFF = 8


@dataclass
class _Sent:
    index: int
    block: Block
    frame: Message
    turn: int  # which pass over the data it belongs to
    answered: bool = False
    asked_again: bool = False


def requests(first: int, last: int, words: int) -> Iterator[Block]:
    """Read requests that cover first..last, `words` words each."""
    for at in range(first, last + 1, words):
        yield Block(at, min(words, last + 1 - at))


class Window:
    """Blocks under way, at most `size` from the oldest unanswered one on; each reply is counted exactly once.

    The end of data (words = 0) goes out when every block before it is answered: the rig then needs no kept reply. A
    program may want the data several times (`header.passes`): then the blocks go out again after each end of data.
    """

    def __init__(self, blocks: Iterable[Block], header: Header, permit: int, size: int) -> None:
        self._blocks = tuple(blocks) if header.passes > 1 else blocks
        self._source = iter(self._blocks)
        self._turn = 0
        self._header = header
        self._permit = permit
        self._size = max(1, size)
        self._sent: deque[_Sent] = deque()
        self._next = 0
        self._exhausted = self._ended = header.flow is Flow.NONE
        self._round: tuple[int, int] | None = None  # wanted index and latest refused one of a go-back under way
        self._answered_ever = 0
        self._answered_before = 0
        self._stalled = 0
        self.results: list[BlockDone] = []
        self._data: dict[int, bytes] = {}

    @property
    def data(self) -> bytes:
        """What was read, in the order of blocks."""
        return b"".join(self._data[index] for index in sorted(self._data))

    @property
    def words(self) -> int:
        """Words answered for so far."""
        return sum(done.words for done in self.results)

    @property
    def waiting(self) -> bool:
        """Whether a block or the end of data is without an answer."""
        return bool(self._sent)

    def due(self) -> list[Message]:
        """New frames that the window has room for now."""
        frames = []
        while True:
            while not self._exhausted and len(self._sent) < self._room:
                block = next(self._source, None)
                if block is None:
                    self._exhausted = True
                    break
                frames.append(self._append(block))
            if not self._exhausted or self._ended or any(sent.block.words for sent in self._sent):
                return frames
            frames.append(self._append(Block(0, 0)))
            self._turn += 1
            if self._turn >= self._header.passes:
                self._ended = True
                return frames
            self._source, self._exhausted = iter(self._blocks), False

    @property
    def _room(self) -> int:
        """Frames that may be under way: an end of data has no answer of its own and takes no block's place."""
        return self._size + sum(not sent.block.words for sent in self._sent)

    def _append(self, block: Block) -> Message:
        data = self._payload(block)
        fields = {"first": block.first, "words": block.words, "data": data}
        frame = Message(Frame.BLOCK, self._permit, self._next % _WRAP, fields)
        self._sent.append(_Sent(self._next, block, frame, self._turn))
        self._next += 1
        return frame

    def _payload(self, block: Block) -> bytes:
        if self._header.flow is not Flow.WRITE or block.words == 0:
            return b""
        size = block.words * (self._header.width // 8)
        if len(block.data) != size or size > BLOCK_BYTES:
            raise ValueError(f"a block of {block.words} words with {len(block.data)} bytes of data")
        mask = block.mask
        if mask is None:
            mask = ((1 << block.words) - 1).to_bytes((block.words + 7) // 8, "little")
        return mask + block.data

    def _find(self, index: int) -> _Sent | None:
        if not self._sent:
            return None
        distance = (index - self._sent[0].index) % _WRAP
        return self._sent[distance] if distance < len(self._sent) else None

    def replied(self, message: Message) -> tuple[bool, list[Message]]:
        """Takes a reply: (whether it is counted now, frames of earlier blocks whose replies must have been lost)."""
        sent = self._find(message.index)
        if sent is None or sent.answered or sent.block.words == 0:
            return False, []
        self._keep(sent, message)
        sent.answered = True
        self._answered_ever += 1
        self._round = None
        for other in self._sent:
            other.answered |= other.index < sent.index and not other.block.words  # an end of data that was surely taken
        while self._sent and self._sent[0].answered:
            self._sent.popleft()
        lost = [other for other in self._sent if other.index < sent.index and not other.answered]
        again = [other.frame for other in lost if not other.asked_again]
        for other in lost:
            other.asked_again = True
        return True, again

    def _keep(self, sent: _Sent, message: Message) -> None:
        block = sent.block
        if message.kind is Frame.BLOCK_DATA:
            data = message.fields["data"]
            size = block.words * (self._header.width // 8)
            if len(data) != size:
                raise RigFault(f"block {sent.index} came back with the wrong length",
                               wanted=f"{size} bytes", got=f"{len(data)} bytes", hint="flash the rig's firmware anew")
            self._data[sent.index] = bytes(data)
            self.results.append(BlockDone(sent.index, block.first, block.words, turn=sent.turn))
            return
        fields = message.fields
        failed = None if fields["failed"] == _NONE_FAILED else fields["failed"]
        raw = fields["histogram"]
        histogram = tuple(int.from_bytes(raw[i : i + 2], "little") for i in range(0, len(raw) - 1, 2))
        self.results.append(
            BlockDone(
                sent.index, block.first, block.words, fields["worst"], fields["worst_tries"], failed, histogram,
                written=fields["words"], turn=sent.turn,
            )
        )  # fmt: skip

    def refused(self, message: Message) -> list[Message]:
        """Goes back to the block that the rig wants; later refusals of the same loss change nothing."""
        wanted = self._find(message.fields["wanted"])
        if wanted is None:
            return []
        refused = self._find(message.index)
        at = refused.index if refused else wanted.index
        if self._round and self._round[0] == wanted.index and at > self._round[1]:
            self._round = (wanted.index, at)
            return []
        self._round = (wanted.index, at)
        return [sent.frame for sent in self._sent if sent.index >= wanted.index]

    def beat(self) -> list[Message]:
        """At each heartbeat: the oldest block again when two passed without an answer, then at the 4th, 8th, 16th ...

        The rig may just be slow: then it has the block and drops the copy. An end of data before it goes with it: it
        has no answer of its own, so nothing tells whether it or the block behind it was lost.
        """
        if self._answered_ever != self._answered_before or not self._sent:
            self._answered_before = self._answered_ever
            self._stalled = 0
            return []
        self._stalled += 1
        turn = self._stalled
        if turn == 1 or (turn & (turn - 1) and turn % _LONGEST_BACK_OFF):
            return []
        self._round = None
        blocks = [at for at, sent in enumerate(self._sent) if sent.block.words]
        return [sent.frame for sent in islice(self._sent, blocks[0] + 1 if blocks else None)]
