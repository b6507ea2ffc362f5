"""Each single op of burns of the tests' own parts deleted, doubled or swapped: refused, or clean to the judge.

As test_mutants.py has it for the shipped ones: PGM pulsed, a pulse upwards, commands before each word; and pages behind
a command on a part with a dead word, where every burn ends by the steps for that. A run takes one mutant of `EVERY`;
all of them with `PULSEWRIGHT_MUTANTS=all`.
"""

from __future__ import annotations

import os
import zlib
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

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
from tests.sequence.mutate import mutants
from tests.sequence.proof_bends import RIG, part_of

EVERY = 1 if os.environ.get("PULSEWRIGHT_MUTANTS") == "all" else 4
DATA = bytes([0x00, 0xFF, 0x55, 0xA1])
MODELS = Path(__file__).parents[1] / "models"
PARTS = [
    ("27c64", "AMD", "m27c64.py"),
    ("2716", "", "m2716.py"),
    ("39sf020", "SST", "m39sf020.py"),
]


def seated(folder: Path, name: str, maker: str, model: str) -> Bench:
    """A blank chip of this kind, the jumper set."""
    path = folder / "tower.bench"
    path.unlink(missing_ok=True)
    if not model:
        return Bench.new(path, name, maker=maker.lower(), jumper=True)
    return Bench.new(path, name, model=MODELS / model, jumper=True)


def run(bench: Bench, sequence: Sequence) -> RunResult | None:
    """A burn of a few words; None where the rig refused it."""
    session = Session(InProcess(bench.rig(1)))
    try:
        session.connect()
        return session.run(sequence, [Block(0, len(DATA), None, DATA)])
    except PulsewrightError:
        return None


@pytest.mark.parametrize(("name", "maker", "model"), PARTS, ids=["PGM", "pulse up", "command"])
def test_no_mutant_of_a_burn_is_accepted_and_dirty(tmp_path: Path, name: str, maker: str, model: str) -> None:
    """The burn is accepted, clean and right; no mutant is accepted that a data sheet forbids, or that burns wrong."""
    part = part_of(name, maker)
    sequence = compiler.compile_burn(part, RIG, 0, len(DATA) - 1, "")
    bench = seated(tmp_path, name, maker, model)
    result = run(bench, sequence)
    assert result is not None
    assert (result.outcome, bytes(bench.chip.cells[: len(DATA)])) == (Outcome.DONE, DATA)
    assert bench.report()["violations"] == []
    assert bad_mutants(part, sequence, lambda: seated(tmp_path, name, maker, model), Outcome.DONE) == []


def test_no_mutant_is_dirty_where_a_word_is_dead() -> None:
    """A page part with a dead word: the burn fails and ends protected; each accepted mutant fails, and is clean too."""
    part = part_of("28c256", "Xicor")
    sequence = compiler.compile_burn(part, RIG, 0, len(DATA) - 1, "", protected=True)

    def dead() -> Bench:
        return Bench.fresh("28c256", contents="blank", maker="xicor", faults=["dead=3"])

    bench = dead()
    result = run(bench, sequence)
    assert result is not None
    assert (result.outcome, bench.report()["violations"]) == (Outcome.FAILED, [])
    assert bad_mutants(part, sequence, dead, Outcome.FAILED) == []


def bad_mutants(part: Definition, sequence: Sequence, make: Callable[[], Bench], ends: Outcome) -> list[str]:
    """Mutants that the proof accepts and the judge finds unclean, or that end otherwise or burn otherwise."""
    assert prove(sequence.code, sequence.permit, part, RIG).findings == ()
    refused, bad = 0, []
    for mutant in mutants(sequence.code, every=EVERY, phase=len(sequence.code) % EVERY):
        permit = replace(sequence.permit, crc32=zlib.crc32(mutant.code))
        if not prove(mutant.code, permit, part, RIG).accepted:
            refused += 1
            continue
        bench = make()
        result = run(bench, replace(sequence, code=mutant.code, permit=permit))
        told = result is None or result.outcome in (ends, Outcome.TRIPPED)
        wrong = result is not None and result.outcome is Outcome.DONE and bytes(bench.chip.cells[: len(DATA)]) != DATA
        if bench.report()["violation_count"] or wrong or not told:
            bad.append(str(mutant))
    assert refused * EVERY > 100
    return bad
