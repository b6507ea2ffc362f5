"""Load an image file, its format told from its content; save one, its format told from its name."""

from __future__ import annotations

import re
from pathlib import Path

from pulsewright.errors import ImageMistake, UsageMistake, Where
from pulsewright.files import read_whole, write_whole
from pulsewright.image.intel_hex import parse_intel_hex, write_intel_hex
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
_NOT_TEXT = re.compile(rb"[^\x20-\x7e\t\r\n\x1a]")
_S_START = re.compile(rb"[Ss][0-9][0-9A-Fa-f]{6}")
_CONTROL = re.compile(r"[\x00-\x08\x0b\x0c\x0e-\x1f\x7f]")


def load(path: Path | str, *, format: str | None = None) -> Image:  # noqa: A002 - the trade's word for it
    """The image in a file; `format` is one of FORMATS, or told from the content.

    FileMistake where the file cannot be read, ImageMistake where it is empty or damaged.
    """
    data = read_whole(path)
    name = str(path)
    if not data.removeprefix(_MARK_OF_UTF8).strip(_BLANKS):
        raise ImageMistake(
            "the image file is empty", where=Where(name), wanted="at least one byte of data", got=f"{len(data)} bytes"
        )
    chosen = _checked(format) or tell_format(data, name)
    if chosen == INTEL_HEX:
        # Latin-1 maps every byte to a character, so a damaged byte is reported at its column, not as a coding fault.
        return parse_intel_hex(data.removeprefix(_MARK_OF_UTF8).decode("latin-1"), name)
    if chosen == S_RECORD:
        return parse_s_records(data.removeprefix(_MARK_OF_UTF8).decode("latin-1"), name)
    return parse_raw(data, name)


def tell_format(data: bytes, name: str = "") -> str:
    """INTEL_HEX, S_RECORD or RAW from the content; the name only decides where a damaged file could be raw bytes too.

    ImageMistake for readable text that is neither: it would be burnt as its own letters.
    """
    start = data.removeprefix(_MARK_OF_UTF8).lstrip(_BLANKS)
    if _RECORD_START.match(start):
        return INTEL_HEX
    strange = len(_NOT_TEXT.findall(start))
    text = strange == 0
    named_hex = Path(name).suffix.lower() in HEX_SUFFIXES
    if start.startswith(b":") and (named_hex or strange * 100 <= len(start)):
        return INTEL_HEX  # a few damaged bytes do not make raw data of a HEX file
    if text and named_hex:
        return INTEL_HEX
    named_s = Path(name).suffix.lower() in S_SUFFIXES
    if _S_START.match(start) and (named_s or strange * 100 <= len(start)):
        return S_RECORD
    if text and named_s:
        return S_RECORD
    if _is_text(start):
        raise ImageMistake(
            "the image file is readable text, and neither Intel HEX nor S-records",
            where=Where(name, 1),
            wanted="Intel HEX, Motorola S-records, or the chip's bytes",
            got=repr(start[:40].decode("utf-8", "replace")),
            hint=f"is it the right file? if its letters are what the chip is to hold: {RAW_MARK}{name or 'FILE'}",
        )
    return RAW


def _is_text(data: bytes) -> bool:
    """Whether the bytes are lines that a person would read: at least one line's end, and nothing but text."""
    if b"\n" not in data:
        return False
    try:
        return not _CONTROL.search(data.decode("utf-8"))
    except UnicodeDecodeError:
        return False


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
        raise UsageMistake("not an image format", wanted=" or ".join(FORMATS), got=wanted)
    return wanted
