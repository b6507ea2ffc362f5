"""Compare what a chip should hold with what it gave: how many bytes differ, in which way, and what it looks like."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial
from itertools import combinations, compress

from pulsewright.units import show_address

LISTED = 16
# A line fault shows in many bytes; below this many differences a pattern may be chance.
_EVIDENCE = 8
_PIECE = 16  # bytes by which a moved image is known again


@dataclass(frozen=True)
class Mismatch:
    """One byte that differs."""

    address: int
    want: int
    got: int


@dataclass(frozen=True)
class Comparison:
    """The result of a comparison; counts are of bytes.

    `burn_missing`: the chip has a 1 where the image has a 0; `needs_erase`: a 0 where the image has a 1. A byte may be
    in both. `first` are the lowest addresses that differ, at most LISTED; `hints` say in words what a line fault would
    explain in full.
    """

    size: int
    compared: int
    differing: int
    burn_missing: int
    needs_erase: int
    first: tuple[Mismatch, ...] = ()
    hints: tuple[str, ...] = ()

    @property
    def equal(self) -> bool:
        """True if no compared byte differs."""
        return self.differing == 0

    def lines(self) -> list[str]:
        """The result as lines of text, facts before guesses."""
        if self.equal:
            return [f"{self.compared} bytes compared, all equal"]
        text = [
            f"{self.differing} of {self.compared} bytes differ",
            f"a burn is missing (chip 1, image 0) in {self.burn_missing}",
            f"an erase is needed (chip 0, image 1) in {self.needs_erase}",
        ]
        text += [f"{show_address(m.address, self.size)}: wanted {m.want:02X}, got {m.got:02X}" for m in self.first]
        if self.differing > len(self.first):
            text.append(f"and {self.differing - len(self.first)} more")
        return text + list(self.hints)


def compare(want: bytes, got: bytes, mask: bytes | None = None) -> Comparison:
    """Compare byte by byte where `mask` is not 0 (everywhere without a mask); ValueError if the lengths differ."""
    if len(want) != len(got) or (mask is not None and len(mask) != len(want)):
        raise ValueError(f"lengths differ: {len(want)}, {len(got)}{'' if mask is None else f', mask {len(mask)}'}")
    if mask is None:
        mask = b"\x01" * len(want)
    compared = len(mask) - mask.count(0)
    differing = [at for at, (w, g, m) in enumerate(zip(want, got, mask, strict=True)) if w != g and m]
    if not differing:
        return Comparison(len(want), compared, 0, 0, 0)
    return Comparison(
        size=len(want),
        compared=compared,
        differing=len(differing),
        burn_missing=sum(1 for at in differing if got[at] & ~want[at]),
        needs_erase=sum(1 for at in differing if want[at] & ~got[at]),
        first=tuple(Mismatch(at, want[at], got[at]) for at in differing[:LISTED]),
        hints=tuple(_hints(want, got, mask, differing)),
    )


def _hints(want: bytes, got: bytes, mask: bytes, differing: list[int]) -> Iterator[str]:
    """What a fault would explain in full; a fault that leaves one byte unexplained is not named."""
    if len(differing) < _EVIDENCE:
        return
    wanted, gotten = bytes(compress(want, mask)), bytes(compress(got, mask))
    values = set(gotten)
    if len(values) == 1:
        value = gotten[0]
        why = "a blank chip, or outputs that never drive" if value == 0xFF else "no data reaches the rig"
        yield f"every byte reads {value:02X}: {why}"
        return
    found = [*_data_line_hints(wanted, gotten), *_address_line_hints(want, got, mask, differing)]
    yield from found or _shift_hint(want, got, mask, differing)


def _data_line_hints(wanted: bytes, gotten: bytes) -> Iterator[str]:
    ones, zeros = 0xFF, 0xFF  # bits that read 1, or 0, in every byte
    for value in set(gotten):
        ones &= value
        zeros &= ~value & 0xFF
    for value_wanted, stuck in ((1, ones), (0, zeros)):
        for bit in range(8):
            both = {value >> bit & 1 for value in set(wanted)} == {0, 1}
            if stuck >> bit & 1 and both:
                yield f"D{bit} reads {value_wanted} in every byte: an open or stuck data line"
    for low, high in combinations(range(8), 2):
        for words, change in (
            (f"D{low} and D{high} look exchanged", lambda a, b: (b, a)),
            (f"D{low} and D{high} read alike, 0 wherever one is 0: shorted together", lambda a, b: (a & b, a & b)),
            (f"D{low} and D{high} read alike, 1 wherever one is 1: shorted together", lambda a, b: (a | b, a | b)),
        ):
            if wanted.translate(_table(low, high, change)) == gotten:
                yield words


def _table(low: int, high: int, change: Callable[[int, int], tuple[int, int]]) -> bytes:
    """For each byte, what is read when a fault changes its bits `low` and `high`."""
    rest = 0xFF & ~(1 << low | 1 << high)
    pairs = (change(value >> low & 1, value >> high & 1) for value in range(256))
    return bytes(value & rest | a << low | b << high for value, (a, b) in enumerate(pairs))


def _address_line_hints(want: bytes, got: bytes, mask: bytes, differing: list[int]) -> Iterator[str]:
    lines = (len(want) - 1).bit_length()
    explains = _explainer(want, got, mask, differing)
    for line in range(lines):
        if explains(partial(_forced_low, bit=1 << line)):
            yield f"A{line} reads as if always low: an open or stuck address line"
        elif explains(partial(_forced_high, bit=1 << line)):
            yield f"A{line} reads as if always high: an open or stuck address line"
    for low, high in combinations(range(lines), 2):
        if explains(partial(_exchanged, low=low, high=high)):
            yield f"A{low} and A{high} look exchanged"
        elif explains(partial(_joined_low, low=low, high=high)):
            yield f"A{low} and A{high} read as if both low where one is: shorted together"
        elif explains(partial(_joined_high, low=low, high=high)):
            yield f"A{low} and A{high} read as if both high where one is: shorted together"
    if explains(_neighbour):
        yield "bytes look exchanged in pairs: the image may be for the other byte order"


def _explainer(
    want: bytes, got: bytes, mask: bytes, differing: list[int]
) -> Callable[[Callable[[int], int]], bool]:
    """A question: is what stands at each address the byte wanted at another one?"""
    compared = [at for at in range(len(want)) if mask[at]]

    def explains(source: Callable[[int], int]) -> bool:
        """True if each compared byte is the one wanted at `source(address)`, as far as that is known."""

        def known(at: int) -> bool:
            other = source(at)
            return other < len(want) and mask[other] != 0

        def agrees(at: int) -> bool:
            return not known(at) or want[source(at)] == got[at]

        # The first byte that speaks against it ends the search, so most of the patterns cost next to nothing.
        return (
            all(source(at) != at and agrees(at) for at in differing)
            and all(agrees(at) for at in compared)
            and sum(1 for at in differing if known(at)) >= _EVIDENCE
        )

    return explains


def _shift_hint(want: bytes, got: bytes, mask: bytes, differing: list[int]) -> Iterator[str]:
    """The chip holds the image, but moved: tried for the places at which a piece of what was read stands in it."""
    explains = _explainer(want, got, mask, differing)
    at = differing[len(differing) // 2]
    piece = got[at : at + _PIECE]
    if len(set(piece)) < _PIECE // 4:
        return  # too uniform to know it again
    found = want.find(piece)
    while found >= 0:
        by = at - found
        if by and explains(partial(_moved, by=by)):
            yield f"the chip holds the image {abs(by)} bytes too {'high' if by > 0 else 'low'}: check --origin"
            return
        found = want.find(piece, found + 1)


def _neighbour(at: int) -> int:
    return at ^ 1


def _moved(at: int, *, by: int) -> int:
    return at - by if at >= by else 1 << 40  # before the image: not known


def _joined_low(at: int, *, low: int, high: int) -> int:
    return at & ~(1 << low | 1 << high) if (at >> low ^ at >> high) & 1 else at


def _joined_high(at: int, *, low: int, high: int) -> int:
    return at | 1 << low | 1 << high if (at >> low ^ at >> high) & 1 else at


def _forced_low(at: int, *, bit: int) -> int:
    return at & ~bit


def _forced_high(at: int, *, bit: int) -> int:
    return at | bit


def _exchanged(at: int, *, low: int, high: int) -> int:
    different = (at >> low ^ at >> high) & 1
    return at ^ (different << low | different << high)
