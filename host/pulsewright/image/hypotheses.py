"""What could be wrong between an image and what a chip gave: each idea foretells what would have been read.

An idea changes bytes by their value (a data line) or takes them from another address (an address line, a moved image).
Pure: whether one holds is judged in `causes`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial
from itertools import combinations, compress

_PIECE = 16  # bytes by which a moved image is known again
_NEARLY = 99  # a bit is stuck that has one value in at least so many of a hundred bytes
_BYTE = range(8)


@dataclass(frozen=True)
class Hypothesis:
    """One idea: by value (`table`: what is read for each byte wanted) or by place (`source`: where it is read from).

    `kind` is a short name for `--json`; `text` a sentence in which lines are called A13, D5.
    """

    kind: str
    text: str
    table: bytes | None = None
    source: Callable[[int], int] | None = None


NOWHERE = 1 << 40  # a source that lies outside every image: nothing is foretold


def data_line_ideas(wanted: bytes, gotten: bytes) -> Iterator[Hypothesis]:
    """Ideas about data lines, from the bytes that are compared alone."""
    yield from _stuck(wanted, gotten)
    for low, high in combinations(_BYTE, 2):
        pair = f"D{low} and D{high}"
        yield Hypothesis("data lines exchanged", f"{pair} look exchanged", _table(low, high, lambda a, b: (b, a)))
        for level, joined in ((0, _wired_and), (1, _wired_or)):
            text = f"{pair} read alike, {level} wherever one is {level}: shorted together"
            yield Hypothesis("data lines shorted", text, _table(low, high, joined))
    yield Hypothesis(
        "data inverted", "every bit is the other way up: the image is inverted", bytes(0xFF ^ v for v in range(256))
    )
    yield from _scrambled_data(wanted, gotten)


def _wired_and(a: int, b: int) -> tuple[int, int]:
    return a & b, a & b


def _wired_or(a: int, b: int) -> tuple[int, int]:
    return a | b, a | b


def _table(low: int, high: int, change: Callable[[int, int], tuple[int, int]]) -> bytes:
    """For each byte, what is read when a fault changes its bits `low` and `high`."""
    rest = 0xFF & ~(1 << low | 1 << high)
    pairs = (change(value >> low & 1, value >> high & 1) for value in range(256))
    return bytes(value & rest | a << low | b << high for value, (a, b) in enumerate(pairs))


def _ones(data: bytes) -> list[int]:
    """In how many bytes each bit is 1."""
    counts = [data.count(value) for value in range(256)]
    return [sum(count for value, count in enumerate(counts) if value >> bit & 1) for bit in _BYTE]


def _stuck(wanted: bytes, gotten: bytes) -> Iterator[Hypothesis]:
    """All stuck lines at once: bits of (nearly) one value in what was read, which the image changes."""
    size = len(gotten)
    up, down = [], []
    for bit, (want_1, got_1) in enumerate(zip(_ones(wanted), _ones(gotten), strict=True)):
        if got_1 * 100 >= size * _NEARLY and want_1 < got_1:
            up.append(bit)
        elif (size - got_1) * 100 >= size * _NEARLY and want_1 > got_1:
            down.append(bit)
    ones, zeros = sum(1 << bit for bit in up), sum(1 << bit for bit in down)
    if len(up) + len(down) == len(_BYTE):
        text = f"nearly every byte reads {ones:02X}"
        yield Hypothesis("one value", text, bytes([ones]) * 256)
        return
    told = [f"{_names('D', bits)} always {level}" for bits, level in ((up, 1), (down, 0)) if bits]
    if told:
        many = len(up) + len(down) > 1
        text = f"{' and '.join(told)}: {'open or stuck data lines' if many else 'an open or stuck data line'}"
        yield Hypothesis("data line stuck", text, bytes((v | ones) & ~zeros & 0xFF for v in range(256)))


def _names(letter: str, bits: list[int]) -> str:
    """The beginning of a sentence: "D3 reads", "D3 and D5 read"."""
    names = [f"{letter}{bit}" for bit in bits]
    return f"{names[0]} reads" if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]} read"


def _scrambled_data(wanted: bytes, gotten: bytes) -> Iterator[Hypothesis]:
    """Three or more data lines in another order: each bit read is, in most bytes, one bit of the image."""

    def columns(data: bytes) -> list[int]:
        return [int.from_bytes(data.translate(bytes(v >> bit & 1 for v in range(256))), "little") for bit in _BYTE]

    want, got = columns(wanted), columns(gotten)
    order = [min(_BYTE, key=lambda bit: (read ^ want[bit]).bit_count()) for read in got]
    if len(set(order)) == len(order) and sum(bit != at for at, bit in enumerate(order)) > 2:
        table = bytes(sum((value >> bit & 1) << at for at, bit in enumerate(order)) for value in range(256))
        yield Hypothesis("data lines exchanged", f"data lines in another order: {_order('D', order)}", table)


def _order(letter: str, order: list[int]) -> str:
    return ", ".join(f"{letter}{at} acts as {letter}{bit}" for at, bit in enumerate(order) if at != bit)


def address_line_ideas(want: bytes, got: bytes, *, whole: bool) -> Iterator[Hypothesis]:
    """Ideas about address lines; `whole`: every byte of a power of two is compared, so that more can be told."""
    lines = (len(want) - 1).bit_length()
    for line in range(lines):
        why = "an open or stuck address line"
        for level, forced in (("low", _forced_low), ("high", _forced_high)):
            text = f"A{line} reads as if always {level}: {why}"
            yield Hypothesis("address line stuck", text, source=partial(forced, bits=1 << line))
        inverted = (
            "bytes look exchanged in pairs: the image may be for the other byte order"
            if line == 0
            else f"blocks of {1 << line} bytes look exchanged in pairs: A{line} the other way up"
        )
        yield Hypothesis(
            "bytes swapped" if line == 0 else "blocks swapped", inverted, source=partial(_flipped, bit=1 << line)
        )
    for low, high in combinations(range(lines), 2):
        pair = f"A{low} and A{high}"
        yield Hypothesis(
            "address lines exchanged", f"{pair} look exchanged", source=partial(_exchanged, low=low, high=high)
        )
        for level, joined in (("low", _joined_low), ("high", _joined_high)):
            text = f"{pair} read as if both {level} where one is: shorted together"
            yield Hypothesis("address lines shorted", text, source=partial(joined, both=1 << low | 1 << high))
    yield from _repeated(lines)
    if whole:
        yield from _scrambled_addresses(want, got, lines)


def _repeated(lines: int) -> Iterator[Hypothesis]:
    """The first part of the image again and again, and its even or odd bytes."""
    for line in range(4, lines - 1):  # the top line alone is told as stuck; less than 16 bytes is a pattern, no image
        text = f"the chip holds the first {1 << line} bytes of the image again and again"
        yield Hypothesis("image repeated", text, source=partial(_forced_low, bits=-1 << line))
    for odd, name in enumerate(("even", "odd")):
        text = f"the chip holds the {name} bytes of the image only: one half of a pair?"
        yield Hypothesis("image halved", text, source=partial(_every_other, odd=odd))


def _scrambled_addresses(want: bytes, got: bytes, lines: int) -> Iterator[Hypothesis]:
    """Three or more address lines in another order: what stands where a line is high stays the same bytes, moved."""

    def marks(data: bytes) -> list[list[int]]:
        halves = [
            b"".join(data[at : at + (1 << line)] for at in range(1 << line, len(data), 2 << line))
            for line in range(lines)
        ]
        return [[half.count(value) for value in range(256)] for half in halves]

    wanted, order = marks(want), []
    for counts in marks(got):
        apart = [sum(abs(a - b) for a, b in zip(counts, other, strict=True)) for other in wanted]
        order.append(apart.index(min(apart)))
    if len(set(order)) == lines and sum(bit != at for at, bit in enumerate(order)) > 2:
        text = f"address lines in another order: {_order('A', order)}"
        yield Hypothesis("address lines exchanged", text, source=partial(_reordered, order=tuple(order)))


def moved_ideas(want: bytes, got: bytes, differing: list[int]) -> Iterator[Hypothesis]:
    """The image, but moved: by how much tells a piece of what was read that stands elsewhere in the image."""
    tried: set[int] = set()
    for place in (len(differing) // 2, len(differing) // 4, len(differing) * 3 // 4):
        at = differing[place]
        piece = got[at : at + _PIECE]
        if len(piece) < _PIECE or len(set(piece)) < _PIECE // 4:
            continue  # too uniform to know it again
        found = want.find(piece)
        while found >= 0 and len(tried) < _PIECE:
            by = at - found
            if by and by not in tried:
                tried.add(by)
                text = f"the chip holds the image {abs(by)} bytes too {'high' if by > 0 else 'low'}: check --origin"
                yield Hypothesis("image moved", text, source=partial(_moved, by=by))
            found = want.find(piece, found + 1)


def compared(data: bytes, mask: bytes) -> bytes:
    """The bytes that are compared, in their order."""
    return bytes(compress(data, mask))


def _moved(at: int, *, by: int) -> int:
    return at - by if at >= by else NOWHERE


def _forced_low(at: int, *, bits: int) -> int:
    return at & ~bits


def _forced_high(at: int, *, bits: int) -> int:
    return at | bits


def _flipped(at: int, *, bit: int) -> int:
    return at ^ bit


def _every_other(at: int, *, odd: int) -> int:
    return at * 2 + odd


def _joined_low(at: int, *, both: int) -> int:
    return at if at & both in (0, both) else at & ~both


def _joined_high(at: int, *, both: int) -> int:
    return at if at & both in (0, both) else at | both


def _exchanged(at: int, *, low: int, high: int) -> int:
    different = (at >> low ^ at >> high) & 1
    return at ^ (different << low | different << high)


def _reordered(at: int, *, order: tuple[int, ...]) -> int:
    return sum((at >> line & 1) << bit for line, bit in enumerate(order))
