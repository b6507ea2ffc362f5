"""What a burn took, counted from the replies of its blocks: pulses by word, or pages and words written."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from pulsewright.chip.model import EachStep, ExpectStep, Method, PulseStep, RepeatStep, Step
from pulsewright.link.results import BlockDone
from pulsewright.units import show_address, show_count


def _pulsed(steps: Iterable[Step], *, counted: bool) -> bool:
    """Whether a pulse stands in the steps: outside any repeat, or (`counted`) inside one."""
    for step in steps:
        if isinstance(step, PulseStep) and not counted:
            return True
        if isinstance(step, RepeatStep) and counted and (_pulsed(step.steps, counted=False)):
            return True
        if isinstance(step, EachStep) and _pulsed(step.steps, counted=counted):
            return True
        if isinstance(step, ExpectStep) and _pulsed(step.else_, counted=counted):
            return True
    return False


def passes_of(method: Method) -> tuple[EachStep, ...]:
    """The loops over the data, in their order."""
    return tuple(step for step in method.steps if isinstance(step, EachStep))


def blind_passes(method: Method) -> int:
    """How many passes give each word one pulse without a count of tries."""
    return sum(_pulsed(step.steps, counted=False) for step in passes_of(method))


def has_pulses(method: Method) -> bool:
    """Whether words are burnt by pulses of the rig; else the chip writes by itself."""
    return _pulsed(method.steps, counted=False) or _pulsed(method.steps, counted=True)


def tries_of(method: Method) -> int:
    """The most pulses a word (or the chip) gets; 1 where nothing is repeated."""
    pending = list(method.steps)
    while pending:
        step = pending.pop(0)
        if isinstance(step, RepeatStep):
            return step.max + blind_passes(method)
        if isinstance(step, EachStep):
            pending = [*step.steps, *pending]
        if isinstance(step, ExpectStep):
            pending = [*step.else_, *pending]
    return 1


@dataclass(frozen=True)
class Pulses:
    """What a burn took: words by number of pulses (index 0: one pulse), the word that took most."""

    histogram: tuple[int, ...]
    worst: int
    worst_tries: int

    @property
    def words(self) -> int:
        """Words that took their value."""
        return sum(self.histogram)

    @property
    def total(self) -> int:
        """Pulses in all."""
        return sum(count * tries for tries, count in enumerate(self.histogram, 1))

    def facts(self) -> dict[str, object]:
        """As JSON values: only the numbers of pulses that happened."""
        return {
            "words": self.words,
            "pulses": self.total,
            "by_tries": {str(tries): count for tries, count in enumerate(self.histogram, 1) if count},
            "worst_word": self.worst,
            "worst_tries": self.worst_tries,
        }


def pulses_of(method: Method, blocks: tuple[BlockDone, ...]) -> Pulses:
    """The sum over blocks and passes; a blind pass gives each of its words one pulse more."""
    blind = blind_passes(method)
    last = [block for block in blocks if block.turn == len(passes_of(method)) - 1] or ([] if blind else [*blocks])
    size = max((len(block.histogram) for block in last), default=0)
    total = [0] * (size + blind + 1)
    for block in last:
        for index, count in enumerate(block.histogram):
            total[index + blind] += count
    if blind:  # a later pass counts only the words that it gave more
        first = [block.written for block in blocks if block.turn == 0]
        total[blind - 1] += sum(first) - sum(sum(block.histogram) for block in last)
    worst = max(last, key=lambda block: block.worst_tries, default=None)
    while total and not total[-1]:
        total.pop()
    if worst is None or not worst.worst_tries:
        return Pulses(tuple(total), blocks[0].first if blocks else 0, blind if blocks else 0)
    return Pulses(tuple(total), worst.worst, worst.worst_tries + blind)


def words_done(method: Method, blocks: tuple[BlockDone, ...]) -> int:
    """How many words surely took their value, as far as the blocks' replies tell."""
    if has_pulses(method):
        return pulses_of(method, blocks).words
    return sum(block.written for block in blocks if block.failed is None)


def burnt_line(method: Method, blocks: tuple[BlockDone, ...], words: int) -> tuple[str, dict[str, object]]:
    """What was done in words, and as JSON values; `words` is the part's size."""
    if has_pulses(method):
        done = pulses_of(method, blocks)
        line = f"{show_count(done.words, 'word')} burnt with {show_count(done.total, 'pulse')}"
        if done.words:
            at = show_address(done.worst, words)
            line += f"; most for one word: {done.worst_tries} of {tries_of(method)} at {at}"
        return line, {"pulses": done.facts()}
    written = sum(block.written for block in blocks if block.failed is None)
    if method.unit == "page":
        pages = sum(block.failed is None for block in blocks)
        line = f"{show_count(pages, 'page')} written, {show_count(written, 'word')}, each read back"
        return line, {"pages": pages, "written_words": written}
    return f"{show_count(written, 'word')} written, each read back", {"written_words": written}
