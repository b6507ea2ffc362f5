"""Compiled sequences bent in one place: for the proof's tests on parts that are burnt otherwise than the 27e512."""

from __future__ import annotations

import zlib
from collections.abc import Callable
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from pulsewright.rig.file import load_rig
from pulsewright.sequence import compile as compiler
from pulsewright.sequence.proof import prove
from pulsewright.sequence.types import Finding, Sequence
from pulsewright.wire.expand import expand
from pulsewright.wire.ops import Instruction, Label, assemble, decode_program
from pulsewright.wire.tables import Op
from tests.sequence.mutate import labelled
from tests.sequence.proof_programs import Items, before, changed, place, without

RIG = load_rig()
PARTS = Path(__file__).parents[1] / "parts"
Bend = Callable[[Items], Items]

_KINDS: dict[str, Callable[[Definition], Sequence]] = {
    "identify": lambda part: compiler.compile_identify(part, RIG),
    "read": lambda part: compiler.compile_read(part, RIG, 0, part.words - 1),
    "blank": lambda part: compiler.compile_blank(part, RIG, 0, part.words - 1),
    "burn": lambda part: compiler.compile_burn(part, RIG, 0, part.words - 1, ""),
    "burn protected": lambda part: compiler.compile_burn(part, RIG, 0, part.words - 1, "", protected=True),
    "erase": lambda part: compiler.compile_erase(part, RIG),
    "protect on": lambda part: compiler.compile_protect(part, RIG, on=True),
    "protect off": lambda part: compiler.compile_protect(part, RIG, on=False),
}


@cache
def part_of(name: str, maker: str = "") -> Definition:
    """A definition, shipped or of the tests, for a maker's row."""
    here = PARTS / f"{name}.toml"
    return load(str(here) if here.exists() else name, maker=maker or None)


def kinds_of(part: Definition) -> list[str]:
    """The sequences that a part has."""
    has = {
        "burn": part.program,
        "burn protected": part.protected,
        "erase": part.erase,
        "protect on": part.protect,
        "protect off": part.protect,
    }
    return [kind for kind in _KINDS if has.get(kind, part) is not None]


def compiled(part: Definition, kind: str) -> Sequence:
    """A sequence of a part."""
    return _KINDS[kind](part)


def bent(
    part: Definition,
    kind: str,
    bend: Bend = lambda items: items,
    *,
    judged_by: Definition | None = None,
    header: dict[str, Any] | None = None,
    **permit: Any,
) -> tuple[Finding, ...]:
    """What the proof finds in a compiled sequence after a change of its ops, its header or its permit."""
    sequence = compiled(part, kind)
    program = decode_program(sequence.code)
    code, _ = assemble(replace(program.header, **(header or {})), bend(labelled(program)))
    changes = {"crc32": zlib.crc32(code), **permit}
    return prove(code, replace(sequence.permit, **changes), judged_by or part, RIG).findings


def opened(op: Op, turn: int = 0) -> Bend:
    """A fused op as its primitives, its labels its own."""
    base = {Op.PAGE_LOAD: 1}.get(op, 0)  # the loops it stands in

    def bend(items: Items) -> Items:
        at = place(items, op, turn)
        fused = items[at]
        assert isinstance(fused, Instruction)
        return [*items[:at], *expand(fused, base), *items[at + 1 :]]

    return bend


def both(*bends: Bend) -> Bend:
    """One change after another."""

    def bend(items: Items) -> Items:
        for one in bends:
            items = one(items)
        return items

    return bend


def drop(op: Op, turn: int = 0) -> Bend:
    """Leaves an op out."""
    return lambda items: without(items, op, turn)


def put(op: Op, turn: int, *new: Instruction | Label) -> Bend:
    """Puts ops before one."""
    return lambda items: before(items, op, turn, *new)


def put_after(op: Op, turn: int, *new: Instruction | Label) -> Bend:
    """Puts ops behind one."""

    def bend(items: Items) -> Items:
        at = place(items, op, turn) + 1
        return [*items[:at], *new, *items[at:]]

    return bend


def set_(op: Op, turn: int = 0, **args: Any) -> Bend:
    """Changes arguments of an op."""
    return lambda items: changed(items, op, turn, **args)


def wait_after(op: Op, turn: int, ticks: int) -> Bend:
    """Changes the first wait behind an op."""

    def bend(items: Items) -> Items:
        at = next(
            index for index in range(place(items, op, turn), len(items)) if getattr(items[index], "op", None) is Op.WAIT
        )
        return [*items[:at], Instruction(Op.WAIT, {"ticks": ticks}), *items[at + 1 :]]

    return bend


def told(findings: tuple[Finding, ...], rule: str, text: str) -> bool:
    """Whether a rule found something that says so."""
    return any(one.rule == rule and text in str(one) for one in findings)
