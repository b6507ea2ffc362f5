"""The abstract interpretation: every path through a program, loops to a fixed point, each op judged in each state."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from functools import reduce
from typing import Final

from pulsewright.sequence.proof import bus, lines, looks, power, raised, work
from pulsewright.sequence.proof.algorithm import A_BLOCK, A_WORD, DONE, FAILED, FREE, Event
from pulsewright.sequence.proof.shape import CLOSING, WRAP, Shape
from pulsewright.sequence.proof.state import (
    RELEASED,
    STALE,
    START,
    UNSET,
    WORD,
    Clocks,
    Flag,
    State,
    aged,
    covers,
    joined,
    waited,
)
from pulsewright.sequence.proof.steps import advance, allowed, exhausted, in_phase, inside, may_end, may_fail, turn
from pulsewright.sequence.proof.tables import Tables
from pulsewright.wire.ops import Instruction
from pulsewright.wire.tables import BLOCK_BYTES, Flow, Op, Range

MOST_STATES: Final = 4_000  # far above what any real program has; past it the proof refuses
_MOST_CLOCKS: Final = 4  # of one state at one op; more are taken together as the least of each

Result = tuple[State, Clocks]
Step = tuple[int, State, Clocks]
Rule = Callable[[Tables, State, Clocks, Instruction], Result]


def _wait(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    ticks, most = ins.args["ticks"], t.timing.longest_ticks
    t.need(ticks <= most, "H7", "a wait longer than anything asks for", f"at most {most} ticks", ticks)
    later = waited(clocks, ticks)
    return state, aged(later, ticks, t.gap_ticks) if inside(t, state) else later


def _failing(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    t.need(in_phase(t, state, FAILED), "H7", "notes a failure where nothing has failed")
    return state, clocks


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
    Op.SAMPLE: looks.sample,
    Op.KEEP: looks.keep,
    Op.COMPARE: looks.compare,
    Op.COMPARE_WORD: looks.compare_word,
    Op.COMPARE_KEPT: looks.compare_kept,
    Op.SENSE: looks.sense,
    Op.RAIL: power.rail,
    Op.RANGE: power.range_,
    Op.SWITCHES: raised.switches,
    Op.BIAS: power.bias,
    Op.MEASURE: power.measure,
    Op.SEATED: raised.seated,
    Op.GATE_LOOK: raised.gate_look,
    Op.GATE: raised.gate,
    Op.REPORT: looks.report,
    Op.FAILING: _failing,
}
_CONTROL: Final = {
    Op.END, Op.FAIL, Op.POLL, Op.BRANCH, Op.LOOP, Op.NEXT, Op.EACH_BLOCK, Op.NEXT_BLOCK, Op.EACH_WORD, Op.NEXT_WORD,
}  # fmt: skip
_UNSETTLED: Final = {Op.WAIT, Op.MEASURE, Op.END, Op.FAIL}  # all that may happen between a move of VCC and its reading
_FUSED: Final = {Op.SCAN, Op.READ_RUN}  # their loops are no steps of a method


class Walk:
    """One walk; `seen[index]` holds every discrete state that reaches an op, with the least clocks of its paths."""

    def __init__(self, tables: Tables, shape: Shape) -> None:
        self.t = tables
        self.shape = shape
        self.seen: list[dict[State, list[Clocks]]] = [{} for _ in shape.flat]
        self.count = 0
        self.todo: list[tuple[int, State, Clocks]] = []

    def run(self) -> None:
        """Follows every path until nothing new is found."""
        highest = max(self.t.rig.site.positions, default=0)
        named = [one.line for one in self.t.rig.site.positions.values() if one.line is not None]
        width = min(64, max([highest, *named, *self.shape.header.address, 0]) + 1)
        inputs = set(self.t.pins.inputs)
        levels = tuple(UNSET if line in inputs else RELEASED for line in range(width))
        rest = State(levels, data=0, pos=frozenset({self.t.course.start}))  # every line is low, D too
        self._reach(0, rest, START)
        while self.todo and self.count <= MOST_STATES:
            index, state, clocks = self.todo.pop()
            offset, instruction = self.shape.flat[index]
            self.t.offset, self.t.index = offset, index
            self._judge(index, instruction, state, clocks)
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
        if old is None:
            self.count += 1
            states[state] = [clocks]
        elif any(covers(one, clocks) for one in old):
            return
        else:
            kept = [*(one for one in old if not covers(clocks, one)), clocks]
            if len(kept) > _MOST_CLOCKS:
                clocks = reduce(joined, kept)
                kept = [clocks]
            states[state] = kept
        self.todo.append((index, state, clocks))

    def _judge(self, index: int, ins: Instruction, state: State, clocks: Clocks) -> None:
        self._allowed(ins, state)
        state = allowed(self.t, state, ins)
        if inside(self.t, state):
            clocks = aged(clocks, bus.cost_of(ins.op), self.t.gap_ticks)
        if ins.op in _CONTROL:
            for to, after, later in self._control(index, ins, state, clocks):
                self._reach(to, after, later)
            return
        after, later = RULES.get(ins.op, work.unknown)(self.t, state, clocks, ins)
        if after is not state and after != state:
            power.invariants(self.t, after)
            power.out_of_pulse(self.t, after, later)
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

    def _control(self, index: int, ins: Instruction, state: State, clocks: Clocks) -> Iterator[Step]:
        op, next_ = ins.op, index + 1
        if op is Op.FAIL:
            may_fail(self.t, state)
        elif op is Op.END:
            may_end(self.t, state)
            self.t.need(state.gate, "H2", "the program ends well without having passed the gate")
        elif op is Op.POLL:
            for after, later in bus.poll(self.t, state, clocks, ins):
                yield next_, after, later
        elif op is Op.BRANCH:
            for to, after in self._branch(index, ins, state):
                yield to, after, clocks
        elif op is Op.LOOP:
            yield next_, state if self._fused() else turn(self.t, state, ins.args["count"] or WRAP), clocks
        elif op is Op.NEXT:
            for to, after in self._next(index, state):
                yield to, after, clocks
        elif op in CLOSING:
            yield self.shape.nests[index][-1], state, clocks
        else:
            self._flow(op)
            for to, after in self._each(index, ins, state):
                yield to, after, clocks

    def _fused(self) -> bool:
        """Whether the op is part of a fused one that no step of a method is."""
        return self.shape.original[self.t.offset].op in _FUSED

    def _next(self, index: int, state: State) -> Iterator[tuple[int, State]]:
        start = self.shape.nests[index][-1]
        count = self.shape.flat[start][1].args["count"] or WRAP
        if count > 1:
            yield start + 1, state if self._fused() else turn(self.t, state, count)
        yield index + 1, state if self._fused() else exhausted(self.t, state)

    def _each(self, index: int, ins: Instruction, state: State) -> Iterator[tuple[int, State]]:
        """One more block or word, and none."""
        kind = A_BLOCK if ins.op is Op.EACH_BLOCK else A_WORD
        begun = self._word(state) if ins.op is Op.EACH_WORD else state
        if self.shape.header.flow is not Flow.WRITE:
            t, fresh = self.t, in_phase(self.t, state, FREE, DONE)
            t.need(fresh, "H7", "words are taken in the middle of the steps", t.course.wanted(state.pos))
            yield index + 1, begun
            yield ins.args["to"], state
            return
        yield index + 1, advance(self.t, begun, Event(kind))
        if kind == A_BLOCK or not self._full(state):
            yield ins.args["to"], advance(self.t, state, Event(kind, 0, False))

    def _full(self, state: State) -> bool:
        """Whether the steps stand before a load: no block without a word to write is sent to one."""
        words = [arrow for arrow in self.t.course.next(state.pos) if arrow.event.kind == A_WORD]
        return bool(words) and all(arrow.to in self.t.course.fulls for arrow in words)

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
        return state._replace(
            levels=levels, data=data, register=WORD, hand=True, sample="", read=(), kept="", flag=Flag()
        )

    def _branch(self, index: int, ins: Instruction, state: State) -> Iterator[tuple[int, State]]:
        when, to = ins.args["when"], ins.args["to"]
        if when == 2:
            yield to, state
            return
        for value in (True, False):
            if state.flag.value is None or state.flag.value is value:
                yield (to if value == bool(when) else index + 1), looks.resolved(self.t, state, value)


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
    if header.flow is Flow.NONE:
        return
    most = t.definition.words * header.passes
    t.need(header.words <= most, "H7", "more words than the chip has, in all passes", most, header.words)
    t.need(header.words > 0, "H7", "a flow of no words")
    # each loop over the blocks takes the host's data to their end once: one in a loop would wait for ever
    blocks = [at for at, (_, one) in enumerate(shape.flat) if one.op is Op.EACH_BLOCK]
    right = len(blocks) == header.passes > 0 and not any(shape.nests[at] for at in blocks)
    t.need(right, "H5", "the host's blocks are not taken in once for each pass",
           f"{header.passes} each_block, in no loop", len(blocks))  # fmt: skip
    size = header.block_words * header.width // 8
    t.need(0 < size <= BLOCK_BYTES, "H5", "block size", f"1 to {BLOCK_BYTES} bytes", size)
