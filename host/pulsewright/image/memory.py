"""What an image file gives: bytes at addresses, with gaps; and how it is fitted to a chip of so many bytes."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from itertools import pairwise

from pulsewright.errors import ImageMistake, UsageMistake, Where
from pulsewright.units import show_address, show_count


@dataclass(frozen=True)
class Segment:
    """A run of bytes without a gap; `start` is the address of the first."""

    start: int
    data: bytes

    @property
    def end(self) -> int:
        """The address after the last byte."""
        return self.start + len(self.data)


@dataclass(frozen=True)
class Piece:
    """The bytes of one record of a file, and the line (from 1; 0 = the file has no lines) they stand on."""

    start: int
    data: bytes
    line: int = 0

    @property
    def end(self) -> int:
        """The address after the last byte."""
        return self.start + len(self.data)


@dataclass(frozen=True)
class Image:
    """Bytes at addresses: `segments` are sorted, hold at least one byte each, and neither touch nor overlap.

    `name` (of the file), `marks` (first address and line of each record, sorted) and `parts` (the images of several
    files) only serve to say where a byte came from; two images with the same bytes are equal.
    """

    segments: tuple[Segment, ...]
    name: str = field(default="", compare=False)
    marks: tuple[tuple[int, int], ...] = field(default=(), compare=False, repr=False)
    parts: tuple[Image, ...] = field(default=(), compare=False, repr=False)

    def __post_init__(self) -> None:
        """Hold the promise on `segments`; ValueError where the caller broke it."""
        previous_end = -1
        for segment in self.segments:
            if not segment.data or segment.start <= previous_end:
                raise ValueError(f"segment at {segment.start:X} is empty, unsorted, touching or overlapping")
            previous_end = segment.end

    @property
    def first(self) -> int:
        """The lowest address; ValueError if the image gives no byte."""
        if not self.segments:
            raise ValueError("the image gives no byte")
        return self.segments[0].start

    @property
    def last(self) -> int:
        """The highest address; ValueError if the image gives no byte."""
        if not self.segments:
            raise ValueError("the image gives no byte")
        return self.segments[-1].end - 1

    @property
    def size(self) -> int:
        """How many bytes the image gives, gaps not counted."""
        return sum(len(segment.data) for segment in self.segments)

    def gaps(self) -> tuple[tuple[int, int], ...]:
        """First and last address of each gap between segments."""
        return tuple((a.end, b.start - 1) for a, b in pairwise(self.segments))

    def where(self, address: int) -> Where:
        """The file and line that gave the byte at `address`; the file alone where it has no lines."""
        for part in self.parts:
            if any(segment.start <= address < segment.end for segment in part.segments):
                return part.where(address)
        at = bisect_right(self.marks, address, key=lambda mark: mark[0]) - 1
        return Where(self.name, self.marks[at][1] if at >= 0 else 0)


def image_of(data: bytes, *, start: int = 0, name: str = "") -> Image:
    """An image of one run of bytes; of none, an image without segments."""
    return Image((Segment(start, data),) if data else (), name)


def join_pieces(pieces: Iterable[Piece], *, name: str = "") -> Image:
    """An image of pieces in any order; ImageMistake where one address is given twice, naming both lines."""
    ordered = sorted((piece for piece in pieces if piece.data), key=lambda piece: (piece.start, piece.line))
    for before, after in pairwise(ordered):
        if after.start < before.end:
            raise _overlap(before, after, name)
    runs: list[tuple[int, list[bytes]]] = []
    end = -1
    for piece in ordered:
        if piece.start != end:
            runs.append((piece.start, []))
        runs[-1][1].append(piece.data)
        end = piece.end
    segments = tuple(Segment(start, b"".join(parts)) for start, parts in runs)
    return Image(segments, name, tuple((piece.start, piece.line) for piece in ordered))


def _overlap(before: Piece, after: Piece, name: str) -> ImageMistake:
    earlier, later = sorted((before, after), key=lambda piece: piece.line)
    twice = after.start
    return ImageMistake(
        f"the byte at address {twice:04X} is given twice, on lines {earlier.line} and {later.line}",
        where=Where(name, later.line, "address"),
        wanted="each address once",
        got=f"{earlier.data[twice - earlier.start]:02X} on line {earlier.line}, "
        f"{later.data[twice - later.start]:02X} on line {later.line}",
        hint="join the two sources again, each at its own address",
    )


@dataclass(frozen=True)
class ImageFile:
    """One file of an image: where its bytes lie (image addresses, `last` included), how many, their CRC-32."""

    name: str
    format: str
    first: int
    last: int
    size: int
    crc32: str

    def text(self) -> str:
        """One line for a person, so that a wrong guess of the format is seen."""
        place = f"{self.first:04X} to {self.last:04X}"
        gaps = "" if self.size == self.last - self.first + 1 else " with gaps"
        return f"{self.name}: {self.format}, {show_count(self.size, 'byte')} at {place}{gaps}, CRC-32 {self.crc32}"

    def facts(self) -> dict[str, object]:
        """As JSON values."""
        return {
            "file": self.name,
            "format": self.format,
            "first": self.first,
            "last": self.last,
            "bytes": self.size,
            "crc32": self.crc32,
        }


@dataclass(frozen=True)
class Fitted:
    """An image laid on a chip: `data` has one byte a cell; `used` has 1 for each byte to write or compare, else 0.

    `given` bytes came from the image, the other used ones from the fill. `cut` bytes of the image were left out by the
    range. A byte that is not used holds the blank value in `data` and is to be left alone. `files`: where it all came
    from.
    """

    data: bytes
    used: bytes
    given: int
    cut: int = 0
    files: tuple[ImageFile, ...] = ()

    def ranges(self) -> Iterator[tuple[int, int]]:
        """First and last chip address of each run of used bytes."""
        start = self.used.find(1)
        while start >= 0:
            end = self.used.find(0, start)
            end = len(self.used) if end < 0 else end
            yield start, end - 1
            start = self.used.find(1, end)


def fit(
    image: Image,
    words: int,
    *,
    origin: int = 0,
    fill: int | None = None,
    first: int = 0,
    last: int | None = None,
    blank: int = 0xFF,
    name: str = "",
) -> Fitted:
    """Lay the image on a chip of `words` bytes; the image address `origin` lands at chip address 0.

    `first` and `last` (chip addresses, `last` included) bound what is used: where either is given, what the image has
    outside them is cut. Without them data outside the chip is an ImageMistake, as is an image that leaves no byte to
    use; bounds outside the chip are a UsageMistake. `name` is the chip's, for the messages.
    """
    bounded = first > 0 or last is not None
    top = words - 1 if last is None else last
    _check_bounds(words, first, top, fill, name)
    if not bounded:
        _check_inside(image, words, origin, name)
    data = bytearray([blank]) * words
    used = bytearray(words)
    if fill is not None:
        data[first : top + 1] = bytes([fill]) * (top + 1 - first)
        used[first : top + 1] = b"\x01" * (top + 1 - first)
    given = 0
    for segment in image.segments:
        start = max(segment.start - origin, first)
        end = min(segment.end - origin, top + 1)
        if start < end:
            data[start:end] = segment.data[start + origin - segment.start : end + origin - segment.start]
            used[start:end] = b"\x01" * (end - start)
            given += end - start
    if not given:
        raise _nothing_left(image, words, origin, first, top)
    return Fitted(bytes(data), bytes(used), given, image.size - given)


def _check_bounds(words: int, first: int, top: int, fill: int | None, name: str) -> None:
    if not 0 <= first <= top < words:
        raise UsageMistake(
            f"the range does not lie in the chip{' ' + name if name else ''}",
            wanted=f"FIRST..LAST within 0000..{show_address(words - 1, words)}, FIRST not above LAST",
            got=f"{first:04X}..{top:04X}",
            hint="without --range the whole chip is meant",
        )
    if fill is not None and not 0 <= fill <= 0xFF:
        raise UsageMistake(
            "the fill is not a byte", wanted="00 to FF", got=str(fill), hint="0xFF is the erased state of most parts"
        )


def _check_inside(image: Image, words: int, origin: int, name: str) -> None:
    """The first image address that has no cell is a mistake, named with its line and the chip's size."""
    part = f" {name}" if name else ""
    for segment in image.segments:
        outside = segment.start if segment.start < origin else max(segment.start, origin + words)
        if outside < segment.end:
            raise ImageMistake(
                f"the image has data outside the chip: the first such byte is at image address {outside:04X}",
                where=image.where(outside),
                wanted=f"image addresses {origin:04X} to {origin + words - 1:04X}: the chip{part} "
                f"has {words} bytes, and image address {origin:04X} lands at chip address 0000",
                got=f"image addresses {image.first:04X} to {image.last:04X}, {image.size} bytes",
                hint=_origin_hint(image, words, origin),
            )


def _origin_hint(image: Image, words: int, origin: int) -> str:
    if image.last - image.first < words and image.first != origin:
        return f"--origin 0x{image.first:X} makes the image's first byte land at chip address 0"
    return "--origin ADDR to move the image, or --range FIRST..LAST to use only the part that lands there"


def _nothing_left(image: Image, words: int, origin: int, first: int, top: int) -> ImageMistake:
    has = f"image addresses {image.first:04X} to {image.last:04X}" if image.segments else "no bytes"
    return ImageMistake(
        "the image has no byte in the wanted range of the chip",
        where=Where(image.name),
        wanted=f"data for chip addresses {show_address(first, words)} to {show_address(top, words)}, "
        f"which are image addresses {first + origin:04X} to {top + origin:04X}",
        got=has,
        hint="check --origin and --range",
    )
