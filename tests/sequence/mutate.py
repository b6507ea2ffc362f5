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


def mutants(code: bytes) -> Iterator[Mutant]:
    """Every single-op mutant of a program, the equal ones (a swap of equal ops) left out."""
    program = decode_program(code)
    items = labelled(program)
    places = [index for index, item in enumerate(items) if isinstance(item, Instruction)]
    for number, index in enumerate(places):
        offset, instruction = program.code[number]
        name = str(instruction)
        deleted = items[:index] + items[index + 1 :]
        doubled = [*items[: index + 1], items[index], *items[index + 1 :]]
        yield Mutant("deleted", offset, name, assemble(program.header, deleted)[0])
        yield Mutant("doubled", offset, name, assemble(program.header, doubled)[0])
        if number + 1 < len(places):
            other = places[number + 1]
            swapped = list(items)
            swapped[index], swapped[other] = items[other], items[index]
            mutant = assemble(program.header, swapped)[0]
            if mutant != code:
                yield Mutant("swapped", offset, name, mutant)
