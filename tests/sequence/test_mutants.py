"""Each single op of a shipped sequence deleted, doubled or swapped: refused by the proof, or clean to the judge.

What the proof accepts is run on the reference interpreter with a modelled chip and the judge at its pins: on a good
chip, and where it burns or erases on one with a dead word, which ends as failed. A mutant that is clean yet leaves the
chip wrong, or calls a dead word done, is no danger to the chip; `WRONG` lists those, each with the job's test that
catches it.

A run takes one mutant of `EVERY`, other ones of each sequence. All of them: `PULSEWRIGHT_MUTANTS=all`.
"""

from __future__ import annotations

import os
import zlib
from collections import Counter
from collections.abc import Iterator
from dataclasses import replace
from functools import cache

import pytest

from pulsewright.chip.model import Definition
from pulsewright.errors import PulsewrightError
from pulsewright.link.inprocess import InProcess
from pulsewright.link.results import Block, RunResult
from pulsewright.link.session import Session
from pulsewright.sequence import compile as compiler
from pulsewright.sequence.proof import prove
from pulsewright.sequence.types import Sequence
from pulsewright.virtual.bench import Bench
from pulsewright.wire.tables import Outcome
from tests.sequence.mutate import Mutant, mutants
from tests.sequence.proof_bends import RIG, kinds_of, part_of

EVERY = 1 if os.environ.get("PULSEWRIGHT_MUTANTS") == "all" else 8
LAST = 7  # reading and burning eight words shows what 65536 would
DATA = bytes([0x00, 0xFF, 0x55, 0xAA, 0x01, 0x80, 0x7F, 0xFE])
SHIPPED = (
    *(("27e512", ""), ("27c256", "ST"), ("27c256", "Atmel"), ("27c256", "TI")),
    *(("28c256", "Atmel"), ("28c256", "Xicor"), ("28c256", "Catalyst")),
)
# Clean, and not what it says: part, sequence, mutant. A sequence may end where no work has begun, and only a write
# shows whether a part is protected: test_protect_switches_and_proves_the_contents looks into the chip.
WRONG = {("28c256", "protect on", "deleted bus_writes"), ("28c256", "protect off", "deleted bus_writes")}
SEQUENCES = [(name, maker, kind) for name, maker in SHIPPED for kind in kinds_of(part_of(name, maker))]


def _short(mutant: Mutant) -> str:
    return f"{mutant.kind} {mutant.op.partition(' ')[0]}"


@cache
def part(name: str, maker: str) -> Definition:
    """The part; where it is erased its scans are short, which no rule minds."""
    whole = part_of(name, maker)
    return replace(whole, words=1_024) if whole.erase is not None else whole


@cache
def sequence_of(name: str, maker: str, kind: str) -> Sequence:
    """A sequence of few words."""
    chip = part(name, maker)
    if kind.startswith("burn"):
        return compiler.compile_burn(chip, RIG, 0, LAST, "", protected="protected" in kind)
    if kind.startswith("protect"):
        return compiler.compile_protect(chip, RIG, on=kind.endswith("on"))
    made = {"read": compiler.compile_read, "blank": compiler.compile_blank}
    if kind in made:
        return made[kind](chip, RIG, 0, LAST)
    return compiler.compile_erase(chip, RIG) if kind == "erase" else compiler.compile_identify(chip, RIG)


def run(name: str, maker: str, kind: str, sequence: Sequence, *, dead: bool) -> tuple[RunResult | None, Bench]:
    """A sequence on a fresh bench: noise for an erase, blank otherwise; None where the rig refused it."""
    faults = ["dead=3"] if dead else []
    if kind in ("burn protected", "protect off"):
        faults.append("protected")
    contents = "noise:3" if kind == "erase" else "blank"
    bench = Bench.fresh(name, contents=contents, maker="" if name == "27e512" else maker.lower(), faults=faults)
    session = Session(InProcess(bench.rig(1)))
    blocks = [Block(0, LAST + 1, None, DATA)] if kind.startswith("burn") else None
    try:
        session.connect()
        return session.run(sequence, blocks), bench
    except PulsewrightError:
        return None, bench


def right(kind: str, result: RunResult | None, bench: Bench, *, dead: bool) -> bool:
    """Whether what was said is true of what the chip holds now."""
    if result is None or result.outcome is not Outcome.DONE:
        return dead
    cells = bytes(bench.chip.cells)
    if dead:
        return False
    if kind.startswith("burn"):
        return cells[: LAST + 1] == DATA and set(cells[LAST + 1 :]) == {0xFF}
    if kind == "read":
        return result.data == cells[: LAST + 1]
    protected = bench.chip.state().get("protected", False)
    return set(cells) == {0xFF} and protected is (kind == "protect on")


def judged(name: str, maker: str, kind: str, changed: Sequence) -> str:
    """What happened to a mutant that the proof accepted."""
    verdict = "clean, right"
    for dead in (False, True) if kind.startswith("burn") or kind == "erase" else (False,):
        result, bench = run(name, maker, kind, changed, dead=dead)
        if bench.report()["violation_count"] or bench.report()["stressed"]:
            return "dirty"
        if not dead and (result is None or result.outcome is not Outcome.DONE):
            verdict = "clean, stopped by the rig"
        elif not right(kind, result, bench, dead=dead):
            verdict = "clean, wrong"
    return verdict


def sampled(name: str, maker: str, kind: str) -> Iterator[Mutant]:
    """The mutants of this run: other places in each sequence."""
    phase = SEQUENCES.index((name, maker, kind)) * 5
    return mutants(sequence_of(name, maker, kind).code, every=EVERY, phase=phase % EVERY)


@pytest.mark.parametrize(("name", "maker", "kind"), SEQUENCES)
def test_the_whole_sequence_is_accepted_and_clean(name: str, maker: str, kind: str) -> None:
    """The sequence as compiled is accepted, ends done, does its work, and leaves the judge without a finding."""
    sequence = sequence_of(name, maker, kind)
    assert prove(sequence.code, sequence.permit, part(name, maker), RIG).findings == ()
    assert judged(name, maker, kind, sequence) == "clean, right"


@pytest.mark.parametrize(("name", "maker", "kind"), SEQUENCES)
def test_no_mutant_is_accepted_and_dirty(name: str, maker: str, kind: str, capsys: pytest.CaptureFixture[str]) -> None:
    """No mutant is both accepted by the proof and forbidden by a data sheet at the pins; those that lie are listed."""
    sequence = sequence_of(name, maker, kind)
    tally: Counter[str] = Counter()
    bad: list[str] = []
    for mutant in sampled(name, maker, kind):
        permit = replace(sequence.permit, crc32=zlib.crc32(mutant.code))
        if not prove(mutant.code, permit, part(name, maker), RIG).accepted:
            tally["refused"] += 1
            continue
        verdict = judged(name, maker, kind, replace(sequence, code=mutant.code, permit=permit))
        tally[verdict] += 1
        if verdict == "dirty" or (verdict == "clean, wrong" and (name, kind, _short(mutant)) not in WRONG):
            bad.append(f"{verdict}: {mutant}")
    with capsys.disabled():
        counts = ", ".join(f"{count} {what}" for what, count in sorted(tally.items()))
        print(f"\n{name} {maker} {kind}: {tally.total()} mutants: {counts}")  # noqa: T201 - what this test is for

    assert tally["refused"] > 0
    assert bad == []


@pytest.mark.parametrize(("name", "kind", "listed"), sorted(WRONG))
def test_what_is_listed_as_clean_and_wrong_is_so(name: str, kind: str, listed: str) -> None:
    """The list holds nothing that the proof refuses, or that does its work after all."""
    maker = next(one for part_name, one, _ in SEQUENCES if part_name == name)
    sequence = sequence_of(name, maker, kind)
    found = [one for one in mutants(sequence.code) if _short(one) == listed]
    assert len(found) == 1
    permit = replace(sequence.permit, crc32=zlib.crc32(found[0].code))
    assert prove(found[0].code, permit, part(name, maker), RIG).accepted
    assert judged(name, maker, kind, replace(sequence, code=found[0].code, permit=permit)) == "clean, wrong"
