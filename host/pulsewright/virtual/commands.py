"""The commands of the host: exactly one closing answer each, whatever the line lost, repeated or brought late."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any, Protocol

from pulsewright.virtual.blocks import BadBlock, Blocks
from pulsewright.virtual.board import RAISED_FULL_MV, VCC_FULL_MV, VCC_STEPS_MV, Board, count_of
from pulsewright.virtual.interpreter import NO_FAULT, Ending
from pulsewright.virtual.loader import Loaded, Unfit, check_permit, load
from pulsewright.virtual.machine import Machine, Trip
from pulsewright.virtual.serial_line import LOWEST_BAUD
from pulsewright.wire.fields import WireMistake, pack
from pulsewright.wire.frames import Message, encode_frame
from pulsewright.wire.permit import Permit, decode_permit
from pulsewright.wire.tables import BLOBS, PROGRAM_BYTES, Fault, Frame, Outcome, State

_NUMBERED = (Frame.RUN, Frame.BLOCK)  # must carry the number of the permit in force; others may carry 0
_WRAP = 1 << 16
Fields = Mapping[str, Any]


class Refusal(Exception):
    """A command that is not accepted."""

    def __init__(self, code: Fault, op: int = 0, pc: int = 0) -> None:
        super().__init__(code.name)
        self.code = code
        self.op = op
        self.pc = pc


class Firmware(Protocol):
    """What the commands want of the rig around them."""

    board: Board
    boot: int

    @property
    def t(self) -> int: ...

    def send(self, frame: bytes) -> None: ...
    def start(self, loaded: Loaded, permit: Permit, blocks: Blocks) -> None: ...
    def trip(self, trip: Trip) -> None: ...
    def fed(self) -> None: ...
    def change_rate(self, baud: int) -> None: ...
    def counters(self) -> tuple[int, int, int]: ...
    def gate_open(self) -> bool: ...
    def making_safe(self) -> bool: ...


class Commands:
    """State between frames. `receive` takes each whole frame; `close_run` is called when a run has ended."""

    def __init__(self, firmware: Firmware) -> None:
        self._rig = firmware
        self.state = State.IDLE
        self.permit: Permit | None = None
        self.number = 0
        self.blocks: Blocks | None = None
        self.latched: Fields | None = None
        self.dropped = 0
        self.repeated = 0
        self.running: Message | None = None
        self._program = bytearray()
        self._loaded: Loaded | None = None
        self._used: set[int] = set()
        self._last: int | None = None
        self._greeted = False  # while a sequence ran: the next command may have any index
        self._kept = b""
        board = firmware.board
        self._nominal_vcc = tuple(count_of(mv, VCC_FULL_MV) for mv in VCC_STEPS_MV)
        self._ceilings = tuple(count_of(mv, RAISED_FULL_MV) for mv in board.ceilings_mv)
        self._do: dict[Frame, Callable[[Fields], bytes]] = {
            Frame.DESCRIBE: self._describe,
            Frame.PERMIT: self._permit,
            Frame.LOAD: self._load,
            Frame.SEAL: self._seal,
            Frame.STATUS: self._status,
            Frame.CLEAR: self._clear,
            Frame.RATE: self._rate,
            Frame.ECHO: lambda fields: bytes(fields["data"]),
        }

    def new_session(self) -> None:
        """A greeting was asked for: another session may begin, with indexes of its own, once nothing runs."""
        if self.running is None:
            self._last = None
        else:
            self._greeted = True

    # ---- frames ---------------------------------------------------------------------------------------------------

    def receive(self, message: Message) -> None:
        """A whole frame from the host."""
        kind = message.kind
        if kind >= Frame.HEARTBEAT or not self._is_of_this_permit(message):
            self.dropped += 1
            return
        if self.number and message.permit == self.number:
            self._rig.fed()
        if kind is Frame.KEEP_ALIVE:
            return
        if kind is Frame.BLOCK:
            self._block(message)
        else:
            self._command(message)

    def _is_of_this_permit(self, message: Message) -> bool:
        if message.kind is Frame.PERMIT:
            return True
        if message.permit == self.number:
            return message.permit != 0 or message.kind not in _NUMBERED
        if message.permit == 0:
            return message.kind not in _NUMBERED
        return False

    def _block(self, message: Message) -> None:
        if self.blocks is None or self.running is None:
            self.dropped += 1
            return
        before = self.blocks.repeated
        try:
            self.blocks.receive(message)
        except BadBlock as bad:
            self._rig.trip(Trip(bad.code, got=message.index))
        self.repeated += self.blocks.repeated - before

    def _command(self, message: Message) -> None:
        if self._last is not None:
            ahead = (message.index - self._last) % _WRAP
            if ahead == 0:
                self.repeated += 1
                if self.running is not None:
                    self.beat()
                else:
                    self._rig.send(self._kept)
                return
            if ahead >= _WRAP // 2 and not self._greeted:
                self.dropped += 1
                return
        if self.running is not None:
            self.dropped += 1
            return
        self._last, self._greeted = message.index, False
        if message.kind is Frame.RUN:
            self._run(message)
            return
        try:
            self._check_latch(message.kind)
            data = self._do[message.kind](message.fields)
        except Refusal as refusal:
            self._refuse(message, refusal)
            return
        self._heartbeat(message)
        self._answer(message, Outcome.DONE, data)

    def _check_latch(self, kind: Frame) -> None:
        if self.latched is not None and kind in (Frame.PERMIT, Frame.LOAD, Frame.SEAL, Frame.RUN):
            raise Refusal(Fault.LATCHED)

    def _refuse(self, message: Message, refusal: Refusal) -> None:
        tick = self._rig.t & 0xFFFFFFFF
        fault = {**NO_FAULT, "code": refusal.code, "op": refusal.op, "pc": refusal.pc, "tick": tick}
        self._answer(message, Outcome.REFUSED, pack(BLOBS["fault"], fault))

    def _heartbeat(self, message: Message) -> None:
        state = State.SAFE if self._rig.making_safe() else self.state
        fields = {"state": state, "ticks": self._rig.t & 0xFFFFFFFF}
        self._rig.send(encode_frame(Message(Frame.HEARTBEAT, message.permit, message.index, fields)))

    def beat(self) -> None:
        """The command under way is running."""
        if self.running is not None:
            self._heartbeat(self.running)

    def _answer(self, message: Message, outcome: Outcome, data: bytes) -> None:
        fields = {"outcome": outcome, "data": data}
        self._kept = encode_frame(Message(Frame.ANSWER, message.permit, message.index, fields))
        self._rig.send(self._kept)

    # ---- one by one -----------------------------------------------------------------------------------------------

    def _describe(self, fields: Fields) -> bytes:
        page = self._rig.board.page(fields["page"])
        if page is None:
            raise Refusal(Fault.BAD_FRAME)
        return page

    def _permit(self, fields: Fields) -> bytes:
        try:
            permit = decode_permit(fields["permit"])
        except WireMistake:
            raise Refusal(Fault.BAD_FRAME) from None
        if permit.boot != self._rig.boot:
            raise Refusal(Fault.WRONG_BOOT)
        if permit.number == 0 or permit.number in self._used:
            raise Refusal(Fault.WRONG_PERMIT)
        if not check_permit(permit, self._ceilings, self._nominal_vcc):
            raise Refusal(Fault.BAD_PERMIT)
        self._used.add(permit.number)
        self.permit, self.number = permit, permit.number
        self.state = State.PERMIT
        self._program.clear()
        self._loaded = None
        self.blocks = None
        return b""

    def _load(self, fields: Fields) -> bytes:
        if self.state is not State.PERMIT:
            raise Refusal(Fault.WRONG_STATE)
        at, code = fields["offset"], fields["code"]
        if at + len(code) > PROGRAM_BYTES:
            raise Refusal(Fault.TOO_LONG)
        if at > len(self._program):
            raise Refusal(Fault.BAD_FRAME)
        self._program[at : at + len(code)] = code
        return b""

    def _seal(self, fields: Fields) -> bytes:
        if self.state is not State.PERMIT or self.permit is None:
            raise Refusal(Fault.WRONG_STATE)
        try:
            self._loaded = load(bytes(self._program), self.permit)
        except Unfit as unfit:
            raise Refusal(unfit.code, unfit.op, unfit.pc) from None
        self.state = State.SEALED
        board = self._rig.board
        self.blocks = Blocks(self.number, self._loaded.header, board.window_blocks, self._rig.send)
        return b""

    def _run(self, message: Message) -> None:
        try:
            self._check_latch(message.kind)
            if self.state is not State.SEALED or self._loaded is None or self.permit is None or self.blocks is None:
                raise Refusal(Fault.WRONG_STATE)
        except Refusal as refusal:
            self._refuse(message, refusal)
            return
        self.state = State.RUNNING
        self.running = message
        self.beat()
        self._rig.start(self._loaded, self.permit, self.blocks)

    def close_run(self, m: Machine, ending: Ending) -> None:
        """The closing answer of the run; a trip is latched if nothing was before."""
        message = self.running
        assert message is not None
        self.running = None
        self.state = State.SAFE
        fault = ending.fault or NO_FAULT
        if ending.outcome is Outcome.TRIPPED and self.latched is None:
            self.latched = fault
        blocks = m.blocks
        done = {
            "matched": m.matched,
            "blocks": (blocks.done if blocks else 0) & 0xFFFF,
            "words": blocks.words_done if blocks else 0,
            "tries": m.tries & 0xFFFF,
        }
        readings = b"".join(
            offset.to_bytes(2, "little") + count.to_bytes(2, "little") for offset, count in m.readings.items()
        )
        tail = {"id": m.id_bytes, "readings": readings}
        data = pack(BLOBS["fault"], fault) + pack(BLOBS["run_done"], done) + pack(BLOBS["run_tail"], tail)
        self._answer(message, ending.outcome, data)

    def _status(self, fields: Fields) -> bytes:
        damaged, dropped, repeated = (min(count, 0xFFFF) for count in self._rig.counters())
        status = {
            "state": self.state,
            "gate": int(self._rig.gate_open()),
            "damaged": damaged,
            "dropped": dropped,
            "repeated": repeated,
            "boot": self._rig.boot,
        }
        return pack(BLOBS["status"], status) + pack(BLOBS["fault"], self.latched or NO_FAULT)

    def _clear(self, fields: Fields) -> bytes:
        self.latched = None
        return b""

    def _rate(self, fields: Fields) -> bytes:
        baud = fields["baud"]
        if not LOWEST_BAUD <= baud <= self._rig.board.top_baud:
            raise Refusal(Fault.BAD_FRAME)
        self._rig.change_rate(baud)
        return b""
