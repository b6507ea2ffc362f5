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
    "turning": "a 0 that fades or a 1 that is under-erased or slow",
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
    values: tuple[tuple[int, tuple[int, ...]], ...]  # (VCC in mV, value of each pass), by rising VCC
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
        """As JSON values: the values of the first passes in their order, and how often each came."""
        reads = [
            {
                "vcc_mv": vcc_mv,
                "values": [f"{value:02X}" for value in seen[:LISTED]],
                "counts": {f"{value:02X}": seen.count(value) for value in dict.fromkeys(seen)},
            }
            for vcc_mv, seen in self.values
        ]
        return {"address": self.address, "kind": self.kind, "reads": reads}


def unsteady(looks: Sequence[Look], first: int, truth: bytes | None = None) -> list[Unsteady]:
    """Every byte on which any two passes at any VCC disagree, by rising address; `first` is that of the first byte.

    `truth`: what the bytes should be, where that is known; else the usual VCC counts as right.
    """
    usual_mv = looks[0].vcc_mv
    looks = by_vcc(looks)
    everything = list(dict.fromkeys(data for look in looks for data in look.passes))
    if len(everything) == 1:
        return []
    places = [at for at, values in enumerate(zip(*everything, strict=True)) if len(set(values)) > 1]
    found = []
    for at in places:
        values = tuple((look.vcc_mv, tuple(data[at] for data in look.passes)) for look in looks)
        found.append(Unsteady(first + at, values, _kind(values, usual_mv, truth[at] if truth is not None else None)))
    return found


def by_vcc(looks: Sequence[Look]) -> list[Look]:
    """By rising VCC; looks at the same VCC are more passes of one look."""
    merged: dict[int, tuple[bytes, ...]] = {}
    for look in looks:
        merged[look.vcc_mv] = (*merged.get(look.vcc_mv, ()), *look.passes)
    return [Look(vcc_mv, merged[vcc_mv]) for vcc_mv in sorted(merged)]


def _kind(values: Sequence[tuple[int, tuple[int, ...]]], usual_mv: int, truth: int | None) -> str:
    """What a byte looks like; that it turns with VCC outweighs that it is unsteady at one as well."""
    kinds = {_bit_kind(values, usual_mv, truth, bit) for bit in range(8)} - {""}
    if "against" in kinds:
        return "against"
    turning = kinds - {"unsteady"}
    if len(turning) > 1:
        return "turning"
    return turning.pop() if turning else "unsteady"


def _bit_kind(values: Sequence[tuple[int, tuple[int, ...]]], usual_mv: int, truth: int | None, bit: int) -> str:
    """What one bit looks like; "" for one that always reads the same."""
    seen = {vcc_mv: {value >> bit & 1 for value in passes} for vcc_mv, passes in values}
    zeros = [vcc_mv for vcc_mv, levels in seen.items() if levels == {0}]
    ones = [vcc_mv for vcc_mv, levels in seen.items() if levels == {1}]
    if not (zeros and ones):
        return "unsteady" if len(zeros) + len(ones) < len(seen) else ""
    if max(zeros) > min(ones):
        return "against"
    right = seen[usual_mv] if truth is None else {truth >> bit & 1}
    if len(right) > 1:
        return "turning"
    return "fading" if right == {0} else "under-erased"


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


def voted(passes: Sequence[bytes]) -> bytes | None:
    """What most of the passes at one VCC read, byte by byte; None where some byte has no value in more than half."""
    result = bytearray(passes[0])
    for at, values in enumerate(zip(*passes, strict=True)):
        if len(set(values)) > 1:
            value = max(values, key=values.count)
            if values.count(value) * 2 <= len(values):
                return None
            result[at] = value
    return bytes(result)


def what_to_try(found: Sequence[Unsteady]) -> str:
    """One thing to try, by what the bytes look like."""
    kinds = {one.kind for one in found}
    if kinds & {"unsteady", "against"}:
        return "clean the contacts, seat the chip again, and read again; --passes 9 shows which value is the rule"
    right = []
    if kinds & {"fading", "turning"}:
        right.append("fading 0s are right in what was read at the lowest VCC")
    if kinds & {"under-erased", "turning"}:
        right.append("slow 1s are right in what was read at the highest")
    return " and ".join(right)
