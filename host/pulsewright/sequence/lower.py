"""A method's steps to ops: mode changes, waits, pulses, looks, loops, bus writes; and the way out when one fails."""

from __future__ import annotations

from pulsewright.chip.model import (
    EachStep,
    EveryWord,
    ExpectStep,
    LoadStep,
    ModeStep,
    PollStep,
    PulseStep,
    RepeatStep,
    Step,
    WaitStep,
    WriteStep,
)
from pulsewright.errors import CannotMake
from pulsewright.sequence import bus
from pulsewright.sequence.build import Builder, Fork
from pulsewright.sequence.modes import enter, move_vcc
from pulsewright.units import Rounding, ticks
from pulsewright.wire.ops import Label, line_byte
from pulsewright.wire.tables import Fail, Level, Op

_ALWAYS = 2


def step_text(step: Step) -> str:
    """A definition step in words."""
    match step:
        case ModeStep():
            return f"mode {step.mode}" + (f", D = {step.data}" if step.data is not None else "")
        case WaitStep():
            return f"wait {step.timing}".rstrip()
        case PulseStep():
            return f"pulse {step.pin} to {step.to} for {step.timing}"
        case ExpectStep():
            return f"expect {step.value}"
        case RepeatStep():
            return f"repeat up to {step.max} times"
        case WriteStep():
            return f"write {step.command or f'{len(step.cycles)} bus cycles'}"
        case LoadStep():
            return "load the page"
        case PollStep():
            return f"poll {step.bit} within {step.timing}"
        case EachStep():
            return f"each {step.unit}"


class Lowering:
    """Walks a method's steps and emits ops.

    `failure`: why an unequal look fails. `way_out`: the label of the steps that put the chip in order after a failure
    (None: there are none); it is reached in standby, with nothing raised.
    """

    def __init__(self, b: Builder, first: int, last: int, failure: Fail, way_out: Label | None = None) -> None:
        self.b = b
        self.first = first
        self.last = last
        self.failure = failure
        self.way_out = way_out
        self.word = False  # inside a loop over words
        self.block = False  # inside a loop over blocks
        self._pending: ExpectStep | None = None

    def run(self, steps: tuple[Step, ...]) -> None:
        """Emits each step in turn."""
        for step in steps:
            with self.b.about(step_text(step), part="work", where=step.where):
                self._one(step)

    def _one(self, step: Step, *, in_turn: bool = False) -> None:
        b = self.b
        if not isinstance(step, WriteStep | LoadStep):
            bus.end_load(b)
        match step:
            case ModeStep():
                if step.data == "image" and not self.word:
                    raise CannotMake("D = the image, outside a loop over words", where=step.where)
                enter(b, step.mode, data=step.data, word=self.word)
            case WaitStep():
                b.wait(step.ps)
            case PulseStep():
                self._pulse(step)
            case ExpectStep():
                self._expect(step, in_turn=in_turn)
            case RepeatStep():
                self._repeat(step)
            case WriteStep():
                bus.write_cycles(b, step)
            case LoadStep():
                bus.load_page(b)
            case PollStep():
                bus.poll(b, step)
                self._unless(Fail.POLL)
            case EachStep():
                self._each(step)

    def _pulse(self, step: PulseStep) -> None:
        b = self.b
        window = b.definition.timing[step.timing]
        if window.min_ps is None or window.max_ps is None:
            raise CannotMake(f"{step.timing} has no window: a pulse needs min and max", where=step.where)
        typ_ps = window.typ_ps if window.typ_ps is not None else (window.min_ps + window.max_ps) // 2
        level = Level.LOW if step.to == "L" else Level.HIGH
        b.wait(0)
        b.emit(
            Op.PULSE,
            line=line_byte(b.pins.line(step.pin), level),
            width=ticks(typ_ps, Rounding.NEAREST),
            max=ticks(window.max_ps, Rounding.AT_MOST),
        )
        b.edge(b.line_settle_ps)
        b.wait(0)

    # ---- looks, and what comes of them ------------------------------------------------------------

    def _compare(self, step: ExpectStep) -> None:
        if step.value == "image":
            self.b.emit(Op.COMPARE_WORD)
        else:
            self.b.emit(Op.COMPARE, word=step.value, mask=step.mask)

    def _expect(self, step: ExpectStep, *, in_turn: bool) -> None:
        b = self.b
        if self.word:
            b.address_word()
        b.wait(b.access_ps(b.state.mode))
        b.emit(Op.SAMPLE)
        if step.else_:
            self._compare(step)
            self._otherwise(step)
        elif in_turn:
            self._pending = step
        else:
            self._compare(step)
            self._unless(self.failure)

    def _otherwise(self, step: ExpectStep) -> None:
        """Unequal: the steps of `else`; equal: past them."""
        b = self.b
        equal = b.label()
        b.emit(Op.BRANCH, when=1, depth=b.depth, to=equal.name)
        fork = b.fork()
        self.run(step.else_)
        b.join(fork, "the steps of else")
        b.place(equal)

    def _unless(self, why: Fail) -> None:
        """Fails where the flag is clear, by the way out where there is one."""
        b = self.b
        if self.way_out is None:
            b.fail_unless(why)
            return
        good = b.label()
        b.emit(Op.BRANCH, when=1, depth=b.depth, to=good.name)
        self._leave(why)
        b.place(good)

    def _leave(self, why: Fail) -> None:
        """Fails here: noted, the chip into standby, and out by the way out; the program goes on as before."""
        b = self.b
        if self.way_out is None:
            b.emit(Op.FAIL, why=why)
            return
        fork = b.fork()
        b.emit(Op.FAILING, why=why)
        enter(b, "standby")
        b.wait(0)
        b.emit(Op.BRANCH, when=_ALWAYS, depth=0, to=self.way_out.name)
        b.back_to(fork)

    # ---- loops ------------------------------------------------------------------------------------

    def _every_word(self, until: EveryWord) -> None:
        b = self.b
        back = b.state.mode
        vcc = b.state.vcc
        with b.about(f"every word reads {until.is_:02X} in mode {until.mode}", where=until.where):
            enter(b, until.mode, at=self.first)
            b.wait(0)
            access = b.line_settle_ps + b.access_ps(until.mode)
            b.emit(
                Op.SCAN,
                first=self.first,
                count=self.last - self.first + 1,
                word=until.is_,
                wait=ticks(access, Rounding.AT_LEAST),
            )
            enter(b, back)
            if b.state.vcc != vcc and vcc is not None:
                move_vcc(b, b.definition.supplies[b.definition.modes[back].vcc], vcc)

    def _repeat(self, step: RepeatStep) -> None:
        b = self.b
        done = b.label()
        outer, self._pending = self._pending, None
        b.wait(0)
        b.state.addressed = False
        b.emit(Op.LOOP, count=step.max)
        b.depth += 1
        begun = b.fork()
        for one in step.steps:
            with b.about(step_text(one), part="work", where=one.where):
                self._one(one, in_turn=True)
        bus.end_load(b)
        if step.until is not None:
            self._every_word(step.until)
        elif self._pending is not None:
            self._compare(self._pending)
        else:
            raise CannotMake("a repeat without a way to end", where=step.where)
        self._pending = outer
        b.wait(0)
        if step.max > 1:
            self._same(begun, "one turn of the repeat")
        b.emit(Op.BRANCH, when=1, depth=b.depth - 1, to=done.name)
        b.emit(Op.NEXT)
        b.depth -= 1
        self._leave(self.failure)
        b.place(done)

    def _each(self, step: EachStep) -> None:
        if self.block:
            self._each_word(step)
            return
        b = self.b
        if step.unit not in ("word", "page") or (step.unit == "page" and not b.definition.page):
            raise CannotMake(f"once for each {step.unit}: the definition gives no such unit", where=step.where)
        end = b.label()
        b.wait(0)
        b.emit(Op.EACH_BLOCK, to=end.name)
        b.depth += 1
        begun = b.fork()
        self.block = True
        if step.unit == "page":
            self.run(step.steps)
            bus.end_load(b)
            b.wait(0)
        else:
            self._each_word(step)
        self.block = False
        self._same(begun, f"one {step.unit}")
        b.depth -= 1
        b.emit(Op.NEXT_BLOCK)
        b.place(end)

    def _each_word(self, step: EachStep) -> None:
        b = self.b
        if step.unit != "word" or self.word:
            raise CannotMake(f"once for each {step.unit} inside another loop over the data", where=step.where)
        end = b.label()
        b.wait(0)
        b.emit(Op.EACH_WORD, to=end.name)
        b.depth += 1
        b.state.addressed = False
        begun = b.fork()
        self.word = True
        self.run(step.steps)
        bus.end_load(b)
        self.word = False
        self._same(begun, "one word")
        b.depth -= 1
        b.emit(Op.NEXT_WORD)
        b.place(end)

    def _same(self, begun: Fork, text: str) -> None:
        """The next turn of a loop begins as this one began; only what the address lines carry may differ."""
        carried, self.b.state.addressed = self.b.state.addressed, begun[0].addressed
        self.b.join(begun, text)
        self.b.state.addressed = carried


def modes_of(steps: tuple[Step, ...]) -> list[str]:
    """Names of the modes that steps go to, in order, each once; without those of bus writes."""
    names: list[str] = []
    for step in steps:
        found: list[str] = []
        if isinstance(step, ModeStep | PollStep):
            found = [step.mode]
        elif isinstance(step, RepeatStep | EachStep):
            found = modes_of(step.steps)
            if isinstance(step, RepeatStep) and step.until is not None:
                found.append(step.until.mode)
        elif isinstance(step, ExpectStep):
            found = modes_of(step.else_)
        names += [name for name in found if name not in names]
    return names


def writes_bus(steps: tuple[Step, ...]) -> bool:
    """Whether any of the steps writes on the bus."""
    return any(
        isinstance(step, WriteStep | LoadStep)
        or (isinstance(step, RepeatStep | EachStep) and writes_bus(step.steps))
        or (isinstance(step, ExpectStep) and writes_bus(step.else_))
        for step in steps
    )
