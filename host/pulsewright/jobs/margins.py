"""What reads at several VCC steps say about a chip: which bytes change, at which VCC, and what that direction means.

A 0 that fades shows first at a high VCC, a 1 that is under-erased or slow at a low one (common practice). What changes
at one and the same VCC is contact, supply or noise, and only such bytes may ever be voted on.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from pulsewright.image.compare import Comparison
from pulsewright.units import show_address, show_count, show_mv

FADING = "0s that read 1 show first at a high VCC: charge fades or the burn was too weak"
UNDER_ERASED = "1s that read 0 show first at a low VCC: under-erased or slow"
_NOISE = "contact, supply or noise"
_KINDS = {
    "fading": "a 0 that fades: burn a new chip soon",
    "under-erased": "a 1 that is under-erased or slow: erase longer, or read slower",
    "unsteady": f"changes at one VCC: {_NOISE}",
    "against": f"neither a fading 0 nor a slow 1: {_NOISE}",
}
LISTED = 16
KEPT = 1_000


def verdicts(comparison: Comparison) -> list[str]:
    """What the direction of the differences says."""
    found = []
    if comparison.burn_missing:
        found.append(FADING)
    if comparison.needs_erase:
        found.append(UNDER_ERASED)
    return found


@dataclass(frozen=True)
class Look:
    """One VCC at which a range was read, in one or more passes; the first look of a list is the usual VCC."""

    vcc_mv: int
    passes: tuple[bytes, ...]


@dataclass(frozen=True)
class Unsteady:
    """A byte that does not read the same everywhere: its values by VCC, one for each pass, and what that looks like."""

    address: int
    values: tuple[tuple[int, tuple[int, ...]], ...]  # (VCC in mV, value of each pass)
    kind: str  # a key of _KINDS

    def text(self, words: int) -> str:
        """As a line: "0004: 00 at 5.0 V, FF at 5.25 V: a 0 that fades ...": values of passes that agree stand once."""
        parts = []
        for vcc_mv, values in self.values:
            counts = {value: values.count(value) for value in dict.fromkeys(values)}
            shown = [f"{value:02X}" + (f" ({count}x)" if len(counts) > 1 else "") for value, count in counts.items()]
            parts.append(f"{'/'.join(shown)} at {show_mv(vcc_mv)}")
        return f"{show_address(self.address, words)}: {', '.join(parts)}: {_KINDS[self.kind]}"

    def facts(self) -> dict[str, object]:
        """As JSON values."""
        values = [{"vcc_mv": vcc_mv, "values": [f"{value:02X}" for value in seen]} for vcc_mv, seen in self.values]
        return {"address": self.address, "kind": self.kind, "reads": values}


def unsteady(looks: Sequence[Look], first: int) -> list[Unsteady]:
    """Every byte on which any two passes at any VCC disagree, by rising address; `first` is that of the first byte."""
    looks = _by_vcc(looks)
    everything = [data for look in looks for data in look.passes]
    same = everything[0]
    if all(data == same for data in everything):
        return []
    places = [at for at, values in enumerate(zip(*everything, strict=True)) if len(set(values)) > 1]
    found = []
    for at in places:
        values = tuple((look.vcc_mv, tuple(data[at] for data in look.passes)) for look in looks)
        found.append(Unsteady(first + at, values, _kind(values)))
    return found


def _by_vcc(looks: Sequence[Look]) -> list[Look]:
    """Looks at the same VCC are more passes of one look."""
    merged: dict[int, tuple[bytes, ...]] = {}
    for look in looks:
        merged[look.vcc_mv] = (*merged.get(look.vcc_mv, ()), *look.passes)
    return [Look(vcc_mv, passes) for vcc_mv, passes in merged.items()]


def _kind(values: Sequence[tuple[int, tuple[int, ...]]]) -> str:
    if any(len(set(seen)) > 1 for _, seen in values):
        return "unsteady"
    usual_mv, usual = values[0][0], values[0][1][0]
    rises = falls = against = False
    for vcc_mv, seen in values[1:]:
        up, down = seen[0] & ~usual, usual & ~seen[0]
        rises |= bool(up) and vcc_mv > usual_mv
        falls |= bool(down) and vcc_mv < usual_mv
        against |= (bool(up) and vcc_mv <= usual_mv) or (bool(down) and vcc_mv >= usual_mv)
    if against or (rises and falls):
        return "against"
    return "fading" if rises else "under-erased"


def told(found: Sequence[Unsteady], words: int) -> list[str]:
    """The bytes as lines of text: how many of each kind, then the first of them."""
    counts = {kind: sum(one.kind == kind for one in found) for kind in _KINDS}
    lines = [f"{show_count(count, 'byte')}: {_KINDS[kind]}" for kind, count in counts.items() if count]
    lines += [one.text(words) for one in found[:LISTED]]
    if len(found) > LISTED:
        lines.append(f"and {len(found) - LISTED} more")
    return lines


def as_facts(found: Sequence[Unsteady]) -> dict[str, object]:
    """As JSON values; of very many the first, with the whole number beside them."""
    return {"unsteady_bytes": len(found), "unsteady": [one.facts() for one in found[:KEPT]]}
