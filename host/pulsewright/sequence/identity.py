"""The gate's part of a sequence: the look with A9 at H, the identify level measured, the gate, the level gone again."""

from __future__ import annotations

from pulsewright.chip.model import Definition, IdCell
from pulsewright.errors import CannotMake
from pulsewright.sequence import bus
from pulsewright.sequence.build import Builder
from pulsewright.sequence.modes import enter
from pulsewright.units import Rounding, ticks
from pulsewright.wire.tables import Op


def wanted_ids(definition: Definition) -> tuple[tuple[IdCell, ...], ...]:
    """Every ID that is accepted: the chosen row's, or all rows' while none is chosen."""
    rows = (definition.row,) if definition.row is not None else definition.makers
    return tuple(alternative for row in rows for alternative in row.ids)


def pass_gate(b: Builder) -> None:
    """From standby to standby with the gate open; firmware trips on a wrong ID with the level gone at once."""
    definition = b.definition
    if definition.identify == "command":
        _by_command(b)
        return
    if definition.identify != "mode":
        with b.about("gate: a part without electronic ID", part="gate"):
            b.emit(Op.GATE, wait=0)
        return
    mode = definition.modes[definition.identify_mode]
    with b.about(f"gate: mode {mode.name}", part="gate", where=mode.where):
        access = _look(b, "read")
        first = min(cell.at for alternative in wanted_ids(definition) for cell in alternative)
        enter(b, mode.name, at=first)
        b.wait(b.timing_min_ps("tVS"))
        b.emit(Op.GATE, wait=access)
        b.edge(b.line_settle_ps)
        enter(b, "standby")
        b.wait(b.timing_min_ps("tVR"))


def _look(b: Builder, mode: str) -> int:
    """The look at the cells without the identify mode, from and to standby; the access wait in ticks."""
    enter(b, mode)
    b.wait(0)
    access = ticks(b.line_settle_ps + b.access_ps(mode), Rounding.AT_LEAST)
    b.emit(Op.GATE_LOOK, wait=access)
    b.edge(b.line_settle_ps)
    b.state.addressed = False
    enter(b, "standby")
    return access


def _by_command(b: Builder) -> None:
    """The ID asked for by bus writes: the only ones before the gate; the chip is back in read mode at the end."""
    command = b.definition.identify_command
    if command is None:
        raise CannotMake(f"{b.definition.name} is identified by a command that its definition does not give")
    with b.about("gate: the ID by command", part="gate", where=command.where):
        access = _look(b, command.mode)
        bus.commands(b, command.enter)
        bus.end_load(b)
        b.wait(command.settle_ps)
        enter(b, command.mode)
        b.wait(0)
        b.emit(Op.GATE, wait=access)
        b.edge(b.line_settle_ps)
        enter(b, "standby")
        bus.commands(b, command.leave)
        bus.end_load(b)
        b.wait(command.settle_ps)
        enter(b, "standby")
