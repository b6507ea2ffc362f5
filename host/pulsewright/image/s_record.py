"""Motorola S-records: read strictly, each fault by name and line; written with a count record and an end record.

Source: the record tables of TI SPRU513Z and of two notes on S19 files, as listed in the project's facts. The parser is
our own for the reason `intel_hex` gives; the writer is a dozen lines, which no library is worth its dependencies for.
An S0 header may have no address field at all, as some firmware writes it; its content is free text either way. Some
tools write no end record where there is no start address: a file that counts its records is whole all the same. Every
address is absolute, so S1, S2 and S3 may stand in one file, and any of S7, S8 and S9 ends it: some tools shorten the
addresses of low bytes, and write one kind of end whatever the data. A record may begin at its last short address and
run on above it, as srec_cat makes them; no source knows of addresses that wrap.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from pulsewright.errors import ImageMistake
from pulsewright.image.lines import NOT_HEX, mistake, numbered_records, short
from pulsewright.image.memory import Image, Piece, join_pieces

_ADDRESS_BYTES = {1: 2, 2: 3, 3: 4, 5: 2, 6: 3, 7: 4, 8: 3, 9: 2}  # by type
_DATA = (1, 2, 3)
_COUNT = (5, 6)
_END_OF = {1: 9, 2: 8, 3: 7}  # data type -> the end that belongs to it
_DIGITS = tuple("0123456789")
_RECORD_BYTES = 16
_4G = 1 << 32


@dataclass
class _State:
    name: str
    kind: int = 0  # the longest of the data records so far
    records: int = 0  # data records
    count_line: int = 0
    end_line: int = 0
    last_line: int = 0
    pieces: list[Piece] = field(default_factory=list)


def parse_s_records(text: str, name: str = "") -> Image:
    """The image of a text of S-records; ImageMistake, with file, line and field, at the first fault."""
    state = _State(name)
    for number, line, record in numbered_records(text):
        state.last_line = number
        _take(state, number, line, record)
    if not state.last_line:
        raise _mistake(
            state, 0, "", "the image file is empty", wanted="records that begin with S", got="none",
            hint="get the file again; is it the right one?",
        )  # fmt: skip
    if not (state.end_line or state.count_line):
        raise _mistake(
            state, state.last_line, "", "the end record is missing: the file may have been cut off",
            wanted=f"a count of the records, or an S{_END_OF.get(state.kind, 9)} record after the last one",
            got=f"the file ends after line {state.last_line}", hint="get the file again; its last part may be lost",
        )  # fmt: skip
    image = join_pieces(state.pieces, name=name)
    if not image.segments:
        raise _mistake(
            state, state.last_line, "", "the image file holds no data", wanted="at least one data record", got="none",
            hint="is it the right file?",
        )  # fmt: skip
    return image


def _take(state: _State, number: int, line: str, record: str) -> None:
    if state.end_line:
        raise _mistake(
            state, number, "", f"a record after the end record of line {state.end_line}",
            wanted="nothing after the end record", got=short(record),
            hint="two files may have been put together: give both files to the command instead",
        )  # fmt: skip
    kind, raw = _decode(state, number, line, record)
    size = _ADDRESS_BYTES.get(kind, 0)
    address, data = int.from_bytes(raw[1 : 1 + size], "big"), raw[1 + size : -1]
    if kind in _DATA:
        _add_data(state, number, kind, address, data)
    elif kind in _COUNT:
        _check_count(state, number, address, data)
    elif kind:
        _end(state, number, kind, data)


def _decode(state: _State, number: int, line: str, record: str) -> tuple[int, bytes]:
    """Type and bytes of a record, from the count to the checksum; mark, digits, length and sum are right."""
    column = line.index(record[0]) + 1
    if record[0] not in "Ss" or record[1:2] not in _DIGITS:
        raise _mistake(
            state, number, f"column {column}", "a line that is not a record", wanted="S and a digit first",
            got=short(record), hint="take it out, if it is a remark",
        )  # fmt: skip
    kind, digits = int(record[1]), record[2:]
    strange = NOT_HEX.search(digits)
    if strange:
        raise _mistake(
            state, number, f"column {column + 2 + strange.start()}", "a character that is no hex digit",
            wanted="0-9, A-F", got=repr(strange[0]), hint="get the file again, or compare with another copy",
        )  # fmt: skip
    if kind == 4:
        raise _mistake(
            state, number, "type", "S4 is reserved", wanted="S0 to S3, S5 to S9", got="S4",
            hint="make the file again with another tool",
        )  # fmt: skip
    if len(digits) % 2:
        raise _mistake(
            state, number, "length", "an odd number of hex digits: one is missing or one too many",
            wanted="two digits a byte", got=f"{len(digits)} digits", hint="compare the line with another copy",
        )  # fmt: skip
    raw = bytes.fromhex(digits)
    least = 1 + _ADDRESS_BYTES.get(kind, 0) + 1
    if len(raw) < least or (len(raw) > 1 and raw[0] + 1 < least):
        raise _mistake(
            state, number, "length", "the record is too short", wanted=f"a count of at least {least - 1:02X}",
            got=f"{len(raw)} bytes" if len(raw) < least else f"{raw[0]:02X}", hint="compare the line with another copy",
        )  # fmt: skip
    _check_sum(state, number, raw)
    return kind, raw


def _check_sum(state: _State, number: int, raw: bytes) -> None:
    if len(raw) != raw[0] + 1:
        raise _mistake(
            state, number, "length", "the record's count and its digits disagree",
            wanted=f"{raw[0]} bytes after the count (count {raw[0]:02X})",
            got=f"{len(raw) - 1} bytes ({len(raw) - 1:02X})",
            hint="the record was cut or joined on its way; get the file again",
        )  # fmt: skip
    if sum(raw) & 0xFF != 0xFF:
        raise _mistake(
            state, number, "checksum", "the record's checksum is wrong", wanted=f"{~sum(raw[:-1]) & 0xFF:02X}",
            got=f"{raw[-1]:02X}",
            hint="a digit of the record was changed: compare it with another copy before the checksum is corrected",
        )  # fmt: skip


def _add_data(state: _State, number: int, kind: int, address: int, data: bytes) -> None:
    if state.count_line:
        raise _mistake(
            state, number, "type", f"a data record after the count record of line {state.count_line}",
            wanted="the count behind all data records", got=f"S{kind} at address {address:04X}",
            hint="two files may have been put together: part them, and give both to the command",
        )  # fmt: skip
    if address + len(data) > _4G:
        raise _mistake(
            state, number, "address", "a record runs past address FFFFFFFF",
            wanted=f"at most {_4G - address} data bytes from {address:X}", got=f"{len(data)} data bytes",
            hint="is it the right file? no chip lies so high",
        )  # fmt: skip
    state.kind = max(kind, state.kind)
    state.records += 1
    state.pieces.append(Piece(address, data, number))


def _check_count(state: _State, number: int, count: int, data: bytes) -> None:
    if data or count != state.records:
        raise _mistake(
            state, number, "count", "the file counts another number of data records than it has",
            wanted=f"{state.records}, as counted here", got=f"{count}" + (" and data" if data else ""),
            hint="records are missing or doubled: get the file again",
        )  # fmt: skip
    state.count_line = number


def _end(state: _State, number: int, kind: int, data: bytes) -> None:
    if data:
        raise _mistake(
            state, number, "length", f"the end record (S{kind}) has data", wanted="an address and nothing else",
            got=f"{len(data)} data bytes", hint="compare the line with another copy",
        )  # fmt: skip
    state.end_line = number


def _mistake(state: _State, line: int, key: str, what: str, *, wanted: str, got: str, hint: str) -> ImageMistake:
    return mistake(state.name, line, key, what, wanted=wanted, got=got, hint=hint)


def _record(kind: int, address: int, size: int, data: bytes = b"") -> str:
    body = address.to_bytes(size, "big") + data
    raw = bytes([len(body) + 1]) + body
    return f"S{kind}{(raw + bytes([~sum(raw) & 0xFF])).hex().upper()}\n"


def write_s_records(image: Image) -> str:
    """The image as S-records of 16 bytes, with the shortest addresses that reach; ValueError past 4G or without any."""
    if image.last >= _4G:
        raise ValueError(f"S-records end at FFFFFFFF, the image at {image.last:X}")
    kind = next(kind for kind in _DATA if image.last < 1 << 8 * _ADDRESS_BYTES[kind])
    size = _ADDRESS_BYTES[kind]
    lines = [_record(0, 0, 2)]
    for segment in image.segments:
        lines += [
            _record(kind, segment.start + at, size, segment.data[at : at + _RECORD_BYTES])
            for at in range(0, len(segment.data), _RECORD_BYTES)
        ]
    count = len(lines) - 1
    if count < 1 << 24:
        lines.append(_record(5 if count < 1 << 16 else 6, count, 2 if count < 1 << 16 else 3))
    lines.append(_record(_END_OF[kind], 0, size))
    return "".join(lines)
