"""Words written into a chip by its own method, with software protection kept, put on or taken off."""

from __future__ import annotations

from pulsewright.chip.model import Definition, Method
from pulsewright.errors import ChipFault, UsageMistake, Where
from pulsewright.jobs.context import JobContext, RunFailed
from pulsewright.jobs.plan import BLOCK_WORDS, sha256, whole_pages, write_blocks
from pulsewright.jobs.pulses import burnt_line, words_done
from pulsewright.jobs.read import read_once
from pulsewright.link.results import Block, RunResult
from pulsewright.sequence.compile import compile_burn, compile_protect
from pulsewright.sequence.types import Sequence

AGAIN = "the same burn again: words that are right already are skipped"
KEEP, ON, OFF = "keep", "on", "off"  # what is to become of software protection


def check_protect(ctx: JobContext) -> None:
    """UsageMistake where protection is to be changed on a part that has none."""
    if ctx.options.protect != KEEP and ctx.definition.protect is None:
        raise UsageMistake(
            f"{ctx.definition.name} has no software protection",
            where=Where(ctx.definition.path, key="protect"),
            got=f"--protect {ctx.options.protect}",
            hint="leave --protect away",
        )


def _span(ctx: JobContext) -> tuple[int, int]:
    """The words a writing sequence is given: the range, made whole pages where a page must be loaded whole."""
    definition, method = ctx.definition, ctx.definition.program
    first, last, page = ctx.first, ctx.last, ctx.definition.page
    if method is not None and method.unit == "page" and method.unloaded != "kept" and page:
        return first - first % page, min(last - last % page + page, definition.words) - 1
    return first, last


def _sequence(ctx: JobContext, data: bytes, *, protected: bool) -> Sequence:
    first, last = _span(ctx)
    return compile_burn(
        ctx.definition, ctx.rig, first, last, sha256(data[first : last + 1]) if data else "", protected=protected
    )


def write_sequences(ctx: JobContext) -> list[Sequence]:
    """Every sequence that writing may come to, to be proven before the chip is touched."""
    definition, protect = ctx.definition, ctx.options.protect
    sequences = [_sequence(ctx, b"", protected=False)]
    if definition.protected is not None and protect != OFF:
        sequences.append(_sequence(ctx, b"", protected=True))
    if definition.protect is not None and protect != KEEP:
        sequences.append(compile_protect(definition, ctx.rig, on=protect == ON))
    return sequences


def write_words(ctx: JobContext, target: bytes, to_write: bytes, have: bytes) -> tuple[str, dict[str, object]]:
    """Writes the words marked, and sees to the protection as asked; a line of text and facts."""
    definition, protect = ctx.definition, ctx.options.protect
    words = len(to_write) - to_write.count(0)
    ctx.progress.begin("burn", words)
    if protect == OFF:
        ctx.run(compile_protect(definition, ctx.rig, on=False))
        line, facts = _written(ctx, target, to_write, protected=False)
        return f"{line}; protection off", {**facts, "protection": OFF}
    if protect == ON and definition.protected is not None:
        line, facts = _written(ctx, target, to_write, protected=True)
        return f"{line}; protection on", {**facts, "protection": ON}
    if protect == ON:
        ctx.run(compile_protect(definition, ctx.rig, on=False))
        line, facts = _written(ctx, target, to_write, protected=False)
        ctx.run(compile_protect(definition, ctx.rig, on=True))
        return f"{line}; protection on", {**facts, "protection": ON}
    try:
        return _written(ctx, target, to_write, protected=False)
    except RunFailed as failed:
        if definition.protected is None or not _refuses_writes(ctx, failed, to_write, have):
            raise
    ctx.progress.fact("the first page did not take and nothing in it changed: the chip is protected, and stays so")
    line, facts = _written(ctx, target, to_write, protected=True)
    return f"{line}; the chip was protected, and still is", {**facts, "protection": ON}


def _written(
    ctx: JobContext, target: bytes, to_write: bytes, *, protected: bool
) -> tuple[str, dict[str, object]]:
    """One sequence over the words marked; an error says how many words were done before it."""
    definition = ctx.definition
    method = definition.protected if protected else definition.program
    assert method is not None
    first, last = _span(ctx)
    words = len(to_write) - to_write.count(0)
    blocks = _blocks(definition, method, target, to_write, first, last)
    sequence = _sequence(ctx, target, protected=protected)
    try:
        result = ctx.run(sequence, blocks, want=target)
    except RunFailed as failed:
        done = words_done(method, failed.result.blocks)
        _, facts = burnt_line(method, failed.result.blocks, definition.words)
        failed.error.facts = (f"at least {done} of {words} words burnt before that", *failed.error.facts)
        failed.error.hint = failed.error.hint or AGAIN
        if ctx.record is not None:
            ctx.record.content.update(facts)
        raise
    line, facts = burnt_line(method, result.blocks, definition.words)
    return line, {**facts, "data_sha256": sequence.data_sha256}


def _blocks(
    definition: Definition, method: Method, target: bytes, to_write: bytes, first: int, last: int
) -> tuple[Block, ...]:
    if method.unit != "page":
        return tuple(write_blocks(target, to_write, first, last))
    pages = whole_pages(to_write, first, last, definition.page)
    return tuple(write_blocks(target, pages, first, last, size=definition.page))


def _refuses_writes(ctx: JobContext, failed: RunFailed, to_write: bytes, have: bytes) -> bool:
    """Whether the very first page did not take, and the chip still holds there what it held: it is protected."""
    if not isinstance(failed.error, ChipFault) or any(block.failed is None for block in failed.result.blocks):
        return False
    page = ctx.definition.page or BLOCK_WORDS
    at = to_write.find(b"\x01")
    first = max(at - at % page, ctx.first)
    last = min(at - at % page + page - 1, ctx.last)
    now: RunResult = read_once(ctx, "was it stored?", first, last)
    return now.data == have[first : last + 1]
