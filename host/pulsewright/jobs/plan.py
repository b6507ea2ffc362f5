"""What a job makes of its range and its image before anything is sent: blocks, masks, which words need what."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from dataclasses import dataclass

from pulsewright.chip.model import Definition, EachStep, Method, RepeatStep
from pulsewright.link.results import Block
from pulsewright.rig.model import RailStep, Rig
from pulsewright.units import show_mv

BLOCK_WORDS = 256


def write_blocks(want: bytes, write: bytes, first: int, last: int) -> Iterator[Block]:
    """The blocks of `first`..`last` that have something to write; `write` has one byte a word, not 0 to write it."""
    for at in range(first, last + 1, BLOCK_WORDS):
        end = min(at + BLOCK_WORDS, last + 1)
        if any(write[at:end]):
            mask = bytearray((end - at + 7) // 8)
            for index, flag in enumerate(write[at:end]):
                if flag:
                    mask[index // 8] |= 1 << index % 8
            yield Block(at, end - at, bytes(mask), want[at:end])


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


def tries_of(method: Method) -> int:
    """The most tries a word (or the chip) gets: the `max` of the method's outermost repeat; 1 where it has none."""
    pending = list(method.steps)
    while pending:
        step = pending.pop(0)
        if isinstance(step, RepeatStep):
            return step.max
        if isinstance(step, EachStep):
            pending = [*step.steps, *pending]
    return 1


@dataclass(frozen=True)
class VerifyStep:
    """One look at the whole range: in `mode`, at a VCC step of the rig (None: the mode's own); `text` names it."""

    mode: str
    rail_step: RailStep | None
    text: str


def verify_steps(definition: Definition, rig: Rig) -> tuple[VerifyStep, ...]:
    """The margins at which the whole is read: the definition's own passes, else what the rig can make inside VCC.read.

    Where the source gives none: the lowest and the highest VCC step of the rig that with its static
    error lies inside the window of VCC.read; one pass where both are the same step.
    """
    if definition.verify:
        passes = []
        for entry in definition.verify:
            vcc = definition.modes[entry.mode].vcc
            level = show_mv(definition.supplies[vcc].typ_mv)
            passes.append(VerifyStep(entry.mode, None, f"{entry.mode} at {vcc} {level} (the definition's pass)"))
        return tuple(passes)
    inside = _inside_read(definition, rig)
    chosen = [inside[0], inside[-1]] if inside else []
    if len(inside) == 1:
        chosen = inside
    return tuple(VerifyStep("read", step, f"VCC {show_mv(step.mv)} (±{show_mv(step.error_mv)})") for step in chosen)


def _inside_read(definition: Definition, rig: Rig) -> list[RailStep]:
    window = definition.supplies["VCC.read"]
    steps = [
        step
        for step in rig.vcc.steps
        if step.number and window.min_mv <= step.mv - step.error_mv and step.mv + step.error_mv <= window.max_mv
    ]
    return sorted(steps, key=lambda step: step.mv)


def unchanging_lines(data: bytes) -> list[int]:
    """Address bits that never change the data: a pin that is open, or an image that repeats; [] for uniform data.

    Only for a whole chip, a power of two of words.
    """
    size = len(data)
    if size < 2 or size & (size - 1) or len(set(data)) == 1:
        return []
    found = []
    for bit in range(size.bit_length() - 1):
        half = 1 << bit
        if all(data[at : at + half] == data[at + half : at + 2 * half] for at in range(0, size, 2 * half)):
            found.append(bit)
    return found
