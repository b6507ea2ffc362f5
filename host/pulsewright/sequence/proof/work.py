"""Pulses (H2, H7): only as a pulse step of the definition, in its turn, with its window and set-ups."""

from __future__ import annotations

from pulsewright.sequence.proof import bus
from pulsewright.sequence.proof.algorithm import A_LOOK, A_PULSE, IMAGE, Arrow, Pulse
from pulsewright.sequence.proof.power import measured_for
from pulsewright.sequence.proof.state import (
    ACT,
    ADDRESS,
    CONTROL,
    DATA,
    OFF,
    ON,
    PULSE,
    RELEASED,
    VCC,
    WORD,
    Clocks,
    Flag,
    State,
    edge,
    elapsed,
)
from pulsewright.sequence.proof.steps import acted
from pulsewright.sequence.proof.tables import Tables
from pulsewright.sequence.proof.timing import at_least, at_most
from pulsewright.wire.ops import Instruction
from pulsewright.wire.tables import Level, Op

Result = tuple[State, Clocks]


def pulse(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """A pulse: a step of the definition, or the strobe of one of its bus writes."""
    width, most, entry = ins.args["width"], ins.args["max"], ins.args["line"]
    line, level = entry & 63, "H" if entry >> 6 == Level.HIGH else "L"
    t.need(entry >> 6 in (Level.LOW, Level.HIGH), "H7", "a pulse to no level")
    found = _steps(t, state, line, level)
    arrows = [
        arrow
        for arrow in t.course.next(state.pos)
        if arrow.event.kind == A_PULSE and t.course.pulses[arrow.event.n] in found
    ]
    if not arrows and bus.cycles_for(t, state, line, level):
        return bus.strobe(t, state, clocks, ins)
    t.need(state.gate and not state.must_drop, "H2", "a pulse before the gate")
    idle = line < len(state.levels) and state.levels[line] == ("L" if level == "H" else "H")
    t.need(idle, "H7", "a pulse of a line that is not at its other level", "", state.levels[line : line + 1])
    if t.need(bool(found), "H7", f"no step of the definition pulses line {line} to {level} in this mode",
              ", ".join(f"{one.pin} to {one.to} in {one.mode}" for one in t.pulses)):  # fmt: skip
        one = t.course.pulses[arrows[0].event.n] if arrows else found[0]
        t.used_busy = True
        _measured(t, state, one)
        _window(t, one, width, most)
        _data(t, state, one)
        _setups(t, state, clocks, one)
        state = _in_turn(t, state, clocks, arrows)._replace(last=one.index, flag=Flag())
        t.need(
            not t.may_drive(_with(state.levels, line, level)) or state.data == RELEASED,
            "H6",
            "the pulse enables outputs against D",
        )
    return state._replace(sample="", read=()), edge(clocks, PULSE, CONTROL, ACT, width=width)


def _steps(t: Tables, state: State, line: int, level: str) -> list[Pulse]:
    """The pulse steps of the definition for this line and level, in a mode that the state is in."""
    modes = {row.name for row in t.matching(state)}
    return [
        one
        for one, at in zip(t.pulses, t.pulse_lines, strict=True)
        if at == line and one.to == level and one.mode in modes
    ]


def _in_turn(t: Tables, state: State, clocks: Clocks, arrows: list[Arrow]) -> State:
    if arrows:
        return acted(t, state, clocks, arrows)
    waits = any(arrow.event.kind == A_LOOK for arrow in t.course.next(state.pos))
    text = "a second pulse without a look at what the first one did" if waits else "a pulse out of its turn"
    t.find("H7", text, t.course.wanted(state.pos))
    return state


def _with(levels: tuple[str, ...], line: int, level: str) -> tuple[str, ...]:
    return (*levels[:line], level, *levels[line + 1 :])


def _measured(t: Tables, state: State, one: Pulse) -> None:
    for want in next((row.raised for row in t.rows if row.name == one.mode), {}).values():
        t.need(measured_for(state, want), "H8", "a raised level was never measured at its position",
               f"{want.role} in the window of {want.supply.name}", state.positions)  # fmt: skip


def _window(t: Tables, one: Pulse, width: int, most: int) -> None:
    low, high = at_least(one.window.min_ps or 0), at_most(one.window.max_ps or 0)
    t.need(low <= width <= high, "H7", f"pulse width outside {one.window.name}", f"{low} to {high} ticks", width)
    t.need(width <= most <= high, "H7", f"pulse bound outside {one.window.name}", f"{width} to {high} ticks", most)


def _data(t: Tables, state: State, one: Pulse) -> None:
    wanted: str | int = RELEASED if one.data is None else WORD if one.data == IMAGE else one.data
    t.need(state.data == wanted, "H7", f"D during the pulse of {one.mode}", wanted, state.data)
    each = t.shape.each(t.index) if t.shape else ()
    if one.each == "word":
        fresh = all(state.levels[line] == WORD for line in t.pins.address)
        t.need(fresh and Op.EACH_WORD in each, "H7", "the address during the pulse is not the word's in hand")
    else:
        t.need(not each, "H7", "a pulse for the whole chip inside a loop over words or blocks")


def _setups(t: Tables, state: State, clocks: Clocks, one: Pulse) -> None:
    timing, line = t.timing, t.timing.line_ps(state)
    supply = next((t.definition.supplies[row.vcc] for row in t.rows if row.name == one.mode), None)
    settle = supply.settle_ps if supply else 0
    for kind, text, setup, rise in (
        (ADDRESS, "address set-up", timing.least("tAS"), line),
        (DATA, "data set-up", timing.least("tDS"), line),
        (CONTROL, "set-up of control lines", timing.least("tOES", "tCS", "tCES"), line),
        (ON, "set-up of the raised level", timing.least("tVS", "tVPS"), timing.rise_ps(state.on)),
    ):
        if kind == ON and not state.on:
            continue
        need = at_least(max(setup, one.before_ps) + rise)
        since = elapsed(clocks, kind)
        t.need(since >= need, "H7", f"{text} before the pulse", f"{need} ticks", since)
    need = at_least(max(settle, timing.least("tVCS")))
    t.need(elapsed(clocks, VCC) >= need, "H7", "set-up of VCC before the pulse", f"{need} ticks", elapsed(clocks, VCC))
    need = timing.recovery_ticks(state.opened)
    t.need(
        elapsed(clocks, OFF) >= need,
        "H7",
        "a raised level is not gone before the pulse",
        f"{need} ticks",
        elapsed(clocks, OFF),
    )


def unknown(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """An op for which the definition's steps have no word, or that the proof does not understand."""
    t.find("H7", f"nothing in the definition allows the op {ins.op.name.lower()}")
    return state, edge(clocks)
