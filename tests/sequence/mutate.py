"""Mutants of an encoded program: each op deleted, doubled, or swapped with its neighbour, branches kept in place."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from pulsewright.wire.ops import Instruction, Label, Program, assemble, decode_program
from pulsewright.wire.tables import Op

_TARGETED = (Op.BRANCH, Op.EACH_BLOCK, Op.EACH_WORD)
Item = Instruction | Label


@dataclass(frozen=True)
class Mutant:
    """What was done to which op, and the program that comes of it."""

    kind: str
    offset: int
    op: str
    code: bytes

    def __str__(self) -> str:
        return f"{self.kind} {self.op} at {self.offset}"


def labelled(program: Program) -> list[Item]:
    """A decoded program with labels in the place of offsets."""
    targets = {i.args["to"] for _, i in program.code if i.op in _TARGETED}
    items: list[Item] = []
    for offset, instruction in program.code:
        if offset in targets:
            items.append(Label(str(offset)))
        if instruction.op in _TARGETED:
            instruction = Instruction(instruction.op, {**instruction.args, "to": str(instruction.args["to"])})
        items.append(instruction)
    return items


KINDS = ("deleted", "doubled", "swapped")


def places(items: list[Item]) -> list[int]:
    """Indexes of the ops among labels."""
    return [index for index, item in enumerate(items) if isinstance(item, Instruction)]


def mutant(program: Program, number: int, kind: str) -> Mutant | None:
    """One mutant of op `number` of a program; None for a swap behind the last op."""
    items = labelled(program)
    where = places(items)
    index = where[number]
    offset, instruction = program.code[number]
    if kind == "deleted":
        changed = items[:index] + items[index + 1 :]
    elif kind == "doubled":
        changed = [*items[: index + 1], items[index], *items[index + 1 :]]
    elif number + 1 < len(where):
        other = where[number + 1]
        changed = list(items)
        changed[index], changed[other] = items[other], items[index]
    else:
        return None
    return Mutant(kind, offset, str(instruction), assemble(program.header, changed)[0])


def rewaited(program: Program, number: int, ticks: int) -> Mutant:
    """A program with another time in one of its waits, counted from 0; it has one."""
    items = labelled(program)
    waits = [index for index in places(items) if getattr(items[index], "op", None) is Op.WAIT]
    index = waits[number % len(waits)]
    offset, instruction = program.code[places(items).index(index)]
    items[index] = Instruction(Op.WAIT, {"ticks": ticks})
    return Mutant(f"waits {ticks}", offset, str(instruction), assemble(program.header, items)[0])


def mutants(code: bytes, *, every: int = 1, phase: int = 0) -> Iterator[Mutant]:
    """Every single-op mutant of a program, the equal ones (a swap of equal ops) left out; or one of `every` so many."""
    program = decode_program(code)
    turn = phase
    for number in range(len(program.code)):
        for kind in KINDS:
            one = mutant(program, number, kind)
            if one is None or one.code == code:
                continue
            turn += 1
            if turn % every == 0:
                yield one
