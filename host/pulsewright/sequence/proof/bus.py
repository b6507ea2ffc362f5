"""Bus write cycles and polls (H7): only the definition's own groups, in their order, with their times."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

from pulsewright.sequence.proof.algorithm import A_POLL, A_WRITE, Arrow, Poll, Write
from pulsewright.sequence.proof.lines import lines
from pulsewright.sequence.proof.looks import too_soon
from pulsewright.sequence.proof.modes import Row
from pulsewright.sequence.proof.power import at_rest, invariants, measured_for, out_of_pulse
from pulsewright.sequence.proof.state import (
    ACT,
    ADDRESS,
    AGE,
    ANSWERING,
    CONTROL,
    DATA,
    HIGH,
    IDLE,
    LOW,
    ON,
    PULSE,
    RELEASED,
    STROBE,
    VCC_MOVED,
    WORD,
    WRITING,
    Clocks,
    Flag,
    State,
    edge,
    elapsed,
    strobed,
    waited,
)
from pulsewright.sequence.proof.steps import acted
from pulsewright.sequence.proof.tables import Tables
from pulsewright.sequence.proof.timing import at_least, at_most
from pulsewright.wire.ops import Instruction, ins
from pulsewright.wire.tables import OP_COST, Op, PollKind

# Erases nothing and can never be undone: the boot-block lock of page-write flash.
_LOCK: Final = (0xAA, 0x55, 0x80, 0xAA, 0x55, 0x40)
_BOARD_COST: Final = 64  # ticks an op may take on a board, where its rig file does not say
_KINDS: Final = {"DQ7": PollKind.DATA_BIT_7, "DQ6": PollKind.TOGGLE_6}
_SLACK: Final = 1_600  # ticks a limit may lie above twice the part's longest time: looks and rounding


def cost_of(op: Op) -> int:
    """Ticks that an op may take beside its waits, on any board."""
    return max(OP_COST[op], _BOARD_COST)


# ---- cycles ---------------------------------------------------------------------------------------------------------


def cycles_for(t: Tables, state: State, line: int, level: str) -> bool:
    """Whether a pulse of a line is the strobe of a bus write: the definition's pin, its level, its mode."""
    write = t.definition.write
    row = t.write_row
    if write is None or row is None or write.to != level:
        return False
    return line == write_line(t) and row in t.matching(state)


def write_line(t: Tables) -> int | None:
    """The line of the strobe."""
    write = t.definition.write
    return None if write is None else t.line_of(write.pin)


def strobe(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> tuple[State, Clocks]:
    """A bus write cycle."""
    width = ins.args["width"]
    arrows = _right(t, state)
    here = t.course.writes[arrows[0].event.n] if arrows else None
    t.need(state.gate or (here is not None and here.probe), "H2", "a bus write before the gate")
    t.need(state.gate or state.looked >= 0, "H2", "a command before the look at the ID cells")
    _width(t, state, width, ins.args["max"])
    _set_ups(t, state, clocks)
    after = state
    if here is not None:
        _order(t, state, clocks, here, width)
        after = acted(t, state, clocks, arrows)
        t.used_busy |= not here.probe
        t.used_load |= here.load
        after = after._replace(busy=ANSWERING if here.probe else WRITING)
    after = after._replace(last=STROBE, sample="", read=(), flag=Flag(), lock=_locked(t, state))
    return after, strobed(edge(clocks, PULSE, CONTROL, ACT, width=width), width)


def _address(t: Tables, state: State) -> int | None:
    """The address that the lines carry; None where it is no constant."""
    levels = [state.levels[line] for line in t.pins.address]
    if not all(level in (LOW, HIGH) for level in levels):
        return None
    return sum((level == HIGH) << bit for bit, level in enumerate(levels))


def _right(t: Tables, state: State) -> list[Arrow]:
    """The arrows of the steps for the cycle that address lines and D make."""
    arrows = [arrow for arrow in t.course.next(state.pos) if arrow.event.kind == A_WRITE]
    own = all(state.levels[line] == WORD for line in t.pins.address) and state.data == WORD
    at = _address(t, state)
    found = []
    for arrow in arrows:
        one = t.course.writes[arrow.event.n]
        if own if one.word is None else (one.at == at and one.word == state.data):
            found.append(arrow)
    word = state.data if isinstance(state.data, str) else f"{state.data:02X}"
    shown = "image" if own else f"{word}@{'?' if at is None else f'{at:04X}'}"
    t.need(bool(found), "H7", "a bus write that the steps do not have here", t.course.wanted(state.pos), shown)
    return found or arrows  # told once; what follows is judged as if it had been right


def _width(t: Tables, state: State, width: int, most: int) -> None:
    write = t.definition.write
    window = t.definition.timing.get(write.timing) if write is not None else None
    if window is None or window.min_ps is None:
        t.find("H7", "a strobe whose width nobody states")
        return
    low, high = at_least(window.min_ps + t.timing.line_ps(state)), t.timing.longest_ticks
    if window.max_ps is not None:  # between two limits the edges have to take what room there is
        low, high = min(low, at_least(window.min_ps + (window.max_ps - window.min_ps) // 2)), at_most(window.max_ps)
    t.need(low <= width <= high, "H7", f"strobe width outside {window.name}", f"{low} to {high} ticks", width)
    t.need(width <= most <= high, "H7", f"strobe bound outside {window.name}", f"{width} to {high} ticks", most)


def _set_ups(t: Tables, state: State, clocks: Clocks) -> None:
    timing, row = t.timing, t.write_row
    line = timing.line_ps(state)
    wanted = [
        (ADDRESS, "address set-up", timing.least("tAS") + line),
        (DATA, "data set-up", timing.least("tDS") + line),
        (CONTROL, "set-up of control lines", timing.least("tOES", "tCS") + line),
        (PULSE, "pause", timing.least("tWPH") + line),
    ]
    if row is not None and row.raised:
        wanted.append((ON, "set-up of the raised level", timing.least("tVS", "tVPS") + timing.rise_ps(state.on)))
        for want in row.raised.values():
            t.need(measured_for(state, want), "H8", "a raised level was never measured at its position", want.role)
    for kind, text, need_ps in wanted:
        need, since = at_least(need_ps), elapsed(clocks, kind)
        t.need(since >= need, "H7", f"{text} before the strobe", f"{need} ticks", since)
    supply = t.definition.supplies[row.vcc] if row is not None else None
    need = at_least(max(supply.settle_ps if supply else 0, timing.least("tVCS")))
    stood = elapsed(clocks, VCC_MOVED) - at_least(t.rig.vcc.settle_ps)  # counts from when the supply is good
    t.need(stood >= need, "H7", "set-up of VCC before the strobe", f"{need} ticks", stood)


def _order(t: Tables, state: State, clocks: Clocks, here: Write, width: int) -> None:
    """The first cycle of a group waits for the chip; the next ones keep inside the load gap."""
    if here.first:
        at_rest(t, state, clocks, "a bus write begins")
        return
    if here.behind:
        need = at_least(t.timing.least("tWPH2") + t.timing.line_ps(state))
        since = elapsed(clocks, PULSE)
        t.need(since >= need, "H7", "pause between a command and its load", f"{need} ticks", since)
    write = t.definition.write
    if write is None or not write.gap:
        return
    need, since = at_least(t.timing.least(write.gap)), elapsed(clocks, PULSE) + width
    t.need(since >= need, "H7", "time from load to load", f"{need} ticks", since)
    most = at_most(t.timing.gap_ps())
    if most:
        latest = width - clocks[AGE]
        t.need(latest <= most, "H7", "the load gap may be over before the next load", f"at most {most} ticks", latest)


def _locked(t: Tables, state: State) -> int:
    """Words of the permanent lock that stand written now; all of them are refused."""
    if not isinstance(state.data, int):
        t.need(state.lock < len(_LOCK) - 1, "H7", "the image may complete the permanent lock")
        return 0
    tail = (*_LOCK[: state.lock], state.data & 0xFF)
    t.need(tail != _LOCK, "H7", "a permanent lock")
    return next(length for length in range(len(_LOCK) - 1, -1, -1) if tail[len(tail) - length :] == _LOCK[:length])


# ---- polls ----------------------------------------------------------------------------------------------------------


def poll(t: Tables, state: State, clocks: Clocks, ins: Instruction) -> Iterator[tuple[State, Clocks]]:
    """A poll, as it ends when the chip is done and as it ends at its limit."""
    arrows = [arrow for arrow in t.course.next(state.pos) if arrow.event.kind == A_POLL and arrow.event.yes]
    if not t.need(bool(arrows), "H7", "nothing in the definition allows the op poll here", t.course.wanted(state.pos)):
        yield state, edge(clocks)
        return
    number = arrows[0].event.n
    wanted = t.course.polls[number]
    limit = ins.args["mantissa"] << ins.args["exponent"]
    _may_poll(t, state, clocks, wanted, ins, limit)
    looked, later = _look(t, state, clocks, wanted, ins)
    looked = looked._replace(sample="", read=(), last=state.last, due=0)
    done = looked._replace(busy=IDLE, flag=Flag(0, A_POLL, number, True))
    over = looked._replace(flag=Flag(0, A_POLL, number, False))
    gap = ins.args["gap"]
    yield done, later
    late = edge(clocks, CONTROL, ACT, width=max(0, limit - gap))
    yield over, tuple(max(one, other) for one, other in zip(waited(late, gap), later, strict=True))


def _may_poll(t: Tables, state: State, clocks: Clocks, wanted: Poll, ins: Instruction, limit: int) -> None:
    t.need(state.gate, "H2", "the chip is polled before the gate")
    kind = _KINDS.get(wanted.bit)
    t.need(ins.args["kind"] == kind, "H7", f"another poll than of {wanted.bit}", kind, ins.args["kind"])
    t.need(state.data == RELEASED, "H7", "the chip is polled while the rig drives D", "released", state.data)
    need, since = at_least(t.timing.begun_ps()), elapsed(clocks, PULSE)
    t.need(since >= need, "H7", "the chip is polled before its load gap is over", f"{need} ticks", since)
    if kind is PollKind.DATA_BIT_7 and state.busy != IDLE:
        own = all(state.levels[line] == WORD for line in t.pins.address)
        t.need(own, "H7", "bit 7 is polled at another address than the word's in hand")
    low = at_least(wanted.max_ps)
    high = 2 * low + _SLACK
    t.need(low <= limit <= high, "H7", "limit of the poll", f"{low} to {high} ticks", limit)


def _look(t: Tables, state: State, clocks: Clocks, wanted: Poll, args: Instruction) -> tuple[State, Clocks]:
    """One look of a poll: outputs on, the access time, outputs off, the pause."""
    seen, later = state, clocks
    if args.args["enable"]:
        seen, later = lines(t, state, clocks, ins(Op.LINES, lines=args.args["enable"]))
    later = waited(later, args.args["access"])
    rows: list[Row] = [row for row in t.matching(seen) if row.name == wanted.mode and row.drives]
    if t.need(bool(rows), "H7", "the chip is polled in another mode", wanted.mode,
              ", ".join(row.name for row in t.matching(seen))):  # fmt: skip
        for text, need, got in too_soon(t, seen, later, rows[0]):
            t.find("H7", text, f"{need} ticks", got)
    off = seen
    if args.args["disable"]:
        off, later = lines(t, seen, later, ins(Op.LINES, lines=args.args["disable"]))
    for between in (seen, off):
        invariants(t, between)
        out_of_pulse(t, between, later)
    t.need(not t.may_drive(off.levels), "H7", "between two looks of a poll the outputs stay on")
    again = lines(t, off, later, ins(Op.LINES, lines=args.args["enable"]))[0] if args.args["enable"] else off
    t.need(again.levels == seen.levels, "H7", "the looks of a poll are not alike")
    need = at_least(t.timing.least("tOEHP") + t.timing.line_ps(state))
    t.need(args.args["gap"] >= need, "H7", "pause between two looks", f"{need} ticks", args.args["gap"])
    return off, waited(edge(later, ACT), args.args["gap"])
