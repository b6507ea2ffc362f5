"""Each single op of each 27e512 sequence deleted, doubled or swapped: refused by the proof, or clean to the judge.

What the proof accepts is run on the reference interpreter with a modelled chip and the judge at its pins. A mutant that
is clean yet leaves the chip wrong is no danger to it; those are counted, and caught by a job's own verify.
"""

from __future__ import annotations

import zlib
from collections import Counter
from collections.abc import Callable
from dataclasses import replace

import pytest

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from pulsewright.errors import PulsewrightError
from pulsewright.link.inprocess import InProcess
from pulsewright.link.results import Block, RunResult
from pulsewright.link.session import Session
from pulsewright.rig.file import load_rig
from pulsewright.rig.model import Rig
from pulsewright.sequence.compile import (
    compile_blank,
    compile_burn,
    compile_erase,
    compile_identify,
    compile_read,
)
from pulsewright.sequence.proof import prove
from pulsewright.sequence.types import Sequence
from pulsewright.virtual.bench import Bench
from pulsewright.wire.tables import Outcome
from tests.sequence.mutate import Mutant, mutants

LAST = 7  # reading and burning eight words shows what 65536 would
DATA = bytes([0x00, 0xFF, 0x55, 0xAA, 0x01, 0x80, 0x7F, 0xFE])

KINDS: dict[str, Callable[[Definition, Rig], Sequence]] = {
    "identify": compile_identify,
    "read": lambda definition, rig: compile_read(definition, rig, 0, LAST),
    "blank": lambda definition, rig: compile_blank(definition, rig, 0, LAST),
    "erase": compile_erase,
    "burn": lambda definition, rig: compile_burn(definition, rig, 0, LAST, ""),
}


def blocks_for(kind: str) -> list[Block] | None:
    """The host's blocks of a sequence; reading asks by itself."""
    return [Block(0, LAST + 1, None, DATA)] if kind == "burn" else None


def run(sequence: Sequence) -> tuple[RunResult | None, Bench]:
    """A sequence on a fresh bench: noise for an erase, blank otherwise; None where the rig refused it."""
    bench = Bench.fresh("27e512", contents="noise:3" if sequence.kind == "erase" else "blank")
    session = Session(InProcess(bench.rig(1)))
    try:
        session.connect()
        return session.run(sequence, blocks_for(sequence.kind)), bench
    except PulsewrightError:
        return None, bench


def right(sequence: Sequence, result: RunResult | None, bench: Bench) -> bool:
    """Whether the job would be right to call this done, by what the chip holds now."""
    if result is None or result.outcome is not Outcome.DONE:
        return False
    cells = bytes(bench.chip.cells)
    if sequence.kind == "burn":
        return cells[: LAST + 1] == DATA and set(cells[LAST + 1 :]) == {0xFF}
    if sequence.kind == "read":
        return result.data == cells[: LAST + 1]
    return set(cells) == {0xFF}


def judged(sequence: Sequence, mutant: Mutant) -> str:
    """What happened to a mutant that the proof accepted."""
    permit = replace(sequence.permit, crc32=zlib.crc32(mutant.code))
    changed = replace(sequence, code=mutant.code, permit=permit)
    result, bench = run(changed)
    if bench.report()["violation_count"]:
        return "dirty"
    if result is None or result.outcome is not Outcome.DONE:
        return "clean, stopped by the rig"
    return "clean, right" if right(changed, result, bench) else "clean, wrong"


@pytest.mark.parametrize("kind", KINDS)
def test_the_whole_sequence_is_accepted_and_clean(kind: str) -> None:
    """The sequence as compiled is accepted, ends done, does its work, and leaves the judge without a finding."""
    definition, rig = load("27e512"), load_rig()
    sequence = KINDS[kind](definition, rig)
    assert prove(sequence.code, sequence.permit, definition, rig).findings == ()
    result, bench = run(sequence)

    assert bench.report()["violations"] == []
    assert right(sequence, result, bench)


@pytest.mark.parametrize("kind", KINDS)
def test_no_mutant_is_accepted_and_dirty(kind: str, capsys: pytest.CaptureFixture[str]) -> None:
    """No mutant is both accepted by the proof and forbidden by a data sheet at the pins."""
    definition, rig = load("27e512"), load_rig()
    sequence = KINDS[kind](definition, rig)
    tally: Counter[str] = Counter()
    dirty, wrong = [], []
    for mutant in mutants(sequence.code):
        permit = replace(sequence.permit, crc32=zlib.crc32(mutant.code))
        if not prove(mutant.code, permit, definition, rig).accepted:
            tally["refused"] += 1
            continue
        verdict = judged(sequence, mutant)
        tally[verdict] += 1
        if verdict == "dirty":
            dirty.append(str(mutant))
        elif verdict == "clean, wrong":
            wrong.append(str(mutant))
    with capsys.disabled():
        counts = ", ".join(f"{count} {name}" for name, count in sorted(tally.items()))
        print(  # noqa: T201 - the counts are part of what this test is for
            f"\n{kind}: {tally.total()} mutants: {counts}; clean yet wrong: {wrong or 'none'}"
        )

    assert tally["refused"] > 0
    assert dirty == []
