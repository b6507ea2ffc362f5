"""Burn: look, save, erase if asked and needed, burn what differs, verify the whole at the margins."""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.chip.model import Method
from pulsewright.errors import ChipFault, Difference, PulsewrightError, UsageMistake, Where
from pulsewright.image.memory import Fitted
from pulsewright.jobs.context import JobContext, JobResult, RunFailed, job
from pulsewright.jobs.erase import check_erasable, erase_whole, save_first
from pulsewright.jobs.plan import Change, change, sha256, tries_of, write_blocks
from pulsewright.jobs.record import crc_text
from pulsewright.jobs.verify import passes_of, verify_passes
from pulsewright.link.results import BlockDone
from pulsewright.sequence.compile import compile_burn, compile_erase
from pulsewright.units import show_address, show_count

AGAIN = "the same burn again: words that are right already are skipped"


@dataclass(frozen=True)
class Pulses:
    """What a burn took: words by number of tries (index 0: one try), the word that took most."""

    histogram: tuple[int, ...]
    worst: int
    worst_tries: int

    @property
    def words(self) -> int:
        """Words that took their value."""
        return sum(self.histogram)

    @property
    def total(self) -> int:
        """Pulses in all."""
        return sum(count * tries for tries, count in enumerate(self.histogram, 1))

    def facts(self) -> dict[str, object]:
        """As JSON values: only the numbers of tries that happened."""
        return {
            "words": self.words,
            "pulses": self.total,
            "by_tries": {str(tries): count for tries, count in enumerate(self.histogram, 1) if count},
            "worst_word": self.worst,
            "worst_tries": self.worst_tries,
        }


def pulses_of(blocks: tuple[BlockDone, ...]) -> Pulses:
    """The sum over blocks."""
    size = max((len(block.histogram) for block in blocks), default=0)
    total = [0] * size
    for block in blocks:
        for index, count in enumerate(block.histogram):
            total[index] += count
    worst = max(blocks, key=lambda block: block.worst_tries, default=None)
    return Pulses(tuple(total), worst.worst if worst else 0, worst.worst_tries if worst else 0)


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


def _burn_words(ctx: JobContext, fitted: Fitted, to_write: bytes) -> tuple[str, dict[str, object]]:
    """The burn sequence over the words marked; an error says how many words were done before it."""
    first, last = ctx.first, ctx.last
    words = len(to_write) - to_write.count(0)
    ctx.progress.begin("burn", words)
    blocks = tuple(write_blocks(fitted.data, to_write, first, last))
    sequence = compile_burn(ctx.definition, ctx.rig, first, last, sha256(fitted.data[first : last + 1]))
    most = tries_of(method_of(ctx))
    try:
        result = ctx.run(sequence, blocks, want=fitted.data)
    except RunFailed as failed:
        done = pulses_of(failed.result.blocks)
        failed.error.facts = (f"at least {done.words} of {words} words burnt before that", *failed.error.facts)
        failed.error.hint = failed.error.hint or AGAIN
        if ctx.record is not None:
            ctx.record.content["pulses"] = done.facts()
        raise
    done = pulses_of(result.blocks)
    line = f"{show_count(done.words, 'word')} burnt with {show_count(done.total, 'pulse')}"
    if done.words:
        at = show_address(done.worst, ctx.definition.words)
        line += f"; most for one word: {done.worst_tries} of {most} at {at}"
    return line, {"pulses": done.facts(), "data_sha256": sequence.data_sha256}


def _chip_fault(what: str, *, facts: list[str], did: str) -> PulsewrightError:
    return ChipFault(
        f"burnt, but {what}", facts=facts, did=did, hint="erase and burn again; a chip that stays so is worn"
    )


def _work(ctx: JobContext, fitted: Fitted) -> JobResult:
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
        _keep_outside(ctx, have)
        line, more = erase_whole(ctx)
        ctx.progress.fact(line)
        lost = sum(1 for word, used in zip(have, fitted.used, strict=True) if not used and word != definition.blank)
        lines.append(line)
        if lost:
            lines.append(f"the erase also cleared {show_count(lost, 'word')} that the image does not give")
        have = bytes([definition.blank]) * definition.words
        needed = change(have, fitted.data, fitted.used)
        facts |= more | {"erased": True, "cleared_words": lost, "skipped_words": needed.equal}
    elif ctx.options.erase:
        lines.append("no erase: no word needs a 0 to become a 1")
    if needed.differing:
        line, more = _burn_words(ctx, fitted, needed.to_write)
        facts |= more
        burnt = f"{line}; {show_count(needed.equal, 'word')} right already"
    else:
        burnt = f"nothing to burn: {show_count(needed.used, 'word')} right already"
    verified, more = verify_passes(ctx, fitted, ctx.first, ctx.last, _chip_fault, proven=True)
    return JobResult(
        (burnt, *verified, *lines, *tail), {**facts, **more, "words": needed.used, "burnt_words": needed.differing}
    )


def _prove_all(ctx: JobContext) -> None:
    """Everything this job may come to is compiled and proven before the chip is touched at all."""
    passes_of(ctx)
    ctx.prove(compile_burn(ctx.definition, ctx.rig, ctx.first, ctx.last, ""))
    if ctx.options.erase and ctx.definition.erase is not None:
        ctx.prove(compile_erase(ctx.definition, ctx.rig))


def burn(ctx: JobContext, fitted: Fitted) -> JobResult:
    """Burns the used words of an image; Difference: an erase is needed and was not asked for; ChipFault: it fails."""
    method_of(ctx)
    if ctx.options.erase:
        check_erasable(ctx.definition)

    def work(context: JobContext) -> JobResult:
        if context.record is not None:
            crc = crc_text(fitted.data[context.first : context.last + 1])
            context.record.content |= {"image_crc32": crc, "image_sha256": sha256(fitted.data)}
        return _work(context, fitted)

    return job(ctx, "burn", work)
