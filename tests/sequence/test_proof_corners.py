"""Checks of the proof that only an odd program or permit meets: each seen to refuse."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from pulsewright.sequence.proof import prove
from pulsewright.wire.ops import Instruction, Label, ins
from pulsewright.wire.permit import VccStep
from pulsewright.wire.tables import Flow, Identity, Level, Op
from tests.sequence.proof_programs import (
    ADDRESS,
    MS,
    OFF,
    ON,
    US,
    Items,
    by_rule,
    encoded,
    lines,
    measure,
    permit,
    program,
)
from tests.sequence.test_proof_parts import NO_ID, without_gate_level, without_identity
from tests.sequence.test_proof_rules import CHIP, RIG, Bend, drop, found, put, put_after, set_


def branch(to: str, depth: int = 0, when: int = 2) -> Instruction:
    """A branch, always taken."""
    return ins(Op.BRANCH, when=when, depth=depth, to=to)


def many_states() -> Items:
    """Twelve lines that are each high or low, nobody knows which."""
    items: Items = [ins(Op.SAMPLE)]
    for line in ADDRESS[:12]:
        items += [ins(Op.COMPARE, word=line, mask=255), ins(Op.BRANCH, when=1, depth=0, to=f"s{line}")]
        items += [ins(Op.LINES, lines=bytes([line | Level.HIGH << 6])), Label(f"s{line}")]
    return items


LINES_OFF = ins(Op.LINES, lines=OFF)
PULSE = ins(Op.PULSE, line=22, width=100 * US, max=105 * US)  # CE

CORNERS: list[tuple[str, str, str, Bend, str]] = [
    ("an address outside", "H7", "read", put(Op.READ_RUN, 0, ins(Op.ADDRESS, at=65_536)), "address outside the chip"),
    ("a step from nowhere", "H7", "read", put(Op.ADDRESS, 0, ins(Op.STEP, by=1)), "an address that was never set"),
    ("an address from nowhere", "H7", "read", put(Op.ADDRESS, 0, ins(Op.ADDRESS_WORD)), "when none is in hand"),
    ("a word from nowhere", "H7", "burn", put(Op.EACH_BLOCK, 0, ins(Op.DRIVE_WORD)), "when none is in hand"),
    ("a wide word", "H6", "erase", set_(Op.DRIVE, word=0x1FF), "a word wider than the chip's"),
    (
        "D in no mode", "H6", "burn",
        put(Op.EACH_BLOCK, 0, ins(Op.LINES, lines=lines(l22="Z", l24="H")), ins(Op.DRIVE, word=0)), "no mode of the",
    ),
    (
        "a line twice", "H6", "read",
        put(Op.READ_RUN, 0, ins(Op.LINES, lines=lines(l24="L") + lines(l24="L"))), "stands twice in one group",
    ),
    ("VCC moved, not measured", "H1", "read", put(Op.SWITCHES, 0, ins(Op.RAIL, rail=0, step=3)), "before VCC stands"),
    ("too long", "H5", "read", put(Op.END, 0, *[ins(Op.WAIT, ticks=1)] * 200), "longer than the board's program"),
    ("four loops", "H5", "read", put(Op.END, 0, *[ins(Op.LOOP, count=2)] * 4, *[ins(Op.NEXT)] * 4), "loops too deep"),
    (
        "words in words", "H5", "read",
        put(Op.END, 0, *[ins(Op.EACH_WORD, to="x")] * 2, *[ins(Op.NEXT_WORD)] * 2, Label("x")), "inside itself",
    ),
    ("backward", "H5", "read", put(Op.END, 0, Label("x"), ins(Op.KEEP), branch("x")), "leads backward"),
    (
        "into a loop", "H5", "read",
        put(Op.END, 0, branch("x", 1), ins(Op.LOOP, count=2), Label("x"), ins(Op.NEXT)), "into a loop from outside",
    ),
    ("a strange condition", "H5", "read", put(Op.END, 0, branch("x", when=3), Label("x")), "that is not known"),
    ("to the end", "H5", "read", lambda items: [*items[:-1], branch("x"), items[-1], Label("x")], "where no op begins"),
    ("a rail that is not known", "H3", "read", put(Op.READ_RUN, 0, ins(Op.RAIL, rail=5, step=0)), "a rail that is not"),
    ("a step for nothing", "H3", "burn", put(Op.EACH_BLOCK, 0, ins(Op.RAIL, rail=1, step=7)), "a raised step that no"),
    ("the rail up unseated", "H1", "read", put(Op.SEATED, 0, ins(Op.RAIL, rail=1, step=1)), "before seating is"),
    ("a channel that is not known", "H8", "read", put(Op.READ_RUN, 0, measure(5, 0, 9)), "a channel that is not known"),
    ("the rail in a wide window", "H8", "erase", set_(Op.MEASURE, 10, low=400), "a window that no supply has"),
    ("a third kind of H", "H11", "read", put(Op.READ_RUN, 0, ins(Op.HIGH, how=2)), "a meaning of H that is not known"),
    ("VCC moved after a pulse", "H7", "erase", put_after(Op.PULSE, 0, ins(Op.RAIL, rail=0, step=1)), "too soon after"),
    ("too many states", "H5", "read", put(Op.READ_RUN, 0, *many_states()), "too many states to follow"),
    (
        "words outside a block", "H5", "read",
        put(Op.END, 0, ins(Op.EACH_WORD, to="x"), ins(Op.NEXT_WORD), Label("x")), "words outside a block",
    ),
    ("D sampled while driven", "H7", "erase", put(Op.PULSE, 0, ins(Op.SAMPLE)), "sampled while the rig drives it"),
    ("VCC off, H driven", "H11", "read", put(Op.READ_RUN, 0, ins(Op.RANGE, which=0)), "VCC goes and H is driven"),
    ("back to the probe", "H1", "read", put(Op.READ_RUN, 0, ins(Op.RANGE, which=1)), "does not come from VCC off"),
    ("probe at no step", "H3", "read", drop(Op.RAIL), "VCC through the probe at no step"),
    ("a third range", "H1", "read", put(Op.READ_RUN, 0, ins(Op.RANGE, which=3)), "a range that is not known"),
    ("supplies pulled up", "H11", "read", put(Op.READ_RUN, 0, ins(Op.BIAS, groups=4, how=2)), "at supply positions"),
    ("an empty window", "H8", "read", put(Op.READ_RUN, 0, measure(2, 9, 8)), "a window with nothing inside"),
    ("D driven, no VCC", "H11", "read", put(Op.RELEASE, 0, ins(Op.DRIVE, word=1)), "D is driven without VCC"),
    ("3.75 V before the gate", "H2", "erase", set_(Op.RAIL, 0, step=1), "at another step than the one to read at"),
    ("D read in standby", "H7", "read", put(Op.READ_RUN, 0, LINES_OFF, ins(Op.SAMPLE)), "sampled in no mode"),
    ("compared with nothing", "H7", "read", put(Op.READ_RUN, 0, ins(Op.COMPARE_WORD)), "when none is in hand"),
    ("nothing compared", "H7", "read", put(Op.READ_RUN, 0, ins(Op.COMPARE_WORD)), "something else than its cell"),
    ("nothing reported", "H7", "read", put(Op.READ_RUN, 0, ins(Op.REPORT)), "reports something else"),
    ("a driven line sensed", "H6", "read", put(Op.SENSE, 0, ins(Op.SENSE, line=22, **{"is": 0})), "but not released"),
    ("a pulse to no level", "H7", "burn", set_(Op.PULSE, line=22 | Level.RELEASED << 6), "a pulse to no level"),
    ("a pulse before the gate", "H2", "burn", put(Op.GATE, 0, PULSE), "a pulse before the gate"),
    (
        "VCC just measured", "H7", "erase",
        put(Op.PULSE, 0, ins(Op.RAIL, rail=0, step=3), ins(Op.WAIT, ticks=6 * MS), measure(2, 600, 650)),
        "set-up of VCC before the pulse",
    ),
    (
        "seated on a driven bus", "H7", "read",
        put(Op.SAMPLE, 1, ins(Op.LINES, lines=ON), ins(Op.LINES, lines=OFF)), "sampled before it floats",
    ),
    (
        "read while A9 falls", "H7", "read",
        put(Op.READ_RUN, 0, ins(Op.SWITCHES, on=16), ins(Op.SWITCHES, on=0)), "sampled too soon after a raised level",
    ),
    ("a line to no pin", "H11", "read", put(Op.READ_RUN, 0, ins(Op.LINES, lines=lines(l2="H"))), "meets no pin"),
]  # fmt: skip


@pytest.mark.parametrize(("rule", "kind", "bend", "text"), [one[1:] for one in CORNERS], ids=[c[0] for c in CORNERS])
def test_an_odd_program_is_refused(rule: str, kind: str, bend: Bend, text: str) -> None:
    """The rule that it breaks finds it and says what it is."""
    told = found(kind, bend, rule)
    assert told.startswith(rule)
    assert text in told


@pytest.mark.parametrize(
    ("header", "rule", "text"),
    [
        ({"flow": Flow.NONE}, "H5", "blocks in a program whose header says it has none"),
        ({"words": 0}, "H7", "a flow of no words"),
    ],
)
def test_an_odd_header_is_refused(header: dict[str, Any], rule: str, text: str) -> None:
    """A good reading under a header that does not fit it."""
    code = encoded("read", program("read"), **header)
    proof = prove(code, permit("read", code), CHIP, RIG)
    assert any(text in one.text for one in by_rule(proof, rule))


ONE = ((0, 0xDA), (1, 8))
PERMITS: list[tuple[str, str, dict[str, Any], str]] = [
    ("nine alternatives", "H2", {"alternatives": (ONE,) * 9}, "too many alternatives"),
    ("an alternative of no cell", "H2", {"alternatives": (ONE, ())}, "number of ID cells"),
    ("an ID cell outside", "H2", {"alternatives": (((65_536, 0xDA), (1, 8)),)}, "an ID cell outside the chip"),
    ("an ID cell too wide", "H2", {"alternatives": (((0, 0x1DA), (1, 8)),)}, "an ID cell outside the chip"),
    ("VCC twice", "H3", {"vcc": (VccStep(3, 594, 656, 6 * MS),) * 2}, "VCC steps of the permit"),
    ("no VCC", "H3", {"vcc": ()}, "VCC steps of the permit"),
    (
        "VCC unused", "H3",
        {"vcc": (VccStep(1, 446, 492, 6 * MS), VccStep(3, 594, 656, 6 * MS))}, "VCC steps that the program never uses",
    ),
    ("safe names a line twice", "H5", {"safe": OFF + OFF[:1]}, "twice"),
    ("safe is no mode", "H5", {"safe": lines(l22="H", l24="L")}, "no row of the mode table in which D floats"),
    ("nine patterns", "H6", {"drives": (ON,) * 9}, "too many patterns"),
]  # fmt: skip


@pytest.mark.parametrize(("rule", "bend", "text"), [one[1:] for one in PERMITS], ids=[one[0] for one in PERMITS])
def test_an_odd_permit_is_refused(rule: str, bend: dict[str, Any], text: str) -> None:
    """A good burn under a permit with one odd field."""
    code = encoded("burn", program("burn"))
    proof = prove(code, permit("burn", code, **bend), CHIP, RIG)
    assert any(text in str(one) for one in by_rule(proof, rule)), list(map(str, proof.findings))


@pytest.mark.parametrize(
    ("kind", "bend", "text"),
    [
        ("read", {"identity": Identity.NONE, "raised": ((2, 422),)}, "identity none, yet raised levels"),
        ("burn", {"identity": Identity.NONE, "identify_switch": 4}, "identity none, yet the program can write"),
        ("read", {"identity": Identity.WANTED}, "wants an ID of a part that has none"),
        ("read", {"identity": Identity.NONE, "alternatives": (ONE,)}, "names ID cells though it wants no identity"),
        ("read", {"identity": Identity.NONE, "identify_switch": 4}, "an identify level that the definition does not"),
    ],
)
def test_an_odd_permit_of_a_part_without_id_is_refused(kind: str, bend: dict[str, Any], text: str) -> None:
    """Without an ID in the definition the permit names neither cells nor level, and without a word raises nothing."""
    code = encoded(kind, without_gate_level(kind))
    proof = prove(code, permit(kind, code, **{**NO_ID, **bend}), without_identity(), RIG)
    assert any(text in str(one) for one in by_rule(proof, "H2")), list(map(str, proof.findings))


def test_an_identify_mode_with_two_levels_is_refused() -> None:
    """The permit has one identify level: a mode table that wants two cannot be identified by."""
    identify = CHIP.modes["identify"]
    two = replace(identify, levels={**identify.levels, "OE": "VH.identify"})
    code = encoded("read", program("read"))
    proof = prove(code, permit("read", code), replace(CHIP, modes={**CHIP.modes, "identify": two}), RIG)
    assert any("identify mode cannot be made" in one.text for one in by_rule(proof, "H2"))


def test_another_way_to_identify_is_not_understood() -> None:
    """A definition that asks for its ID by commands is refused, not taken for one that does it by a level."""
    code = encoded("read", program("read"))
    proof = prove(code, permit("read", code), replace(CHIP, identify="commands"), RIG)
    assert any("not understood" in one.text for one in by_rule(proof, "H2"))
