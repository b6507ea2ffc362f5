"""The proof on parts and rigs that differ in one thing from the shipped: what they can do no more is refused."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from pulsewright.rig.file import load_rig
from pulsewright.sequence.proof import prove
from pulsewright.wire.ops import Instruction, Label, ins
from pulsewright.wire.tables import Identity, Op
from tests.sequence.proof_programs import (
    MS,
    OFF,
    ON,
    US,
    Items,
    by_rule,
    changed,
    encoded,
    gate,
    measure,
    permit,
    program,
    rules,
    seating,
)

RIG = load_rig()
CHIP = load("27e512", maker="DA")


def without_identity() -> Definition:
    """The part, had it no electronic ID."""
    modes = {name: mode for name, mode in CHIP.modes.items() if name != "identify"}
    return replace(CHIP, identify="none", identify_mode="", modes=modes)


def without_gate_level(kind: str) -> Items:
    """A program whose gate wants no identity; the raised rail still goes to 12 V where it burns."""
    rail = [item for item in gate() if getattr(item, "op", None) is Op.RAIL]
    opened: Items = [ins(Op.GATE, wait=20), ins(Op.LINES, lines=OFF), ins(Op.WAIT, ticks=3 * US)]
    if kind == "burn":
        opened += [*rail, ins(Op.WAIT, ticks=25 * MS), measure(1, 406, 422)]
    work = program(kind)[len(seating()) + len(gate()) :]
    return [*seating(), *opened, *work]


NO_ID: dict[str, Any] = {"alternatives": (), "identify_switch": 0xFF, "identify_step": 0, "identify_ceiling": 0}


@pytest.mark.parametrize(
    ("kind", "identity", "accepted"),
    [
        ("read", Identity.NONE, True),
        ("burn", Identity.VOUCHED_NONE, True),
        ("burn", Identity.NONE, False),
        ("read", Identity.WANTED, False),
    ],
)
def test_a_part_without_id_writes_only_when_vouched(kind: str, identity: Identity, accepted: bool) -> None:
    """With no ID in the definition: reading needs no word, raised levels and writing need the vouched permit (H9)."""
    code = encoded(kind, without_gate_level(kind))
    proof = prove(code, permit(kind, code, identity=identity, **NO_ID), without_identity(), RIG)

    assert proof.accepted is accepted, list(map(str, proof.findings))
    assert accepted or "H2" in rules(proof)


def test_both_sums_are_told_where_a_level_does_not_fit() -> None:
    """A rig whose 12 V step is off by 0.2 V is refused for the program level, with the window and both sums."""
    steps = tuple(replace(one, error_mv=200) if one.number == 1 else one for one in RIG.raised.steps)
    rig = replace(RIG, raised=replace(RIG.raised, steps=steps))
    code = encoded("burn", program("burn"))
    told = "\n".join(map(str, by_rule(prove(code, permit("burn", code), CHIP, rig), "H3")))

    assert "11.75 V to 12.25 V" in told
    assert "11.783 V to 12.285 V" in told


def test_a_dip_counts_once_it_is_long() -> None:
    """A dip longer than the rig file ignores takes the erase level below its window."""
    code = encoded("erase", program("erase"))
    rig = replace(RIG, dip_ignored_us=99)

    assert "H3" in rules(prove(code, permit("erase", code), CHIP, rig))


def test_the_identify_level_needs_the_limiter() -> None:
    """On a rig whose A9 switch has no limiter nothing is identified."""
    switches = tuple(replace(one, limiter=False) for one in RIG.switches)
    code = encoded("read", program("read"))
    proof = prove(code, permit("read", code), CHIP, replace(RIG, switches=switches))

    assert any("limiter" in one.text for one in by_rule(proof, "H2"))


def test_an_absolute_maximum_under_the_window_counts() -> None:
    """The lower of window and absolute maximum bounds the level: OE of at most 14.1 V cannot be erased at 14 V."""
    maxima = {**CHIP.maxima, "OE": replace(CHIP.maxima["OE"], mv=14_100)}
    code = encoded("erase", program("erase"))

    assert "H3" in rules(prove(code, permit("erase", code), replace(CHIP, maxima=maxima), RIG))


def test_more_current_than_the_rig_gives_is_refused() -> None:
    """A program current above the raised rail's limit is no fit, however good the voltage."""
    supplies = {**CHIP.supplies, "VPP.program": replace(CHIP.supplies["VPP.program"], current_ua=60_000)}
    code = encoded("burn", program("burn"))

    assert "H3" in rules(prove(code, permit("burn", code), replace(CHIP, supplies=supplies), RIG))


def test_a_mode_that_reads_without_a_bound_is_never_sampled() -> None:
    """Where the definition gives no longest access time the proof allows no sample."""
    timing = {name: one for name, one in CHIP.timing.items() if name not in ("tACC", "tCE")}
    code = encoded("read", program("read"))

    assert not prove(code, permit("read", code), replace(CHIP, timing=timing), RIG).accepted


def test_the_self_timed_wait_covers_the_sheets_maximum() -> None:
    """A part with a write cycle of its own needs that long a wait in the permit (H5)."""
    timing = {**CHIP.timing, "tWC": replace(CHIP.timing["tPW"], name="tWC", max_ps=10**10)}
    part = replace(CHIP, timing=timing)
    code = encoded("burn", program("burn"))

    assert "H5" in rules(prove(code, permit("burn", code), part, RIG))
    assert prove(code, permit("burn", code, self_timed=10 * MS), part, RIG).accepted


def test_each_finding_names_its_op_and_numbers() -> None:
    """A finding carries rule, byte offset, what is wrong, what is wanted and what stands there."""
    items = changed(program("burn"), Op.PULSE, width=94 * US)
    code = encoded("burn", items)
    first = prove(code, permit("burn", code), CHIP, RIG).findings[0]

    assert code[first.offset] == Op.PULSE
    assert (first.rule, first.wanted, first.got) == ("H7", "1520 to 1680 ticks", "1504")


def again(items: Items) -> Items:
    """The same ops a second time: their labels get other names."""
    return [
        Label(f"{item.name} again")
        if isinstance(item, Label)
        else Instruction(item.op, {**item.args, "to": f"{item.args['to']} again"})
        if "to" in item.args
        else item
        for item in items
    ]


def test_a_power_down_takes_the_look_with_it() -> None:
    """After VCC was away the gate needs a look of its own (H2), as it needs a seating check of its own (H1)."""
    look = ins(Op.GATE_LOOK, wait=20)
    off = [ins(Op.HIGH, how=0), ins(Op.LINES, lines=ON), ins(Op.ADDRESS, at=0), ins(Op.RANGE, which=0)]
    whole = [*seating(), look, *off, *again(seating()), *gate(), ins(Op.END)]
    blind = [*seating(), look, *off, *again(seating()), *(item for item in gate() if item != look), ins(Op.END)]
    codes = encoded("identify", whole), encoded("identify", blind)
    good, bad = (prove(code, permit("identify", code), CHIP, RIG) for code in codes)

    assert good.findings == ()
    assert any("without the look before it" in one.text for one in by_rule(bad, "H2"))
