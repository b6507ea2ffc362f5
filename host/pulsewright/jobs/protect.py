"""Protect: software data protection switched on or off, the contents proven to be as before."""

from __future__ import annotations

from pulsewright.errors import ChipFault, UsageMistake, Where
from pulsewright.jobs.context import JobContext, JobResult, job
from pulsewright.jobs.erase import save_first
from pulsewright.jobs.identify import id_facts
from pulsewright.jobs.maker import check_maker, resolve_maker
from pulsewright.jobs.read import read_once
from pulsewright.jobs.record import crc_text
from pulsewright.sequence.compile import compile_identify, compile_protect
from pulsewright.units import show_address, show_count

WANTED = ("on", "off", "show")


def _check(ctx: JobContext) -> None:
    definition = ctx.definition
    if definition.protect is None:
        raise UsageMistake(
            f"{definition.name} has no software protection in its definition",
            where=Where(definition.path, key="protect"),
            hint="`chip` shows what the part has; some parts of the same number and another maker have it",
        )
    if (ctx.first, ctx.last) != (0, definition.words - 1):
        raise UsageMistake("protection is of the whole chip", wanted="no --range", got=ctx.span(), hint="leave it away")


def _show(ctx: JobContext) -> JobResult:
    """What can be known without a write: a chip is seated, and that the part does not tell."""
    result = ctx.run(compile_identify(ctx.definition, ctx.rig))
    lines = (
        f"{ctx.definition.name} does not tell whether its protection is on: only a write shows it, and none was made",
        "`burn --protect keep` finds out with the first page it writes and leaves the protection as it was",
    )
    return JobResult(lines, {**id_facts(ctx.definition, result), "protection": "unknown"})


def _switch(ctx: JobContext, wanted: str) -> JobResult:
    definition = ctx.definition
    sequence = compile_protect(definition, ctx.rig, on=wanted == "on")
    ctx.prove(sequence)
    before, facts, lines = save_first(ctx, 0, definition.words - 1)
    ctx.progress.begin(f"protection {wanted}", 0)
    result = ctx.run(sequence)
    after = read_once(ctx, "are the contents as they were?", 0, definition.words - 1)
    changed = [at for at, pair in enumerate(zip(before.data, after.data, strict=True)) if pair[0] != pair[1]]
    if changed:
        first = changed[0]
        raise ChipFault(
            f"{show_count(len(changed), 'word')} changed while protection was switched {wanted}: "
            "this chip takes the command as data",
            wanted=f"{ctx.hex(before.data[first])} at {show_address(first, definition.words)}",
            got=ctx.hex(after.data[first]),
            did="VCC off",
            hint="this part has no software protection, or another one: see its print; burn the saved contents back",
        )
    line = f"protection {wanted}: the command was given, and the contents are as before (CRC-32 {crc_text(after.data)})"
    return JobResult((line, *lines), {**facts, **id_facts(definition, result), "protection": wanted})


def protect(ctx: JobContext, wanted: str) -> JobResult:
    """Software protection "on", "off" or "show"; ChipFault where the chip took the command as data."""
    _check(ctx)
    check_maker(ctx)

    def work(context: JobContext) -> JobResult:
        maker = resolve_maker(context)
        result = _show(context) if wanted == "show" else _switch(context, wanted)
        return JobResult((*result.lines, *maker), result.facts)

    return job(ctx, "protect", work)
