"""Ops that read D or a line and compare, and the op that ends a sequence as failed: closures as in ops.py."""

from __future__ import annotations

from pulsewright.virtual.machine import Machine, Noted, Trip, Waiting, until
from pulsewright.virtual.ops import Args, LinesSet, Step
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
    """Looks until the kind is met, at most mantissa x 2^exponent ticks from now."""
    kind, limit = PollKind(a["kind"]), a["mantissa"] << a["exponent"]
    look = _Look(m, a)

    def step() -> int:
        m.slow = _poll_on(m, look, kind, m.t + limit, after)
        return -1

    return step


class _Look:
    """One look of a poll: outputs on, the access time, a sample, outputs off, the pause before the next."""

    def __init__(self, m: Machine, a: Args) -> None:
        self._enable, self._disable = LinesSet(m, a["enable"]), LinesSet(m, a["disable"])
        self._access, self._gap = a["access"], a["gap"]

    def take(self, m: Machine) -> Waiting:
        """Yields what it waits for; gives the sample."""
        self._enable.apply(m)
        m.edge = m.t
        yield from until(m, m.t + max(self._access, 1))
        word = m.sample = m.socket.sample(m.t)
        m.t += OP_COST[Op.POLL]
        self._disable.apply(m)
        m.edge = m.t
        yield from until(m, m.t + max(self._gap, 1))
        if m.t >= m.next_event:
            yield None
        return word


def _poll_on(m: Machine, look: _Look, kind: PollKind, limit: int, after: int) -> Waiting:
    toggling = kind in (PollKind.TOGGLE_6, PollKind.TOGGLE_6_LIMIT_5)
    before = (yield from look.take(m)) if toggling else 0
    while True:
        now = yield from look.take(m)
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
    """The sequence ends: failed, here or where `failing` noted it; a rail that was seen low is blamed before a chip."""

    def step() -> int:
        if m.raised_strikes:
            raise Trip(Fault.RAISED_OUTSIDE, *m.strike)
        noted = m.noted
        if noted is not None:
            m.address, m.sample, m.kept = noted.address, noted.sample, noted.kept
        raise Trip(Fault.FAILED, got=noted.why if noted else a["why"], outcome=Outcome.FAILED)

    return step


def failing(m: Machine, a: Args, after: int) -> Step:
    """The work failed here: noted, and told in the block's reply; the program goes on to put the chip in order."""

    def step() -> int:
        if m.noted is None:
            m.noted = Noted(a["why"], m.pc, m.address, m.sample, m.kept)
            if m.pc in m.writing and m.blocks is not None:
                m.blocks.fail(m, m.address)
        m.t += _COST
        return after

    return step
