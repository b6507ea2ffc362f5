"""Frames: bodies to bytes on the line and back, with the counters of what was damaged; hello outside the framing."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import cache
from typing import Any, cast

from pulsewright.wire.fields import WireMistake, pack, unpack
from pulsewright.wire.tables import (
    ABORT_RUN,
    FRAME_FIELDS,
    HELLO_FIELDS,
    HELLO_LENGTH,
    HELLO_MAGIC,
    Frame,
)

_HEAD = (("kind", "u8"), ("permit", "u16"), ("index", "u16"))
_HEAD_BYTES = 5
_LONGEST = 1024  # a stretch without a zero that is longer than any frame is noise


@cache
def _crc_function() -> Callable[[bytes], int]:
    from crcmod.predefined import mkPredefinedCrcFun  # at first use: start-up of a command stays short

    return cast("Callable[[bytes], int]", mkPredefinedCrcFun("x-25"))


def crc16(data: bytes) -> int:
    """CRC-16/IBM-SDLC (ISO/IEC 13239): reflected 1021, init FFFF, xorout FFFF; "123456789" gives 906E."""
    return _crc_function()(data)


@dataclass(frozen=True)
class Message:
    """A decoded frame: its kind, permit, index and fields."""

    kind: Frame
    permit: int
    index: int
    fields: Mapping[str, Any] = field(default_factory=dict)


def encode_frame(message: Message) -> bytes:
    """The frame's bytes on the line, the ending zero included."""
    from cobs import cobs

    head = pack(_HEAD, {"kind": message.kind, "permit": message.permit, "index": message.index})
    body = head + pack(FRAME_FIELDS[message.kind], message.fields)
    return bytes(cobs.encode(body + crc16(body).to_bytes(2, "little"))) + b"\0"


def decode_frame(stuffed: bytes) -> Message:
    """A frame from the bytes between two zeros; WireMistake for damage of any kind."""
    from cobs import cobs

    try:
        body = bytes(cobs.decode(stuffed))
    except cobs.DecodeError as mistake:
        raise WireMistake(str(mistake)) from None
    if len(body) < _HEAD_BYTES + 2 or crc16(body[:-2]) != int.from_bytes(body[-2:], "little"):
        raise WireMistake("CRC-16 does not hold")
    try:
        kind = Frame(body[0])
    except ValueError:
        raise WireMistake(f"unknown frame {body[0]:02X}") from None
    fields = unpack(FRAME_FIELDS[kind], body[_HEAD_BYTES:-2])
    return Message(kind, int.from_bytes(body[1:3], "little"), int.from_bytes(body[3:5], "little"), fields)


class FrameReader:
    """Cuts a byte stream into frames; counts damage; sees a run of zeros as the abort."""

    def __init__(self) -> None:
        self._stretch = bytearray()
        self._zeros = 0
        self.damaged = 0
        self.aborts = 0

    def feed(self, byte: int) -> Message | bytes | None:
        """The frame that this byte ends, the raw stretch if it is no frame of ours (a hello), or None.

        A damaged stretch is counted and returned raw, so that a reader of hellos may look at it. The abort shows as a
        higher `aborts`.
        """
        if byte:
            self._zeros = 0
            if len(self._stretch) < _LONGEST:
                self._stretch.append(byte)
            return None
        self._zeros += 1
        if self._zeros == ABORT_RUN:
            self.aborts += 1
        if not self._stretch:
            return None
        stretch = bytes(self._stretch)
        self._stretch.clear()
        try:
            return decode_frame(stretch)
        except WireMistake:
            self.damaged += 1
            return stretch


@dataclass(frozen=True)
class Hello:
    """The fixed greeting of a rig."""

    layout: int
    window_blocks: int
    receive_bytes: int
    fingerprint: int
    boot: int
    fault: int = 0
    fault_op: int = 0
    fault_pc: int = 0
    fault_tick: int = 0
    fault_got: int = 0
    fault_low: int = 0

    def encode(self) -> bytes:
        """The 32 bytes."""
        body = HELLO_MAGIC + pack(HELLO_FIELDS, vars(self))
        body = body.ljust(HELLO_LENGTH - 2, b"\0")
        return body + crc16(body).to_bytes(2, "little")


def decode_hello(data: bytes) -> Hello:
    """A greeting from 32 bytes; WireMistake if it is none."""
    if len(data) != HELLO_LENGTH or not data.startswith(HELLO_MAGIC):
        raise WireMistake("no hello")
    if crc16(data[:-2]) != int.from_bytes(data[-2:], "little"):
        raise WireMistake("a damaged hello")
    length = len(pack(HELLO_FIELDS, dict.fromkeys((name for name, _ in HELLO_FIELDS), 0)))
    start = len(HELLO_MAGIC)
    return Hello(**unpack(HELLO_FIELDS, data[start : start + length]))
