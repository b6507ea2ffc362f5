"""The form of a program: decoded and flattened, its loops nested, its branches forward, no way past its end."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

from pulsewright.wire.expand import flatten
from pulsewright.wire.fields import WireMistake
from pulsewright.wire.ops import Header, Instruction, decode_program
from pulsewright.wire.tables import LOOP_DEPTH, PROGRAM_BYTES, Op

OPENING: Final = {Op.LOOP: Op.NEXT, Op.EACH_BLOCK: Op.NEXT_BLOCK, Op.EACH_WORD: Op.NEXT_WORD}
CLOSING: Final = {close: open_ for open_, close in OPENING.items()}
WRAP: Final = 65_536

Report = Callable[[int, str, str, str], None]  # offset, text, wanted, got


@dataclass(frozen=True)
class Shape:
    """A program as one flat list of primitives; `nests[i]` are the indexes of the loops around i, outermost first."""

    header: Header
    flat: tuple[tuple[int, Instruction], ...]
    nests: tuple[tuple[int, ...], ...]
    original: dict[int, Instruction]  # by byte offset, fused ops as they stand

    def each(self, index: int) -> tuple[Op, ...]:
        """The data loops around an index."""
        ops = (self.flat[start][1].op for start in self.nests[index])
        return tuple(op for op in ops if op is not Op.LOOP)


def _nests(flat: list[tuple[int, Instruction]], report: Report) -> tuple[tuple[int, ...], ...]:
    stack: list[int] = []
    nests: list[tuple[int, ...]] = []
    for index, (offset, instruction) in enumerate(flat):
        if instruction.op in CLOSING:
            if not stack or flat[stack[-1]][1].op is not CLOSING[instruction.op]:
                report(offset, f"{instruction.op.name.lower()} closes no loop of its kind", "", "")
                return ()
        nests.append(tuple(stack))
        if instruction.op in OPENING:
            stack.append(index)
            if len(stack) > LOOP_DEPTH:
                report(offset, "loops too deep", str(LOOP_DEPTH), str(len(stack)))
                return ()
            kind = [flat[at][1].op for at in stack]
            if instruction.op is not Op.LOOP and kind.count(instruction.op) > 1:
                report(offset, f"{instruction.op.name.lower()} inside itself", "", "")
                return ()
        elif instruction.op in CLOSING:
            stack.pop()
    if stack:
        report(flat[stack[-1]][0], "a loop is never closed", "", "")
        return ()
    return tuple(nests)


def _branches(flat: list[tuple[int, Instruction]], nests: tuple[tuple[int, ...], ...], report: Report) -> bool:
    good = True
    for index, (offset, instruction) in enumerate(flat):
        if "to" not in instruction.args:
            continue
        to, own = instruction.args["to"], nests[index]
        if to >= len(flat):
            report(offset, "leads past the end of the program", "", "")
        elif to <= index:
            report(offset, "leads backward: the program need not end", "", "")
        elif own[: len(nests[to])] != nests[to]:
            report(offset, "leads into a loop from outside", "", "")
        elif instruction.op is Op.BRANCH and instruction.args["depth"] != len(nests[to]):
            report(offset, "leaves loops down to another depth than its target's", str(len(nests[to])),
                   str(instruction.args["depth"]))  # fmt: skip
        elif instruction.op is Op.BRANCH and instruction.args["when"] > 2:
            report(offset, "branches on a condition that is not known", "0, 1 or 2", str(instruction.args["when"]))
        else:
            continue
        good = False
    return good


def shape_of(code: bytes, report: Report) -> Shape | None:
    """The program's form; None when it has none that could be walked (every reason is reported)."""
    if len(code) > PROGRAM_BYTES:
        report(0, "longer than the board's program memory", f"{PROGRAM_BYTES} bytes", str(len(code)))
        return None
    try:
        program = decode_program(code)
        flat, _ = flatten(program.code)
    except WireMistake as mistake:
        report(0, f"does not decode: {mistake}", "", "")
        return None
    except KeyError as missing:
        report(0, f"branches to {missing}, where no op begins", "", "")
        return None
    if not flat:
        report(0, "an empty program", "", "")
        return None
    nests = _nests(flat, report)
    if not nests or not _branches(flat, nests, report):
        return None
    return Shape(program.header, tuple(flat), nests, dict(program.code))
