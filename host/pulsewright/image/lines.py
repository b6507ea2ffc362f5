"""The lines of a text of records, and how a mistake in one is told: what Intel HEX and S-records share."""

from __future__ import annotations

import re
from collections.abc import Iterator

from pulsewright.errors import ImageMistake, Where

NOT_HEX = re.compile(r"[^0-9A-Fa-f]")
# LF, CR LF and CR alone; CR CR LF is what a text transfer makes of CR LF, and still the end of one line.
_LINE_END = re.compile(r"\r*\n|\r")
# Old disk systems filled the last block of a text file with this; it carries nothing.
_PADDING = "\x1a"
_SHOWN = 24


def numbered_records(text: str) -> Iterator[tuple[int, str, str]]:
    """Number (from 1), line, and the line without blanks, of each line that holds more than blanks and padding."""
    for number, line in enumerate(_LINE_END.split(text), start=1):
        record = line.strip(" \t" + _PADDING)
        if record:
            yield number, line, record


def short(record: str) -> str:
    """The record in quotes, a long one cut."""
    return repr(record if len(record) <= _SHOWN else record[:_SHOWN] + "...")


def mistake(name: str, line: int, key: str, what: str, *, wanted: str, got: str, hint: str) -> ImageMistake:
    """A mistake in the file `name`, on a line (0: in the file as a whole), in the field `key`."""
    return ImageMistake(what, where=Where(name, line, key), wanted=wanted, got=got, hint=hint)
