"""Ops that decide what comes next: branches, counted loops, and the loops over the host's blocks and their words."""

from __future__ import annotations

from pulsewright.virtual.blocks import Blocks
from pulsewright.virtual.contacts import NEVER
from pulsewright.virtual.machine import Ended, Machine, Trip, Waiting
from pulsewright.virtual.ops import Args, Step
from pulsewright.wire.tables import OP_COST, Fault, Op

_COST = OP_COST[Op.LOOP]
_ALWAYS = 2
_WRAP = 65_536


def end(m: Machine, a: Args, after: int) -> Step:
    """The sequence is done."""

    def step() -> int:
        m.t += _COST
        raise Ended

    return step


def branch(m: Machine, when: int, to: int, after: int, outer: int) -> Step:
    """Forward when the flag is so. One that leaves a loop for a counted one brings back that one's turn (`outer`)."""
    turns = m.turns

    def step() -> int:
        m.t += _COST
        if when in (_ALWAYS, m.flag):
            if outer >= 0:
                m.tries = turns[outer]
            return to
        return after

    return step


def loop(m: Machine, depth: int, after: int) -> Step:
    """Begins a counted loop; its turn is the tries register."""
    turns = m.turns

    def step() -> int:
        turns[depth] = m.tries = 1
        m.t += _COST
        return after

    return step


def next_turn(m: Machine, depth: int, count: int, body: int, after: int, outer: int) -> Step:
    """The end of a counted loop; left for a counted one around it, that one's turn is the tries register again."""
    turns, most = m.turns, count or _WRAP

    def step() -> int:
        m.t += _COST
        if turns[depth] < most:
            turns[depth] += 1
            m.tries = turns[depth]
            return body
        if outer >= 0:
            m.tries = turns[outer]
        return after

    return step


# ---- blocks and words ---------------------------------------------------------------------------------------------


def each_block(m: Machine, blocks: Blocks, to: int, after: int) -> Step:
    """Takes the host's next block, waiting for it; at the end of data goes on behind the loop."""

    def step() -> int:
        if not m.gate:
            raise Trip(Fault.GATE_SHUT)
        m.t += _COST
        if blocks.over:
            return to
        if blocks.queue:
            return to if blocks.take(m) else after
        m.slow = _block_on(m, blocks, to, after)
        return -1

    return step


def _block_on(m: Machine, blocks: Blocks, to: int, after: int) -> Waiting:
    while not blocks.queue:
        yield NEVER
    return to if blocks.take(m) else after


def next_block(m: Machine, blocks: Blocks, head: int) -> Step:
    """Sends the block's reply, then back to the next block."""

    def step() -> int:
        blocks.finish(m)
        m.t += _COST
        return head

    return step


def each_word(m: Machine, blocks: Blocks, to: int, after: int) -> Step:
    """Begins with the first word of the block that is not to be left."""

    def step() -> int:
        m.words = blocks.words_of_block()
        m.t += _COST
        return _advance(m, to, after)

    return step


def _advance(m: Machine, to: int, body: int) -> int:
    for address, word in m.words:
        m.address = m.at = address
        m.word, m.tries, m.wrote = word, 0, False
        return body
    return to


def next_word(m: Machine, blocks: Blocks, to: int, body: int, *, writes: bool) -> Step:
    """Counts a word that was driven, and its tries, then on to the next word of the block."""
    count = blocks.count_word if writes else None

    def step() -> int:
        if count is not None and m.wrote:
            count(m.at, m.tries)
        m.t += 2 * _COST
        for address, word in m.words:
            m.address = m.at = address
            m.word, m.tries, m.wrote = word, 0, False
            return body
        return to

    return step
