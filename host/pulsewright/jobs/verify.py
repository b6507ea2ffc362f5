"""Verify: the chip against an image, at the margins of VCC that the definition names or the rig can make."""

from __future__ import annotations

from collections.abc import Callable

from pulsewright.errors import CannotMake, Difference, PulsewrightError, ShortfallRefused
from pulsewright.image.compare import compare
from pulsewright.image.memory import Fitted
from pulsewright.jobs.context import JobContext, JobResult, job
from pulsewright.jobs.identify import id_facts
from pulsewright.jobs.maker import resolve_maker
from pulsewright.jobs.margins import verdicts
from pulsewright.jobs.plan import VerifyStep, shortfalls, verify_steps
from pulsewright.jobs.read import read_once
from pulsewright.jobs.record import crc_text
from pulsewright.units import show_count


def passes_of(ctx: JobContext) -> tuple[VerifyStep, ...]:
    """The passes; ShortfallRefused where the rig cannot make one that the definition names and nobody accepted that.

    CannotMake where the rig has no step inside the window of VCC.read.
    """
    definition = ctx.definition
    short = shortfalls(definition, ctx.rig)
    if short and not ctx.options.accept_shortfall:
        raise ShortfallRefused(
            f"the rig cannot make {len(short)} of the {len(definition.verify)} margin passes of {definition.name}",
            where=definition.verify[0].where,
            did="nothing was written",
            facts=list(short),
            hint="--accept-shortfall does without: the words are verified all the same, but not at these margins",
        )
    if short and ctx.record is not None:
        ctx.record.content["shortfall"] = list(short)
    steps = verify_steps(ctx.definition, ctx.rig)
    if not steps:
        raise CannotMake(
            f"no VCC step of {ctx.rig.name} lies inside VCC.read of {ctx.definition.name} with its error",
            did="nothing was sent",
            hint="rig show lists the steps",
        )
    return steps


def verify_passes(
    ctx: JobContext, fitted: Fitted, first: int, last: int, failure: Callable[..., PulsewrightError], *, proven: bool
) -> tuple[list[str], dict[str, object]]:
    """Reads a range at each pass and compares the used words; `failure` makes the error where one differs.

    `proven`: each word has read right before, so that a difference speaks of margins and not of another image.
    """
    want, used = fitted.data[first : last + 1], fitted.used[first : last + 1]
    lines: list[str] = []
    facts: dict[str, object] = {}
    names = []
    for step in passes_of(ctx):
        result = read_once(ctx, f"verify, {step.text}", first, last, mode=step.mode, rail_step=step.rail_step)
        facts = {**id_facts(ctx.definition, result), "after_crc32": crc_text(result.data)}
        comparison = compare(bytes(first) + want, bytes(first) + result.data, bytes(first) + used)
        if not comparison.equal:
            raise failure(
                f"{comparison.differing} of {comparison.compared} words differ at {step.text}",
                facts=[*comparison.lines()[1:], *(verdicts(comparison) if proven else ())],
                did="VCC off",
            )
        lines.append(f"{show_count(comparison.compared, 'word')} verified at {step.text}")
        proven = True
        names.append({"vcc": step.text, "words": comparison.compared})
    return lines, {**facts, "verified": names}


def check_against(ctx: JobContext, fitted: Fitted) -> JobResult:
    """The verify job's work, without its record."""
    resolve_maker(ctx)
    crc = crc_text(fitted.data[ctx.first : ctx.last + 1])
    images = [file.facts() for file in fitted.files]
    if ctx.record is not None:
        ctx.record.content |= {"image_crc32": crc, "images": images}
    lines, facts = verify_passes(ctx, fitted, ctx.first, ctx.last, _difference, proven=False)
    used = len(fitted.used) - fitted.used.count(0)
    return JobResult(tuple(lines), {**facts, "image_crc32": crc, "images": images, "words": used})


def _difference(what: str, *, facts: list[str], did: str) -> PulsewrightError:
    return Difference(what, facts=facts, did=did, hint="read --passes 2 tells whether the chip reads steadily")


def verify(ctx: JobContext, fitted: Fitted) -> JobResult:
    """Compares the used words of an image with the chip at every pass; Difference with classes of mismatch."""
    return job(ctx, "verify", lambda context: check_against(context, fitted))
