"""Where in the definition's steps a program stands, and how it goes on: each event only in its turn (H7)."""

from __future__ import annotations

from pulsewright.sequence.proof.algorithm import A_LOOK, A_TURN, Arrow, Event
from pulsewright.sequence.proof.state import ACT, Clocks, State, elapsed
from pulsewright.sequence.proof.tables import Tables
from pulsewright.sequence.proof.timing import at_least
from pulsewright.wire.ops import Instruction
from pulsewright.wire.tables import Op

# What may stand between two cycles of a group or a load.
IN_A_GROUP = {
    Op.ADDRESS, Op.ADDRESS_WORD, Op.DRIVE, Op.DRIVE_WORD, Op.RELEASE, Op.WAIT, Op.PULSE, Op.EACH_WORD, Op.NEXT_WORD,
}  # fmt: skip


def advance(t: Tables, state: State, event: Event) -> State:
    """The state behind an event that moves nothing at the pins."""
    arrows = [arrow for arrow in t.course.next(state.pos) if arrow.event == event]
    if not t.need(bool(arrows), "H7", f"{t.course.named(event)} out of its turn", t.course.wanted(state.pos)):
        return state
    return along(state, arrows)


def along(state: State, arrows: list[Arrow]) -> State:
    """The state behind arrows, with the time that the steps want from the last thing done."""
    due = max(at_least(arrow.wait_ps) for arrow in arrows)
    return state._replace(pos=frozenset(arrow.to for arrow in arrows), due=max(due, state.due))


def acted(t: Tables, state: State, clocks: Clocks, arrows: list[Arrow]) -> State:
    """The state behind something done at the pins; what the steps wait before it has passed."""
    after = along(state, arrows)
    since = elapsed(clocks, ACT)
    what = t.course.named(arrows[0].event)
    t.need(since >= after.due, "H7", f"{what} sooner than the steps want it", f"{after.due} ticks", since)
    return after._replace(due=0)


def turn(t: Tables, state: State, count: int) -> State:
    """A counted loop begins a turn, the count being its most."""
    arrows = [arrow for arrow in t.course.next(state.pos) if arrow.event.kind == A_TURN and arrow.event.yes]
    if not arrows:
        waits = any(arrow.event.kind == A_LOOK for arrow in t.course.next(state.pos))
        text = "a turn begins while what was written is not read back" if waits else "a loop that the steps do not have"
        t.find("H7", text, t.course.wanted(state.pos))
        return state
    right = [arrow for arrow in arrows if t.course.loops[arrow.event.n] == count]
    most = " or ".join(str(t.course.loops[arrow.event.n]) for arrow in arrows)
    t.need(bool(right), "H7", "repetitions of the steps", most, count)
    return along(state, right or arrows)


def exhausted(t: Tables, state: State) -> State:
    """A counted loop ends because its turns are used up."""
    arrows = [arrow for arrow in t.course.next(state.pos) if arrow.event.kind == A_TURN and not arrow.event.yes]
    if not t.need(bool(arrows), "H7", "the turns end while the steps want more", t.course.wanted(state.pos)):
        return state
    return along(state, arrows)


def inside(t: Tables, state: State) -> bool:
    """Whether the program is between two cycles of a group, or in a load."""
    return any(t.course.inside[one] for one in state.pos)


def in_phase(t: Tables, state: State, *phases: str) -> bool:
    """Whether the program may be in one of these phases of its steps."""
    return any(t.course.phases[one] in phases for one in state.pos)


def allowed(t: Tables, state: State, ins: Instruction) -> State:
    """Nothing but cycles comes in the middle of a group or a load: what else comes leaves only the complete ones."""
    if ins.op in IN_A_GROUP or not inside(t, state):
        return state
    complete = frozenset(one for one in state.pos if not t.course.inside[one])
    t.need(bool(complete), "H7", "something else before a group of bus writes is complete",
           t.course.wanted(state.pos), ins)  # fmt: skip
    return state._replace(pos=complete or state.pos)


def may_end(t: Tables, state: State) -> None:
    """The program ends well only where no method has begun, or where one is done."""
    good = any(t.course.ends[one] and not t.course.inside[one] for one in state.pos)
    t.need(good, "H7", "the program ends well in the middle of the steps", t.course.wanted(state.pos))


def may_fail(t: Tables, state: State) -> None:
    """The program ends as failed only where the steps that put the chip in order are done, or where there are none."""
    good = any(t.course.fails[one] for one in state.pos)
    t.need(good, "H5", "the program fails and leaves out steps that end a method", t.course.wanted(state.pos))
