"""Every safety rule seen to refuse: by hand-made sequences, by drawn ones, by a job; and the table that says so.

H10 is no matter of a sequence, nor is H9's word: these two are the job's. `tests/jobs/test_refusals.py` has the jobs.
"""

from __future__ import annotations

import re
import zlib
from collections import Counter
from collections.abc import Iterable
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, note, reject, settings
from hypothesis import strategies as st

from pulsewright.sequence.proof import prove
from pulsewright.wire.ops import assemble, decode_program
from tests.jobs.test_refusals import AT_RUN_TIME
from tests.sequence import test_proof_bus, test_proof_corners, test_proof_gate, test_proof_rules, test_proof_vpp
from tests.sequence.bend_case import Case, NoPlace
from tests.sequence.mutate import labelled
from tests.sequence.proof_bends import RIG, compiled, kinds_of, part_of
from tests.sequence.rule_bends import BENDS, Bend

RULES = tuple(f"H{number}" for number in range(1, 12))
OF_THE_PROOF = tuple(rule for rule in RULES if rule != "H10")
PARTS = (
    *(("27e512", ""), ("27e512", "DA"), ("27c256", "ST"), ("27c256", "Atmel"), ("27c256", "TI"), ("27c64", "Intel")),
    *(("28c256", ""), ("28c256", "Xicor"), ("2716", ""), ("39sf020", "SST")),
)
SEQUENCES = [(part, kind) for part in (part_of(*one) for one in PARTS) for kind in kinds_of(part)]
BY_HAND: dict[str, Iterable[str]] = {
    "rules": [str(one[1]) for one in test_proof_rules.CASES],
    "bus": [str(one[1]) for one in test_proof_bus.BENT],
    "corners": [str(one[1]) for one in (*test_proof_corners.CORNERS, *test_proof_corners.PERMITS)],
    "gate": [str(one[1]) for one in test_proof_gate.CHECKS],
    "vpp": [str(one[1]) for one in (*test_proof_vpp.BENT, *test_proof_vpp.PERMITS)],
}
GUIDE = Path(__file__).parents[2] / "DEVELOPERS.md"
HEAD = "| rule | by hand, in `test_proof_*` | drawn, in `rule_bends` | at run time, in `test_refusals` |"


def by_hand(rule: str) -> list[str]:
    """Where hand-made sequences are refused by a rule."""
    return [name for name, rules in BY_HAND.items() if rule in rules]


def drawn(rule: str) -> list[str]:
    """The bends that break a rule, in words."""
    return [bend.__name__.replace("_", " ") for bend in BENDS.get(rule, ())]


def table() -> list[str]:
    """The table of the guide, as the tests are now."""
    rows = [HEAD, "| --- | --- | --- | --- |"]
    for rule in RULES:
        cells = [by_hand(rule), drawn(rule), AT_RUN_TIME.get(rule, [])]
        rows.append(f"| {rule} | {' | '.join(', '.join(cell) or '-' for cell in cells)} |")
    return rows


def test_the_guides_table_is_what_the_tests_are(capsys: pytest.CaptureFixture[str]) -> None:
    """The table of refusals in DEVELOPERS.md names just the refusals that the tests see."""
    lines = GUIDE.read_text(encoding="utf-8").splitlines()
    start = lines.index(HEAD)
    stands = lines[start : start + len(RULES) + 2]
    with capsys.disabled():
        print("\n" + "\n".join(table()))  # noqa: T201 - it is printed for the guide
    assert stands == table()


@pytest.mark.parametrize("rule", RULES)
def test_no_rule_is_without_its_refusals(rule: str) -> None:
    """Each rule that the proof knows is refused by hand and drawn; each rule at all is refused at run time."""
    assert AT_RUN_TIME[rule]
    if rule in OF_THE_PROOF:
        assert by_hand(rule)
        assert drawn(rule)


def test_every_rule_of_the_guide_is_one_of_these() -> None:
    """The guide's table of who enforces what has a row for each rule, and no more."""
    rows = re.findall(r"^\| (H\d+) [a-zA-Z]", GUIDE.read_text(encoding="utf-8"), re.MULTILINE)
    assert rows == list(RULES)


EVERY_BEND = [pytest.param(rule, bend, id=f"{rule} {bend.__name__}") for rule, bends in BENDS.items() for bend in bends]


@pytest.mark.parametrize(("rule", "bend"), EVERY_BEND)
def test_a_drawn_sequence_that_breaks_a_rule_is_refused_by_it(rule: str, bend: Bend) -> None:
    """Any job of any part, bent so that it breaks a rule: that rule is among the findings."""
    tally: Counter[str] = Counter()

    @settings(deadline=None, max_examples=12, suppress_health_check=list(HealthCheck))
    @given(st.data())
    def every(data: st.DataObject) -> None:
        part, kind = data.draw(st.sampled_from(SEQUENCES))
        sequence = compiled(part, kind)
        program = decode_program(sequence.code)
        case = Case(part, sequence, labelled(program), data)
        try:
            bend(case)
        except NoPlace:
            reject()
        code = assemble(program.header, case.items)[0]
        permit = replace(sequence.permit, **{"crc32": zlib.crc32(code), **case.permit})
        found = prove(code, permit, part, RIG).findings
        note("\n".join(map(str, found)))
        assert rule in {one.rule for one in found}, (part.name, kind)
        tally[part.name] += 1

    every()
    assert tally
