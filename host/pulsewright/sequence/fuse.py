"""Puts a fused op where a run of primitives equals its expansion, to the last argument; else leaves them."""

from __future__ import annotations

from typing import Any

from pulsewright.sequence.types import Origin
from pulsewright.wire.expand import expand
from pulsewright.wire.ops import Instruction, Label, ins
from pulsewright.wire.tables import Op

Item = Instruction | Label


def _shape(items: list[Item]) -> list[tuple[Any, ...]]:
    """Items with labels numbered by their first appearance, so that two runs can be compared."""
    numbers: dict[str, int] = {}

    def number(name: str) -> int:
        return numbers.setdefault(name, len(numbers))

    shape: list[tuple[Any, ...]] = []
    for item in items:
        if isinstance(item, Label):
            shape.append(("label", number(item.name)))
            continue
        args = dict(item.args)
        if isinstance(args.get("to"), str):
            args["to"] = number(args["to"])
        shape.append((item.op, tuple(args.items())))
    return shape


def _pulse_verify(items: list[Item]) -> Instruction | None:
    """The fused op with the arguments these primitives would have; None where the kinds of op already differ."""
    ops = [item for item in items if isinstance(item, Instruction)]
    by_op: dict[Op, list[Instruction]] = {}
    for op in ops:
        by_op.setdefault(op.op, []).append(op)
    waits = [op.args["ticks"] for op in by_op.get(Op.WAIT, [])]
    switches = by_op.get(Op.SWITCHES, [])
    lines = by_op.get(Op.LINES, [])
    if len(by_op.get(Op.PULSE, [])) != 1 or len(lines) != 2 or Op.LOOP not in by_op or len(switches) not in (0, 2):
        return None
    if len(waits) != (6 if switches else 5):
        return None
    if not switches:
        waits.insert(2, 0)
    pulse = by_op[Op.PULSE][0]
    return ins(
        Op.PULSE_VERIFY,
        tries=by_op[Op.LOOP][0].args["count"],
        switches=switches[0].args["on"] if switches else 0,
        setup=waits[0],
        line=pulse.args["line"],
        width=pulse.args["width"],
        max=pulse.args["max"],
        hold=waits[1],
        fall=waits[2],
        recover=waits[3],
        enable=lines[0].args["lines"],
        access=waits[4],
        disable=lines[1].args["lines"],
        float=waits[5],
        factor=0,
        over_max=0,
    )


def _end_of_run(items: list[tuple[Item, Origin]], start: int) -> int:
    """Index behind the block loop that begins at `start`, its closing label included."""
    end = start
    while not (isinstance(items[end][0], Instruction) and items[end][0].op is Op.NEXT_BLOCK):  # type: ignore[union-attr]  # narrowed just before
        end += 1
    return end + 2


def fuse(items: list[tuple[Item, Origin]]) -> list[tuple[Item, Origin]]:
    """The same program with each word loop that equals `pulse_verify`'s expansion replaced by that op."""
    fused: list[tuple[Item, Origin]] = []
    at = 0
    while at < len(items):
        item, origin = items[at]
        if isinstance(item, Instruction) and item.op is Op.EACH_BLOCK:
            end = _end_of_run(items, at)
            run = [each for each, _ in items[at:end]]
            candidate = _pulse_verify(run)
            if candidate is not None and _shape(expand(candidate, 0)) == _shape(run):
                fused.append((candidate, origin))
                at = end
                continue
        fused.append((item, origin))
        at += 1
    return fused
