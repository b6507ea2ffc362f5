"""The gate's part of a sequence: the look with A9 at H, the identify level measured, the gate, the level gone again."""

from __future__ import annotations

from pulsewright.chip.model import Definition, IdCell
from pulsewright.sequence.build import Builder
from pulsewright.sequence.lower import enter
from pulsewright.units import Rounding, ticks
from pulsewright.wire.tables import Op


def wanted_ids(definition: Definition) -> tuple[tuple[IdCell, ...], ...]:
    """Every ID that is accepted: the chosen row's, or all rows' while none is chosen."""
    rows = (definition.row,) if definition.row is not None else definition.makers
    return tuple(alternative for row in rows for alternative in row.ids)


def pass_gate(b: Builder) -> None:
    """From standby to standby with the gate open; firmware trips on a wrong ID with the level gone at once."""
    definition = b.definition
    if definition.identify != "mode":
        with b.about("gate: a part without electronic ID", part="gate"):
            b.emit(Op.GATE, wait=0)
        return
    mode = definition.modes[definition.identify_mode]
    with b.about(f"gate: mode {mode.name}", part="gate", where=mode.where):
        enter(b, "read")
        b.wait(0)
        access = ticks(b.line_settle_ps + b.access_ps("read"), Rounding.AT_LEAST)
        b.emit(Op.GATE_LOOK, wait=access)
        b.edge(b.line_settle_ps)
        enter(b, "standby")
        first = min(cell.at for alternative in wanted_ids(definition) for cell in alternative)
        enter(b, mode.name, at=first)
        b.wait(definition.timing["tVS"].min_ps or 0 if "tVS" in definition.timing else 0)
        b.emit(Op.GATE, wait=access)
        b.edge(b.line_settle_ps)
        enter(b, "standby")
        b.wait(definition.timing["tVR"].min_ps or 0 if "tVR" in definition.timing else 0)
