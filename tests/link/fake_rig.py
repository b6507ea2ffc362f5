"""A rig with nothing but the wire's manners: no ops, a row of cells, and a count of how often each was touched.

It keeps every rule of the wire that the session relies on, is quick enough to be run thousands of times, and can be
told to misbehave. The session's tests against real ops are in test_virtual.py.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from pulsewright.wire.fields import WireMistake, pack
from pulsewright.wire.frames import FrameReader, Hello, Message, encode_frame
from pulsewright.wire.ops import decode_program
from pulsewright.wire.permit import Permit, decode_permit
from pulsewright.wire.tables import (
    BLOBS,
    FINGERPRINT,
    HELLO_BAUD,
    HELLO_REQUEST,
    LAYOUT,
    Fault,
    Flow,
    Frame,
    Outcome,
    State,
)

MS = 16_000
_NEVER = 1 << 62
_COMMANDS = set(range(1, 10))


def fault(code: Fault, **numbers: int) -> bytes:
    """A fault blob."""
    return pack(BLOBS["fault"], {**dict.fromkeys((n for n, _ in BLOBS["fault"]), 0), "code": code, **numbers})


class FakeRig:
    """See the file. `word_ticks` is what a word takes, `seat_ticks` the time before the first block is taken."""

    def __init__(self, *, boot: int = 7, words: int = 64, word_ticks: int = 160, seat_ticks: int = 5 * MS,
                 window: int = 3, fingerprint: int = FINGERPRINT, fail_at: int | None = None,
                 self_timed_ticks: int = 0, top_baud: int = 1_000_000) -> None:
        self.t = 0
        self.boot, self.window, self.word_ticks, self.seat_ticks = boot, window, word_ticks, seat_ticks
        self.fail_at, self.self_timed_ticks, self.top_baud = fail_at, self_timed_ticks, top_baud
        self.hello = Hello(LAYOUT, window, 2048, fingerprint, boot)
        self.cells = bytearray(b"\xff" * words)
        self.touched: dict[int, int] = {}
        self.runs = 0
        self.deaf_above: int | None = None  # a rate above which nothing gets through
        self.mute_above: int | None = None  # a rate above which the host hears only noise
        self.stubborn = False  # does not stop when told to
        self.reset_at = _NEVER
        self.host_baud: int | None = None
        self._rx: deque[tuple[int, int]] = deque()
        self._tx: deque[tuple[int, int]] = deque()
        self._out = bytearray()
        self._breaks: deque[int] = deque()
        self.power_up()

    def power_up(self) -> None:
        """What a reset does; cells, counts and boot number stay."""
        self.baud, self.state, self.powered = HELLO_BAUD, State.IDLE, False
        self.permit: Permit | None = None
        self.latched = b""
        self._code = b""
        self._reader, self._recent, self._aborts = FrameReader(), bytearray(), 0
        self._kept: tuple[int, Message] | None = None
        self._next_baud = 0
        self._rate_deadline = self._beat_at = self._dead_at = self._work_at = _NEVER
        self._damaged = self._dropped = self._repeated = 0
        self._run_index = 0
        self._rx.clear()
        self._tx.clear()

    # ---- the seam of the transport

    def receive(self, data: bytes, at: int) -> None:
        same = self.host_baud in (None, self.baud)
        for byte in data:
            at += 160_000_000 // (self.host_baud or self.baud)
            self._rx.append((at, byte if same else (byte ^ 0x5A) | 1))

    def line_break(self, at: int) -> None:
        self._breaks.append(at)

    def take_output(self) -> bytes:
        data = bytes(self._out)
        self._out.clear()
        return data

    def run(self, until: int) -> None:
        while not self._out:
            rx = self._rx[0][0] if self._rx else _NEVER
            tx = self._tx[0][0] if self._tx else _NEVER
            broken = self._breaks[0] if self._breaks else _NEVER
            at = min(rx, tx, broken, self._work_at, self._beat_at, self._dead_at, self._rate_deadline,
                     self.reset_at)
            if at > until:
                self.t = max(self.t, until)
                return
            self.t = max(self.t, at)
            if at == tx:
                byte = self._tx.popleft()[1]
                heard = self.host_baud in (None, self.baud) and self.baud <= (self.mute_above or self.baud)
                self._out.append(byte if heard else (byte ^ 0x5A) | 1)
                if not self._tx and self._next_baud:
                    self.baud, self._next_baud = self._next_baud, 0
                    self._rate_deadline = self.t + 500 * MS if self.baud != HELLO_BAUD else _NEVER
            elif at == rx:
                self._byte(self._rx.popleft()[1])
            elif at == broken:
                self._breaks.popleft()
                self._abort()
                if self.state is not State.RUNNING:
                    self.baud, self._rate_deadline = HELLO_BAUD, _NEVER
            elif at == self.reset_at:
                self.boot, self.reset_at = self.boot + 1, _NEVER
                self.power_up()
            elif at == self._work_at:
                self._work()
            elif at == self._dead_at:
                self._end(Outcome.TRIPPED, fault(Fault.DEAD_MAN))
            elif at == self._beat_at:
                self._beat()
            else:
                self.baud, self._rate_deadline = HELLO_BAUD, _NEVER

    # ---- bytes and frames

    def _send(self, data: bytes) -> None:
        at = max(self._tx[-1][0] if self._tx else 0, self.t)
        for byte in data:
            at += 160_000_000 // self.baud
            self._tx.append((at, byte))

    def _reply(self, kind: Frame, index: int, **fields: Any) -> Message:
        message = Message(kind, self.permit.number if self.permit else 0, index, fields)
        self._send(encode_frame(message))
        return message

    def _byte(self, byte: int) -> None:
        if self.deaf_above is not None and self.baud > self.deaf_above:
            return
        self._recent = (self._recent + bytes([byte]))[-len(HELLO_REQUEST) :]
        found = self._reader.feed(byte)
        if self._reader.aborts != self._aborts:
            self._aborts = self._reader.aborts
            self._abort()
        if self._recent == HELLO_REQUEST and self.baud == HELLO_BAUD:
            self._kept = None
            code = self.latched[0] if self.latched else 0
            self._send(replace(self.hello, boot=self.boot, fault=code).encode())
        elif isinstance(found, Message):
            self._rate_deadline = _NEVER
            self._frame(found)

    def _frame(self, message: Message) -> None:
        number = self.permit.number if self.permit else 0
        if self.powered and message.permit == number:
            self._dead_at = self.t + 500 * MS
        if message.kind is Frame.BLOCK:
            if message.permit == number and (self.state is State.RUNNING or self._done):
                self._block(message)
        elif message.kind in _COMMANDS:
            self._command(message, number)
        elif message.kind is not Frame.KEEP_ALIVE:
            self._dropped += 1

    def _command(self, message: Message, number: int) -> None:
        if self.state is State.RUNNING and message.index == self._run_index:
            self._repeated += 1
            self._beat()
            return
        if self._kept and self._kept[0] == message.index:
            self._repeated += 1
            self._send(encode_frame(self._kept[1]))
            return
        if message.permit not in (0, number):
            self._answer(message.index, Outcome.REFUSED, fault(Fault.WRONG_PERMIT))
            return
        if self.state is State.RUNNING:
            self._answer(message.index, Outcome.REFUSED, fault(Fault.WRONG_STATE))
            return
        self._reply(Frame.HEARTBEAT, message.index, state=self.state, ticks=self.t & 0xFFFFFFFF)
        self._do(message.kind, message.index, message.fields)

    def _answer(self, index: int, outcome: Outcome, data: bytes = b"") -> None:
        self._kept = (index, self._reply(Frame.ANSWER, index, outcome=outcome, data=data))

    def _do(self, kind: Frame, index: int, fields: Mapping[str, Any]) -> None:
        refused: Fault | None = None
        data = b""
        if kind is Frame.DESCRIBE:
            data = self._page(fields["page"])
        elif kind is Frame.ECHO:
            data = fields["data"]
        elif kind is Frame.STATUS:
            data = self._status()
        elif kind is Frame.CLEAR:
            self.latched = b""
        elif kind is Frame.PERMIT:
            refused = self._take_permit(fields["permit"])
        elif kind is Frame.LOAD:
            self._code = self._code[: fields["offset"]] + fields["code"]
        elif kind is Frame.SEAL:
            refused = self._seal()
        elif kind is Frame.RUN:
            refused = None if self.state is State.SEALED else Fault.WRONG_STATE
            if refused is None:
                self._start(index)
                return
        if refused is not None:
            self._answer(index, Outcome.REFUSED, fault(refused))
            return
        self._answer(index, Outcome.DONE, data)
        if kind is Frame.RATE:
            self._next_baud = fields["baud"]

    def _page(self, number: int) -> bytes:
        if number == 0:
            page = {"board": b"fake", "window_blocks": self.window, "block_bytes": 512, "program_bytes": 1024,
                    "receive_bytes": 2048, "driven_from": 594, "off_below": 62, "clear_above_vcc": 37,
                    "fall_limit": 16 * MS, "off_limit": 80 * MS, "lines": 32, "data_lines": bytes(range(13, 21)),
                    "rails": 2, "steps": 3, "switches": bytes([1, 3]), "vcc_switches": bytes([28]),
                    "top_baud": self.top_baud}
            return pack(BLOBS["describe"], page)
        return {1: bytes(range(12)), 2: bytes([1, 2, 3, 4]), 3: bytes([1, 4, 2, 4])}[number]

    def _status(self) -> bytes:
        values = {"state": self.state, "gate": 0, "damaged": self._reader.damaged, "dropped": self._dropped,
                  "repeated": self._repeated, "boot": self.boot}
        return pack(BLOBS["status"], values) + (self.latched or fault(Fault.NONE))

    # ---- a sequence

    def _take_permit(self, raw: bytes) -> Fault | None:
        try:
            permit = decode_permit(raw)
        except WireMistake:
            return Fault.BAD_PERMIT
        if permit.boot != self.boot:
            return Fault.WRONG_BOOT
        if self.latched:
            return Fault.LATCHED
        self.permit, self._code, self.state, self._done = None, b"", State.PERMIT, False
        self._permit = permit
        return None

    def _seal(self) -> Fault | None:
        import zlib

        if self.state is not State.PERMIT:
            return Fault.WRONG_STATE
        if zlib.crc32(self._code) != self._permit.crc32:
            return Fault.BAD_CRC
        self.permit, self.state = self._permit, State.SEALED
        return None

    def _start(self, index: int) -> None:
        self.runs += 1
        self._header = decode_program(self._code).header
        self._run_index, self.state, self.powered = index, State.RUNNING, True
        self._blocks: deque[Message] = deque()
        self._replies: dict[int, Message] = {}
        self._wanted = self._block_count = self._word_count = 0
        self._at: tuple[Message, int] | None = None
        self._making_safe = False
        self._beat()
        self._dead_at = self.t + 500 * MS
        self._work_at = self.t + self.seat_ticks

    _done = False

    def _beat(self) -> None:
        self._beat_at = self.t + 250 * MS
        state = State.SAFE if self._making_safe else State.RUNNING
        self._reply(Frame.HEARTBEAT, self._run_index, state=state, ticks=self.t & 0xFFFFFFFF)

    def _block(self, message: Message) -> None:
        if message.index < self._wanted:
            self._repeated += 1
            if message.index in self._replies:
                self._send(encode_frame(self._replies[message.index]))
        elif message.index > self._wanted:
            self._reply(Frame.BLOCK_REFUSED, message.index, wanted=self._wanted)
        elif len(self._blocks) <= self.window:
            self._wanted += 1
            self._blocks.append(message)
            if self._at is None and self._work_at == _NEVER and not self._making_safe:
                self._work_at = self.t

    def _work(self) -> None:
        if self._making_safe:
            self._end(Outcome.ABORTED, fault(Fault.ABORTED))
            return
        if self._header.flow is Flow.NONE:
            self._end(Outcome.DONE, fault(Fault.NONE))
            return
        if self._at is None:
            if not self._blocks:
                self._work_at = _NEVER
                return
            self._at = (self._blocks.popleft(), 0)
            if self._at[0].fields["words"] == 0:
                self._end(Outcome.DONE, fault(Fault.NONE))
                return
        self._word()

    def _word(self) -> None:
        assert self._at is not None
        block, number = self._at
        address, words = block.fields["first"] + number, block.fields["words"]
        if self.fail_at == address:
            self._end(Outcome.FAILED, fault(Fault.FAILED, got=17, address=address))
            return
        mask = (words + 7) // 8
        data = block.fields["data"]
        if self._header.flow is Flow.READ or data[number // 8] >> number % 8 & 1:
            self.touched[address] = self.touched.get(address, 0) + 1
            self._word_count += 1
            if self._header.flow is Flow.WRITE:
                self.cells[address] = data[mask + number]
        self._at = (block, number + 1)
        if number + 1 == words:
            self._close_block(block, words)
        self._work_at = self.t + self.word_ticks

    def _close_block(self, block: Message, words: int) -> None:
        self._block_count += 1
        first = block.fields["first"]
        if self._header.flow is Flow.READ:
            reply = self._reply(Frame.BLOCK_DATA, block.index, data=bytes(self.cells[first : first + words]))
        else:
            reply = self._reply(Frame.BLOCK_DONE, block.index, words=words, worst=first, worst_tries=1,
                                failed=0xFFFFFFFF, histogram=words.to_bytes(2, "little") + bytes(62))
        self._replies[block.index] = reply
        self._replies.pop(block.index - self.window, None)
        self._at = None

    def _abort(self) -> None:
        if self.state is not State.RUNNING or self.stubborn:
            return
        second, self._making_safe = self._making_safe, True
        self._work_at = self.t if second else self.t + self.self_timed_ticks

    def _end(self, outcome: Outcome, trouble: bytes) -> None:
        self.powered, self.state, self._done = False, State.SAFE, True
        self._work_at = self._beat_at = self._dead_at = _NEVER
        self.latched = b"" if outcome is Outcome.DONE else trouble
        counts = {"matched": 0xFF, "blocks": self._block_count, "words": self._word_count, "tries": 0}
        done = pack(BLOBS["run_done"], counts)
        tail = pack(BLOBS["run_tail"], {"id": b"\x8f\x0d", "readings": bytes([10, 0, 1, 2])})
        self._answer(self._run_index, outcome, trouble + done + tail)
