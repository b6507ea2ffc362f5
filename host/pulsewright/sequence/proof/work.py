"""Ops that look at D or pulse the chip (H2, H7), and what their results are worth."""

from __future__ import annotations

from typing import Final

from pulsewright.sequence.proof.algorithm import IMAGE, Pulse
from pulsewright.sequence.proof.modes import Row
from pulsewright.sequence.proof.power import measured_for
from pulsewright.sequence.proof.state import (
    ADDRESS,
    BIAS,
    CONTROL,
    DATA,
    DISABLED,
    LOW,
    OFF,
    ON,
    PULSE,
    RELEASED,
    VCC,
    WORD,
    Clocks,
    Flag,
    State,
    Written,
    edge,
    elapsed,
)
from pulsewright.sequence.proof.tables import SEAT_DOWN, SEAT_HELD, SEAT_OFF, SEAT_POWER, SEAT_UP, Tables
from pulsewright.sequence.proof.timing import BIAS_SETTLE_PS, at_least, at_most
from pulsewright.wire.ops import Instruction
from pulsewright.wire.tables import Bias, Level, Op, Range

Result = tuple[State, Clocks]

# What the sample register holds, by how it was taken.
OFF_DOWN: Final = "VCC off, bias down"
FLOAT_UP: Final = "outputs off, bias up"
FLOAT_DOWN: Final = "outputs off, bias down"
HELD_UP: Final = "outputs on, bias up"
HELD_DOWN: Final = "outputs on, bias down"
OF_WORD: Final = "the word in hand"
OF_CELL: Final = "a cell"
VERIFIES: Final = "verify "  # with the pulse's index, before OF_WORD or OF_CELL
_SEATING: Final = {(OFF_DOWN, 0): SEAT_OFF, (FLOAT_UP, 1): SEAT_UP, (FLOAT_DOWN, 0): SEAT_DOWN}


def sample(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """The sample register from D."""
    t.need(state.data == RELEASED, "H7", "D is sampled while the rig drives it", "released", state.data)
    kind = _seating_kind(t, state, clocks) if not state.seated else _work_kind(t, state, clocks)
    return state._replace(sample=kind), clocks


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
        _access(t, state, clocks, rows)
        return {Bias.UP: HELD_UP, Bias.DOWN: HELD_DOWN}.get(Bias(pull), "")
    if any(row.data == "Z" and not row.raised for row in rows):
        floating = at_least(t.timing.float_ps + t.timing.line_ps(state))
        since = elapsed(clocks, DISABLED)
        t.need(since >= floating, "H7", "D is sampled before it floats (tDF)", f"{floating} ticks", since)
        return {Bias.UP: FLOAT_UP, Bias.DOWN: FLOAT_DOWN}.get(Bias(pull), "")
    t.find("H1", "D is sampled in a state that says nothing about the seating")
    return ""


def _work_kind(t: Tables, state: State, clocks: Clocks) -> str:
    t.need(state.gate, "H2", "the chip is read before the gate")
    rows = [row for row in t.matching(state) if row.drives]
    kind = OF_WORD if all(state.levels[line] == WORD for line in t.pins.address) else OF_CELL
    if state.done >= 0 and any(row.name in t.pulses[state.done].verify_modes for row in rows):
        _access(t, state, clocks, [row for row in rows if row.name in t.pulses[state.done].verify_modes])
        return f"{VERIFIES}{state.done} {kind}"
    if state.written.pulse >= 0:
        pulse = t.pulses[state.written.pulse]
        right = [row for row in rows if row.name in pulse.verify_modes]
        if t.need(bool(right), "H7", "what was pulsed is read back in another mode than its verify mode",
                  " or ".join(pulse.verify_modes), ", ".join(row.name for row in rows)):  # fmt: skip
            _access(t, state, clocks, right)
            return f"{VERIFIES}{pulse.index} {kind}"
        return ""
    if t.need(bool(rows), "H7", "D is sampled in no mode in which the chip drives it"):
        _access(t, state, clocks, rows)
        return kind
    return ""


def _access(t: Tables, state: State, clocks: Clocks, rows: list[Row]) -> None:
    """Data are valid: access times of the quickest matching row, with the edges' own time, and no level that falls."""
    line = t.timing.line_ps(state)
    bounds = min((t.timing.access_ps(row) for row in rows if row.drives), default=(0, 0))
    for kind, bound, name in ((ADDRESS, bounds[0], "address"), (CONTROL, bounds[1], "enabling edge")):
        need = at_least(bound + line)
        t.need(
            elapsed(clocks, kind) >= need,
            "H7",
            f"D is sampled too soon after the {name}",
            f"{need} ticks",
            elapsed(clocks, kind),
        )
    if state.opened:
        need = t.timing.fall_ticks(state.opened) + at_least(bounds[0])
        t.need(
            elapsed(clocks, OFF) >= need,
            "H7",
            "D is sampled too soon after a raised level",
            f"{need} ticks",
            elapsed(clocks, OFF),
        )


def keep(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """The kept register from the sample register."""
    return state._replace(kept=state.sample), clocks


def _verifying(state: State) -> int:
    return int(state.sample.split()[1]) if state.sample.startswith(VERIFIES) else -1


def compare(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Sample against a constant."""
    word, full = ins.args["word"], ins.args["mask"] & t.word_mask == t.word_mask
    flag = Flag()
    if full and not state.seated:
        for (kind, ones), fact in _SEATING.items():
            if state.sample == kind and word == (t.word_mask if ones else 0):
                flag = Flag(fact)
    verifying = _verifying(state)
    if verifying >= 0:
        pulse = t.pulses[verifying]
        right = pulse.verify_value == word and full and (not pulse.whole or _whole(t))
        t.need(right, "H7", "what was pulsed is not compared with what it must be, over the whole chip",
               f"{pulse.verify_value}, {t.definition.words} words", f"{word:X}")  # fmt: skip
        flag = Flag(0, verifying)
    return _compared(state, flag), clocks


def _whole(t: Tables) -> bool:
    """Whether the compare belongs to a scan over every word of the chip."""
    op = t.shape.original.get(t.offset) if t.shape else None
    if op is None or op.op is not Op.SCAN:
        return False
    return bool(op.args["first"] == 0 and op.args["count"] == t.definition.words)


def _compared(state: State, flag: Flag) -> State:
    """A compare says nothing until its flag is looked at: what was right before is open again."""
    if flag.verifies < 0:
        return state._replace(flag=flag)
    return state._replace(flag=flag, written=Written(flag.verifies, compared=True), done=-1)


def compare_word(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Sample against the word in hand."""
    t.need(state.register == WORD, "H7", "compares with a word when none is in hand")
    verifying = _verifying(state)
    right = state.sample.endswith(OF_WORD) and (verifying < 0 or t.pulses[verifying].verify_value == IMAGE)
    t.need(
        right,
        "H7",
        "compares the word in hand with something else than its cell",
        OF_WORD,
        state.sample or "nothing read",
    )
    return _compared(state, Flag(0, verifying)), clocks


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
    """The state on the path where the flag has a value: a seating fact, or a write known to be right or wrong."""
    flag, written, done = state.flag, state.written, state.done
    if flag.verifies >= 0:
        written = Written() if value else Written(flag.verifies, compared=True)
        done = flag.verifies if value else -1
    facts = state.facts | flag.fact if value else state.facts
    return state._replace(flag=flag._replace(value=value), written=written, done=done, facts=facts)


# ---- pulses ---------------------------------------------------------------------------------------------------------


def pulse(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """A pulse: allowed only as a pulse step of the definition, in its mode, with its window, set-ups and repeats."""
    width, most = ins.args["width"], ins.args["max"]
    entry = ins.args["line"]
    line, level = entry & 63, "H" if entry >> 6 == Level.HIGH else "L"
    t.need(entry >> 6 in (Level.LOW, Level.HIGH), "H7", "a pulse to no level")
    t.need(state.gate and not state.must_drop, "H2", "a pulse before the gate")
    found = [
        one
        for one, at in zip(t.pulses, t.pulse_lines, strict=True)
        if at == line and one.to == level and any(row.name == one.mode for row in t.matching(state))
    ]
    if t.need(bool(found), "H7", f"no step of the definition pulses line {line} to {level} in this mode",
              ", ".join(f"{one.pin} to {one.to} in {one.mode}" for one in t.pulses)):  # fmt: skip
        one = found[0]
        _measured(t, state, one)
        _window(t, one, width, most)
        _data(t, state, one)
        _setups(t, state, clocks, one)
        _repeats(t, state, one)
        state = state._replace(written=Written(one.index), flag=Flag())
        t.need(
            not t.may_drive(_with(state.levels, line, level)) or state.data == RELEASED,
            "H6",
            "the pulse enables outputs against D",
        )
    return state._replace(sample=""), edge(clocks, PULSE, CONTROL, width=width)


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
        (CONTROL, "set-up of control lines", timing.least("tOES"), line),
        (ON, "set-up of the raised level", timing.least("tVS"), timing.rise_ps(state.on)),
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


def _repeats(t: Tables, state: State, one: Pulse) -> None:
    uncompared = state.written.pulse >= 0 and not state.written.compared
    t.need(not uncompared, "H7", "a second pulse without a look at what the first one did")
    t.need(state.done != one.index, "H7", "pulses again what already reads back right")
    turns = t.shape.turns(t.index) if t.shape else 0
    t.need(turns == one.repeats, "H7", f"repetitions of the pulse of {one.mode}", one.repeats, turns)


def unknown(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """An op for which the definition's steps have no word, or that the proof does not understand."""
    t.find("H7", f"nothing in the definition allows the op {ins.op.name.lower()}")
    return state, edge(clocks)
