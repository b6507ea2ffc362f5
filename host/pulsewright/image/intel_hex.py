"""Intel HEX: read strictly, each fault by name and line; written by the `intelhex` library.

Source: Intel "Hexadecimal Object File Format Specification", Revision A, 1/6/88. The parser is our own because a person
who repairs an old file needs the line, the field, and the number that would have been right; the library stops at its
first doubt with less than that, and knows nothing of an overlap's other line or of mixed addressing.
"""

from __future__ import annotations

import io
from dataclasses import dataclass, field

from pulsewright.errors import ImageMistake
from pulsewright.image.lines import NOT_HEX, mistake, numbered_records, short
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
_RECORD_BYTES = 16


@dataclass
class _State:
    """What stays in force from line to line."""

    name: str
    base: int = 0
    base_type: int | None = None
    base_line: int = 0
    past_64k: ImageMistake | None = None  # held until the first base says whether addresses are linear
    end_line: int = 0
    last_line: int = 0
    pieces: list[Piece] = field(default_factory=list)


def parse_intel_hex(text: str, name: str = "") -> Image:
    """The image of an Intel HEX text; ImageMistake, with file, line and field, at the first fault.

    Lower-case digits, any line ends, blank lines and end-of-text padding are taken. Only data records use their
    address field; that of the others is ignored, because old files put a start address or a base there. What has one
    reading only is taken: a change between base types 02 and 04 while the base is 0, as objcopy makes it, and a record
    past FFFF in front of the first base, where that is a linear one.
    """
    state = _State(name)
    for number, line, record in numbered_records(text):
        state.last_line = number
        _take(state, number, line, record)
    if not state.last_line:
        raise _mistake(
            state,
            0,
            "",
            "the image file is empty",
            wanted="records that begin with ':'",
            got="none",
            hint="get the file again; is it the right one?",
        )
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
    if state.past_64k:
        raise state.past_64k
    image = join_pieces(state.pieces, name=name)
    if not image.segments:
        raise _mistake(
            state,
            state.end_line,
            "",
            "the image file holds no data",
            wanted="at least one data record",
            got="none",
            hint="is it the right file?",
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
            got=short(record),
            hint="two files may have been put together: part them behind the end record, and give both to the command",
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
            state,
            number,
            f"column {column}",
            "a line that is not a record",
            wanted="':' first",
            got=short(record),
            hint="take the line out, if it is a remark; else compare it with another copy",
        )
    digits = record[1:]
    strange = NOT_HEX.search(digits)
    if strange:
        at = column + 1 + strange.start()
        raise _mistake(
            state,
            number,
            f"column {at}",
            "a character that is no hex digit",
            wanted="0-9, A-F",
            got=repr(strange[0]),
            hint="get the file again, or compare the line with another copy",
        )
    if len(digits) % 2:
        raise _mistake(
            state,
            number,
            "length",
            "an odd number of hex digits: one is missing or one too many",
            wanted="two digits a byte",
            got=f"{len(digits)} digits",
            hint="compare the line with another copy",
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
            hint="the line was cut: get the file again",
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
            state,
            number,
            "type",
            "a record type Intel HEX does not know",
            wanted="00 to 05",
            got=f"{kind:02X}",
            hint="make the file again as plain Intel HEX",
        )
    if length != _LENGTHS.get(kind, length):
        raise _mistake(
            state,
            number,
            "length",
            f"the {_NAMES[kind]} record (type {kind:02X}) has a wrong length",
            wanted=f"{_LENGTHS[kind]} data bytes",
            got=f"{length}",
            hint="compare the line with another copy, or make the file again",
        )


def _set_base(state: _State, number: int, kind: int, value: int) -> None:
    """A base stays in force until the next one; the specification leaves a mixture of both kinds undefined.

    With a base of 0 in force a change means the same whether the two replace each other or add up.
    """
    if state.base_type not in (None, kind) and state.base:
        raise _mistake(
            state,
            number,
            "type",
            f"mixed addressing: types 02 and 04 in one file, on lines {state.base_line} and {number}",
            wanted=f"type {state.base_type:02X}, as on line {state.base_line}",
            got=f"type {kind:02X}, {_NAMES[kind]}",
            hint="make the file again with one kind of base",
        )
    if state.base_type is None and kind == LINEAR_BASE:
        state.past_64k = None
    if state.base_type != kind:
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
    else:
        state.pieces.append(Piece(offset, data, number))
    if state.base_type is None and offset + len(data) > _64K and not state.past_64k:
        state.past_64k = _mistake(
            state,
            number,
            "address",
            "a record runs past address FFFF, and no linear base record says that it may",
            wanted=f"at most {_64K - offset} data bytes from {offset:04X}",
            got=f"{len(data)} data bytes",
            hint="make the file again with base records (type 04), which reach past 64K",
        )


def _mistake(state: _State, line: int, key: str, what: str, *, wanted: str, got: str, hint: str) -> ImageMistake:
    return mistake(state.name, line, key, what, wanted=wanted, got=got, hint=hint)


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
