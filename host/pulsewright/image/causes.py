"""What a mismatch looks like: ideas judged by how many of the bytes that differ they explain, and what speaks against.

A cause is only told where it explains nine of ten of the bytes that differ and next to none that is right speaks
against it; the numbers stand beside it.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from itertools import chain

from pulsewright.image.hypotheses import (
    Hypothesis,
    address_line_ideas,
    compared,
    data_line_ideas,
    moved_ideas,
)
from pulsewright.units import show_address

# A fault of a line shows in many bytes; below this many a pattern may be chance.
EVIDENCE = 8
TOLD = 3
_SAMPLE = 64
_LEAST_PERCENT = 90  # of the bytes that differ, explained
_MOST_AGAINST_PERCENT = 5  # right bytes that speak against it, counted against the explained ones


@dataclass(frozen=True)
class Cause:
    """A likely cause: `explained` of `of` differing bytes are as it would have them, `against` right ones are not.

    It says nothing of `beyond` further differing bytes: what they would be lies outside the image.
    """

    kind: str
    text: str
    explained: int
    of: int
    against: int = 0
    beyond: int = 0

    @property
    def full(self) -> bool:
        """Whether it explains everything."""
        return self.explained == self.of and not self.against

    def line(self) -> str:
        """As a line of text with its numbers."""
        share = f"all {self.of}" if self.explained == self.of else f"{self.explained} of {self.of}"
        against = "; 1 byte that is right speaks against it" if self.against == 1 else ""
        if self.against > 1:
            against = f"; {self.against} bytes that are right speak against it"
        beyond = f" that it says anything of; {self.beyond} more differ" if self.beyond else ""
        return f"{self.text} (explains {share} differing bytes{beyond}{against})"

    def facts(self) -> dict[str, object]:
        """As JSON values."""
        return {
            "cause": self.kind,
            "text": self.text,
            "explained": self.explained,
            "differing": self.of,
            "against": self.against,
            "beyond": self.beyond,
        }


def likely_causes(
    want: bytes, got: bytes, mask: bytes, differing: list[int], *, blank: int = 0xFF
) -> tuple[Cause, ...]:
    """What explains the bytes at the addresses `differing`: at most TOLD causes, () where nothing does.

    Where causes explain everything, only these; else the one that explains the most. `mask`: which bytes are compared.
    """
    if len(differing) < EVIDENCE:
        return ()
    wanted, gotten = compared(want, mask), compared(got, mask)
    if len(set(gotten)) == 1:
        return (_uniform(gotten[0], len(differing), blank),)
    judge = _Judge(want, got, mask, differing)
    whole = len(wanted) == len(want) and len(want) & (len(want) - 1) == 0
    ideas = chain(
        data_line_ideas(wanted, gotten),
        address_line_ideas(want, got, whole=whole),
    )
    # What a line explains, half of a moved image may explain as well: a move is asked for last.
    found = judge.causes(ideas) or judge.causes(moved_ideas(want, got, differing))
    full = [cause for cause in found if cause.full]
    if full:
        return tuple(full[:TOLD])
    found += _not_burnt(got, differing, blank, size=len(want))
    return (max(found, key=lambda cause: cause.explained - cause.against),) if found else ()


def _uniform(value: int, differing: int, blank: int) -> Cause:
    why = "a blank chip, or outputs that never drive" if value == blank else "no data reaches the rig"
    kind = "blank" if value == blank else "no data"
    return Cause(kind, f"every byte reads {value:02X}: {why}", differing, differing)


def _not_burnt(got: bytes, differing: list[int], blank: int, *, size: int) -> Iterator[Cause]:
    """Right bytes say nothing against it: a burn that was cut leaves some right and the rest blank."""
    blanks = [at for at in differing if got[at] == blank]
    if len(blanks) * 100 >= len(differing) * _LEAST_PERCENT:
        span = f"{show_address(blanks[0], size)}..{show_address(blanks[-1], size)}"
        text = f"what differs reads {blank:02X}, the erased state, within {span}: not burnt yet?"
        yield Cause("not burnt", text, len(blanks), len(differing))


class _Judge:
    """One mismatch, ready to have ideas judged on it."""

    def __init__(self, want: bytes, got: bytes, mask: bytes, differing: list[int]) -> None:
        self._want, self._got, self._mask = want, got, mask
        self._differing = differing
        self._sample = differing[:: max(1, len(differing) // _SAMPLE)]
        self._pairs: Counter[tuple[int, int]] | None = None
        self._right: list[int] | None = None

    def causes(self, ideas: Iterable[Hypothesis]) -> list[Cause]:
        """The ideas that explain enough."""
        return [cause for idea in ideas if (cause := self._cause(idea)) is not None]

    def _cause(self, idea: Hypothesis) -> Cause | None:
        """The cause this idea is, with its numbers; None where it does not explain enough."""
        if not self._may_hold(idea):
            return None
        explained, of, against = self._by_value(idea.table) if idea.table is not None else self._by_place(idea)
        enough = of >= EVIDENCE and explained * 100 >= of * _LEAST_PERCENT
        if not enough or against * 100 > explained * _MOST_AGAINST_PERCENT:
            return None
        return Cause(idea.kind, idea.text, explained, of, against, len(self._differing) - of)

    def _foretold(self, idea: Hypothesis, at: int) -> int | None:
        """What would be read at an address; None where that is not known."""
        if idea.table is not None:
            return idea.table[self._want[at]]
        assert idea.source is not None
        other = idea.source(at)
        return self._want[other] if other < len(self._want) and self._mask[other] else None

    def _may_hold(self, idea: Hypothesis) -> bool:
        """A look at some of the differing bytes, which ends most ideas at once: a quarter of them may be wrong."""
        wrong = 0
        for at in self._sample:
            foretold = self._foretold(idea, at)
            wrong += foretold is not None and foretold != self._got[at]
            if wrong * 4 > len(self._sample):
                return False
        return True

    def _by_value(self, table: bytes) -> tuple[int, int, int]:
        if self._pairs is None:
            self._pairs = Counter(zip(compared(self._want, self._mask), compared(self._got, self._mask), strict=True))
        explained = against = 0
        for (want, got), count in self._pairs.items():
            if want != got:
                explained += count * (table[want] == got)
            else:
                against += count * (table[want] != got)
        return explained, len(self._differing), against

    def _by_place(self, idea: Hypothesis) -> tuple[int, int, int]:
        if self._right is None:
            wrong = set(self._differing)
            self._right = [at for at, flag in enumerate(self._mask) if flag and at not in wrong]
        there = [(self._foretold(idea, at), self._got[at]) for at in self._differing]
        known = [(foretold, got) for foretold, got in there if foretold is not None]
        explained = sum(foretold == got for foretold, got in known)
        if len(known) < EVIDENCE or explained * 100 < len(known) * _LEAST_PERCENT:
            return explained, len(known), 0
        against = sum(self._foretold(idea, at) not in (None, self._got[at]) for at in self._right)
        return explained, len(known), against
