"""Compare what a chip should hold with what it gave: how many bytes differ, in which way, and what it looks like."""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.image.causes import Cause, likely_causes
from pulsewright.units import show_address

LISTED = 16


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
    in both. `first` are the lowest addresses that differ, at most LISTED; `causes` say what would explain them.
    """

    size: int
    compared: int
    differing: int
    burn_missing: int
    needs_erase: int
    first: tuple[Mismatch, ...] = ()
    causes: tuple[Cause, ...] = ()

    @property
    def equal(self) -> bool:
        """True if no compared byte differs."""
        return self.differing == 0

    def lines(self) -> list[str]:
        """The result as lines of text, facts before guesses."""
        return self.counted() + [cause.line() for cause in self.causes]

    def counted(self) -> list[str]:
        """The facts alone as lines of text: how many differ, of which class, the first of them."""
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
        return text

    def facts(self) -> dict[str, object]:
        """As JSON values."""
        return {
            "compared": self.compared,
            "differing": self.differing,
            "burn_missing": self.burn_missing,
            "needs_erase": self.needs_erase,
            "first": [{"address": m.address, "wanted": f"{m.want:02X}", "got": f"{m.got:02X}"} for m in self.first],
            "causes": [cause.facts() for cause in self.causes],
        }


def compare(want: bytes, got: bytes, mask: bytes | None = None, *, blank: int = 0xFF) -> Comparison:
    """Compare byte by byte where `mask` is not 0 (everywhere without a mask); ValueError if the lengths differ.

    `blank` is a byte in the erased state.
    """
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
        causes=likely_causes(want, got, mask, differing, blank=blank),
    )
