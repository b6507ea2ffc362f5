"""The theorem on parts that nobody makes: whatever the proof accepts, the judge finds clean, on every branch.

A sheet of plain numbers is drawn; definition and chip are written from it by two writers that share nothing but it; the
rig stands anywhere inside the errors of its file. Jobs are run whole, on chips that take a word at once, at some later
try or never, that stall, that are something else. A sheet that the rig cannot serve, or a sequence that is refused, is
no failure; how many get to the end is counted. `PULSEWRIGHT_DRAWS` sets how many sheets of each family are drawn.
"""

from __future__ import annotations

import os
import zlib
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path

import pytest
from hypothesis import HealthCheck, Phase, assume, given, note, settings
from hypothesis import strategies as st

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from pulsewright.errors import CannotMake, PulsewrightError
from pulsewright.link.inprocess import InProcess
from pulsewright.link.results import Block, RunResult
from pulsewright.link.session import Session
from pulsewright.sequence import compile as compiler
from pulsewright.sequence.proof import prove
from pulsewright.sequence.types import Sequence
from pulsewright.virtual.faults import ChipFaults
from pulsewright.wire.ops import decode_program
from pulsewright.wire.tables import Op, Outcome
from tests.sequence.mutate import KINDS, Mutant, mutant, rewaited
from tests.sequence.rig_errors import RIG, Errors, errors, rig_with
from tests.sequence.sheet import FAMILIES, Sheet, sheets
from tests.sequence.sheet_bus import CUT
from tests.sequence.sheet_chip import chip_of
from tests.sequence.sheet_definition import definition_of

DRAWS = int(os.environ.get("PULSEWRIGHT_DRAWS", "12"))  # sheets of each family
LAST = 5  # words 0 to 5 are burnt

_HEALTH = [HealthCheck.too_slow, HealthCheck.data_too_large, HealthCheck.filter_too_much]
_PHASES = (Phase.explicit, Phase.reuse, Phase.generate)  # a sheet is small enough as it is: shrinking takes minutes
DRAWN = settings(deadline=None, max_examples=DRAWS, phases=_PHASES, suppress_health_check=_HEALTH)


@dataclass(frozen=True)
class Behaviour:
    """How the chip in the socket takes its jobs. `pulses`: how many a cell needs; `erases`: how many the chip."""

    dead: bool = False
    pulses: int = 1
    contents: str = "blank"
    other: bool = False
    protected: bool = False


@st.composite
def behaviours(draw: st.DrawFn, sheet: Sheet) -> Behaviour:
    """Good more often than not, else wrong in one way."""
    how = draw(st.sampled_from(("good", "good", "slow", "last", "never", "dead", "other", "stalls")))
    pulses = {"slow": 2, "last": max(sheet.tries, sheet.erase_tries), "never": sheet.tries + 2, "stalls": 400}
    contents = "noise" if sheet.page or sheet.erase_tries or sheet.family == "bytes" else "blank"
    return Behaviour(
        dead=how == "dead",
        pulses=pulses.get(how, 1),
        contents=contents if draw(st.booleans()) else "blank",
        other=how == "other",
        protected=sheet.protects and draw(st.booleans()),
    )


def resolved(sheet: Sheet, folder: Path) -> Definition:
    """The definition that a user would have written."""
    path = folder / "invented.toml"
    path.write_text(definition_of(sheet))
    return load(str(path))


def jobs(part: Definition, protected: bool) -> Iterator[Sequence]:
    """What is done with a part, one closed sequence after another; CannotMake where the rig cannot."""
    yield compiler.compile_identify(part, RIG)
    yield compiler.compile_blank(part, RIG, 0, LAST)
    if part.erase is not None:
        yield compiler.compile_erase(part, RIG)
    if part.protect is not None and protected:
        yield compiler.compile_protect(part, RIG, on=True)
        yield compiler.compile_burn(part, RIG, 0, LAST, "", protected=True)
        yield compiler.compile_protect(part, RIG, on=False)
    yield compiler.compile_burn(part, RIG, 0, LAST, "")
    yield compiler.compile_read(part, RIG, 0, LAST)


class Seat:
    """A chip in a rig, and what the judge has seen."""

    def __init__(self, sheet: Sheet, how: Behaviour, off: Errors) -> None:
        chip = self.chip = chip_of(sheet)
        self.stalls = how.pulses > 1  # past the longest time that its own sheet gives: then VCC goes all the same
        if how.contents == "noise":
            chip.cells[:] = bytes((at * 197 + 13) & 0xFF for at in range(sheet.words))
        wrong = (0x5A, 0xA5) if how.other and sheet.ids else None
        chip.take_faults(
            ChipFaults(
                wrong_id=wrong,
                dead=(1,) if how.dead else (),
                slow_percent=100 if how.pulses > 1 else 0,
                slow_pulses=how.pulses,
            )
        )
        self.rig, self.judge = rig_with(chip, off)
        self.session = Session(InProcess(self.rig))
        self.session.connect()

    def run(self, sequence: Sequence, data: bytes) -> RunResult | None:
        """A sequence with its data; None where the rig refused it."""
        words = data if sequence.kind == "burn" else b""
        blocks = [Block(0, len(words), None, words)] if words else None
        try:
            return self.session.run(sequence, blocks)
        except PulsewrightError as error:
            note(f"{sequence.title}: {' / '.join(error.lines())}")
            return None

    def unclean(self) -> list[str]:
        """Everything that a sheet forbids."""
        found = [
            f"{one.rule} at pin {one.pin}, {one.at_us} us: {one.wanted}; {one.got}" for one in self.judge.violations
        ]
        return [*found, *(one for one in self.chip.stressed if not (self.stalls and one == CUT))]


def drawn(family: str, folder: Path) -> Counter[str]:
    """How far the jobs of so many parts of a family came."""
    tally: Counter[str] = Counter()

    @DRAWN
    @given(st.data())
    def every(data: st.DataObject) -> None:
        sheet = data.draw(sheets((family,)))
        how, off = data.draw(behaviours(sheet)), data.draw(errors())
        image = data.draw(st.binary(min_size=LAST + 1, max_size=LAST + 1))
        tally[whole_job(resolved(sheet, folder), sheet, how, off, image)] += 1

    every()
    return tally


def test_whatever_the_proof_accepts_is_clean(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Each job of an invented part that is accepted leaves the judge content, and a good chip as it should be.

    Six of ten parts at least are accepted and run to the end, good or stopped by their chip; two of ten of each family.
    """
    whole: Counter[str] = Counter()
    for family in FAMILIES:
        tally = drawn(family, tmp_path)
        with capsys.disabled():
            print(f"\n{family}: {', '.join(f'{count} {what}' for what, count in sorted(tally.items()))}")  # noqa: T201
        assert (tally["to the end"] + tally["stopped by the chip"]) * 10 >= 2 * tally.total()
        whole += tally
    assert (whole["to the end"] + whole["stopped by the chip"]) * 10 >= 6 * whole.total()


def whole_job(part: Definition, sheet: Sheet, how: Behaviour, off: Errors, image: bytes) -> str:
    """How far a part's jobs came; AssertionError for one that was accepted and is not clean."""
    note(definition_of(sheet))
    try:
        planned = list(jobs(part, how.protected))
    except CannotMake:
        return "the rig cannot"
    refused = {str(one) for each in planned for one in prove(each.code, each.permit, part, RIG).findings}
    if refused:
        note(str(refused))
        return "refused"
    seat = Seat(sheet, how, off)
    good = how == Behaviour(contents=how.contents, protected=how.protected)
    result: RunResult | None = None
    for sequence in planned:
        result = seat.run(sequence, image)
        assert seat.unclean() == [], sequence.title
        if good and sequence.kind not in ("blank", "burn"):
            assert (result and result.outcome) is Outcome.DONE, sequence.title
    if not good:
        return "stopped by the chip"
    assert result is not None
    assert result.data == bytes(seat.chip.cells[: LAST + 1])
    if how.contents == "blank" or part.erase is not None or part.page:
        assert result.data == image
    return "to the end"


def test_a_definition_that_misreads_its_sheet_is_found(tmp_path: Path) -> None:
    """The judge's limits are the sheet's: where a definition has its minima too short, a job is unclean."""
    found: Counter[str] = Counter()

    @DRAWN
    @given(st.data())
    def every(data: st.DataObject) -> None:
        sheet = data.draw(sheets(("own VPP, CE low", "shared OE/VPP")))
        times = {name: (least // 9, usual, most) for name, (least, usual, most) in sheet.times.items()}
        pulses = {name: time for name, time in sheet.times.items() if "pulse" in name}
        misread = replace(sheet, times={**times, **pulses})
        part = resolved(misread, tmp_path)
        try:
            burn = compiler.compile_burn(part, RIG, 0, LAST, "")
        except CannotMake:
            return
        if prove(burn.code, burn.permit, part, RIG).accepted:
            seat = Seat(sheet, Behaviour(), Errors())
            seat.run(burn, bytes(LAST + 1))
            found["unclean" if seat.unclean() else "clean"] += 1

    every()
    assert found["unclean"]


@st.composite
def edits(draw: st.DrawFn, sequence: Sequence) -> Mutant:
    """One op of a sequence deleted, doubled, swapped with the next one, or a wait made another."""
    program = decode_program(sequence.code)
    kind = draw(st.sampled_from((*KINDS, "waits", "waits")))
    number = draw(st.integers(0, len(program.code) - 1))
    if kind == "waits":
        waits = [one.args["ticks"] for _, one in program.code if one.op is Op.WAIT]
        ticks = waits[number % len(waits)]
        return rewaited(program, number, max(0, ticks - draw(st.integers(1, max(1, min(ticks, 100))))))
    found = mutant(program, number, kind)
    assume(found is not None and found.code != sequence.code)
    assert found is not None
    return found


def test_no_edit_of_an_invented_parts_sequence_is_accepted_and_dirty(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """A sequence with one op deleted, doubled, swapped or less of a wait is refused, or clean."""
    tally: Counter[str] = Counter()

    @settings(DRAWN, max_examples=8 * DRAWS)
    @given(st.data())
    def every(data: st.DataObject) -> None:
        sheet = data.draw(sheets())
        part = resolved(sheet, tmp_path)
        try:
            planned = [one for one in jobs(part, sheet.protects) if one.kind not in ("identify", "blank", "read")]
        except CannotMake:
            return
        sequence = data.draw(st.sampled_from(planned))
        if not prove(sequence.code, sequence.permit, part, RIG).accepted:
            return
        edit = data.draw(edits(sequence))
        permit = replace(sequence.permit, crc32=zlib.crc32(edit.code))
        if not prove(edit.code, permit, part, RIG).accepted:
            tally["refused"] += 1
            return
        tally["accepted"] += 1
        note(f"{sequence.title}: {edit}")
        for how in (Behaviour(contents="noise" if part.erase else "blank"), Behaviour(dead=True)):
            seat = Seat(sheet, how, data.draw(errors()))
            seat.run(replace(sequence, code=edit.code, permit=permit), bytes([0x00, 0xFF, 0x5A, 0xA5, 0x0F, 0x80]))
            assert seat.unclean() == [], f"{sequence.title}: {edit}"

    every()
    with capsys.disabled():
        print(f"\nedits: {', '.join(f'{count} {what}' for what, count in sorted(tally.items()))}")  # noqa: T201
    assert tally["accepted"] * 10 >= tally.total()
    assert tally["refused"] * 10 >= tally.total()
