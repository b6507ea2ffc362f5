"""H3's sums, in the compiler and in the proof apart: each thing that lifts or lowers a level is seen to count."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from pulsewright.errors import CannotMake
from pulsewright.rig.file import load_rig
from pulsewright.rig.model import Rig
from pulsewright.sequence.compile import compile_burn, compile_erase, compile_identify
from pulsewright.sequence.proof import prove
from pulsewright.sequence.types import Sequence

CHIP = load("27e512", maker="DA")
RIG = load_rig()


def erase(definition: Definition, rig: Rig) -> Sequence:
    """14.0 V ± 0.1 V + 0.085 V in a window of 13.75 V to 14.25 V, through a limiter that takes 0.125 V at A9."""
    return compile_erase(definition, rig)


def burn(definition: Definition, rig: Rig) -> Sequence:
    """12.0 V ± 0.086 V + 0.085 V in a window of 11.75 V to 12.25 V."""
    return compile_burn(definition, rig, 0, 7, "")


def identify(definition: Definition, rig: Rig) -> Sequence:
    """VCC of 5.0 V ± 0.034 V + 0.07 V in a window of 4.75 V to 5.25 V."""
    return compile_identify(definition, rig)


def raised(**changes: int) -> Rig:
    """The rig with other numbers for every step of the raised rail."""
    steps = tuple(replace(step, **changes) if step.mv else step for step in RIG.raised.steps)
    return replace(RIG, raised=replace(RIG.raised, steps=steps))


def vcc(**changes: int) -> Rig:
    """The rig with other numbers for every step of VCC."""
    steps = tuple(replace(step, **changes) if step.mv else step for step in RIG.vcc.steps)
    return replace(RIG, vcc=replace(RIG.vcc, steps=steps))


def switch(number: int, **changes: Any) -> Rig:
    """The rig with another raised switch."""
    switches = tuple(replace(one, **changes) if one.number == number else one for one in RIG.switches)
    return replace(RIG, switches=switches)


def dips_of(ignored_us: int) -> Rig:
    """The rig, its dips of 100 us ignored or not."""
    return replace(RIG, dip_ignored_us=ignored_us)


def vcc_drop(mv: int) -> Rig:
    """The rig with VCC switches that lose so much."""
    return replace(RIG, vcc_switches=tuple(replace(one, drop_mv=mv) for one in RIG.vcc_switches))


def oe_at_most(mv: int) -> Definition:
    """The part with another absolute maximum of OE."""
    return replace(CHIP, maxima={**CHIP.maxima, "OE": replace(CHIP.maxima["OE"], mv=mv)})


# what is compiled, and a chip or a rig just good enough and one just not
Sums = tuple[Callable[[Definition, Rig], Sequence], Definition, Rig, Definition, Rig]
SUMS: dict[str, Sums] = {
    "the rail's error upward": (burn, CHIP, raised(error_mv=165), CHIP, raised(error_mv=166)),
    "the rail's overshoot": (burn, CHIP, raised(overshoot_mv=164), CHIP, raised(overshoot_mv=165)),
    "the switch's own ceiling": (erase, CHIP, switch(4, ceiling_mv=14_185), CHIP, switch(4, ceiling_mv=14_184)),
    "an absolute maximum": (erase, oe_at_most(14_185), RIG, oe_at_most(14_184), RIG),
    "the rail's error downward": (erase, CHIP, raised(error_mv=125), CHIP, raised(error_mv=126)),
    "what the limiter loses": (erase, CHIP, switch(4, drop_mv=150), CHIP, switch(4, drop_mv=151)),
    "a dip too long to be ignored": (erase, CHIP, dips_of(100), CHIP, dips_of(99)),
    "VCC's error": (identify, CHIP, vcc(error_mv=180), CHIP, vcc(error_mv=181)),
    "VCC's overshoot": (identify, CHIP, vcc(overshoot_mv=216), CHIP, vcc(overshoot_mv=217)),
    "what the VCC switch loses": (identify, CHIP, vcc_drop(216), CHIP, vcc_drop(217)),
    "a dip of VCC": (
        identify, CHIP, vcc(dip_mv=192, dip_us=300), CHIP, vcc(dip_mv=193, dip_us=300),
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", SUMS)
def test_the_compiler_counts(name: str) -> None:
    """A level that just fits is made, one millivolt more is refused with both sums."""
    make, chip, rig, other_chip, other_rig = SUMS[name]
    make(chip, rig)
    with pytest.raises(CannotMake, match="no step of the"):
        make(other_chip, other_rig)


@pytest.mark.parametrize("name", SUMS)
def test_the_proof_counts(name: str) -> None:
    """The sequence made where it just fits is accepted there, and refused where a millivolt is missing."""
    make, chip, rig, other_chip, other_rig = SUMS[name]
    sequence = make(chip, rig)
    assert prove(sequence.code, sequence.permit, chip, rig).findings == ()
    found = prove(sequence.code, sequence.permit, other_chip, other_rig).findings
    assert {"H2", "H3"} & {finding.rule for finding in found}
