"""A session that answers by the kind of a sequence, on plain cells: job logic without a rig, in no time."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from typing import Any

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from pulsewright.jobs.context import JobContext, Options
from pulsewright.link.line import RigCounters
from pulsewright.link.results import Block, BlockDone, Counters, RigFacts, RunResult, Trouble
from pulsewright.rig.file import load_rig
from pulsewright.rig.model import Rig
from pulsewright.sequence.types import Sequence
from pulsewright.wire.frames import Hello
from pulsewright.wire.tables import Fail, Fault, Outcome

WORDS = 65536
ID = b"\xda\x08"


def noise(seed: int = 1) -> bytearray:
    """Contents that hold every byte value."""
    return bytearray((at * 31 + (at >> 8) * seed) & 0xFF for at in range(WORDS))


def facts_of(rig: Rig, hello: Hello) -> RigFacts:
    """What a board that fits a rig file tells of itself."""
    nominal = tuple(
        tuple(rail.scaling.count_at_least(step.mv) for step in rail.steps) for rail in (rig.vcc, rig.raised)
    )
    return RigFacts(
        hello=hello,
        board="fake",
        window_blocks=4,
        block_bytes=512,
        program_bytes=1024,
        driven_from=0,
        off_below=0,
        clear_above_vcc=0,
        fall_limit_ticks=0,
        off_limit_ticks=0,
        lines=32,
        data_lines=rig.site.data_lines,
        switches=tuple(switch.position for switch in rig.switches),
        vcc_switches=tuple(switch.position for switch in rig.vcc_switches),
        top_baud=1_000_000,
        nominal=nominal,
        ceilings=tuple(switch.scaling.count_at_most(switch.ceiling_mv) for switch in rig.switches),
    )


@dataclass
class FakeSession:
    """Cells that read, burn from 1 to 0 and erase; `before` may change them or answer in their place."""

    cells: bytearray = field(default_factory=lambda: bytearray(b"\xff" * WORDS))
    before: Callable[[Sequence, int], RunResult | None] = lambda sequence, turn: None
    stuck: dict[int, int] = field(default_factory=dict)
    erase_pulses: int = 1
    kinds: list[str] = field(default_factory=list)
    titles: list[str] = field(default_factory=list)
    identities: list[int] = field(default_factory=list)
    written: list[int] = field(default_factory=list)

    @property
    def facts(self) -> RigFacts:
        """A board that needs no telling."""
        hello = Hello(1, 4, 512, 0xA4572FA2, 7, 0, 0, 0, 0, 0, 0)
        return facts_of(load_rig(), hello)

    def run(self, sequence: Sequence, blocks: Iterable[Block] = ()) -> RunResult:
        """What a chip would have answered."""
        self.kinds.append(sequence.kind)
        self.identities.append(sequence.permit.identity)
        self.titles.append(sequence.title)
        answer = self.before(sequence, len(self.kinds))
        if answer is not None:
            return answer
        if sequence.kind == "read":
            data = b"".join(self.cells[block.first : block.first + block.words] for block in blocks)
            return self.done(data=data)
        if sequence.kind == "erase":
            self.cells[:] = b"\xff" * len(self.cells)
            return self.done(tries=self.erase_pulses)
        if sequence.kind == "burn":
            return self._burn(blocks)
        if sequence.kind == "blank":
            at = next((at for at in range(sequence.first, sequence.last + 1) if self.cells[at] != 0xFF), None)
            if at is not None:
                return self.failed(Fail.NOT_BLANK, at, self.cells[at])
        return self.done()

    def _burn(self, blocks: Iterable[Block]) -> RunResult:
        done: list[BlockDone] = []
        for index, block in enumerate(blocks):
            count = 0
            for offset in range(block.words):
                if block.mask is None or block.mask[offset // 8] >> offset % 8 & 1:
                    at = block.first + offset
                    self.written.append(at)
                    self.cells[at] = (self.cells[at] & block.data[offset]) | self.stuck.get(at, 0)
                    if self.cells[at] != block.data[offset]:
                        done.append(BlockDone(index, block.first, offset, block.first, 1, at, (count,)))
                        return self.failed(Fail.PROGRAM, at, self.cells[at], blocks=tuple(done))
                    count += 1
            done.append(BlockDone(index, block.first, block.words, block.first, 1, None, (count,)))
        return self.done(blocks=tuple(done))

    def done(self, **fields: Any) -> RunResult:
        """A sequence that ended well."""
        return _result(Outcome.DONE, None, **fields)

    def failed(self, why: Fail, address: int, sample: int, **fields: Any) -> RunResult:
        """A `fail` op."""
        trouble = Trouble(int(Fault.FAILED), "failed", got=int(why), address=address, sample=sample)
        return _result(Outcome.FAILED, trouble, **fields)


def _result(outcome: Outcome, trouble: Trouble | None, **fields: Any) -> RunResult:
    given: dict[str, Any] = {"data": b"", "blocks": (), "tries": 0, **fields}
    counters = Counters(0, 0, 0, RigCounters(0, 0, 0), 1234)
    return RunResult(outcome, trouble, 0, ID, (), counters=counters, **given)


@dataclass(frozen=True)
class FakeRig:
    """The rig that a job thinks was opened."""

    in_process: bool = True


def context(
    session: FakeSession, *, definition: Definition | None = None, in_process: bool = True, **options: Any
) -> JobContext:
    """A job's context around a fake session."""
    return JobContext(definition or load("27e512"), load_rig(), FakeRig(in_process), session, Options(**options))
