"""What a job makes of its range and its image before anything is sent: blocks, masks, which words need what."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from dataclasses import dataclass

from pulsewright.chip.model import Definition
from pulsewright.errors import CannotMake
from pulsewright.link.results import Block
from pulsewright.rig.model import RailStep, Rig
from pulsewright.sequence.levels import choose_vcc
from pulsewright.units import show_mv

BLOCK_WORDS = 256


def write_blocks(want: bytes, write: bytes, first: int, last: int, *, size: int = BLOCK_WORDS) -> Iterator[Block]:
    """The blocks of `first`..`last` that have something to write; `write` has one byte a word, not 0 to write it.

    Blocks hold at most `size` words and never cross a multiple of it: with a page's size, a block is a page.
    """
    at = first
    while at <= last:
        end = min(at - at % size + size, last + 1)
        if any(write[at:end]):
            mask = bytearray((end - at + 7) // 8)
            for index, flag in enumerate(write[at:end]):
                if flag:
                    mask[index // 8] |= 1 << index % 8
            yield Block(at, end - at, bytes(mask), want[at:end])
        at = end


def whole_pages(to_write: bytes, first: int, last: int, page: int) -> bytes:
    """The words to write, made whole pages of it: every word of a page with one of them, within `first`..`last`."""
    marked = bytearray(len(to_write))
    for at in range(first - first % page, last + 1, page):
        begin, end = max(at, first), min(at + page, last + 1)
        if any(to_write[begin:end]):
            marked[begin:end] = b"\x01" * (end - begin)
    return bytes(marked)


@dataclass(frozen=True)
class Change:
    """What burning `want` over `have` means, counted over the used words."""

    used: int
    equal: int
    to_write: bytes  # one byte a word of the chip, 1: differs and is used
    impossible: tuple[int, ...]  # addresses that need a 0 to become a 1

    @property
    def differing(self) -> int:
        """Used words that differ."""
        return self.used - self.equal


def change(have: bytes, want: bytes, used: bytes) -> Change:
    """Which used words differ, and which of them need a change from 0 to 1; all three have one byte a word."""
    to_write = bytes(1 if u and h != w else 0 for h, w, u in zip(have, want, used, strict=True))
    impossible = tuple(at for at, flag in enumerate(to_write) if flag and want[at] & ~have[at])
    count = len(used) - used.count(0)
    return Change(count, count - (len(to_write) - to_write.count(0)), to_write, impossible)


def sha256(data: bytes) -> str:
    """The hash by which a sequence refers to its data, hex."""
    return hashlib.sha256(data).hexdigest()


@dataclass(frozen=True)
class VerifyStep:
    """One look at the whole range: in `mode`, at a VCC step of the rig (None: the mode's own); `text` names it."""

    mode: str
    rail_step: RailStep | None
    text: str


def shortfalls(definition: Definition, rig: Rig) -> tuple[str, ...]:
    """The margin passes a definition names that the rig cannot make, each with the reason."""
    short = []
    for entry in definition.verify:
        step = definition.supplies[definition.modes[entry.mode].vcc]
        try:
            choose_vcc(definition, rig, step)
        except CannotMake as reason:
            short.append(f"pass {entry.mode} at {step.name} {show_mv(step.typ_mv)}: {reason.what}")
    return tuple(short)


def verify_steps(definition: Definition, rig: Rig) -> tuple[VerifyStep, ...]:
    """The margins at which the whole is read: the definition's own passes, else what the rig can make inside VCC.read.

    Where the source gives none (or the rig can make none of them): the lowest and the highest VCC step of the rig that
    with its static error lies inside the window of VCC.read; one pass where both are the same step.
    """
    passes = []
    for entry in definition.verify:
        vcc = definition.modes[entry.mode].vcc
        try:
            choose_vcc(definition, rig, definition.supplies[vcc])
        except CannotMake:
            continue  # a shortfall: `shortfalls` tells it
        level = show_mv(definition.supplies[vcc].typ_mv)
        passes.append(VerifyStep(entry.mode, None, f"{entry.mode} at {vcc} {level} (the definition's pass)"))
    if passes:
        return tuple(passes)
    inside = _inside_read(definition, rig)
    chosen = [inside[0], inside[-1]] if inside else []
    if len(inside) == 1:
        chosen = inside
    return tuple(VerifyStep("read", step, f"VCC {show_mv(step.mv)} (±{show_mv(step.error_mv)})") for step in chosen)


def vcc_of(definition: Definition, rig: Rig, step: VerifyStep) -> int:
    """The VCC of a pass, millivolts, as the rig makes it."""
    if step.rail_step is not None:
        return step.rail_step.mv
    return choose_vcc(definition, rig, definition.supplies[definition.modes[step.mode].vcc]).mv


def _inside_read(definition: Definition, rig: Rig) -> list[RailStep]:
    window = definition.supplies["VCC.read"]
    steps = [
        step
        for step in rig.vcc.steps
        if step.number and window.min_mv <= step.mv - step.error_mv and step.mv + step.error_mv <= window.max_mv
    ]
    return sorted(steps, key=lambda step: step.mv)


_ENOUGH_WORDS = 64  # fewer words can read alike by chance


def unchanging_lines(data: bytes, first: int = 0, words: int | None = None) -> list[int]:
    """Address bits that never change the data: a pin that is open, or an image that repeats; [] for uniform data.

    `data` begins at address `first` of a chip of so many `words` (None: it is the whole chip). A part of a chip tells
    of the bits that change within it: where 32 words or more, not all the same, have their partner in it.
    """
    if len(set(data)) < 2:
        return []
    end = first + len(data)
    least = 1 if words is None or len(data) == words else _ENOUGH_WORDS // 2
    return [bit for bit in range((end - 1).bit_length()) if _never_changes(data, first, 1 << bit, least)]


def _never_changes(data: bytes, first: int, half: int, least: int) -> bool:
    pairs, values = 0, set[int]()
    for block in range(first - first % (2 * half), first + len(data), 2 * half):
        low, high = max(block, first) - first, min(block + half, first + len(data) - half) - first
        if low >= high:
            continue
        part = data[low:high]
        if part != data[low + half : high + half]:
            return False
        pairs += high - low
        values |= set(part)
    return pairs >= least and len(values) > 1


def joined_lines(data: bytes) -> list[tuple[int, int]]:
    """Pairs of address bits that act as one: where they differ, the data is that of both low, or that of both high.

    Two address pins that touch look so, whichever level wins. Only for a whole chip, a power of two of words, and only
    bits that change the data at all; [] for uniform data.
    """
    size = len(data)
    if size < 4 or size & (size - 1) or len(set(data)) == 1:
        return []
    still = unchanging_lines(data)
    bits = [bit for bit in range(size.bit_length() - 1) if bit not in still]
    return [(low, high) for low in bits for high in bits if low < high and _act_as_one(data, low, high)]


def _act_as_one(data: bytes, low: int, high: int) -> bool:
    a, b = 1 << low, 1 << high
    step = max(1, len(data) // 256 | 1)  # an odd stride meets every value of every bit: most pairs fall here at once
    for at in (*range(0, len(data), step), *range(len(data))):
        if not at & (a | b) and not data[at | a] == data[at | b] == data[at]:
            return all(
                data[one | a] == data[one | b] == data[one | a | b] for one in range(len(data)) if not one & (a | b)
            )
    return True


def alike_data_lines(data: bytes, width: int = 8) -> list[tuple[int, int]]:
    """Pairs of data bits that read alike in every word, though each is both 0 and 1 somewhere: pins that touch?

    [] for less than 64 words.
    """
    if len(data) < _ENOUGH_WORDS:
        return []
    words = set(data)
    changing = [bit for bit in range(width) if len({word >> bit & 1 for word in words}) == 2]
    pairs = [(low, high) for low in changing for high in changing if low < high]
    return [(a, b) for a, b in pairs if all((word >> a ^ word >> b) & 1 == 0 for word in words)]
