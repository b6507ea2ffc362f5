"""What the proof knows of rig and chip between two ops: an exact discrete part, and lower bounds of elapsed time.

Time is kept as gaps: for each kind of edge, the least number of ticks between it and the last edge of all; and `since`,
the least number of ticks passed since that last edge. A wait of n counts from the last edge, so after it every kind of
edge lies at least gap + n back. A clock that something other than an edge started (a measurement) is FRESH, worth 0
ticks, until the next edge: a wait may already have been over when it started.
"""

from __future__ import annotations

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
CLOCKS: Final = 12

LONG_AGO: Final = 1 << 40
FRESH: Final = -1

Clocks = tuple[int, ...]
START: Final[Clocks] = (LONG_AGO,) * CLOCKS

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


def elapsed(clocks: Clocks, which: int) -> int:
    """The least number of ticks since the last edge of a kind."""
    gap = clocks[which]
    return 0 if gap == FRESH else gap + clocks[SINCE]


def edge(clocks: Clocks, *which: int, width: int = 0) -> Clocks:
    """Clocks after an edge of the given kinds, `width` ticks after the op began."""
    passed = clocks[SINCE] + width
    aged = [width if gap == FRESH else min(gap + passed, LONG_AGO) for gap in clocks]
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


def joined(one: Clocks, other: Clocks) -> Clocks:
    """Clocks that hold on both of two paths: the least of each."""
    return one if one == other else tuple(map(min, one, other))


class Flag(NamedTuple):
    """What the flag says: set means `fact` holds (a seating bit) or a write is right; `value` if the path knows it."""

    fact: int = 0
    verifies: int = -1  # index of the pulse whose result was compared
    value: bool | None = None


class Written(NamedTuple):
    """The last pulse that has not yet been read back as right: its index, and whether a compare has followed it."""

    pulse: int = -1
    compared: bool = False


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
    written: Written = Written()
    done: int = -1  # the pulse whose result, for the word in hand or the chip, is known to be right
    register: str = UNSET  # the address register: EITHER known to us, WORD, or never loaded
