"""Read: the range in any number of passes, and which bytes the passes disagree about."""

from __future__ import annotations

from pulsewright.chip.model import Definition
from pulsewright.errors import Difference
from pulsewright.image.compare import compare
from pulsewright.jobs.context import JobContext, JobResult, job
from pulsewright.jobs.identify import id_facts
from pulsewright.jobs.margins import verdicts
from pulsewright.jobs.plan import BLOCK_WORDS, alike_data_lines, joined_lines, unchanging_lines, verify_steps
from pulsewright.jobs.record import crc_text
from pulsewright.link.blocks import requests
from pulsewright.link.results import RunResult
from pulsewright.rig.model import RailStep
from pulsewright.sequence.compile import compile_read
from pulsewright.units import show_address, show_count

LISTED = 16


def read_once(
    ctx: JobContext, title: str, first: int, last: int, *, mode: str = "read", rail_step: RailStep | None = None
) -> RunResult:
    """One pass over a range."""
    ctx.progress.begin(title, last - first + 1)
    sequence = compile_read(ctx.definition, ctx.rig, first, last, mode=mode, rail_step=rail_step)
    return ctx.run(sequence, requests(first, last, BLOCK_WORDS))


def disagreement(passes: list[bytes], first: int, words: int) -> list[str]:
    """The bytes that the passes disagree about, as lines of text, at most LISTED and then how many more."""
    places = [at for at, values in enumerate(zip(*passes, strict=True)) if len(set(values)) > 1]
    lines = [
        f"{show_address(first + at, words)}: " + ", ".join(f"{data[at]:02X}" for data in passes)
        for at in places[:LISTED]
    ]
    if len(places) > LISTED:
        lines.append(f"and {len(places) - LISTED} more")
    return lines


def read_agreed(ctx: JobContext, why: str, passes: int, first: int, last: int) -> RunResult:
    """A range read in so many passes that all agree; Difference lists the bytes where they do not."""
    results = [
        read_once(ctx, f"{why}, pass {number + 1} of {passes}" if passes > 1 else why, first, last)
        for number in range(passes)
    ]
    lines = disagreement([result.data for result in results], first, ctx.definition.words)
    if lines:
        raise Difference(
            f"{passes} passes do not agree",
            wanted="the same bytes in every pass",
            facts=lines,
            did="VCC off; nothing was written",
            hint="clean the contacts and read again; a chip whose bits fade reads differently at other VCC steps",
        )
    return results[-1]


def _read_margins(ctx: JobContext, data: bytes) -> list[str]:
    """The range read again at each margin of VCC; Difference lists the bytes that change, and what that says."""
    lines = []
    for step in verify_steps(ctx.definition, ctx.rig):
        title = f"read at {step.text}"
        other = read_once(ctx, title, ctx.first, ctx.last, mode=step.mode, rail_step=step.rail_step).data
        if other != data:
            comparison = compare(bytes(ctx.first) + data, bytes(ctx.first) + other)
            raise Difference(
                f"{show_count(comparison.differing, 'byte')} read otherwise at {step.text}",
                wanted="the same bytes at every VCC inside the window",
                facts=[*comparison.lines()[3:], *verdicts(comparison)],
                did="VCC off; nothing was written",
                hint="a chip that changes with VCC is fading or under-erased: save it again and again, then compare",
            )
        lines.append(f"the same at {step.text}")
    return lines


def alike_text(definition: Definition, pairs: list[tuple[int, int]]) -> list[str]:
    """Data lines that always read alike, as lines of text."""
    pins = definition.pins["D"]
    return [
        f"D{a} (pin {pins[a]}) and D{b} (pin {pins[b]}) read alike in every word: do the pins touch?" for a, b in pairs
    ]


def _work(ctx: JobContext) -> JobResult:
    definition = ctx.definition
    result = read_agreed(ctx, "read", ctx.options.passes, ctx.first, ctx.last)
    data = result.data
    margins = _read_margins(ctx, data) if ctx.options.margins else []
    step = definition.supplies["VCC.read"].typ_mv
    lines = [
        f"{len(data)} words read, {ctx.span()}, {ctx.options.passes} "
        f"{'passes, all agree' if ctx.options.passes > 1 else 'pass'}; CRC-32 {crc_text(data)}"
    ]
    lines += margins
    blank = data.count(definition.blank)
    lines.append(f"{blank} of them are {ctx.hex(definition.blank)}, the erased state")
    still = unchanging_lines(data) if ctx.words == definition.words else []
    if still:
        names = ", ".join(f"A{bit} (pin {definition.pins['A'][bit]})" for bit in still)
        lines.append(f"the data never changes with {names}: open pin or repeated image")
    pairs = joined_lines(data) if ctx.words == definition.words else []
    for pair in pairs:
        pins = " and ".join(f"A{bit} (pin {definition.pins['A'][bit]})" for bit in pair)
        lines.append(f"{pins} act as one: do the pins touch?")
    alike = alike_data_lines(data, definition.width)
    lines += alike_text(definition, alike)
    facts: dict[str, object] = {
        **id_facts(definition, result),
        "words": len(data),
        "passes": ctx.options.passes,
        "crc32": crc_text(data),
        "blank_words": blank,
        "unchanging_lines": [f"A{bit}" for bit in still],
        "alike_data_lines": [[f"D{bit}" for bit in pair] for pair in alike],
        "joined_lines": [[f"A{bit}" for bit in pair] for pair in pairs],
        "vcc_mv": step,
        "margins": margins,
    }
    return JobResult(tuple(lines), facts, data)


def read(ctx: JobContext) -> JobResult:
    """The range's words in `data`; Difference if the passes disagree."""
    return job(ctx, "read", _work)
