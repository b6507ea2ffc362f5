"""What the proof asks of the identify level, of looks and of the gate: each check seen to refuse by its own words."""

from __future__ import annotations

from dataclasses import replace

import pytest

from pulsewright.sequence.proof import prove
from pulsewright.wire.ops import ins
from pulsewright.wire.tables import Identity, Op
from tests.sequence.proof_programs import OFF, ON, Items, by_rule, encoded, lines, permit, program
from tests.sequence.test_proof_parts import NO_ID, without_gate_level, without_identity
from tests.sequence.test_proof_rules import CHIP, RIG, Bend, drop, found, put, set_

LOOK = ins(Op.GATE_LOOK, wait=20)


def quick_look(items: Items) -> Items:
    """The look a tick too soon after its enabling edge."""
    toggled = put(Op.GATE_LOOK, 0, ins(Op.LINES, lines=OFF), ins(Op.LINES, lines=ON))(items)
    return set_(Op.GATE_LOOK, wait=18)(toggled)


CHECKS: list[tuple[str, str, str, Bend, str]] = [
    ("14 V switched", "H2", "read", set_(Op.RAIL, 1, step=5), "before the gate another step than the identify step"),
    ("14 V stands", "H2", "read", set_(Op.RAIL, 1, step=5), "another level than the identify step before the gate"),
    ("D under the level", "H2", "read", put(Op.SWITCHES, 0, ins(Op.DRIVE, word=0)), "driven under the identify level"),
    ("VCC not measured", "H4", "read", put(Op.SWITCHES, 0, ins(Op.RAIL, rail=0, step=3)), "without VCC measured"),
    ("no mode", "H2", "read", put(Op.SWITCHES, 0, ins(Op.LINES, lines=lines(l22="Z"))), "no mode that is quiet"),
    ("level at 3.75 V", "H2", "erase", set_(Op.RAIL, 0, step=1), "VCC is not the identify mode's"),
    ("gate at 3.75 V", "H2", "erase", set_(Op.RAIL, 0, step=1), "VCC at the gate is not the identify mode's"),
    ("seated in the probe", "H1", "read", put(Op.RANGE, 1, ins(Op.SEATED)), "as passed without VCC in its window"),
    ("seated while driven", "H1", "read", put(Op.SEATED, 0, ins(Op.DRIVE, word=0)), "as passed with something driven"),
    ("quick cells", "H7", "read", set_(Op.GATE_LOOK, wait=2), "access time of the ID cells"),
    ("quick look", "H7", "read", quick_look, "time from the enabling edge to the first ID cell"),
    ("D at the look", "H2", "read", put(Op.GATE_LOOK, 0, ins(Op.DRIVE, word=0)), "D is driven at the gate"),
    ("gate in standby", "H2", "read", put(Op.GATE, 0, ins(Op.LINES, lines=OFF)), "lines at the gate are not"),
    ("look unseated", "H1", "read", put(Op.SEATED, 0, LOOK), "a look at the ID cells before the seating check"),
    ("look under the level", "H2", "read", put(Op.GATE, 0, LOOK), "look before the gate is done under a raised level"),
    ("gate unseated", "H1", "read", drop(Op.SEATED), "the gate before the seating check"),
    ("gate twice", "H2", "read", put(Op.SWITCHES, 1, ins(Op.GATE, wait=20)), "the gate is passed twice"),
]


@pytest.mark.parametrize(("rule", "kind", "bend", "text"), [one[1:] for one in CHECKS], ids=[one[0] for one in CHECKS])
def test_each_check_speaks(rule: str, kind: str, bend: Bend, text: str) -> None:
    """The check that the change meets finds it, whatever else finds it too."""
    assert text in found(kind, bend, rule)


def test_the_identify_level_of_another_mode_is_refused() -> None:
    """Where a second row of the mode table has the same level at A9, the lines may not be in that one."""
    other = replace(CHIP.modes["identify"], name="other", levels={"CE": "L", "OE": "H", "A9": "VH.identify"}, data="Z")
    code = encoded("read", put(Op.GATE, 0, ins(Op.LINES, lines=lines(l24="H")))(program("read")))
    two = replace(CHIP, modes={**CHIP.modes, "other": other})
    told = by_rule(prove(code, permit("read", code), two, RIG), "H2")
    assert any("the identify level is another mode's" in one.text for one in told)


def test_no_level_stands_at_a_gate_without_identity() -> None:
    """A part without ID has nothing raised when its gate opens."""
    raised = [ins(Op.RAIL, rail=1, step=1), ins(Op.SWITCHES, on=4)]
    code = encoded("burn", put(Op.GATE, 0, *raised)(without_gate_level("burn")))
    vouched = permit("burn", code, identity=Identity.VOUCHED_NONE, **NO_ID)
    told = by_rule(prove(code, vouched, without_identity(), RIG), "H2")
    assert any("a raised level at a gate that wants no identity" in one.text for one in told)


def test_a_look_needs_an_id_in_the_definition() -> None:
    """A program that reads ID cells is no program for a part that has none."""
    code = encoded("read", program("read"))
    told = by_rule(prove(code, permit("read", code), without_identity(), RIG), "H2")
    assert any("reads an ID that the definition does not have" in one.text for one in told)
