"""Verify: the chip against an image, at the margins of VCC that the definition names or the rig can make."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass, replace

from pulsewright.chip.model import Definition
from pulsewright.errors import CannotMake, Difference, PulsewrightError, ShortfallRefused
from pulsewright.image.compare import Comparison, compare
from pulsewright.image.memory import Fitted
from pulsewright.jobs.context import JobContext, JobResult, job
from pulsewright.jobs.identify import id_facts
from pulsewright.jobs.maker import resolve_maker
from pulsewright.jobs.margins import Look, Unsteady, as_facts, told, unsteady, verdicts
from pulsewright.jobs.plan import VerifyStep, shortfalls, vcc_of, verify_steps
from pulsewright.jobs.read import doubts_of, read_once
from pulsewright.jobs.record import crc_text
from pulsewright.link.results import RunResult
from pulsewright.units import show_count

_CONTACTS = "clean the contacts of the pins named, seat the chip again, verify again"
_CROSSED = "see whether the image is for the chip as it stands, or for a board with such lines"
_HINTS = {  # by the kind of the likely cause
    "data line stuck": _CONTACTS,
    "data lines shorted": _CONTACTS,
    "address line stuck": _CONTACTS,
    "address lines shorted": _CONTACTS,
    "data lines exchanged": _CROSSED,
    "data inverted": _CROSSED,
    "address lines exchanged": _CROSSED,
    "bytes swapped": _CROSSED,
    "blocks swapped": _CROSSED,
    "image moved": "verify with another --origin",
    "no data": "clean the contacts, seat the chip again, verify again",
}


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


@dataclass(frozen=True)
class _Pass:
    """One pass over the range, compared with the image."""

    step: VerifyStep
    vcc_mv: int
    result: RunResult
    comparison: Comparison

    def text(self) -> str:
        """How it went, as a line."""
        found = self.comparison
        return f"at {self.step.text}: " + (
            f"all {show_count(found.compared, 'word')} equal"
            if found.equal
            else f"{found.differing} of {found.compared} words differ"
        )


def verify_passes(
    ctx: JobContext, fitted: Fitted, first: int, last: int, failure: Callable[..., PulsewrightError], *, proven: bool
) -> tuple[list[str], dict[str, object]]:
    """Reads a range at each pass and compares the used words; `failure` makes the error where one differs.

    `proven`: each word has read right before, so that a difference speaks of margins and not of another image. Where a
    pass differs the others are made all the same: a word that is wrong at one VCC only is another matter than one that
    is wrong at all.
    """
    passes = [_pass(ctx, fitted, first, last, step) for step in passes_of(ctx)]
    if not all(one.comparison.equal for one in passes):
        raise _differs(ctx, fitted, first, passes, failure, proven=proven)
    compared = passes[0].comparison.compared
    lines = [f"{show_count(compared, 'word')} verified at {one.step.text}" for one in passes]
    result = passes[-1].result
    doubts = doubts_of(ctx.definition, result.data, first)
    told_doubts = doubts.text(ctx.definition)
    if proven:  # a burn: told beside its result
        for text in told_doubts:
            ctx.progress.fact(text)
    else:
        lines += told_doubts
    return lines, {
        **id_facts(ctx.definition, result),
        "after_crc32": crc_text(result.data),
        "verified": [{"vcc": one.step.text, "words": compared} for one in passes],
        **doubts.facts(),
    }


def _pass(ctx: JobContext, fitted: Fitted, first: int, last: int, step: VerifyStep) -> _Pass:
    result = read_once(ctx, f"verify, {step.text}", first, last, mode=step.mode, rail_step=step.rail_step)
    want, used = fitted.data[first : last + 1], fitted.used[first : last + 1]
    comparison = compare(
        bytes(first) + want, bytes(first) + result.data, bytes(first) + used, blank=ctx.definition.blank
    )
    named = tuple(replace(cause, text=with_pins(cause.text, ctx.definition)) for cause in comparison.causes)
    return _Pass(step, vcc_of(ctx.definition, ctx.rig, step), result, replace(comparison, causes=named))


def with_pins(text: str, definition: Definition) -> str:
    """A sentence in which each line has its pin: "A13 (pin 26) reads as if ..."."""

    def named(match: re.Match[str]) -> str:
        pins, bit = definition.pins.get(match[1], ()), int(match[2])
        return f"{match[0]} (pin {pins[bit]})" if bit < len(pins) else match[0]

    return re.sub(r"\b([AD])(\d+)\b", named, text)


def _differs(
    ctx: JobContext,
    fitted: Fitted,
    first: int,
    passes: list[_Pass],
    failure: Callable[..., PulsewrightError],
    *,
    proven: bool,
) -> PulsewrightError:
    """The error of a range that is not the image: the worst pass, what VCC does to it, what it looks like."""
    worst = max(passes, key=lambda one: one.comparison.differing)
    comparison = worst.comparison
    facts = comparison.counted()[1:]
    turned = _turned(fitted, first, passes)
    if len(passes) > 1:
        facts += [one.text() for one in passes]
        facts += told(turned, ctx.definition.words) or ["the same words at every VCC: no matter of margins"]
    elif proven:
        facts += verdicts(comparison)
    facts += [cause.line() for cause in comparison.causes]
    if not comparison.causes:
        facts += doubts_of(ctx.definition, worst.result.data, first).text(ctx.definition)
    error = failure(
        f"{comparison.differing} of {comparison.compared} words differ at {worst.step.text}", facts=facts, did="VCC off"
    )
    hint = _HINTS.get(comparison.causes[0].kind, "") if comparison.causes else ""
    if hint and (not proven or hint == _CONTACTS):
        error.hint = hint
    each = [{"vcc": one.step.text, "vcc_mv": one.vcc_mv, "differing": one.comparison.differing} for one in passes]
    error.more |= {"mismatch": comparison.facts(), "passes": each, **as_facts(turned)}
    return error


def _turned(fitted: Fitted, first: int, passes: list[_Pass]) -> list[Unsteady]:
    """The used words that do not read the same in every pass, each with what that says, given the image."""
    looks = [Look(one.vcc_mv, (one.result.data,)) for one in passes]
    truth = fitted.data[first : first + len(passes[0].result.data)]
    return [one for one in unsteady(looks, first, truth) if fitted.used[one.address]]


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
