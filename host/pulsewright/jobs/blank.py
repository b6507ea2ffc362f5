"""Blank check: is every word of the range in the erased state; where not, how many are not, and which."""

from __future__ import annotations

from pulsewright.errors import Difference, Interrupted, PulsewrightError
from pulsewright.jobs.context import JobContext, JobResult, RunFailed, job
from pulsewright.jobs.identify import id_facts
from pulsewright.jobs.read import read_once
from pulsewright.sequence.compile import compile_blank
from pulsewright.units import show_address, show_count, show_mv

LISTED = 16


def _work(ctx: JobContext) -> JobResult:
    ctx.progress.begin("blank check", 0)
    sequence = compile_blank(ctx.definition, ctx.rig, ctx.first, ctx.last)
    try:
        result = ctx.run(sequence)
    except RunFailed as failed:
        if isinstance(failed.error, Difference):
            _count(ctx, failed.error)
        raise
    word = ctx.hex(ctx.definition.blank)
    line = f"blank: {ctx.words} words, {ctx.span()}, read {word} at VCC {show_mv(sequence.vcc_mv)}"
    return JobResult((line,), {**id_facts(ctx.definition, result), "words": ctx.words, "vcc_mv": sequence.vcc_mv})


def _count(ctx: JobContext, error: PulsewrightError) -> None:
    """Reads the range, for the check stops at the first word that is not blank; what it finds goes into the error.

    That the chip is not blank stands, whatever becomes of this read; only an interrupt ends the job as one.
    """
    try:
        data = read_once(ctx, "which words are not blank", ctx.first, ctx.last).data
    except RunFailed as failed:
        if isinstance(failed.error, Interrupted):
            raise
        error.facts = (*error.facts, f"how many are not is unknown, the read for it failed: {failed.error.what}")
        return
    words, blank = ctx.definition.words, ctx.definition.blank
    found = [(ctx.first + at, word) for at, word in enumerate(data) if word != blank]
    error.more |= {
        "not_blank_words": len(found),
        "not_blank": [{"address": at, "got": ctx.hex(word)} for at, word in found[:LISTED]],
    }
    if not found:
        error.facts = (*error.facts, f"a read right after it finds {ctx.hex(blank)} in all {ctx.words} words")
        error.hint = "clean the contacts, seat the chip again: a word that reads two ways is contact, supply or noise"
        return
    ends = f"{show_address(found[0][0], words)}..{show_address(found[-1][0], words)}"
    lines = [f"{show_count(len(found), 'word')} of {ctx.words} not blank, within {ends}"]
    lines += [f"{show_address(at, words)}: {ctx.hex(word)}" for at, word in found[:LISTED]]
    if len(found) > LISTED:
        lines.append(f"and {len(found) - LISTED} more")
    error.facts = (*error.facts, *lines)
    if ctx.record is not None:
        ctx.record.content["not_blank_words"] = len(found)


def blank(ctx: JobContext) -> JobResult:
    """Done when every word is blank; else Difference with how many are not and the first of them."""
    return job(ctx, "blank-check", _work)
