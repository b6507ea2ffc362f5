"""Read: the range in any number of passes, and which bytes the passes disagree about."""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.chip.model import Definition
from pulsewright.errors import Difference
from pulsewright.jobs.context import JobContext, JobResult, job
from pulsewright.jobs.identify import id_facts
from pulsewright.jobs.maker import resolve_maker
from pulsewright.jobs.margins import Look, as_facts, told, unsteady
from pulsewright.jobs.plan import (
    BLOCK_WORDS,
    VerifyStep,
    alike_data_lines,
    joined_lines,
    unchanging_lines,
    vcc_of,
    verify_steps,
)
from pulsewright.jobs.record import crc_text
from pulsewright.link.blocks import requests
from pulsewright.link.results import RunResult
from pulsewright.rig.model import RailStep
from pulsewright.sequence.compile import compile_read
from pulsewright.sequence.levels import choose_vcc
from pulsewright.units import show_count


def read_once(
    ctx: JobContext, title: str, first: int, last: int, *, mode: str = "read", rail_step: RailStep | None = None
) -> RunResult:
    """One pass over a range."""
    ctx.progress.begin(title, last - first + 1)
    sequence = compile_read(ctx.definition, ctx.rig, first, last, mode=mode, rail_step=rail_step)
    return ctx.run(sequence, requests(first, last, BLOCK_WORDS))


def _passes(ctx: JobContext, why: str, passes: int, first: int, last: int, step: VerifyStep | None) -> list[RunResult]:
    """A range read so often at one VCC."""
    results = []
    for number in range(passes):
        title = f"{why}, pass {number + 1} of {passes}" if passes > 1 else why
        if step is None:
            results.append(read_once(ctx, title, first, last))
        else:
            results.append(read_once(ctx, title, first, last, mode=step.mode, rail_step=step.rail_step))
    return results


def usual_mv(ctx: JobContext) -> int:
    """The VCC at which a plain read happens on this rig."""
    return choose_vcc(ctx.definition, ctx.rig, ctx.definition.supplies["VCC.read"]).mv


def read_agreed(ctx: JobContext, why: str, passes: int, first: int, last: int) -> RunResult:
    """A range read in so many passes that all agree; Difference lists the bytes where they do not."""
    results = _passes(ctx, why, passes, first, last, None)
    _all_agree(ctx, [Look(usual_mv(ctx), tuple(result.data for result in results))], first)
    return results[-1]


def _all_agree(ctx: JobContext, looks: list[Look], first: int) -> None:
    """Difference with every byte that is not the same in every pass at every VCC."""
    found = unsteady(looks, first)
    if not found:
        return
    passes = len(looks[0].passes)
    where = "at every VCC" if len(looks) > 1 else "in every pass"
    what = f"{passes} passes do not agree" if len(looks) == 1 else "the chip does not read the same at every VCC"
    if ctx.record is not None:
        ctx.record.content.update(as_facts(found))
    steady = all(one.kind != "unsteady" for one in found)
    raise Difference(
        f"{what}: {show_count(len(found), 'byte')}",
        wanted=f"the same bytes {where}",
        facts=told(found, ctx.definition.words),
        did="VCC off; no file was written",
        hint="bytes that turn with VCC: read only the VCC at which they are right (--range helps to find them)"
        if steady
        else "clean the contacts, seat the chip again, and read again",
        more=as_facts(found),
    )


def _read_margins(ctx: JobContext, data: bytes) -> list[str]:
    """The range read again at each margin of VCC; Difference lists the bytes that change, and what that says."""
    usual = Look(usual_mv(ctx), (data,))
    looks, lines = [usual], []
    for step in verify_steps(ctx.definition, ctx.rig):
        results = _passes(ctx, f"read at {step.text}", ctx.options.passes, ctx.first, ctx.last, step)
        looks.append(Look(vcc_of(ctx.definition, ctx.rig, step), tuple(result.data for result in results)))
        lines.append(f"the same at {step.text}")
    _all_agree(ctx, looks, ctx.first)
    return lines


@dataclass(frozen=True)
class Doubts:
    """What the data of a read says about the contacts: address bits and pairs, pairs of data bits."""

    still: tuple[int, ...]
    joined: tuple[tuple[int, int], ...]
    alike: tuple[tuple[int, int], ...]

    def text(self, definition: Definition) -> list[str]:
        """As lines of text, each pin named."""
        a, d = definition.pins["A"], definition.pins["D"]
        lines = []
        if self.still:
            names = ", ".join(f"A{bit} (pin {a[bit]})" for bit in self.still)
            lines.append(f"the data never changes with {names}: open pin or repeated image")
        lines += [f"A{x} (pin {a[x]}) and A{y} (pin {a[y]}) act as one: do the pins touch?" for x, y in self.joined]
        return lines + [
            f"D{x} (pin {d[x]}) and D{y} (pin {d[y]}) read alike in every word: do the pins touch?"
            for x, y in self.alike
        ]

    def facts(self) -> dict[str, object]:
        """As JSON values."""
        return {
            "unchanging_lines": [f"A{bit}" for bit in self.still],
            "joined_lines": [[f"A{bit}" for bit in pair] for pair in self.joined],
            "alike_data_lines": [[f"D{bit}" for bit in pair] for pair in self.alike],
        }


def doubts_of(definition: Definition, data: bytes, *, whole: bool) -> Doubts:
    """The doubts about contacts that data gives; of address lines only the whole chip tells."""
    still = tuple(unchanging_lines(data)) if whole else ()
    joined = tuple(joined_lines(data)) if whole else ()
    return Doubts(still, joined, tuple(alike_data_lines(data, definition.width)))


def _work(ctx: JobContext) -> JobResult:
    maker = resolve_maker(ctx) if ctx.options.margins else ()  # a maker's own margins
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
    doubts = doubts_of(definition, data, whole=ctx.words == definition.words)
    lines += doubts.text(definition)
    facts: dict[str, object] = {
        **id_facts(definition, result),
        "words": len(data),
        "passes": ctx.options.passes,
        "crc32": crc_text(data),
        "blank_words": blank,
        **doubts.facts(),
        "vcc_mv": step,
        "margins": margins,
    }
    return JobResult((*lines, *maker), facts, data)


def read(ctx: JobContext) -> JobResult:
    """The range's words in `data`; Difference if the passes disagree."""
    return job(ctx, "read", _work)
