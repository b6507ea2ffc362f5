"""Several image files as one image: each with its format, its place and its checksum, none over another."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

from pulsewright.errors import ImageMistake, UsageMistake, Where
from pulsewright.image.checksum import crc32
from pulsewright.image.load import RAW, RAW_MARK, load_told
from pulsewright.image.memory import Image, ImageFile, Segment
from pulsewright.units import UnitMistake, parse_address


def load_files(names: Sequence[str]) -> tuple[Image, tuple[ImageFile, ...]]:
    """One image of files given as FILE, FILE@ADDR or raw:FILE; ADDR is the image address at which its address 0 lands.

    A file whose own name ends in @ADDR is that file. ImageMistake where two files give the same address.
    """
    parts: list[Image] = []
    files: list[ImageFile] = []
    for name in names:
        image, chosen = _one(name)
        parts.append(image)
        data = b"".join(segment.data for segment in image.segments)
        files.append(ImageFile(image.name, chosen, image.first, image.last, image.size, f"{crc32(data):08X}"))
    return _joined(parts), tuple(files)


def _one(given: str) -> tuple[Image, str]:
    raw = given.startswith(RAW_MARK) and not Path(given).exists()
    name, at = _placed(given.removeprefix(RAW_MARK) if raw else given)
    image, chosen = load_told(name, format=RAW if raw else None)
    return _moved(image, at), chosen


def _placed(given: str) -> tuple[str, int]:
    """The file's name and the address behind its last @; a file that bears the whole as its name wins."""
    name, mark, address = given.rpartition("@")
    if not mark or not name or Path(given).exists():
        return given, 0
    try:
        return name, parse_address(address)
    except UnitMistake:
        if Path(name).exists():
            raise UsageMistake(
                f"what stands behind the @ of {given} is no address",
                wanted="FILE@ADDR, ADDR such as 0x4000 or 16K",
                got=address,
                hint="the address at which the file's first byte lands",
            ) from None
        return given, 0


def _moved(image: Image, by: int) -> Image:
    if not by:
        return image
    segments = tuple(Segment(one.start + by, one.data) for one in image.segments)
    return replace(image, segments=segments, marks=tuple((start + by, line) for start, line in image.marks))


def _joined(parts: Sequence[Image]) -> Image:
    if len(parts) == 1:
        return parts[0]
    pieces = sorted(((one, part) for part in parts for one in part.segments), key=lambda pair: pair[0].start)
    for (before, earlier), (after, later) in pairwise(pieces):
        if after.start < before.end:
            raise _overlap(earlier, later, before, after)
    runs: list[tuple[int, bytearray]] = []
    for one, _ in pieces:
        if runs and runs[-1][0] + len(runs[-1][1]) == one.start:
            runs[-1][1].extend(one.data)
        else:
            runs.append((one.start, bytearray(one.data)))
    name = ", ".join(part.name for part in parts)
    return Image(tuple(Segment(start, bytes(data)) for start, data in runs), name, parts=tuple(parts))


def _overlap(earlier: Image, later: Image, before: Segment, after: Segment) -> ImageMistake:
    twice = after.start
    old, new = before.data[twice - before.start], after.data[0]
    return ImageMistake(
        f"the byte at image address {twice:04X} is given twice, by {earlier.name} and by {later.name}",
        where=later.where(twice),
        wanted="each address once",
        got=f"{old:02X} in {Where(earlier.name, earlier.where(twice).line)}, {new:02X} in {later.where(twice)}",
        hint="FILE@ADDR puts a file elsewhere; or leave out the one that is not wanted",
    )
