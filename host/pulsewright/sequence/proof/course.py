"""Reads a definition's steps into the automaton of algorithm.py; a step that is not understood leads nowhere."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

from pulsewright.chip.model import (
    Cycle,
    Definition,
    EachStep,
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
from pulsewright.sequence.proof.algorithm import (
    A_BLOCK,
    A_LOOK,
    A_POLL,
    A_PULSE,
    A_TURN,
    A_WORD,
    A_WRITE,
    AFTER,
    DONE,
    FAILED,
    FREE,
    IDENTIFY,
    IMAGE,
    THE_GATE,
    WORK,
    Arrow,
    Course,
    Event,
    Look,
    Poll,
    Pulse,
    Write,
)


@dataclass
class _Net:
    """States and arrows while they are made; an arrow without an event costs nothing but its wait."""

    course: Course
    arrows: list[list[tuple[Event | None, int, int]]] = field(default_factory=list)
    fails: list[bool] = field(default_factory=list)

    def state(self, phase: str, *, fails: bool = False, inside: bool = False) -> int:
        """A new state."""
        self.arrows.append([])
        self.fails.append(fails)
        self.course.phases.append(phase)
        self.course.inside.append(inside)
        return len(self.arrows) - 1

    def arrow(self, at: int, event: Event | None, to: int, wait_ps: int = 0) -> None:
        """A new arrow."""
        self.arrows[at].append((event, to, wait_ps))

    def close(self, done: frozenset[int]) -> None:
        """Leaves only arrows with events, and tells where a program may end."""
        for at in range(len(self.arrows)):
            reached = {at: 0}
            todo = [at]
            found: dict[tuple[Event, int], int] = {}
            while todo:
                here = todo.pop()
                for event, to, wait_ps in self.arrows[here]:
                    wait_ps += reached[here]
                    if event is not None:
                        found[event, to] = max(wait_ps, found.get((event, to), 0))
                    elif to not in reached:
                        reached[to] = wait_ps
                        todo.append(to)
            self.course.arrows.append(tuple(Arrow(event, to, wait) for (event, to), wait in found.items()))
            self.course.ends.append(bool(done & reached.keys()))
            self.course.fails.append(not self.course.inside[at] and any(self.fails[one] for one in reached))


class _Reader:
    """Follows a list of steps from a state on."""

    def __init__(self, definition: Definition, net: _Net, at: int, phase: str, failed: int, *, fails: bool) -> None:
        self.definition = definition
        self.net = net
        self.course = net.course
        self.at = at
        self.phase = phase
        self.failed = failed  # where an unequal look, a poll past its limit or the last turn leads
        self.fails = fails
        self.wait_ps = 0  # since the last event
        self.mode = ""
        self.data: str | int | None = None
        self.before_ps = 0  # since the mode was entered
        self.between_ps = 0  # waits in the mode before
        self.last = -1  # pulse since which only waits came
        self.block = False
        self.each = ""
        self.look = -1  # the look of this turn, which decides at the turn's end

    # ---- states and arrows --------------------------------------------------------------------------

    def state(self, *, inside: bool = False) -> int:
        """A new state of this phase."""
        return self.net.state(self.phase, fails=self.fails, inside=inside)

    def go(self, event: Event, *, to: int | None = None, inside: bool = False) -> None:
        """An arrow from here to a new state, or to one that is there, which is where the next step begins."""
        target = self.state(inside=inside) if to is None else to
        self.net.arrow(self.at, event, target, self.wait_ps)
        self.at, self.wait_ps = target, 0

    def side(self, event: Event, to: int) -> None:
        """An arrow from here to another state, where the steps do not go on."""
        self.net.arrow(self.at, event, to, self.wait_ps)

    def join(self, to: int) -> None:
        """The steps go on in a state that is there."""
        self.net.arrow(self.at, None, to, self.wait_ps)
        self.at, self.wait_ps = to, 0

    def nowhere(self) -> None:
        """What is not understood: no path leads on."""
        self.at = self.state()

    # ---- steps --------------------------------------------------------------------------------------

    def read(self, steps: tuple[Step, ...], *, in_turn: bool = False) -> None:
        """Takes in a list of steps."""
        for place, step in enumerate(steps):
            behind = place > 0 and isinstance(steps[place - 1], WriteStep)
            goes_on = place + 1 < len(steps) and isinstance(steps[place + 1], LoadStep)
            match step:
                case ModeStep():
                    self._enter(step.mode, _data_of(self.definition, step))
                case WaitStep():
                    self._wait(step)
                case PulseStep():
                    self._pulse(step)
                case ExpectStep():
                    self._expect(step, in_turn=in_turn)
                case RepeatStep():
                    self._repeat(step)
                case EachStep():
                    self._each(step)
                case WriteStep():
                    self.cycles(step.cycles, goes_on=goes_on)
                case LoadStep():
                    self._load(behind=behind)
                case PollStep():
                    self._poll(step)

    def _enter(self, mode: str, data: str | int | None) -> None:
        self.mode, self.data = mode, data
        self.between_ps, self.before_ps, self.last = self.before_ps, 0, -1

    def _wait(self, step: WaitStep) -> None:
        self.wait_ps += step.ps
        if self.last < 0:
            self.before_ps += step.ps
        else:
            pulse = self.course.pulses[self.last]
            self.course.pulses[self.last] = replace(pulse, after_ps=pulse.after_ps + step.ps)

    def _pulse(self, step: PulseStep) -> None:
        window = self.definition.timing.get(step.timing)
        if window is None or window.min_ps is None or window.max_ps is None:
            self.nowhere()  # a pulse without a window is allowed nowhere
            return
        number = len(self.course.pulses)
        self.course.pulses.append(
            Pulse(number, self.mode, step.pin, step.to, window, self.data, self.each, self.before_ps, 0)
        )
        self.go(Event(A_PULSE, number))
        self.last, self.before_ps = number, 0

    def _new_look(self, look: Look) -> int:
        self.course.looks.append(look)
        return len(self.course.looks) - 1

    def _expect(self, step: ExpectStep, *, in_turn: bool) -> None:
        number = self._new_look(Look(self.mode, step.value, step.mask, self.wait_ps, self.between_ps))
        if in_turn and not step.else_:
            if self.look >= 0:
                self.nowhere()  # two looks that end a turn
            self.look = number
            return
        if not step.else_:
            self.side(Event(A_LOOK, number, False), self.failed)
            self.go(Event(A_LOOK, number))
            return
        unequal, equal = self.state(), self.state()
        self.side(Event(A_LOOK, number), equal)
        mode, data = self.mode, self.data
        self.go(Event(A_LOOK, number, False), to=unequal)
        self.read(step.else_)
        self.join(equal)
        self._enter(mode, data)

    def _repeat(self, step: RepeatStep) -> None:
        number = len(self.course.loops)
        self.course.loops.append(step.max)
        body, more, out = self.state(), self.state(), self.state()
        self.go(Event(A_TURN, number), to=body)
        outer, self.look = self.look, -1
        self.read(step.steps, in_turn=True)
        look, self.look = self.look, outer
        if step.until is not None:
            if look >= 0:
                self.nowhere()
            mask = (1 << self.definition.width) - 1
            look = self._new_look(Look(step.until.mode, step.until.is_, mask, self.wait_ps, whole=True))
        if look < 0:
            self.nowhere()
            return
        self.side(Event(A_LOOK, look), out)
        self.go(Event(A_LOOK, look, False), to=more)
        self.side(Event(A_TURN, number), body)
        self.side(Event(A_TURN, number, False), self.failed)
        self.at = out

    def _each(self, step: EachStep) -> None:
        outer, self.each = self.each, step.unit if step.unit == "word" else self.each
        if self.block:
            self._words(step)
        else:
            head = self.state()
            self.join(head)
            self.block = True
            self.go(Event(A_BLOCK))
            if step.unit == "word":
                self._words(step)
            else:
                self.read(step.steps)
            self.block = False
            self.join(head)
            self.go(Event(A_BLOCK, 0, False))
        self.each = outer

    def _words(self, step: EachStep) -> None:
        if step.unit != "word":
            self.nowhere()
            return
        head = self.state()
        self.join(head)
        self.go(Event(A_WORD))
        self.read(step.steps)
        self.join(head)
        self.go(Event(A_WORD, 0, False))

    # ---- the bus ------------------------------------------------------------------------------------

    def _write(self, write: Write) -> Event:
        self.course.writes.append(write)
        return Event(A_WRITE, len(self.course.writes) - 1)

    def _on_the_bus(self) -> None:
        write = self.definition.write
        self._enter("" if write is None else write.mode, None)

    def cycles(
        self, cycles: tuple[Cycle, ...], *, goes_on: bool = False, probe: bool = False, to: int | None = None
    ) -> None:
        """A group of cycles; between them the program is inside it, and behind the last where a load follows."""
        for place, cycle in enumerate(cycles):
            last = place + 1 == len(cycles)
            event = self._write(Write(cycle.at, cycle.word, place == 0, probe=probe))
            self.go(event, to=to if last else None, inside=not last or goes_on)
        self._on_the_bus()

    def _load(self, *, behind: bool) -> None:
        """Word after word. A page is sent for the words it holds: one without any does not come."""
        out, more = self.state(), self.state(inside=True)
        begun = self.state(inside=True)
        self.course.fulls.add(begun)
        self.go(Event(A_WORD), to=begun)
        self.go(self._write(Write(None, None, not behind, load=True, behind=behind)), to=more)
        self.side(Event(A_WORD, 0, False), out)
        self.go(Event(A_WORD), inside=True)
        self.go(self._write(Write(None, None, False, load=True)), to=more)
        self.at = out
        self._on_the_bus()

    def _poll(self, step: PollStep) -> None:
        window = self.definition.timing.get(step.timing)
        if window is None or window.max_ps is None:
            self.nowhere()
            return
        number = len(self.course.polls)
        self.course.polls.append(Poll(step.bit, step.mode, window.max_ps))
        self.side(Event(A_POLL, number, False), self.failed)
        self.go(Event(A_POLL, number))
        self._on_the_bus()


def _data_of(definition: Definition, step: ModeStep) -> str | int | None:
    if step.data is not None:
        return step.data
    mode = definition.modes.get(step.mode)
    if mode is None or mode.data in ("out", "Z"):
        return None
    return IMAGE if mode.data == "in" else mode.data


def _method(
    definition: Definition, net: _Net, free: int, done: int, steps: tuple[Step, ...], finally_: tuple[Step, ...]
) -> None:
    """A method from `free` to `done`, its last steps behind work that was done and behind work that failed."""
    lost = net.state(FAILED, fails=True)
    failed = net.state(FAILED)
    reader = _Reader(definition, net, failed, FAILED, lost, fails=False)
    reader.read(finally_)
    reader.join(lost)
    entry = net.state(FREE)
    net.arrow(free, None, entry)
    reader = _Reader(definition, net, entry, WORK, failed, fails=not finally_)
    reader.read(steps)
    reader.phase, reader.failed, reader.fails = AFTER, lost, False
    if finally_:
        reader.join(reader.state())
    reader.read(finally_)
    reader.join(done)


def _identification(definition: Definition, net: _Net, free: int) -> int:
    """From a chip that is not asked yet to one that reads as ever; without commands that is the same."""
    command = definition.identify_command
    if definition.identify != "command" or command is None:
        return free
    start = net.state(IDENTIFY, fails=True)
    reader = _Reader(definition, net, start, IDENTIFY, start, fails=True)
    reader.cycles(command.enter, probe=True)
    reader.go(Event(THE_GATE))
    reader.cycles(command.leave, probe=True, to=free)
    return start


def course_of(definition: Definition) -> Course:
    """The automaton of everything that a definition's steps let a program do."""
    course = Course()
    net = _Net(course)
    free, done = net.state(FREE, fails=True), net.state(DONE, fails=True)
    for method in (definition.program, definition.protected, definition.erase):
        if method is not None:
            _method(definition, net, free, done, method.steps, method.finally_)
    if definition.protect is not None:
        for steps in (definition.protect.on, definition.protect.off):
            _method(definition, net, free, done, steps, ())
    course.start = _identification(definition, net, free)
    net.close(frozenset({free, done}))
    return course
