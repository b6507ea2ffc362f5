"""What each fused op means: its expansion into primitives. Interpreter and proof run these, nothing else.

Branches inside an expansion name labels that start with "."; `assemble`-like users resolve them within the expansion.
`depth` of a branch counts from the loop depth at which the fused op stands (given as `base`).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from pulsewright.wire.ops import Instruction, Label, ins
from pulsewright.wire.tables import OP_ARGS, Fail, Op

Item = Instruction | Label
_WRAP = 65_536
_TARGETED = (Op.BRANCH, Op.EACH_BLOCK, Op.EACH_WORD)
_OPENING = (Op.LOOP, Op.EACH_BLOCK, Op.EACH_WORD)
_CLOSING = (Op.NEXT, Op.NEXT_BLOCK, Op.NEXT_WORD)


def _read_run(a: Mapping[str, Any], base: int) -> list[Item]:
    return [
        ins(Op.EACH_BLOCK, to=".end"),
        ins(Op.EACH_WORD, to=".block"),
        ins(Op.ADDRESS_WORD),
        ins(Op.WAIT, ticks=a["wait"]),
        ins(Op.SAMPLE),
        ins(Op.REPORT),
        ins(Op.NEXT_WORD),
        Label(".block"),
        ins(Op.NEXT_BLOCK),
        Label(".end"),
    ]


def _scan(a: Mapping[str, Any], base: int) -> list[Item]:
    outer, inner = (a["count"] // _WRAP, 0) if a["count"] > _WRAP else (1, a["count"] % _WRAP)
    return [
        ins(Op.ADDRESS, at=a["first"]),
        ins(Op.LOOP, count=outer),
        ins(Op.LOOP, count=inner),
        ins(Op.WAIT, ticks=a["wait"]),
        ins(Op.SAMPLE),
        ins(Op.COMPARE, word=a["word"], mask=0xFFFF),
        ins(Op.BRANCH, when=0, depth=base, to=".out"),
        ins(Op.STEP, by=1),
        ins(Op.NEXT),
        ins(Op.NEXT),
        Label(".out"),
    ]


def _raise(a: Mapping[str, Any]) -> list[Item]:
    return [ins(Op.SWITCHES, on=a["switches"])] if a["switches"] else []


def _lower(a: Mapping[str, Any]) -> list[Item]:
    return [ins(Op.SWITCHES, on=0), ins(Op.WAIT, ticks=a["fall"])] if a["switches"] else []


def _over_program(a: Mapping[str, Any]) -> list[Item]:
    if not a["factor"]:
        return []
    return [
        ins(Op.DRIVE_WORD),
        *_raise(a),
        ins(Op.WAIT, ticks=a["setup"]),
        ins(Op.OVER_PULSE, line=a["line"], unit=a["width"], factor=a["factor"], max=a["over_max"]),
        ins(Op.WAIT, ticks=a["hold"]),
        *_lower(a),
        ins(Op.RELEASE),
        ins(Op.WAIT, ticks=a["recover"]),
    ]


def _pulse_verify(a: Mapping[str, Any], base: int) -> list[Item]:
    return [
        ins(Op.EACH_BLOCK, to=".end"),
        ins(Op.EACH_WORD, to=".block"),
        ins(Op.LOOP, count=a["tries"]),
        ins(Op.ADDRESS_WORD),
        ins(Op.DRIVE_WORD),
        *_raise(a),
        ins(Op.WAIT, ticks=a["setup"]),
        ins(Op.PULSE, line=a["line"], width=a["width"], max=a["max"]),
        ins(Op.WAIT, ticks=a["hold"]),
        *_lower(a),
        ins(Op.RELEASE),
        ins(Op.WAIT, ticks=a["recover"]),
        ins(Op.LINES, lines=a["enable"]),
        ins(Op.WAIT, ticks=a["access"]),
        ins(Op.SAMPLE),
        ins(Op.LINES, lines=a["disable"]),
        ins(Op.WAIT, ticks=a["float"]),
        ins(Op.COMPARE_WORD),
        ins(Op.BRANCH, when=1, depth=base + 2, to=".good"),
        ins(Op.NEXT),
        ins(Op.FAIL, why=Fail.PROGRAM),
        Label(".good"),
        *_over_program(a),
        ins(Op.NEXT_WORD),
        Label(".block"),
        ins(Op.NEXT_BLOCK),
        Label(".end"),
    ]


def _strobe(a: Mapping[str, Any]) -> list[Item]:
    return [
        ins(Op.WAIT, ticks=a["setup"]),
        ins(Op.PULSE, line=a["strobe"], width=a["width"], max=a["width"]),
        ins(Op.WAIT, ticks=a["hold"]),
    ]


def _bus_writes(a: Mapping[str, Any], base: int) -> list[Item]:
    items: list[Item] = []
    for at, word in a["cycles"]:
        items += [ins(Op.ADDRESS, at=at), ins(Op.DRIVE, word=word), *_strobe(a)]
    return [*items, ins(Op.RELEASE)]


def _write_poll(a: Mapping[str, Any], base: int) -> list[Item]:
    return [
        ins(Op.ADDRESS_WORD),
        ins(Op.DRIVE_WORD),
        *_strobe(a),
        ins(Op.RELEASE),
        ins(Op.POLL, **{name: a[name] for name, _ in OP_ARGS[Op.POLL]}),
        ins(Op.BRANCH, when=1, depth=base, to=".done"),
        ins(Op.FAIL, why=Fail.POLL),
        Label(".done"),
    ]


def _page_load(a: Mapping[str, Any], base: int) -> list[Item]:
    return [
        ins(Op.EACH_WORD, to=".end"),
        ins(Op.ADDRESS_WORD),
        ins(Op.DRIVE_WORD),
        *_strobe(a),
        ins(Op.NEXT_WORD),
        Label(".end"),
        ins(Op.RELEASE),
    ]


EXPANSIONS: dict[Op, Callable[[Mapping[str, Any], int], list[Item]]] = {
    Op.READ_RUN: _read_run,
    Op.SCAN: _scan,
    Op.PULSE_VERIFY: _pulse_verify,
    Op.BUS_WRITES: _bus_writes,
    Op.WRITE_POLL: _write_poll,
    Op.PAGE_LOAD: _page_load,
}


def expand(instruction: Instruction, base: int) -> list[Item]:
    """The primitives of a fused op standing at loop depth `base`; a primitive expands to itself."""
    make = EXPANSIONS.get(instruction.op)
    return [instruction] if make is None else make(instruction.args, base)



def flatten(code: tuple[tuple[int, Instruction], ...]) -> tuple[list[tuple[int, Instruction]], dict[int, int]]:
    """A program with every fused op replaced by its primitives, as one flat list with targets as list indexes.

    Returns (list of (byte offset of the op it came from, instruction whose `to` is an index into this list),
    byte offset -> index). `to` = len(list) stands for "runs past the end". KeyError for a branch into no op.
    """
    flat: list[tuple[int, Instruction]] = []
    index_of: dict[int, int] = {}
    pending: list[tuple[int, int | str, dict[str, int]]] = []
    depth = 0
    for offset, instruction in code:
        index_of[offset] = len(flat)
        labels: dict[str, int] = {}
        for item in expand(instruction, depth):
            if isinstance(item, Label):
                labels[item.name] = len(flat)
                continue
            if item.op in _TARGETED:
                pending.append((len(flat), item.args["to"], labels))
            flat.append((offset, item))
        if instruction.op in _OPENING:
            depth += 1
        elif instruction.op in _CLOSING:
            depth -= 1
    for place, to, labels in pending:
        offset, item = flat[place]
        index = labels[to] if isinstance(to, str) else index_of[to]
        flat[place] = (offset, Instruction(item.op, {**item.args, "to": index}))
    return flat, index_of
