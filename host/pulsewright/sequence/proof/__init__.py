"""The safety proof: judges encoded bytes by itself; shares no code with the compiler.

`prove` decodes a program and follows every path through it, loops to a fixed point, in an abstract state of rig and
chip. It finds what breaks H1 to H8 and H11 and the permit's side of H9; what it does not understand it refuses.
"""

from __future__ import annotations

from pulsewright.chip.model import Definition
from pulsewright.rig.model import Rig
from pulsewright.sequence.proof.permit import check_permit, check_used
from pulsewright.sequence.proof.shape import shape_of
from pulsewright.sequence.proof.tables import make_tables
from pulsewright.sequence.proof.walk import Walk, check_header
from pulsewright.sequence.types import Finding, Proof
from pulsewright.wire.permit import Permit

__all__ = ["prove"]


def prove(code: bytes, permit: Permit, definition: Definition, rig: Rig) -> Proof:
    """Judges an encoded program under a permit, for a definition (a maker row or all) on a rig; never raises for bytes.

    An empty list of findings accepts. Findings stand in the order of their ops; offset 0 is the program as a whole.
    """
    findings: list[Finding] = []

    def report(offset: int, text: str, wanted: str, got: str) -> None:
        findings.append(Finding("H5", offset, text, wanted, got))

    if definition.package not in rig.site.packages:
        return Proof((Finding("H6", 0, f"the rig's site takes no {definition.package}"),), 0, 0)
    shape = shape_of(code, report)
    t = make_tables(definition, rig, permit)
    t.shape = shape
    for problem in t.pins.problems:
        t.find("H6", problem)
    check_permit(t, code)
    if shape is None:
        return Proof((*findings, *t.findings.values()), 0, 0)
    check_header(t, shape)
    walk = Walk(t, shape)
    walk.run()
    check_used(t)
    found = sorted([*findings, *t.findings.values()], key=lambda one: one.offset)
    return Proof(tuple(found), len(shape.flat), walk.count)
