"""The abstract interpretation: every path through a program, loops to a fixed point, each op judged in each state."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Final

from pulsewright.sequence.proof import lines, power, raised, work
from pulsewright.sequence.proof.shape import CLOSING, Shape
from pulsewright.sequence.proof.state import (
    RELEASED,
    STALE,
    START,
    UNSET,
    WORD,
    Clocks,
    Flag,
    State,
    joined,
    waited,
)
from pulsewright.sequence.proof.tables import Tables
from pulsewright.wire.ops import Instruction
from pulsewright.wire.tables import BLOCK_BYTES, Flow, Op, Range

MOST_STATES: Final = 4_000  # far above what any real program has; past it the proof refuses

Result = tuple[State, Clocks]
Rule = Callable[[Tables, State, Clocks, Instruction], Result]


def _wait(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    return state, waited(clocks, ins.args["ticks"])


RULES: Final[dict[Op, Rule]] = {
    Op.HIGH: power.high,
    Op.LINES: lines.lines,
    Op.ADDRESS: lines.address,
    Op.STEP: lines.step,
    Op.ADDRESS_WORD: lines.address_word,
    Op.DRIVE: lines.drive,
    Op.DRIVE_WORD: lines.drive_word,
    Op.RELEASE: lines.release,
    Op.WAIT: _wait,
    Op.PULSE: work.pulse,
    Op.SAMPLE: work.sample,
    Op.KEEP: work.keep,
    Op.COMPARE: work.compare,
    Op.COMPARE_WORD: work.compare_word,
    Op.COMPARE_KEPT: work.compare_kept,
    Op.SENSE: work.sense,
    Op.RAIL: power.rail,
    Op.RANGE: power.range_,
    Op.SWITCHES: raised.switches,
    Op.BIAS: power.bias,
    Op.MEASURE: power.measure,
    Op.SEATED: raised.seated,
    Op.GATE_LOOK: raised.gate_look,
    Op.GATE: raised.gate,
    Op.REPORT: work.report,
}
_CONTROL: Final = {
    Op.END, Op.FAIL, Op.BRANCH, Op.LOOP, Op.NEXT, Op.EACH_BLOCK, Op.NEXT_BLOCK, Op.EACH_WORD, Op.NEXT_WORD,
}  # fmt: skip
_UNSETTLED: Final = {Op.WAIT, Op.MEASURE, Op.END, Op.FAIL}  # all that may happen between a move of VCC and its reading
_BEFORE_DROP: Final = {Op.SWITCHES}


class Walk:
    """One walk; `seen[index]` holds every discrete state that reaches an op, with the least clocks of all paths."""

    def __init__(self, tables: Tables, shape: Shape) -> None:
        self.t = tables
        self.shape = shape
        self.seen: list[dict[State, Clocks]] = [{} for _ in shape.flat]
        self.count = 0
        self.todo: list[tuple[int, State]] = []

    def run(self) -> None:
        """Follows every path until nothing new is found."""
        highest = max(self.t.rig.site.positions, default=0)
        named = [one.line for one in self.t.rig.site.positions.values() if one.line is not None]
        width = min(64, max([highest, *named, *self.shape.header.address, 0]) + 1)
        inputs = set(self.t.pins.inputs)
        levels = tuple(UNSET if line in inputs else RELEASED for line in range(width))
        self._reach(0, State(levels, data=0), START)  # at rest every line is low, D too
        while self.todo and self.count <= MOST_STATES:
            index, state = self.todo.pop()
            offset, instruction = self.shape.flat[index]
            self.t.offset, self.t.index = offset, index
            self._judge(index, instruction, state, self.seen[index][state])
        self.t.offset = 0
        self.t.need(self.count <= MOST_STATES, "H5", "too many states to follow", MOST_STATES, self.count)
        for (offset, instruction), states in zip(self.shape.flat, self.seen, strict=True):
            self.t.offset = offset
            self.t.need(bool(states), "H5", f"no path reaches {instruction.op.name.lower()}")

    def _reach(self, index: int, state: State, clocks: Clocks) -> None:
        if index >= len(self.seen):
            self.t.find("H5", "the program runs past its end")
            return
        states = self.seen[index]
        old = states.get(state)
        new = clocks if old is None else joined(old, clocks)
        if new != old:
            self.count += old is None
            states[state] = new
            self.todo.append((index, state))

    def _judge(self, index: int, ins: Instruction, state: State, clocks: Clocks) -> None:
        self._allowed(ins, state)
        if ins.op in _CONTROL:
            for to, after in self._control(index, ins, state):
                self._reach(to, after, clocks)
            return
        after, later = RULES.get(ins.op, work.unknown)(self.t, state, clocks, ins)
        if after is not state and after != state:
            power.invariants(self.t, after)
            if after.on:
                raised.standing(self.t, after)
        self._reach(index + 1, after, later)

    def _allowed(self, ins: Instruction, state: State) -> None:
        if state.must_drop:
            drops = ins.op is Op.SWITCHES and ins.args["on"] == 0
            self.t.need(
                drops, "H2", "something else than the drop of the identify level after the gate", "switches on=0", ins
            )
        if state.range == Range.FULL and not state.vcc_good:
            self.t.need(ins.op in _UNSETTLED, "H8", "work before VCC was measured after its move", "measure", ins)

    # ---- control flow -----------------------------------------------------------------------------------------------

    def _control(self, index: int, ins: Instruction, state: State) -> Iterator[tuple[int, State]]:
        op, next_ = ins.op, index + 1
        if op is Op.FAIL:
            return
        if op is Op.END:
            self._finished(state, "the program ends")
            self.t.need(state.gate, "H2", "the program ends well without having passed the gate")
        elif op is Op.BRANCH:
            yield from self._branch(index, ins, state)
        elif op is Op.LOOP:
            yield next_, state
        elif op in CLOSING:
            if op is Op.NEXT_WORD:
                self._finished(state, "the next word is taken")
            start = self.shape.nests[index][-1]
            if op is Op.NEXT:
                yield start + 1, state
                yield next_, state
            else:
                yield start, state
        else:
            self._flow(op)
            yield next_, self._word(state) if op is Op.EACH_WORD else state
            yield ins.args["to"], state

    def _finished(self, state: State, what: str) -> None:
        t = self.t
        t.need(state.written.pulse < 0, "H7", f"{what} while what was pulsed is not read back as right")

    def _flow(self, op: Op) -> None:
        header, t = self.shape.header, self.t
        t.need(header.flow is not Flow.NONE, "H5", "blocks in a program whose header says it has none")
        if op is Op.EACH_BLOCK:
            return
        inside = any(self.shape.flat[at][1].op is Op.EACH_BLOCK for at in self.shape.nests[t.index])
        t.need(inside, "H5", "words outside a block")

    def _word(self, state: State) -> State:
        """A new word in hand: what lines and D show is the word before."""
        levels = tuple(STALE if level == WORD else level for level in state.levels)
        data = STALE if state.data == WORD else state.data
        return state._replace(levels=levels, data=data, register=WORD, sample="", kept="", flag=Flag(), done=-1)

    def _branch(self, index: int, ins: Instruction, state: State) -> Iterator[tuple[int, State]]:
        when, to = ins.args["when"], ins.args["to"]
        if when == 2:
            yield to, state
            return
        for value in (True, False):
            if state.flag.value is None or state.flag.value is value:
                yield (to if value == bool(when) else index + 1), work.resolved(self.t, state, value)


def check_header(t: Tables, shape: Shape) -> None:
    """The routine header against the definition."""
    header = shape.header
    t.need(header.width == t.definition.width, "H7", "word width", t.definition.width, header.width)
    t.need(
        header.address == t.pins.address,
        "H6",
        "the header's address lines are not the chip's",
        t.pins.address,
        header.address,
    )
    t.need(header.words <= t.definition.words, "H7", "more words than the chip has", t.definition.words, header.words)
    blocks = [at for at, (_, one) in enumerate(shape.flat) if one.op is Op.EACH_BLOCK]
    if header.flow is not Flow.NONE:
        once = len(blocks) == 1 and not shape.nests[blocks[0]]  # the host's data end once: a second loop waits for ever
        t.need(once, "H5", "the host's blocks are not taken in just once", "one each_block, in no loop", len(blocks))
        size = header.block_words * header.width // 8
        t.need(0 < size <= BLOCK_BYTES, "H5", "block size", f"1 to {BLOCK_BYTES} bytes", size)
        t.need(header.words > 0, "H7", "a flow of no words")
