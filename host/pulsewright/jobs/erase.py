"""Erase: the part's own electrical erase, what was in it saved first."""

from __future__ import annotations

from pulsewright.chip.model import Definition
from pulsewright.errors import FileMistake, UsageMistake, Where
from pulsewright.jobs.context import JobContext, JobResult, job
from pulsewright.jobs.identify import id_facts
from pulsewright.jobs.maker import check_maker, resolve_maker
from pulsewright.jobs.pulses import tries_of
from pulsewright.jobs.read import doubts_of, read_agreed
from pulsewright.jobs.record import crc_text, save_dump
from pulsewright.jobs.writing import KEEP, check_protect, write_sequences, write_words
from pulsewright.link.results import RunResult
from pulsewright.sequence.compile import compile_blank, compile_erase
from pulsewright.units import show_mv

# STMicroelectronics M2716 and M27C family sheets, section "Erasure operation": 15 W-s/cm2 at 253.7 nm.
UV_DOSE = "at least 15 W·s/cm² at 253.7 nm: 15 to 20 minutes under a lamp of 12 mW/cm² at 2.5 cm, window bare and clean"


def overwrites(definition: Definition) -> bool:
    """Whether the part has no erase of its own but takes the erased state as any other data."""
    return definition.erase is None and definition.program is not None and definition.program.bits == "both"


def check_erasable(definition: Definition) -> None:
    """UsageMistake for a part that no electrical erase clears; for a UV part it explains lamp and dose."""
    if definition.erase is not None or overwrites(definition):
        return
    if definition.erase_kind == "uv":
        raise UsageMistake(
            f"{definition.name} is erased by UV light through its window, not by a rig",
            where=Where(definition.path),
            facts=[UV_DOSE, "UV-C harms eyes and skin within minutes: only in a closed box with a switch in its lid"],
            hint="take it out of the socket, give it the dose, then blank-check",
        )
    raise UsageMistake(
        f"{definition.name} has no erase in its definition",
        where=Where(definition.path, key="erase"),
        hint="a one-time part cannot be erased; else copy the data sheet's erase algorithm into the definition",
    )


def save_first(ctx: JobContext, first: int, last: int) -> tuple[RunResult, dict[str, object], list[str]]:
    """What the chip holds before it changes: read in two passes that agree, kept in a file unless the operator said no.

    Gives the last pass, the facts and the lines of text.
    """
    result = read_agreed(ctx, "save" if ctx.options.save else "look", 2, first, last)
    facts: dict[str, object] = {"before_crc32": crc_text(result.data)}
    doubts = doubts_of(ctx.definition, result.data, first).text(ctx.definition)
    for doubt in doubts:
        ctx.progress.fact(doubt)
    if not ctx.options.save:
        return result, facts, doubts
    try:
        path = save_dump(ctx.definition, result.data, first)
    except FileMistake as mistake:
        mistake.did = "VCC off; the chip is as it was"
        raise
    ctx.progress.fact(f"saved to {path}")
    facts["saved"] = str(path)
    if ctx.record is not None:
        ctx.record.content.update(facts)
    return result, facts, [f"what the chip held (CRC-32 {crc_text(result.data)}) is saved in {path}", *doubts]


def erase_whole(ctx: JobContext) -> tuple[str, dict[str, object]]:
    """The erase itself: a line of text and facts; ChipFault when the pulses are used up."""
    definition = ctx.definition
    check_erasable(definition)
    method = definition.erase
    assert method is not None
    ctx.progress.begin("erase", 0)
    result = ctx.run(compile_erase(definition, ctx.rig))
    most = tries_of(method)
    verify = definition.modes.get("erase_verify", definition.modes["read"])
    vcc_mv = definition.supplies[verify.vcc].typ_mv
    pulses = result.tries
    word = ctx.hex(definition.blank)
    line = f"erased in {pulses} of {most} pulses; {definition.words} words read {word} at VCC {show_mv(vcc_mv)}"
    return line, {
        **id_facts(definition, result),
        "erase_pulses": pulses,
        "erase_pulses_allowed": most,
        "erase_verify_vcc_mv": vcc_mv,
    }


def _overwrite(ctx: JobContext) -> JobResult:
    """Every word of the range that is not blank written with the erased state, then the range looked at."""
    definition = ctx.definition
    for sequence in (*write_sequences(ctx), compile_blank(definition, ctx.rig, ctx.first, ctx.last)):
        ctx.prove(sequence)
    looked, facts, tail = save_first(ctx, ctx.first, ctx.last)
    blank, words = definition.blank, definition.words
    have = bytes([blank]) * ctx.first + looked.data + bytes([blank]) * (words - ctx.last - 1)
    to_write = bytes(word != blank for word in have)
    line = "nothing to erase"
    if any(to_write) or ctx.options.protect != KEEP:
        line, more = write_words(ctx, bytes([blank]) * words, to_write, have)
        facts |= more
    ctx.progress.begin("blank check", 0)
    result = ctx.run(compile_blank(definition, ctx.rig, ctx.first, ctx.last))
    vcc = show_mv(definition.supplies[definition.modes["read"].vcc].typ_mv)
    line = f"erased: {line}; {ctx.words} words, {ctx.span()}, read {ctx.hex(blank)} at VCC {vcc}"
    return JobResult((line, *tail), {**facts, **id_facts(definition, result), "words": ctx.words})


def _work(ctx: JobContext) -> JobResult:
    maker = resolve_maker(ctx)
    definition = ctx.definition
    if overwrites(definition):
        return _overwrite(ctx)
    ctx.prove(compile_erase(definition, ctx.rig))  # before the chip is touched at all
    _, facts, lines = save_first(ctx, 0, definition.words - 1)
    line, more = erase_whole(ctx)
    return JobResult((line, *maker, *lines), {**facts, **more, "words": definition.words})


def erase(ctx: JobContext) -> JobResult:
    """Erases the whole chip, proven word by word; UsageMistake for a part that light erases.

    A part that takes any data over any other is written with the erased state, over the range.
    """
    check_erasable(ctx.definition)
    check_maker(ctx)
    check_protect(ctx)
    whole = (ctx.first, ctx.last) == (0, ctx.definition.words - 1)
    method = ctx.definition.erase
    if not whole and method is not None and method.unit == "chip":
        raise UsageMistake(
            f"{ctx.definition.name} erases as a whole: a part of it cannot be erased",
            where=method.where,
            wanted="no --range",
            got=ctx.span(),
            hint="read what is to stay, erase, then burn it again",
        )
    return job(ctx, "erase", _work)
