"""Load an image file, its format told from its content; save one, its format told from its name."""

from __future__ import annotations

import re
from pathlib import Path

from pulsewright.errors import ImageMistake, UsageMistake, Where
from pulsewright.files import read_whole, write_whole
from pulsewright.image.intel_hex import parse_intel_hex, write_intel_hex
from pulsewright.image.lines import short
from pulsewright.image.memory import Image, image_of
from pulsewright.image.raw import parse_raw
from pulsewright.image.s_record import parse_s_records, write_s_records

INTEL_HEX = "intel-hex"
S_RECORD = "s-record"
RAW = "raw"
FORMATS = (INTEL_HEX, S_RECORD, RAW)
HEX_SUFFIXES = (".hex", ".ihx")
S_SUFFIXES = (".s19", ".s28", ".s37", ".srec", ".mot")
RAW_MARK = "raw:"  # before a file's name: its bytes as they are, whatever they look like

_MARK_OF_UTF8 = b"\xef\xbb\xbf"
_BLANKS = b" \t\r\n"
_RECORD_START = re.compile(rb":[0-9A-Fa-f]{10}")
_PLAIN_TEXT = bytes(range(0x20, 0x7F)) + b"\t\r\n\x1a"
_S_START = re.compile(rb"[Ss][0-9][0-9A-Fa-f]{6}")
_CONTROL = re.compile(rb"[\x00-\x08\x0e-\x1f\x7f]")  # line ends, tab, form feed and its like are text
_UPPER_HALF = bytes(range(0x80, 0x100))
_MARKS_OF_UTF16 = (b"\xff\xfe", b"\xfe\xff")
# So many bytes that are all readable without one line's end are no chance: 16 random ones are so once in 5 million.
_WORDS = 16
# Files that carry an image inside: what they begin with, what they are, what to do. The first bytes of the formats'
# own specifications, from memory.
_WRAPPED = (
    (b"\x7fELF", "an ELF object file", "objcopy -O ihex FILE OUT.hex makes Intel HEX of it;"),
    (b"PK\x03\x04", "a ZIP archive", "unpack it first;"),
    (b"\x1f\x8b\x08", "a gzip archive", "unpack it first;"),
)


def load(path: Path | str, *, format: str | None = None) -> Image:  # noqa: A002 - the trade's word for it
    """The image in a file; `format` is one of FORMATS, or told from the content.

    FileMistake where the file cannot be read, ImageMistake where it is empty, damaged or no image.
    """
    return load_told(path, format=format)[0]


def load_told(path: Path | str, *, format: str | None = None) -> tuple[Image, str]:  # noqa: A002 - as in load
    """As `load`, and the format that the file was taken for."""
    chosen = _checked(format)
    data = read_whole(path)
    name = str(path)
    if not data or (chosen != RAW and not data.removeprefix(_MARK_OF_UTF8).strip(_BLANKS)):
        raise ImageMistake(
            "the image file is empty",
            where=Where(name),
            wanted="at least one byte of data",
            got=f"{len(data)} bytes{', all of them blanks' if data else ''}",
            hint=f"get the file again{f'; {RAW_MARK}{name} takes the blanks as bytes' if data else ''}",
        )
    if chosen is None:
        chosen = tell_format(data, name)
    if chosen == RAW:
        return parse_raw(data, name), chosen
    # Latin-1 maps every byte to a character, so a damaged byte is reported at its column, not as a coding fault.
    text = data.removeprefix(_MARK_OF_UTF8).decode("latin-1")
    return (parse_intel_hex if chosen == INTEL_HEX else parse_s_records)(text, name), chosen


def tell_format(data: bytes, name: str = "") -> str:
    """INTEL_HEX, S_RECORD or RAW from the content; the name only decides where a damaged file could be raw bytes too.

    ImageMistake for what would be burnt as something else than it is: readable text that holds no records, and object
    files and archives, which hold an image inside.
    """
    start = data.removeprefix(_MARK_OF_UTF8).lstrip(_BLANKS)
    found = _records(start, name)
    if found:
        return found
    taken_for, hint = _no_image(data)
    if taken_for:
        raise ImageMistake(
            f"the image file is {taken_for}, and neither Intel HEX nor S-records",
            where=Where(name),
            wanted="Intel HEX, Motorola S-records, or the chip's bytes",
            got=short(data[:40].decode("latin-1")),
            hint=f"{hint} {RAW_MARK}{name or 'FILE'} takes its bytes as they are",
        )
    return RAW


def _records(start: bytes, name: str) -> str:
    """The kind of records that the bytes are, damaged or not; "" for none."""
    suffix = Path(name).suffix.lower()
    named = INTEL_HEX if suffix in HEX_SUFFIXES else S_RECORD if suffix in S_SUFFIXES else ""
    strange = len(start.translate(None, _PLAIN_TEXT))
    readable = strange * 100 <= len(start)  # a few damaged bytes do not make raw data of a file of records
    if _RECORD_START.match(start) or (start.startswith(b":") and (named == INTEL_HEX or readable)):
        return INTEL_HEX
    if (_S_START.match(start) and readable) or (named == S_RECORD and start[:1] in (b"S", b"s")):
        return S_RECORD
    return named if readable else ""


def _no_image(data: bytes) -> tuple[str, str]:
    """What the bytes are, where they are surely not those of a chip, and what to do about it; "" for both otherwise."""
    for mark, what, hint in _WRAPPED:
        if data.startswith(mark):
            return what, hint
    if data.startswith(_MARKS_OF_UTF16) and _is_text(data.replace(b"\x00", b"")[2:]):
        return "text in UTF-16", "save it as plain text (ASCII), if it is the right file;"
    if _is_text(data.removeprefix(_MARK_OF_UTF8)):
        return "readable text", "is it the right file?"
    return "", ""


def _is_text(data: bytes) -> bool:
    """Whether a person would read the bytes: lines, or some words without a line's end; few letters beyond ASCII.

    A pattern of one or two values, such as a chip full of 55, is no text.
    """
    data = data.rstrip(b"\x1a")
    if _CONTROL.search(data):
        return False
    foreign = len(data) - len(data.translate(None, _UPPER_HALF))
    if foreign * 10 > len(data) and not _is_utf8(data):
        return False
    return b"\n" in data or b"\r" in data or (len(data) >= _WORDS and len(set(data)) > 2)


def _is_utf8(data: bytes) -> bool:
    try:
        data.decode("utf-8")
    except UnicodeDecodeError:
        return False
    return True


def save(path: Path | str, data: bytes, *, first: int = 0, format: str | None = None) -> None:  # noqa: A002 - as in load
    """Write the bytes of a chip from its address `first` on, whole or not at all.

    Intel HEX and S-records, which keep the addresses, for a name in HEX_SUFFIXES and S_SUFFIXES, else raw. FileMistake
    where it cannot be written.
    """
    chosen = _checked(format) or format_for(path)
    if chosen == INTEL_HEX:
        data = write_intel_hex(image_of(data, start=first)).encode("ascii")
    elif chosen == S_RECORD:
        data = write_s_records(image_of(data, start=first)).encode("ascii")
    write_whole(path, data)


def format_for(path: Path | str) -> str:
    """The format that `save` gives a file of this name."""
    suffix = Path(path).suffix.lower()
    if suffix in HEX_SUFFIXES:
        return INTEL_HEX
    return S_RECORD if suffix in S_SUFFIXES else RAW


def _checked(wanted: str | None) -> str | None:
    if wanted is not None and wanted not in FORMATS:
        hint = "without a format, the content tells it"
        raise UsageMistake("not an image format", wanted=" or ".join(FORMATS), got=wanted, hint=hint)
    return wanted
