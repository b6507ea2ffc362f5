"""Which maker's part it is: read from the chip before anything that makers do in different ways."""

from __future__ import annotations

from pulsewright.chip.load import load, maker_needed
from pulsewright.errors import UsageMistake, Where
from pulsewright.jobs.consent import check_consent
from pulsewright.jobs.context import JobContext
from pulsewright.jobs.identify import matched_row
from pulsewright.sequence.compile import compile_identify


def check_maker(ctx: JobContext) -> None:
    """UsageMistake where rows without ID differ in what could harm and the operator named none."""
    needed = maker_needed(ctx.definition)
    if needed:
        raise UsageMistake(
            f"{ctx.definition.name} of different makers differs, and no ID tells which one this is",
            where=Where(ctx.definition.path, key="makers"),
            wanted=f"--maker and one of {', '.join(needed)}",
            got="no --maker",
            hint="read the print on the chip",
        )


def resolve_maker(ctx: JobContext) -> tuple[str, ...]:
    """The definition of the job becomes that of the maker whose ID the chip gives; a line of text that says so.

    Nothing happens for a part of one maker, of a maker that the operator named, or without IDs. The voltages of the row
    need their own consent (H10).
    """
    definition = ctx.definition
    if definition.row is not None or not any(row.ids for row in definition.makers):
        return ()
    ctx.progress.begin("which maker", 0)
    row = matched_row(definition, ctx.run(compile_identify(definition, ctx.rig)))
    if row is None:
        return ()
    ctx.definition = load(definition.path, maker=row.maker)
    consent = check_consent(
        ctx.definition, in_process=ctx.open_rig.in_process, accepted=ctx.options.accepted, ask=ctx.ask
    )
    if ctx.record is not None:
        ctx.record.definition = ctx.definition
        ctx.record.content["consent"] = consent
    line = f"the ID is that of maker row {row.maker}"
    ctx.progress.fact(line)
    return (line,)
