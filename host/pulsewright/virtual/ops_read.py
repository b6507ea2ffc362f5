"""Ops that read D or a line and compare, and the op that ends a sequence as failed: closures as in ops.py."""

from __future__ import annotations

from pulsewright.virtual.machine import Machine, Trip, Waiting
from pulsewright.virtual.ops import Args, Step
from pulsewright.wire.tables import OP_COST, Fail, Fault, Op, Outcome, PollKind

_COST = OP_COST[Op.SAMPLE]
_WORD = 0xFF
_BIT_5, _BIT_6, _BIT_7 = 0x20, 0x40, 0x80


def sample(m: Machine, a: Args, after: int) -> Step:
    """Sample register from D."""
    look = m.socket.sample

    def step() -> int:
        t = m.t
        m.sample = look(t)
        m.t = t + _COST
        return after

    return step


def keep(m: Machine, a: Args, after: int) -> Step:
    """Kept register from the sample register."""

    def step() -> int:
        m.kept = m.sample
        m.t += _COST
        return after

    return step


def compare(m: Machine, a: Args, after: int) -> Step:
    """Flag: sample under mask is the word."""
    word, mask = a["word"], a["mask"]

    def step() -> int:
        m.flag = m.sample & mask == word
        m.t += _COST
        return after

    return step


def compare_word(m: Machine, a: Args, after: int) -> Step:
    """Flag: sample is the word in hand."""

    def step() -> int:
        m.flag = m.sample == m.word
        m.t += _COST
        return after

    return step


def compare_kept(m: Machine, a: Args, after: int) -> Step:
    """Flag: sample and kept agree under mask."""
    mask = a["mask"]

    def step() -> int:
        m.flag = not (m.sample ^ m.kept) & mask
        m.t += _COST
        return after

    return step


def sense(m: Machine, a: Args, after: int) -> Step:
    """Flag: the line reads this level."""
    line, level = a["line"], a["is"]

    def step() -> int:
        m.flag = m.socket.line(m.t, line) == level
        m.t += _COST
        return after

    return step


def report(m: Machine, a: Args, after: int) -> Step:
    """The sample register goes into the block's reply."""

    def step() -> int:
        m.report.append(m.sample)
        m.t += _COST
        return after

    return step


def poll(m: Machine, a: Args, after: int) -> Step:
    """Samples until the kind is met, at most mantissa x 2^exponent ticks from now."""
    kind, limit = PollKind(a["kind"]), a["mantissa"] << a["exponent"]

    def step() -> int:
        m.slow = _poll_on(m, kind, m.t + limit, after)
        return -1

    return step


def _poll_on(m: Machine, kind: PollKind, limit: int, after: int) -> Waiting:
    cost, data = OP_COST[Op.POLL], m.socket.data
    before = data(m.t)
    toggling = kind in (PollKind.TOGGLE_6, PollKind.TOGGLE_6_LIMIT_5)
    while True:
        m.t += cost
        if m.t >= m.next_event:
            yield None
        now = m.sample = data(m.t)
        still = bool((now ^ before) & _BIT_6)
        if toggling:
            met = not still
        elif kind is PollKind.EQUAL:
            met = now == m.word
        else:
            met = not (now ^ m.word) & _BIT_7
        if met or m.t >= limit:
            m.flag = met
            return after
        if kind is PollKind.TOGGLE_6_LIMIT_5 and now & before & _BIT_5:
            raise Trip(Fault.FAILED, got=Fail.POLL)
        before = now


def fail(m: Machine, a: Args, after: int) -> Step:
    """The sequence ends: failed."""

    def step() -> int:
        raise Trip(Fault.FAILED, got=a["why"], outcome=Outcome.FAILED)

    return step
