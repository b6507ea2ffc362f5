"""Blank check: is every word of the range in the erased state."""

from __future__ import annotations

from pulsewright.jobs.context import JobContext, JobResult, job
from pulsewright.jobs.identify import id_facts
from pulsewright.sequence.compile import compile_blank
from pulsewright.units import show_mv


def _work(ctx: JobContext) -> JobResult:
    ctx.progress.begin("blank check", 0)
    sequence = compile_blank(ctx.definition, ctx.rig, ctx.first, ctx.last)
    result = ctx.run(sequence)
    word = ctx.hex(ctx.definition.blank)
    line = f"blank: {ctx.words} words, {ctx.span()}, read {word} at VCC {show_mv(sequence.vcc_mv)}"
    return JobResult((line,), {**id_facts(ctx.definition, result), "words": ctx.words, "vcc_mv": sequence.vcc_mv})


def blank(ctx: JobContext) -> JobResult:
    """Done when every word is blank; else Difference with the first that is not."""
    return job(ctx, "blank-check", _work)
