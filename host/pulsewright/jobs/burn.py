"""Burn: look, save, erase if asked and needed, burn what differs, verify the whole at the margins."""

from __future__ import annotations

from pulsewright.chip.model import Method
from pulsewright.errors import ChipFault, Difference, PulsewrightError, UsageMistake, Where
from pulsewright.image.memory import Fitted
from pulsewright.jobs.context import JobContext, JobResult, job
from pulsewright.jobs.erase import check_erasable, erase_whole, save_first
from pulsewright.jobs.maker import check_maker, resolve_maker
from pulsewright.jobs.plan import Change, change, sha256
from pulsewright.jobs.record import crc_text
from pulsewright.jobs.verify import passes_of, verify_passes
from pulsewright.jobs.writing import KEEP, check_protect, write_sequences, write_words
from pulsewright.sequence.compile import compile_erase
from pulsewright.units import show_address, show_count


def method_of(ctx: JobContext) -> Method:
    """The part's program method; UsageMistake where the definition has none."""
    if ctx.definition.program is None:
        raise UsageMistake(
            f"{ctx.definition.name} has no program algorithm in its definition",
            where=Where(ctx.definition.path, key="program"),
            hint="a mask ROM cannot be burnt; else copy the data sheet's algorithm into the definition",
        )
    return ctx.definition.program


def _laid(data: bytes, first: int, words: int, blank: int) -> bytes:
    """What was read of a range, on a whole chip."""
    return bytes([blank]) * first + data + bytes([blank]) * (words - first - len(data))


def _needs_erase(ctx: JobContext, needed: Change, fitted: Fitted, have: bytes) -> Difference:
    words = ctx.definition.words
    at = needed.impossible[0]
    return Difference(
        f"{show_count(len(needed.impossible), 'word')} with a 0 that must become a 1, which only an erase can do",
        wanted=f"{ctx.hex(fitted.data[at])} at {show_address(at, words)}, the first such word",
        got=f"{ctx.hex(have[at])}",
        did="VCC off; nothing was written",
        facts=[f"{needed.differing} of {needed.used} words of the image differ from the chip"],
        hint="burn --erase" if ctx.definition.erase is not None else "erase the chip, then burn",
    )


def _keep_outside(ctx: JobContext, have: bytes) -> None:
    """Difference where a range was named and the erase of the whole chip would clear words outside it."""
    definition = ctx.definition
    blank = definition.blank
    outside = sum(word != blank for word in (*have[: ctx.first], *have[ctx.last + 1 :]))
    if outside:
        raise Difference(
            f"the erase that this burn needs would also clear {show_count(outside, 'word')} outside {ctx.span()}",
            where=Where(definition.path, key="erase"),
            wanted="a chip that is blank outside the range",
            got=f"{show_count(outside, 'word')} that are not {ctx.hex(blank)}",
            did="VCC off; nothing was written",
            hint="read the chip into a file, put the new words into it, burn that without --range",
        )


def _target(fitted: Fitted, have: bytes) -> bytes:
    """What the chip is to hold: the image where it says something, else what it holds now."""
    return bytes(new if used else old for new, used, old in zip(fitted.data, fitted.used, have, strict=True))


def _chip_fault(what: str, *, facts: list[str], did: str) -> PulsewrightError:
    return ChipFault(
        f"burnt, but {what}", facts=facts, did=did, hint="erase and burn again; a chip that stays so is worn"
    )


def _erased(ctx: JobContext, fitted: Fitted, have: bytes) -> tuple[bytes, Change, list[str], dict[str, object]]:
    """The chip erased for the image: what it holds then, what is still to do, lines and facts."""
    definition = ctx.definition
    _keep_outside(ctx, have)
    line, more = erase_whole(ctx)
    ctx.progress.fact(line)
    lost = sum(1 for word, used in zip(have, fitted.used, strict=True) if not used and word != definition.blank)
    lines = [line]
    if lost:
        lines.append(f"the erase also cleared {show_count(lost, 'word')} that the image does not give")
    have = bytes([definition.blank]) * definition.words
    needed = change(have, fitted.data, fitted.used)
    return have, needed, lines, more | {"erased": True, "cleared_words": lost, "skipped_words": needed.equal}


def _work(ctx: JobContext, fitted: Fitted) -> JobResult:
    maker = resolve_maker(ctx)
    definition, method = ctx.definition, method_of(ctx)
    whole = ctx.options.erase and definition.erase is not None
    first, last = (0, definition.words - 1) if whole else (ctx.first, ctx.last)
    _prove_all(ctx)
    looked, facts, tail = save_first(ctx, first, last)
    have = _laid(looked.data, first, definition.words, definition.blank)
    needed = change(have, fitted.data, fitted.used)
    lines: list[str] = []  # what the erase did, behind what the burn did: the first line is the job's result
    facts |= {"skipped_words": needed.equal, "erased": False}
    if needed.impossible and method.bits == "1 to 0":
        if not ctx.options.erase:
            raise _needs_erase(ctx, needed, fitted, have)
        have, needed, lines, more = _erased(ctx, fitted, have)
        facts |= more
    elif ctx.options.erase:
        lines.append("no erase: no word needs a 0 to become a 1")
    if needed.differing or ctx.options.protect != KEEP:
        line, more = write_words(ctx, _target(fitted, have), needed.to_write, have)
        facts |= more
        burnt = f"{line}; {show_count(needed.equal, 'word')} right already"
    else:
        burnt = f"nothing to burn: {show_count(needed.used, 'word')} right already"
    verified, more = verify_passes(ctx, fitted, ctx.first, ctx.last, _chip_fault, proven=True)
    return JobResult(
        (burnt, *verified, *lines, *maker, *tail),
        {**facts, **more, "words": needed.used, "burnt_words": needed.differing}
        | {"images": [file.facts() for file in fitted.files]},
    )


def _prove_all(ctx: JobContext) -> None:
    """Everything this job may come to is compiled and proven before the chip is touched at all."""
    passes_of(ctx)
    for sequence in write_sequences(ctx):
        ctx.prove(sequence)
    if ctx.options.erase and ctx.definition.erase is not None:
        ctx.prove(compile_erase(ctx.definition, ctx.rig))


def burn(ctx: JobContext, fitted: Fitted) -> JobResult:
    """Burns the used words of an image; Difference: an erase is needed and was not asked for; ChipFault: it fails."""
    method_of(ctx)
    check_maker(ctx)
    check_protect(ctx)
    if ctx.options.erase:
        check_erasable(ctx.definition)

    def work(context: JobContext) -> JobResult:
        if context.record is not None:
            crc = crc_text(fitted.data[context.first : context.last + 1])
            context.record.content |= {"image_crc32": crc, "image_sha256": sha256(fitted.data)}
            context.record.content["images"] = [file.facts() for file in fitted.files]
        return _work(context, fitted)

    return job(ctx, "burn", work)
