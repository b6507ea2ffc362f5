"""Ops that move lines, address and data (H6, and the holds and recoveries of H7)."""

from __future__ import annotations

from pulsewright.sequence.proof.algorithm import A_LOOK, IDENTIFY
from pulsewright.sequence.proof.modes import lines_fit
from pulsewright.sequence.proof.state import (
    ADDRESS,
    CONTROL,
    DATA,
    DISABLED,
    EITHER,
    HIGH,
    LOW,
    NOT_LOOKED,
    OFF,
    PULSE,
    RELEASED,
    WORD,
    Clocks,
    State,
    edge,
    elapsed,
)
from pulsewright.sequence.proof.tables import Tables
from pulsewright.sequence.proof.timing import at_least
from pulsewright.wire.fields import WireMistake
from pulsewright.wire.ops import Instruction, line_of
from pulsewright.wire.tables import Level

Result = tuple[State, Clocks]
_SHORT = {Level.LOW: LOW, Level.HIGH: HIGH, Level.RELEASED: RELEASED}


def held(t: Tables, state: State, clocks: Clocks, kind: str) -> None:
    """An edge of a kind keeps its hold time after the last pulse."""
    hold = t.timing.hold_ticks(kind, state.last, state)
    t.need(
        elapsed(clocks, PULSE) >= hold, "H7", f"{kind} hold after the pulse", f"{hold} ticks", elapsed(clocks, PULSE)
    )


def _fallen(t: Tables, state: State, clocks: Clocks, changed: list[int]) -> None:
    """A line moves only when a raised level at its position is gone."""
    for one in t.rig.switches:
        position = t.rig.site.positions.get(one.position)
        if not state.opened >> one.number & 1 or position is None or position.line not in changed:
            continue
        fall = t.timing.fall_ticks(1 << one.number)
        t.need(elapsed(clocks, OFF) >= fall, "H7", f"line {position.line} moves while its position still falls",
               f"{fall} ticks", elapsed(clocks, OFF))  # fmt: skip


def _moved(t: Tables, state: State, clocks: Clocks, levels: tuple[str, ...], kind: str) -> Result:
    """State and clocks after lines took new levels, judged on the way."""
    changed = [line for line, old in enumerate(state.levels) if levels[line] != old or levels[line] in (WORD, EITHER)]
    _fallen(t, state, clocks, changed)
    if changed:
        held(t, state, clocks, kind)
    was, now = t.may_drive(state.levels), t.may_drive(levels)
    if state.data != RELEASED:
        t.need(
            not t.may_drive(state.levels, levels),
            "H6",
            "outputs are enabled while the rig drives D",
            "D released",
            "driven",
        )
    kinds = []
    if any(line in t.pins.control for line in changed):
        kinds.append(CONTROL)
    if any(line not in t.pins.control for line in changed):
        kinds.append(ADDRESS)
    if now and not was:
        recovery = t.timing.recovery_ticks(state.opened)
        t.need(elapsed(clocks, OFF) >= recovery, "H7", "outputs are enabled too soon after a raised level",
               f"{recovery} ticks", elapsed(clocks, OFF))  # fmt: skip
        least = at_least(t.timing.least("tOES") if state.last >= 0 else 0)
        looks = [t.course.looks[arrow.event.n] for arrow in t.course.next(state.pos) if arrow.event.kind == A_LOOK]
        least = max([least, *(at_least(look.before_ps) for look in looks)])
        t.need(elapsed(clocks, DATA) >= least, "H7", "outputs are enabled too soon after D was let go",
               f"{least} ticks", elapsed(clocks, DATA))  # fmt: skip
    if was and not now:
        kinds.append(DISABLED)
    return state._replace(levels=levels), edge(clocks, *kinds)


def lines(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Sets lines as one group."""
    levels = list(state.levels)
    known = {position.line for position in t.rig.site.positions.values() if position.line is not None}
    seen: set[int] = set()
    kind = "address"
    for entry in ins.args["lines"]:
        try:
            line, wire_level = line_of(entry)
        except WireMistake as mistake:
            t.find("H6", str(mistake))
            continue
        level = _SHORT[wire_level]
        if not t.need(line in known and line < len(levels), "H6", f"the rig has no line {line}"):
            continue
        t.need(line not in seen, "H6", f"line {line} stands twice in one group")
        seen.add(line)
        if line in t.pins.control:
            kind = "control"
        if line in t.pins.data or line in t.rig.site.data_lines:
            t.find("H6", f"line {line} is a data line: it is driven as a word or not at all")
        elif line in t.pins.open_lines:
            t.need(level != HIGH, "H6", f"line {line} meets a pin that is not connected", "low or released", level)
        elif line in t.pins.supply_lines:
            t.find("H6", f"line {line} meets a supply pin, or a pin that no mode drives")
        elif line not in t.pins.inputs:
            t.need(level != HIGH, "H11", f"line {line} meets no pin of the chip", "low or released", level)
        levels[line] = level
    return _moved(t, state, clocks, tuple(levels), kind)


def _with_address(t: Tables, state: State, bits: list[str]) -> tuple[str, ...]:
    levels = list(state.levels)
    for line, level in zip(_address_lines(t), bits, strict=False):
        if 0 <= line < len(levels):
            levels[line] = level
    return tuple(levels)


def _address_lines(t: Tables) -> tuple[int, ...]:
    return t.shape.header.address if t.shape else ()


def address(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Address register and lines."""
    at = ins.args["at"]
    t.need(at < t.definition.words, "H7", "an address outside the chip", f"below {t.definition.words}", at)
    bits = [HIGH if at >> bit & 1 else LOW for bit in range(len(_address_lines(t)))]
    return _moved(t, state._replace(register=EITHER), clocks, _with_address(t, state, bits), "address")


def step(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Adds to the address register and moves the lines: known to be set, not to what."""
    t.need(state.register == EITHER, "H7", "steps an address that was never set", "", state.register)
    bits = [EITHER] * len(_address_lines(t))
    return _moved(t, state, clocks, _with_address(t, state, bits), "address")


def address_word(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Address register and lines to the word in hand's."""
    t.need(state.hand, "H7", "the address of a word when none is in hand")
    level = WORD if state.hand else EITHER
    state = state._replace(register=level)
    return _moved(t, state, clocks, _with_address(t, state, [level] * len(_address_lines(t))), "address")


def _drive(t: Tables, state: State, clocks: Clocks, word: str | int) -> Result:
    asks = state.looked != NOT_LOOKED and any(t.course.phases[one] == IDENTIFY for one in state.pos)
    t.need(state.gate or asks, "H2", "D is driven before the gate")
    t.need(not t.may_drive(state.levels), "H6", "D is driven while the chip may drive it", "outputs off")
    floating = at_least(t.timing.float_ps + t.timing.line_ps(state))
    since = elapsed(clocks, DISABLED)
    t.need(since >= floating, "H6", "D is driven before the chip has let go of it (tDF)", f"{floating} ticks", since)
    idle = any(row.data not in ("out", "Z") and lines_fit(row, state.levels) for row in t.rows)
    t.need(idle, "H6", "D is driven in no mode of the definition in which the chip listens")
    if state.data != word or word == WORD:
        held(t, state, clocks, "data")
    return state._replace(data=word), edge(clocks, DATA)


def drive(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Drives D with a constant."""
    t.need(
        ins.args["word"] <= t.word_mask,
        "H6",
        "a word wider than the chip's",
        f"{t.word_mask:X}",
        f"{ins.args['word']:X}",
    )
    return _drive(t, state, clocks, int(ins.args["word"]))


def drive_word(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Drives D with the word in hand."""
    t.need(state.hand, "H7", "drives a word when none is in hand")
    return _drive(t, state, clocks, WORD)


def release(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Result:
    """Lets go of D."""
    if state.data != RELEASED:
        held(t, state, clocks, "data")
    return state._replace(data=RELEASED), edge(clocks, DATA)
