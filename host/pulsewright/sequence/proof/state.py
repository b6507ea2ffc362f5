"""What the proof knows of rig and chip between two ops: an exact discrete part, and lower bounds of elapsed time.

Time is kept as gaps: for each kind of edge, the least number of ticks between it and the last edge of all; and `since`,
the least number of ticks passed since that last edge. A wait of n counts from the last edge, so after it every kind of
edge lies at least gap + n back. A clock that something other than an edge started (a measurement) is FRESH, worth 0
ticks, until the next edge: a wait may already have been over when it started.
"""

from __future__ import annotations

from operator import le
from typing import Final, NamedTuple

# Clocks. SINCE is the time since the last edge; the others are gaps to it.
SINCE: Final = 0
ADDRESS: Final = 1
DATA: Final = 2
CONTROL: Final = 3
ON: Final = 4  # a raised switch closed
OFF: Final = 5  # a raised switch opened
VCC: Final = 6  # VCC measured in its window
PULSE: Final = 7  # end of the last pulse
DISABLED: Final = 8  # the lines left a pattern in which the chip may drive D
BIAS: Final = 9  # a weak pull changed
VCC_MOVED: Final = 10  # VCC at the socket was told to move
RAIL_MOVED: Final = 11  # the raised rail was told to move
ACT: Final = 12  # the last pulse, bus write or poll
CLOCKS: Final = 13
AGE: Final = CLOCKS  # no lower bound but an upper one, negative: since the last strobe began, inside a load

LONG_AGO: Final = 1 << 40
FRESH: Final = -1

Clocks = tuple[int, ...]
START: Final[Clocks] = (*(LONG_AGO,) * CLOCKS, 0)

# Levels of a line: low, high, released; a bit of the word in hand, of an earlier word; known to be set, not to what;
# never set since the board's reset.
LOW: Final = "L"
HIGH: Final = "H"
RELEASED: Final = "Z"
WORD: Final = "W"
STALE: Final = "S"
EITHER: Final = "U"
UNSET: Final = "?"

NOT_LOOKED: Final = -1
NO_PULSE: Final = -1
STROBE: Final = -2

# What a chip may be busy with.
IDLE: Final = 0
WRITING: Final = 1  # a bus write of a method
ANSWERING: Final = 2  # a command of the identification


def elapsed(clocks: Clocks, which: int) -> int:
    """The least number of ticks since the last edge of a kind."""
    gap = clocks[which]
    return 0 if gap == FRESH else gap + clocks[SINCE]


def edge(clocks: Clocks, *which: int, width: int = 0) -> Clocks:
    """Clocks after an edge of the given kinds, `width` ticks after the op began."""
    passed = clocks[SINCE] + width
    aged = [width if gap == FRESH else min(gap + passed, LONG_AGO) for gap in clocks]
    aged[AGE] = clocks[AGE]
    aged[SINCE] = 0
    for kind in which:
        aged[kind] = 0
    return tuple(aged)


def waited(clocks: Clocks, ticks: int) -> Clocks:
    """Clocks after a wait until at least `ticks` after the last edge."""
    return clocks if ticks <= clocks[SINCE] else (ticks, *clocks[1:])


def started(clocks: Clocks, which: int) -> Clocks:
    """Clocks after something that is no edge of a pin restarted one of them."""
    return (*clocks[:which], FRESH, *clocks[which + 1 :])


def aged(clocks: Clocks, ticks: int, most: int) -> Clocks:
    """Clocks after at most so many ticks more since the last strobe; past `most` it no longer matters how many."""
    return (*clocks[:AGE], max(clocks[AGE] - ticks, -most))


def strobed(clocks: Clocks, width: int) -> Clocks:
    """Clocks at the end of a strobe: it began at most its width ago."""
    return (*clocks[:AGE], -width)


def covers(one: Clocks, other: Clocks) -> bool:
    """Whether what holds by one holds by the other too: none of its times is longer."""
    return all(map(le, one, other))


def joined(one: Clocks, other: Clocks) -> Clocks:
    """Clocks that hold on both of two paths: the least of each."""
    return one if one == other else tuple(map(min, one, other))


class Flag(NamedTuple):
    """What the flag says: set means `fact` holds (a seating bit), or the answer to a look or poll of the steps."""

    fact: int = 0
    kind: str = ""  # LOOK or POLL; "": it answers nothing
    n: int = 0
    value: bool | None = None  # if the path knows it


class State(NamedTuple):
    """The discrete part. `levels` by line number; `data` "Z", "W", "S" or the constant that the rig drives."""

    levels: tuple[str, ...]
    range: int = 0
    vcc: int = 0
    vcc_good: bool = False
    rail: int = 0
    rail_window: tuple[int, int] | None = None  # counts in which the raised rail was measured since it moved
    positions: tuple[tuple[int, int, int], ...] = ()  # switch and counts of each level measured at its position since
    on: int = 0
    opened: int = 0  # raised switches that opened at OFF and may still fall
    data: str | int = RELEASED
    driven: bool = False  # H is driven, not released
    bias: tuple[int, int, int] = (0, 0, 0)  # data, address, power
    facts: int = 0
    seated: bool = False
    gate: bool = False
    must_drop: bool = False
    looked: int = NOT_LOOKED
    sample: str = ""
    kept: str = ""
    flag: Flag = Flag()
    read: tuple[str, ...] = ()  # modes in which the sample register was read, its access times kept
    last: int = NO_PULSE  # the last pulse by its number, or STROBE
    pos: frozenset[int] = frozenset()  # where in the definition's steps the program stands
    due: int = 0  # ticks that the steps want between the last pulse, write or poll and what comes next
    busy: int = IDLE  # why the chip may be at work by itself since PULSE
    lock: int = 0  # words of the permanent lock that were written last
    register: str = UNSET  # the address register: EITHER known to us, WORD, or never loaded
    hand: bool = False  # a word is in hand
