"""Read: the range in any number of passes, and which bytes the passes disagree about."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from pulsewright.chip.model import Definition
from pulsewright.errors import Difference, FileMistake
from pulsewright.jobs.context import JobContext, JobResult, job
from pulsewright.jobs.identify import id_facts
from pulsewright.jobs.maker import resolve_maker
from pulsewright.jobs.margins import Look, Unsteady, as_facts, by_vcc, told, unsteady, voted, what_to_try
from pulsewright.jobs.plan import (
    BLOCK_WORDS,
    VerifyStep,
    alike_data_lines,
    joined_lines,
    shortfalls,
    unchanging_lines,
    vcc_of,
    verify_steps,
)
from pulsewright.jobs.record import crc_text, save_dump
from pulsewright.link.blocks import requests
from pulsewright.link.results import RunResult
from pulsewright.rig.model import RailStep
from pulsewright.sequence.compile import compile_read
from pulsewright.sequence.levels import choose_vcc
from pulsewright.units import show_count, show_mv

KEPT_READINGS = 4  # of one VCC that do not agree; the record lists the bytes
NO_FILE = "VCC off; the file that was asked for is not written"


def read_once(
    ctx: JobContext, title: str, first: int, last: int, *, mode: str = "read", rail_step: RailStep | None = None
) -> RunResult:
    """One pass over a range."""
    ctx.progress.begin(title, last - first + 1)
    sequence = compile_read(ctx.definition, ctx.rig, first, last, mode=mode, rail_step=rail_step)
    return ctx.run(sequence, requests(first, last, BLOCK_WORDS))


def _look(
    ctx: JobContext, why: str, passes: int, first: int, last: int, step: VerifyStep | None
) -> tuple[Look, RunResult]:
    """A range read so often at one VCC, and the last result; readings that are equal are kept once."""
    known: dict[bytes, bytes] = {}

    def once(number: int) -> RunResult:
        title = f"{why}, pass {number} of {passes}" if passes > 1 else why
        if step is None:
            return read_once(ctx, title, first, last)
        return read_once(ctx, title, first, last, mode=step.mode, rail_step=step.rail_step)

    result = once(1)
    readings = [known.setdefault(result.data, result.data)]
    for number in range(2, passes + 1):
        result = once(number)
        readings.append(known.setdefault(result.data, result.data))
    vcc_mv = usual_mv(ctx) if step is None else vcc_of(ctx.definition, ctx.rig, step)
    return Look(vcc_mv, tuple(readings)), result


def usual_mv(ctx: JobContext) -> int:
    """The VCC at which a plain read happens on this rig."""
    return choose_vcc(ctx.definition, ctx.rig, ctx.definition.supplies["VCC.read"]).mv


def read_agreed(ctx: JobContext, why: str, passes: int, first: int, last: int) -> RunResult:
    """A range read in so many passes that all agree; Difference lists the bytes where they do not."""
    look, result = _look(ctx, why, passes, first, last, None)
    _all_agree(ctx, [look], first, "VCC off; the chip is as it was")
    return result


def _all_agree(ctx: JobContext, looks: list[Look], first: int, did: str) -> None:
    """Difference with every byte that is not the same in every pass at every VCC; what was read is kept."""
    found = unsteady(looks, first)
    if not found:
        return
    passes = len(looks[0].passes)
    turns = any(one.kind != "unsteady" for one in found)
    what = "the chip does not read the same at every VCC" if turns else f"{passes} passes do not agree"
    kept, lines = _kept(ctx, looks, first, found)
    raise Difference(
        f"{what}: {show_count(len(found), 'byte')}",
        wanted=f"the same bytes {'at every VCC' if turns else 'in every pass'}",
        facts=[*told(found, ctx.definition.words), *lines],
        did=did,
        hint=what_to_try(found),
        more={**as_facts(found), "readings": kept},
    )


def _kept(
    ctx: JobContext, looks: list[Look], first: int, found: Sequence[Unsteady]
) -> tuple[list[dict[str, object]], list[str]]:
    """What was read is never lost: a file for each reading, at each VCC, and for what may be voted; facts, lines."""
    readings: list[tuple[int, str, bytes]] = []
    for look in by_vcc(looks):
        distinct = list(dict.fromkeys(look.passes))
        readings += [
            (look.vcc_mv, f"pass {look.passes.index(data) + 1} of {len(look.passes)}", data)
            for data in distinct[:KEPT_READINGS]
        ]
        vote = voted(look.passes) if len(distinct) > 1 and all(one.kind == "unsteady" for one in found) else None
        if vote is not None and vote not in distinct[:KEPT_READINGS]:
            readings.append((look.vcc_mv, "each byte as most passes read it", vote))
    facts: list[dict[str, object]] = []
    lines: list[str] = []
    for vcc_mv, what, data in readings:
        try:
            path = str(save_dump(ctx.definition, data, first, f"{vcc_mv}mV"))
        except FileMistake as mistake:
            return facts, [*lines, f"a reading could not be kept: {mistake.what}"]
        facts.append({"vcc_mv": vcc_mv, "what": what, "crc32": crc_text(data), "file": path})
        lines.append(f"read at {show_mv(vcc_mv)}, {what}: kept in {path}")
    return facts, lines


def _margin_steps(ctx: JobContext) -> tuple[list[VerifyStep], list[str]]:
    """The margins a read may go to, and lines on those it cannot: the definition's own, else the rig's in VCC.read.

    Where the definition's own are all at the usual VCC, which tells no more than one pass more, the rig's as well. A
    pass that raises a level is no read.
    """
    definition, rig, usual = ctx.definition, ctx.rig, usual_mv(ctx)
    lines = [f"not read: {reason}" for reason in shortfalls(definition, rig)]
    steps: list[VerifyStep] = []
    for step in (*verify_steps(definition, rig), *verify_steps(replace(definition, verify=()), rig)):
        if step.rail_step is not None and steps:
            break
        sequence = compile_read(definition, rig, ctx.first, ctx.last, mode=step.mode, rail_step=step.rail_step)
        if sequence.permit.raised:
            lines.append(f"not read: {step.text}, which raises a level")
        elif vcc_of(definition, rig, step) != usual:
            steps.append(step)
    if not steps:
        window = definition.supplies["VCC.read"]
        lines.append(
            f"no margin was read: of {rig.name} no VCC step besides {show_mv(usual)} lies with its error within "
            f"VCC.read, {show_mv(window.min_mv)} to {show_mv(window.max_mv)}"
        )
    return steps, lines


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


def doubts_of(definition: Definition, data: bytes, first: int = 0) -> Doubts:
    """The doubts about contacts that data from `first` on gives; of joined address lines only the whole chip tells."""
    whole = len(data) == definition.words
    joined = tuple(joined_lines(data)) if whole else ()
    still = tuple(unchanging_lines(data, first, definition.words))
    return Doubts(still, joined, tuple(alike_data_lines(data, definition.width)))


def _work(ctx: JobContext) -> JobResult:
    maker = resolve_maker(ctx) if ctx.options.margins else ()  # a maker's own margins
    definition, passes = ctx.definition, ctx.options.passes
    steps, margins = _margin_steps(ctx) if ctx.options.margins else ([], [])
    usual, result = _look(ctx, "read", passes, ctx.first, ctx.last, None)
    data = result.data
    looks = [usual, *(_look(ctx, f"read at {step.text}", passes, ctx.first, ctx.last, step)[0] for step in steps)]
    _all_agree(ctx, looks, ctx.first, NO_FILE)
    margins = [*(f"the same at {step.text}" for step in steps), *margins]
    lines = [
        f"{len(data)} words read, {ctx.span()}, {passes} "
        f"{'passes, all agree' if passes > 1 else 'pass'}; CRC-32 {crc_text(data)}"
    ]
    blank = data.count(definition.blank)
    doubts = doubts_of(definition, data, ctx.first)
    lines += [f"{blank} of them are {ctx.hex(definition.blank)}, the erased state", *margins, *doubts.text(definition)]
    facts: dict[str, object] = {
        **id_facts(definition, result),
        "words": len(data),
        "passes": passes,
        "crc32": crc_text(data),
        "blank_words": blank,
        **doubts.facts(),
        "vcc_mv": usual.vcc_mv,
        "margins": margins,
        "margins_vcc_mv": [look.vcc_mv for look in looks[1:]],
    }
    return JobResult((*lines, *maker), facts, data)


def read(ctx: JobContext) -> JobResult:
    """The range's words in `data`; Difference if the passes disagree."""
    return job(ctx, "read", _work)
