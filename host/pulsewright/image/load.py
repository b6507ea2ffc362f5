"""Load an image file, its format told from its content; save one, its format told from its name."""

from __future__ import annotations

import re
from pathlib import Path

from pulsewright.errors import ImageMistake, UsageMistake, Where
from pulsewright.files import read_whole, write_whole
from pulsewright.image.intel_hex import parse_intel_hex, write_intel_hex
from pulsewright.image.memory import Image, image_of
from pulsewright.image.raw import parse_raw

INTEL_HEX = "intel-hex"
RAW = "raw"
FORMATS = (INTEL_HEX, RAW)
HEX_SUFFIXES = (".hex", ".ihx")

_MARK_OF_UTF8 = b"\xef\xbb\xbf"
_BLANKS = b" \t\r\n"
_RECORD_START = re.compile(rb":[0-9A-Fa-f]{10}")
_NOT_TEXT = re.compile(rb"[^\x20-\x7e\t\r\n\x1a]")
# Lines of S, a digit and hex digits, and nothing else: Motorola S-records, which a burn must never take for raw bytes.
_S_RECORDS = re.compile(rb"\s*(S[0-9][0-9A-Fa-f]{6,}\s+)*S[0-9][0-9A-Fa-f]{6,}\s*")


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
    return parse_raw(data, name)


def tell_format(data: bytes, name: str = "") -> str:
    """INTEL_HEX or RAW from the content; the name only decides where a damaged HEX file could be taken for raw bytes.

    ImageMistake for S-records: they would be burnt as their own text.
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
    if text and _S_RECORDS.fullmatch(start):
        raise ImageMistake(
            "the image file holds Motorola S-records, which cannot be read yet",
            where=Where(name),
            wanted="Intel HEX or raw binary",
            got="S-records",
            hint="make Intel HEX of it: objcopy -I srec -O ihex FILE OUT.hex",
        )
    return RAW


def save(path: Path | str, data: bytes, *, first: int = 0, format: str | None = None) -> None:  # noqa: A002 - as in load
    """Write the bytes of a chip from its address `first` on, whole or not at all.

    Intel HEX, which keeps the addresses, for a name in HEX_SUFFIXES, else raw. FileMistake where it cannot be written.
    """
    if (_checked(format) or format_for(path)) == INTEL_HEX:
        data = write_intel_hex(image_of(data, start=first)).encode("ascii")
    write_whole(path, data)


def format_for(path: Path | str) -> str:
    """The format that `save` gives a file of this name."""
    return INTEL_HEX if Path(path).suffix.lower() in HEX_SUFFIXES else RAW


def _checked(wanted: str | None) -> str | None:
    if wanted is not None and wanted not in FORMATS:
        raise UsageMistake("not an image format", wanted=" or ".join(FORMATS), got=wanted)
    return wanted
