"""Intel HEX: read strictly, each fault by name and line; written by the `intelhex` library.

Source: Intel "Hexadecimal Object File Format Specification", Revision A, 1/6/88. The parser is our own because a person
who repairs an old file needs the line, the field, and the number that would have been right; the library stops at its
first doubt with less than that, and knows nothing of an overlap's other line or of mixed addressing.
"""

from __future__ import annotations

import io
import re
from dataclasses import dataclass, field

from pulsewright.errors import ImageMistake, Where
from pulsewright.image.memory import Image, Piece, join_pieces

DATA, END, SEGMENT_BASE, SEGMENT_START, LINEAR_BASE, LINEAR_START = range(6)
_NAMES = {
    DATA: "data",
    END: "end of file",
    SEGMENT_BASE: "extended segment address",
    SEGMENT_START: "start segment address",
    LINEAR_BASE: "extended linear address",
    LINEAR_START: "start linear address",
}
# Data bytes each type must have; a data record may have any number.
_LENGTHS = {END: 0, SEGMENT_BASE: 2, SEGMENT_START: 4, LINEAR_BASE: 2, LINEAR_START: 4}
_64K = 0x1_0000
_4G = 0x1_0000_0000
_NOT_HEX = re.compile(r"[^0-9A-Fa-f]")
# Old disk systems filled the last block of a text file with this; it carries nothing.
_PADDING = "\x1a"
_RECORD_BYTES = 16


@dataclass
class _State:
    """What stays in force from line to line."""

    name: str
    base: int = 0
    base_type: int | None = None
    base_line: int = 0
    end_line: int = 0
    last_line: int = 0
    pieces: list[Piece] = field(default_factory=list)


def parse_intel_hex(text: str, name: str = "") -> Image:
    """The image of an Intel HEX text; ImageMistake, with file, line and field, at the first fault.

    Lower-case digits, any line ends, blank lines and end-of-text padding are taken. Only data records use their
    address field; that of the others is ignored, because old files put a start address or a base there.
    """
    state = _State(name)
    for number, line in enumerate(text.split("\n"), start=1):
        record = line.strip(" \t\r" + _PADDING)
        if record:
            state.last_line = number
            _take(state, number, line, record)
    if not state.last_line:
        raise _mistake(state, 0, "", "the image file is empty", wanted="records that begin with ':'", got="none")
    if not state.end_line:
        raise _mistake(
            state,
            state.last_line,
            "",
            "the end record is missing: the file may have been cut off",
            wanted="`:00000001FF` after the last record",
            got=f"the file ends after line {state.last_line}",
            hint="get the file again; its last part may be lost",
        )
    image = join_pieces(state.pieces, name=name)
    if not image.segments:
        raise _mistake(
            state, state.end_line, "", "the image file holds no data", wanted="at least one data record", got="none"
        )
    return image


def _take(state: _State, number: int, line: str, record: str) -> None:
    """Check one record and do what it says."""
    if state.end_line:
        raise _mistake(
            state,
            number,
            "",
            f"a record after the end record of line {state.end_line}",
            wanted="nothing after the end record",
            got=_short(record),
            hint="two files may have been put together: remove the first end record, and join them on purpose",
        )
    raw = _decode(state, number, line, record)
    kind = raw[3]
    _check_type(state, number, kind, raw[0])
    offset, data = int.from_bytes(raw[1:3], "big"), raw[4:-1]
    if kind == DATA:
        _add_data(state, number, offset, data)
    elif kind in (SEGMENT_BASE, LINEAR_BASE):
        _set_base(state, number, kind, int.from_bytes(data, "big"))
    elif kind == END:
        state.end_line = number


def _decode(state: _State, number: int, line: str, record: str) -> bytes:
    """The bytes of a record, from LL to the checksum; its mark, digits, length and sum are right."""
    column = line.index(record[0]) + 1
    if record[0] != ":":
        raise _mistake(
            state, number, f"column {column}", "a line that is not a record", wanted="':' first", got=_short(record)
        )
    digits = record[1:]
    strange = _NOT_HEX.search(digits)
    if strange:
        at = column + 1 + strange.start()
        raise _mistake(
            state, number, f"column {at}", "a character that is no hex digit", wanted="0-9, A-F", got=repr(strange[0])
        )
    if len(digits) % 2:
        raise _mistake(
            state,
            number,
            "length",
            "an odd number of hex digits: one is missing or one too many",
            wanted="two digits a byte",
            got=f"{len(digits)} digits",
        )
    raw = bytes.fromhex(digits)
    if len(raw) < 5:
        raise _mistake(
            state,
            number,
            "length",
            "the record is too short",
            wanted="at least 10 hex digits after the ':'",
            got=f"{len(digits)}",
        )
    if len(raw) != raw[0] + 5:
        raise _mistake(
            state,
            number,
            "length",
            "the record's length byte and its digits disagree",
            wanted=f"{raw[0]} data bytes (length byte {raw[0]:02X})",
            got=f"{len(raw) - 5} data bytes ({len(raw) - 5:02X})",
            hint="the record was cut or joined on its way; get the file again",
        )
    if sum(raw) & 0xFF:
        raise _mistake(
            state,
            number,
            "checksum",
            "the record's checksum is wrong",
            wanted=f"{-sum(raw[:-1]) & 0xFF:02X}",
            got=f"{raw[-1]:02X}",
            hint="a digit of the record was changed: compare it with another copy before the checksum is corrected",
        )
    return raw


def _check_type(state: _State, number: int, kind: int, length: int) -> None:
    if kind not in _NAMES:
        raise _mistake(
            state, number, "type", "a record type Intel HEX does not know", wanted="00 to 05", got=f"{kind:02X}"
        )
    if length != _LENGTHS.get(kind, length):
        raise _mistake(
            state,
            number,
            "length",
            f"the {_NAMES[kind]} record (type {kind:02X}) has a wrong length",
            wanted=f"{_LENGTHS[kind]} data bytes",
            got=f"{length}",
        )


def _set_base(state: _State, number: int, kind: int, value: int) -> None:
    """A base stays in force until the next one; the specification leaves a mixture of both kinds undefined."""
    if state.base_type not in (None, kind):
        raise _mistake(
            state,
            number,
            "type",
            f"mixed addressing: types 02 and 04 in one file, on lines {state.base_line} and {number}",
            wanted=f"type {state.base_type:02X}, as on line {state.base_line}",
            got=f"type {kind:02X}, {_NAMES[kind]}",
            hint="make the file again with one kind of base",
        )
    if state.base_type is None:
        state.base_type, state.base_line = kind, number
    state.base = value << (4 if kind == SEGMENT_BASE else 16)


def _add_data(state: _State, number: int, offset: int, data: bytes) -> None:
    """Place a data record: with a type 02 base its offset wraps inside 64K, with a type 04 base at 4G."""
    if state.base_type == SEGMENT_BASE:
        room = _64K - offset
        state.pieces.append(Piece(state.base + offset, data[:room], number))
        state.pieces.append(Piece(state.base, data[room:], number))
    elif state.base_type == LINEAR_BASE:
        room = _4G - state.base - offset
        state.pieces.append(Piece(state.base + offset, data[:room], number))
        state.pieces.append(Piece(0, data[room:], number))
    elif offset + len(data) > _64K:
        raise _mistake(
            state,
            number,
            "address",
            "a record runs past address FFFF before any base record says whether it wraps",
            wanted=f"at most {_64K - offset} data bytes from {offset:04X}",
            got=f"{len(data)} data bytes",
        )
    else:
        state.pieces.append(Piece(offset, data, number))


def _short(record: str) -> str:
    return repr(record if len(record) <= 24 else record[:24] + "...")


def _mistake(state: _State, line: int, key: str, what: str, *, wanted: str, got: str, hint: str = "") -> ImageMistake:
    return ImageMistake(what, where=Where(state.name, line, key), wanted=wanted, got=got, hint=hint)


def write_intel_hex(image: Image) -> str:
    """The image as Intel HEX text, 16 bytes a record, type 04 bases above 64K; ValueError past 4G or without bytes."""
    from intelhex import IntelHex  # loaded only to write: a burn never needs it

    if image.last >= _4G:
        raise ValueError(f"Intel HEX ends at FFFFFFFF, the image at {image.last:X}")
    out = IntelHex()
    for segment in image.segments:
        out.puts(segment.start, segment.data)
    text = io.StringIO()
    out.write_hex_file(text, byte_count=_RECORD_BYTES)
    return text.getvalue()
