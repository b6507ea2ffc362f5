"""What a session takes and gives: blocks, facts of the rig, the result of a run."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from pulsewright.link.line import RigCounters
from pulsewright.wire.frames import Hello
from pulsewright.wire.tables import Outcome


@dataclass(frozen=True)
class Block:
    """Words to read or write. `mask`: one bit a word, bit 0 first, 1 = write (None: all); `data`: low byte first."""

    first: int
    words: int
    mask: bytes | None = None
    data: bytes = b""


@dataclass(frozen=True)
class BlockDone:
    """What became of a block; `failed` is the first word that would not take, `histogram` words by number of tries.

    `written`: words that were written at all; `turn`: which pass over the data the block belongs to, from 0.
    """

    index: int
    first: int
    words: int
    worst: int = 0
    worst_tries: int = 0
    failed: int | None = None
    histogram: tuple[int, ...] = ()
    written: int = 0
    turn: int = 0


@dataclass(frozen=True)
class Trouble:
    """A decoded fault of the rig; voltages in raw counts, `pc` the byte offset of the op in the sequence."""

    code: int
    name: str
    op: int = 0
    pc: int = 0
    tick: int = 0
    got: int = 0
    low: int = 0
    high: int = 0
    address: int = 0
    sample: int = 0
    kept: int = 0
    pulsing: bool = False

    def numbers(self) -> str:
        """The numbers as text, only those that are not zero."""
        shown = [f"op {self.op:02X} at {self.pc}"] if self.op else []
        shown += [f"{name} {value}" for name in ("tick", "got", "low", "high") if (value := getattr(self, name))]
        shown += [f"{name} {value:04X}" for name in ("address", "sample", "kept") if (value := getattr(self, name))]
        return ", ".join(shown)


@dataclass(frozen=True)
class Counters:
    """Counters of both ends. `sent_again`, `damaged` and `dropped` are this end's; `rig` is the other's."""

    sent_again: int
    damaged: int
    dropped: int
    rig: RigCounters | None
    elapsed_us: int

    def facts(self) -> tuple[str, ...]:
        """Both ends as lines of text for a message."""
        here = f"frames here: {self.sent_again} sent again, {self.damaged} damaged, {self.dropped} unasked for"
        if self.rig is None:
            return (here, "frames at the rig: not known, it does not answer")
        there = f"{self.rig.damaged} damaged, {self.rig.dropped} dropped, {self.rig.repeated} repeated"
        return (here, f"frames at the rig: {there}")


@dataclass(frozen=True)
class RunResult:
    """How a sequence ended and what it brought. `readings`: (offset of the measure op, raw count); `matched`: which
    of the permit's alternatives the ID bytes were (as the rig counts them); `tries`: the turn in which the last loop
    was left."""

    outcome: Outcome
    trouble: Trouble | None
    matched: int | None
    id_bytes: bytes
    readings: tuple[tuple[int, int], ...]
    data: bytes
    blocks: tuple[BlockDone, ...]
    counters: Counters
    tries: int = 0


@dataclass(frozen=True)
class RigFacts:
    """What the rig told when the session began. Counts are raw; `nominal` by rail and step; `cost_ticks` by op code."""

    hello: Hello
    board: str
    window_blocks: int
    block_bytes: int
    program_bytes: int
    driven_from: int
    off_below: int
    clear_above_vcc: int
    fall_limit_ticks: int
    off_limit_ticks: int
    lines: int
    data_lines: tuple[int, ...]
    switches: tuple[int, ...]
    vcc_switches: tuple[int, ...]
    top_baud: int
    nominal: tuple[tuple[int, ...], ...]
    ceilings: tuple[int, ...]
    cost_ticks: Mapping[int, int] = field(default_factory=dict)
    baud: int = 0
    earlier: Trouble | None = None  # a fault that was latched when the session began

    @property
    def boot(self) -> int:
        """The boot number: it counts the rig's resets."""
        return self.hello.boot


@dataclass(frozen=True)
class LinkProgress:
    """How far a sequence is: `stage` is "load" or "run", counts are of blocks and words answered so far."""

    stage: str
    blocks: int
    words: int
    elapsed_us: int
