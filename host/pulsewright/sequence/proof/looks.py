"""Ops that look at D (H2, H7), and what their results are worth."""

from __future__ import annotations

from typing import Final

from pulsewright.sequence.proof.algorithm import A_LOOK, IDENTIFY, IMAGE, Arrow, Event, Look
from pulsewright.sequence.proof.modes import Row
from pulsewright.sequence.proof.power import at_rest
from pulsewright.sequence.proof.state import (
    ACT,
    ADDRESS,
    BIAS,
    CONTROL,
    DISABLED,
    LOW,
    OFF,
    RELEASED,
    WORD,
    Clocks,
    Flag,
    State,
    elapsed,
)
from pulsewright.sequence.proof.steps import advance
from pulsewright.sequence.proof.tables import SEAT_DOWN, SEAT_HELD, SEAT_OFF, SEAT_POWER, SEAT_UP, Tables
from pulsewright.sequence.proof.timing import BIAS_SETTLE_PS, at_least
from pulsewright.wire.ops import Instruction
from pulsewright.wire.tables import Bias, Op, Range

Result = tuple[State, Clocks]

# What the sample register holds, by how it was taken.
OFF_DOWN: Final = "VCC off, bias down"
FLOAT_UP: Final = "outputs off, bias up"
FLOAT_DOWN: Final = "outputs off, bias down"
HELD_UP: Final = "outputs on, bias up"
HELD_DOWN: Final = "outputs on, bias down"
OF_WORD: Final = "the word in hand"
OF_CELL: Final = "a cell"
_SEATING: Final = {(OFF_DOWN, 0): SEAT_OFF, (FLOAT_UP, 1): SEAT_UP, (FLOAT_DOWN, 0): SEAT_DOWN}


def sample(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """The sample register from D."""
    t.need(state.data == RELEASED, "H7", "D is sampled while the rig drives it", "released", state.data)
    if not state.seated:
        return state._replace(sample=_seating_kind(t, state, clocks), read=()), clocks
    return _read(t, state, clocks), clocks


def _pulled(t: Tables, clocks: Clocks) -> None:
    need, since = at_least(BIAS_SETTLE_PS), elapsed(clocks, BIAS)
    t.need(since >= need, "H1", "the seating is looked at before the weak pull had its effect", f"{need} ticks", since)


def _seating_kind(t: Tables, state: State, clocks: Clocks) -> str:
    pull = state.bias[0]
    _pulled(t, clocks)
    if state.range == Range.OFF:
        down = all(state.levels[line] in (LOW, RELEASED) for line in t.pins.inputs)
        return OFF_DOWN if down and pull == Bias.DOWN else ""
    rows = t.matching(state)
    if any(row.drives and not row.raised for row in rows):
        late = [too_soon(t, state, clocks, row) for row in rows if row.drives]
        for text, need, got in min(late, key=len):
            t.find("H7", text, f"{need} ticks", got)
        return {Bias.UP: HELD_UP, Bias.DOWN: HELD_DOWN}.get(Bias(pull), "")
    if any(row.data == "Z" and not row.raised for row in rows):
        floating = at_least(t.timing.float_ps + t.timing.line_ps(state))
        since = elapsed(clocks, DISABLED)
        t.need(since >= floating, "H7", "D is sampled before it floats (tDF)", f"{floating} ticks", since)
        return {Bias.UP: FLOAT_UP, Bias.DOWN: FLOAT_DOWN}.get(Bias(pull), "")
    t.find("H1", "D is sampled in a state that says nothing about the seating")
    return ""


def _read(t: Tables, state: State, clocks: Clocks) -> State:
    t.need(state.gate, "H2", "the chip is read before the gate")
    asked = any(t.course.phases[one] == IDENTIFY for one in state.pos)
    t.need(not (state.gate and asked), "H7", "the chip is read while it shows its ID")
    at_rest(t, state, clocks, "D is sampled")
    wanted = looks_for(t, state)
    due = max([state.due, *(at_least(look.wait_ps) for _, look in wanted)])
    since = elapsed(clocks, ACT)
    t.need(since >= due, "H7", "D is sampled sooner than the steps want it", f"{due} ticks", since)
    rows = [row for row in t.matching(state) if row.drives]
    if not t.need(bool(rows), "H7", "D is sampled in no mode in which the chip drives it"):
        return state._replace(sample="", read=())
    modes = {look.mode for _, look in wanted}
    soon = {row.name: too_soon(t, state, clocks, row) for row in rows}
    read = tuple(name for name, late in soon.items() if not late)
    missed = [late for name, late in soon.items() if late and (name in modes or not read)]
    for text, need, got in missed[0] if missed else ():
        t.find("H7", text, f"{need} ticks", got)
    kind = OF_WORD if all(state.levels[line] == WORD for line in t.pins.address) else OF_CELL
    return state._replace(sample=kind, read=read)


def looks_for(t: Tables, state: State) -> list[tuple[Arrow, Look]]:
    """The looks that the steps want here."""
    return [(arrow, t.course.looks[arrow.event.n]) for arrow in t.course.next(state.pos) if arrow.event.kind == A_LOOK]


def too_soon(t: Tables, state: State, clocks: Clocks, row: Row) -> list[tuple[str, int, int]]:
    """Which times to valid data of a row are not over, with the edges' own time, and no level that falls."""
    line = t.timing.line_ps(state)
    bounds = t.timing.access_ps(row)
    found = []
    for kind, bound, name in ((ADDRESS, bounds[0], "address"), (CONTROL, bounds[1], "enabling edge")):
        need, since = at_least(bound + line), elapsed(clocks, kind)
        if since < need:
            found.append((f"D is sampled too soon after the {name}", need, since))
    if state.opened:
        need, since = t.timing.fall_ticks(state.opened) + at_least(bounds[0]), elapsed(clocks, OFF)
        if since < need:
            found.append(("D is sampled too soon after a raised level", need, since))
    return found


def keep(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """The kept register from the sample register."""
    return state._replace(kept=state.sample), clocks


def compare(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Sample against a constant."""
    word, mask = ins.args["word"], ins.args["mask"] & t.word_mask
    if not state.seated:
        facts = [
            fact
            for (kind, ones), fact in _SEATING.items()
            if state.sample == kind and word == (t.word_mask if ones else 0) and mask == t.word_mask
        ]
        return state._replace(flag=Flag(facts[0] if facts else 0)), clocks
    return state._replace(flag=_answer(t, state, word, mask)), clocks


def compare_word(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Sample against the word in hand."""
    t.need(state.hand, "H7", "compares with a word when none is in hand")
    t.need(
        state.sample == OF_WORD,
        "H7",
        "compares the word in hand with something else than its cell",
        OF_WORD,
        state.sample or "nothing read",
    )
    return state._replace(flag=_answer(t, state, IMAGE, t.word_mask)), clocks


def _answer(t: Tables, state: State, value: str | int, mask: int) -> Flag:
    """What a compare says about the look that the steps want here; where they want none, nothing."""
    found = looks_for(t, state)
    if not found:
        return Flag()
    here = [(arrow, look) for arrow, look in found if look.mode in state.read]
    if not t.need(bool(here), "H7", "what was written is read back in another mode than its verify mode",
                  " or ".join(look.mode for _, look in found), ", ".join(state.read)):  # fmt: skip
        return Flag()
    for arrow, look in here:
        if look.value == value and look.mask & t.word_mask == mask and (not look.whole or _whole(t)):
            return Flag(0, A_LOOK, arrow.event.n)
    t.find("H7", "what was written is not compared with what it must be", " or ".join(str(look) for _, look in here),
           value if isinstance(value, str) else f"{value:X}")  # fmt: skip
    return Flag()


def _whole(t: Tables) -> bool:
    """Whether the compare belongs to a scan over every word of the chip."""
    op = t.shape.original.get(t.offset) if t.shape else None
    if op is None or op.op is not Op.SCAN:
        return False
    return bool(op.args["first"] == 0 and op.args["count"] == t.definition.words)


def compare_kept(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Sample against the kept register."""
    both = {state.sample, state.kept} == {HELD_UP, HELD_DOWN} and ins.args["mask"] & t.word_mask == t.word_mask
    return state._replace(flag=Flag(SEAT_HELD if both else 0)), clocks


def sense(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """A released line's level."""
    line, is_ = ins.args["line"], ins.args["is"]
    released = line < len(state.levels) and state.levels[line] == RELEASED
    t.need(released, "H6", f"line {line} is sensed but not released")
    looks = (
        released and line in t.pins.power_lines and state.bias[2] == Bias.DOWN and state.range != Range.OFF and is_ == 0
    )
    if looks:
        _pulled(t, clocks)
    return state._replace(flag=Flag(SEAT_POWER << line if looks else 0)), clocks


def report(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """The sample goes to the host as the word's."""
    t.need(
        state.sample == OF_WORD,
        "H7",
        "reports something else than the word's cell",
        OF_WORD,
        state.sample or "nothing read",
    )
    return state, clocks


def resolved(t: Tables, state: State, value: bool) -> State:
    """The state on the path where the flag has a value: a seating fact, or a look or poll of the steps answered.

    Inside a scan each word's compare only goes on or ends the scan; its answer is the flag behind it.
    """
    flag = state.flag
    facts = state.facts | flag.fact if value else state.facts
    known = flag._replace(value=value)
    op = t.shape.original.get(t.offset) if t.shape else None
    if not flag.kind or (op is not None and op.op is Op.SCAN):
        return state._replace(flag=known, facts=facts)
    after = advance(t, state, Event(flag.kind, flag.n, value))
    return after._replace(flag=Flag(0, value=value), facts=facts)
