"""Ops that move or read lines: each function makes the closure that is one op of one program.

A closure does the op at `m.t`, moves `m.t` on by the op's cost, and returns the index of the next op; or it sets
`m.slow` to a generator and returns -1 where it has to wait for something outside. It refuses by a Trip before anything
moves. `m.edge` is the last tick at which something may have moved: what a wait counts from.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from pulsewright.virtual.board import DATA_POSITIONS
from pulsewright.virtual.machine import Machine, Trip, Waiting, until
from pulsewright.wire.ops import line_of
from pulsewright.wire.tables import OP_COST, Fault, Level, Op

Step = Callable[[], int]
Args = Mapping[str, Any]
_COST = OP_COST[Op.LINES]
_WORD = 0xFF
_BIT_5, _BIT_6, _BIT_7 = 0x20, 0x40, 0x80


def _check_work(m: Machine) -> None:
    """Before the gate nothing is driven or pulsed, but the commands by which some parts are asked for their ID."""
    if not (m.gate or (m.writes_early and m.seated)):
        raise Trip(Fault.GATE_SHUT)


class LinesSet:
    """A set of lines and levels, with the masks that are checked and kept when it is applied."""

    def __init__(self, m: Machine, lines: bytes) -> None:
        self.lines = tuple((line, int(level)) for line, level in map(line_of, lines) if line not in DATA_POSITIONS)
        self._low = sum(1 << line for line, level in self.lines if level == Level.LOW)
        controls = [(line, level) for line, level in self.lines if line not in m.address_lines]
        self._kept = ~sum(1 << line for line, _ in controls)
        self._to_low = sum(1 << line for line, level in controls if level == Level.LOW)
        self._to_high = sum(1 << line for line, level in controls if level == Level.HIGH)
        self._single = self.lines[0] if len(self.lines) == 1 else None
        self._seen: tuple[int, int] | None = None  # masks of the last time, and what came of them
        self._then = (0, 0, False)

    def apply(self, m: Machine) -> None:
        """Checks, then moves the lines as one group at `m.t`."""
        if self._low & (m.closed_lines | m.vcc_lines):
            raise Trip(Fault.LINE_AT_RAISED)
        seen = (m.low, m.high)
        if seen != self._seen:
            self._seen = seen
            low, high = m.low & self._kept | self._to_low, m.high & self._kept | self._to_high
            self._then = (low, high, m.matches(low, high))
        low, high, may_drive = self._then
        if may_drive and m.driving and m.range:
            raise Trip(Fault.BUS_CONFLICT)
        m.low, m.high, m.may_drive = low, high, may_drive
        single = self._single
        if single is not None:
            m.socket.set_line(m.t, single[0], single[1])
        else:
            m.socket.set_lines(m.t, self.lines)


def lines(m: Machine, a: Args, after: int) -> Step:
    """Sets lines, as one group."""
    wanted = LinesSet(m, a["lines"])
    socket = m.socket

    def step() -> int:
        t = m.t
        wanted.apply(m)
        if m.closed:
            socket.weigh(t)
        m.edge = t
        m.t = t + _COST
        return after

    return step


def _move_address(m: Machine) -> Callable[[], None]:
    move = m.socket.set_address
    mask = (1 << len(m.address_lines)) - 1

    def to_register() -> None:
        at = m.address & mask
        if m.closed_bits & ~at:
            raise Trip(Fault.LINE_AT_RAISED)
        t = m.t
        move(t, at)
        m.edge = t
        m.t = t + _COST

    return to_register


def address(m: Machine, a: Args, after: int) -> Step:
    """Address register and lines to a constant."""
    move, at = _move_address(m), a["at"]

    def step() -> int:
        m.address = at
        move()
        return after

    return step


def step_address(m: Machine, a: Args, after: int) -> Step:
    """Adds to the address register, moves the lines."""
    move, by = _move_address(m), a["by"]

    def step() -> int:
        m.address = m.address + by & 0xFFFFFFFF
        move()
        return after

    return step


def address_word(m: Machine, a: Args, after: int) -> Step:
    """Address register and lines to the word in hand's."""
    move = m.socket.set_address
    mask = (1 << len(m.address_lines)) - 1

    def step() -> int:
        m.address = m.at
        at = m.at & mask
        if m.closed_bits & ~at:
            raise Trip(Fault.LINE_AT_RAISED)
        t = m.t
        move(t, at)
        m.edge = t
        m.t = t + _COST
        return after

    return step


def _drive(m: Machine, word: int) -> None:
    if not m.gate:
        _check_work(m)
    if m.may_drive and m.range:
        raise Trip(Fault.BUS_CONFLICT)
    t = m.t
    m.socket.drive(t, word)
    m.driving = True
    m.edge = t
    m.t = t + _COST


def drive(m: Machine, a: Args, after: int) -> Step:
    """Drives D with a constant."""
    word = a["word"] & _WORD

    def step() -> int:
        _drive(m, word)
        return after

    return step


def drive_word(m: Machine, a: Args, after: int) -> Step:
    """Drives D with the word in hand."""

    def step() -> int:
        _drive(m, m.word)
        m.wrote = True
        return after

    return step


def release(m: Machine, a: Args, after: int) -> Step:
    """D released."""
    let_go = m.socket.release

    def step() -> int:
        t = m.t
        let_go(t)
        m.driving = False
        m.edge = t
        m.t = t + _COST
        return after

    return step


def high(m: Machine, a: Args, after: int) -> Step:
    """What H means; driven only while VCC was measured at a step the board may drive at."""
    driven = bool(a["how"])

    def step() -> int:
        if driven and not m.may_be_driven(m.vcc_step):
            raise Trip(Fault.DRIVEN_TOO_LOW)
        m.high_driven = driven
        m.socket.set_high(m.t, driven)
        m.edge = m.t
        m.t += _COST
        return after

    return step


# ---- time ---------------------------------------------------------------------------------------------------------


def wait(m: Machine, a: Args, after: int) -> Step:
    """At least so many ticks after the last edge; the ops since then have passed part of them."""
    ticks, socket = a["ticks"], m.socket

    def step() -> int:
        t = m.t + _COST
        end = m.edge + ticks
        t = max(t, end)
        while t > m.next_event:
            at = socket.next_end
            if at >= m.next_other:
                m.slow = _wait_on(m, t, after)
                return -1
            socket.end_ramps(at)  # the only thing that is due on the way: no need to stop for it
            m.next_event = min(socket.next_end, m.next_other)
        m.t = t
        return after

    return step


def _wait_on(m: Machine, t: int, after: int) -> Waiting:
    yield from until(m, t)
    return after


def pulse(m: Machine, a: Args, after: int) -> Step:
    """The line to the level given for exactly `width`, then to its other level."""
    make, width = _pulse(m, a["line"], after), a["width"]

    def step() -> int:
        return make(width)

    return step


def over_pulse(m: Machine, a: Args, after: int) -> Step:
    """Over-program: unit x factor x tries, never above max."""
    make, unit, most = _pulse(m, a["line"], after), a["unit"] * a["factor"], a["max"]

    def step() -> int:
        return make(min(unit * max(1, m.tries), most))

    return step


def _pulse(m: Machine, entry: int, after: int) -> Callable[[int], int]:
    line, level = line_of(entry)
    active = int(level)
    idle = int(Level.HIGH) if level is Level.LOW else int(Level.LOW)
    begin, end = LinesSet(m, bytes([entry])), LinesSet(m, bytes([line | idle << 6]))
    bit = 1 << line
    is_control = line not in m.address_lines
    socket = m.socket

    def may_drive() -> bool:
        """Whether the chip may drive D in either state of the line."""
        low, high = m.low & ~bit, m.high & ~bit
        return is_control and (m.matches(low | bit, high) or m.matches(low, high | bit))

    def make(width: int) -> int:
        if not m.gate:
            _check_work(m)
        if m.driving and m.range and may_drive():  # asked before anything moves
            raise Trip(Fault.BUS_CONFLICT)
        if bit & (m.closed_lines | m.vcc_lines):
            raise Trip(Fault.LINE_AT_RAISED)
        t = m.t
        begin.apply(m)
        m.pulsed = True
        m.edge = t
        if m.closed:
            socket.weigh(t)
        m.t = t + width
        if m.t <= m.next_event:
            end.apply(m)
            if m.closed:
                socket.weigh(m.t)
            m.edge = m.t
            m.t += _COST
            return after
        m.t = t
        m.pulsing = (line, idle)
        m.slow = _pulse_on(m, t + width, end, after)
        return -1

    assert active != idle
    return make


def _pulse_on(m: Machine, t: int, end: LinesSet, after: int) -> Waiting:
    yield from until(m, t)
    m.pulsing = None
    end.apply(m)
    if m.closed:
        m.socket.weigh(t)
    m.edge = t
    m.t = t + _COST
    return after
