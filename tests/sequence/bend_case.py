"""A compiled sequence on its way to be bent: ops found, dropped, put in and changed at places that are drawn."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, TypeVar

from hypothesis import strategies as st

from pulsewright.chip.model import Definition
from pulsewright.sequence.types import Sequence
from pulsewright.wire.ops import Instruction
from pulsewright.wire.tables import Op
from tests.sequence.proof_bends import opened
from tests.sequence.proof_programs import Items, before, changed, place, without

T = TypeVar("T")


class NoPlace(Exception):
    """The sequence has no op that this bend is about."""


@dataclass
class Case:
    """A sequence to bend, and what came of it."""

    part: Definition
    sequence: Sequence
    items: Items
    data: st.DataObject
    permit: dict[str, Any] = field(default_factory=dict)

    def draw(self, strategy: st.SearchStrategy[T]) -> T:
        """Something of this case."""
        return self.data.draw(strategy)

    def number(self, low: int, high: int) -> int:
        """A number of this case."""
        return self.draw(st.integers(low, high))

    def one_of(self, found: list[int]) -> int:
        """One of these places; NoPlace where there is none."""
        if not found:
            raise NoPlace
        return self.draw(st.sampled_from(found))

    def where(self, op: Op, **args: Any) -> list[int]:
        """Turns of an op that has these arguments."""
        ops = [one for one in self.items if isinstance(one, Instruction) and one.op is op]
        return [turn for turn, one in enumerate(ops) if all(one.args[name] == value for name, value in args.items())]

    def args(self, op: Op, turn: int) -> dict[str, Any]:
        """An op's arguments."""
        one = self.items[place(self.items, op, turn)]
        assert isinstance(one, Instruction)
        return dict(one.args)

    def drop(self, op: Op, turn: int) -> None:
        """An op left out."""
        self.items = without(self.items, op, turn)

    def set(self, op: Op, turn: int, **args: Any) -> None:
        """Other arguments of an op."""
        self.items = changed(self.items, op, turn, **args)

    def put(self, op: Op, turn: int, *new: Instruction) -> None:
        """Ops before one."""
        self.items = before(self.items, op, turn, *new)

    def behind(self, op: Op, turn: int, *new: Instruction) -> None:
        """Ops behind one."""
        at = place(self.items, op, turn) + 1
        self.items = [*self.items[:at], *new, *self.items[at:]]

    def raises(self) -> list[int]:
        """Turns of the switch ops that close something."""
        return [turn for turn in self.where(Op.SWITCHES) if self.args(Op.SWITCHES, turn)["on"]]

    def opened(self) -> None:
        """The fused ops that pulse or load as their primitives."""
        for op in (Op.PULSE_VERIFY, Op.PAGE_LOAD):
            if self.where(op):
                self.items = opened(op)(self.items)
