"""Identify: the seating check and the ID bytes, nothing else."""

from __future__ import annotations

from pulsewright.chip.model import Definition, MakerRow
from pulsewright.jobs.context import JobContext, JobResult, job
from pulsewright.link.results import RunResult
from pulsewright.sequence.compile import compile_identify
from pulsewright.units import show_address

CANNOT_TELL = "the seating check looks at D, CE, OE, GND and VCC: it cannot tell whether the other pins have contact"


def matched_row(definition: Definition, result: RunResult) -> MakerRow | None:
    """The maker row whose ID was read; None where the part has none."""
    rows = (definition.row,) if definition.row is not None else definition.makers
    alternatives = [row for row in rows for _ in row.ids]
    if result.matched is None or result.matched >= len(alternatives):
        return None
    return alternatives[result.matched]


def id_facts(definition: Definition, result: RunResult) -> dict[str, object]:
    """The ID bytes and their maker row as JSON values."""
    row = matched_row(definition, result)
    return {"id": result.id_bytes.hex(" ").upper(), "maker": row.maker if row is not None else None}


def _work(ctx: JobContext) -> JobResult:
    ctx.progress.begin("seating check and ID", 0)
    result = ctx.run(compile_identify(ctx.definition, ctx.rig))
    row = matched_row(ctx.definition, result)
    definition = ctx.definition
    facts = id_facts(definition, result)
    if row is None:
        lines = (f"a chip is seated; {definition.name} has no electronic ID, nothing was raised",)
    else:
        cells = next(cells for cells in row.ids if len(cells) == len(result.id_bytes))
        read = ", ".join(
            f"{value:02X} at {show_address(cell.at, definition.words)}" + (f" ({cell.what})" if cell.what else "")
            for cell, value in zip(cells, result.id_bytes, strict=True)
        )
        lines = (f"seated; ID {read}: {definition.name}, maker row {row.maker}",)
    return JobResult((*lines, CANNOT_TELL), facts)


def identify(ctx: JobContext) -> JobResult:
    """Seating check and ID bytes; SeatingRefused or IdentityRefused where they are not the part's."""
    return job(ctx, "identify", _work)
