"""What a definition's own steps allow, as data: pulses, looks, bus writes, polls, and the order they come in.

The order is an automaton (`Course`) over what a program visibly does - a pulse, a bus write cycle, the outcome of a
look or a poll, a turn of a loop, a block or word taken - made by course.py. A program may do what some arrow out of
where it stands says, and nothing else.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Final, NamedTuple

from pulsewright.chip.model import Window

IMAGE: Final = "image"

# Kinds of event.
A_PULSE: Final = "pulse"
A_WRITE: Final = "bus write"
A_LOOK: Final = "look"
A_POLL: Final = "poll"
A_TURN: Final = "turn"
A_BLOCK: Final = "block"
A_WORD: Final = "word"
THE_GATE: Final = "gate"

# Phases of a state of the automaton.
IDENTIFY: Final = "identify"  # the chip is asked for its ID, or shows it
FREE: Final = "free"  # no method has begun
WORK: Final = "work"
AFTER: Final = "after"  # in the steps that end a method, the work done
FAILED: Final = "failed"  # the work failed: in the steps that end it
DONE: Final = "done"


class Event(NamedTuple):
    """Something a program does; `n` numbers it within its kind, `yes` is its outcome where it has one.

    Look: equal; poll: done; turn, block, word: one more is begun (False: none is left).
    """

    kind: str
    n: int = 0
    yes: bool = True


class Arrow(NamedTuple):
    """From a state by an event to another; at least `wait_ps` after the last pulse, write or poll."""

    event: Event
    to: int
    wait_ps: int


@dataclass(frozen=True)
class Pulse:
    """One pulse step of a method in its place. Times in picoseconds; `data` "image", a constant, None: D released."""

    index: int
    mode: str
    pin: str
    to: str
    window: Window
    data: str | int | None
    each: str  # "word", or "" for the whole chip
    before_ps: int  # waits between the mode and the pulse
    after_ps: int  # waits between the pulse and the next step that moves a pin


@dataclass(frozen=True)
class Look:
    """A read-back: in which mode, against what; `whole`: every word of the chip."""

    mode: str
    value: str | int
    mask: int
    wait_ps: int  # waits between the event before and the read-back
    before_ps: int = 0  # waits between the mode before and the mode it is made in
    whole: bool = False

    def __str__(self) -> str:
        value = self.value if isinstance(self.value, str) else f"{self.value:02X}"
        return f"{value} in {self.mode}{', every word' if self.whole else ''}"


@dataclass(frozen=True)
class Write:
    """One bus write cycle in its place; `at` and `word` None: the word in hand at its own address."""

    at: int | None
    word: int | None
    first: bool  # nothing of the same group or load comes before it
    load: bool = False  # a word of a page
    behind: bool = False  # the first word of a load that comes directly behind a command
    probe: bool = False  # of the identification, not of a method

    def __str__(self) -> str:
        return "image" if self.word is None else f"{self.word:02X}@{self.at:04X}"


@dataclass(frozen=True)
class Poll:
    """A poll: "DQ7" or "DQ6", the mode it reads in, how long the part may take, in picoseconds."""

    bit: str
    mode: str
    max_ps: int


@dataclass
class Course:
    """The automaton, its states by number, and what the numbers in its events stand for."""

    pulses: list[Pulse] = field(default_factory=list)
    looks: list[Look] = field(default_factory=list)
    writes: list[Write] = field(default_factory=list)
    polls: list[Poll] = field(default_factory=list)
    loops: list[int] = field(default_factory=list)  # most turns of each counted loop
    arrows: list[tuple[Arrow, ...]] = field(default_factory=list)
    phases: list[str] = field(default_factory=list)
    inside: list[bool] = field(default_factory=list)  # in the middle of a group of cycles, or of a load
    ends: list[bool] = field(default_factory=list)  # the program may end well
    fails: list[bool] = field(default_factory=list)  # the program may end as failed
    fulls: set[int] = field(default_factory=set)  # at the first word of a load, of which there is always one
    start: int = 0
    _next: dict[frozenset[int], tuple[Arrow, ...]] = field(default_factory=dict)

    def next(self, pos: frozenset[int]) -> tuple[Arrow, ...]:
        """Every arrow out of a set of states."""
        found = self._next.get(pos)
        if found is None:
            found = self._next[pos] = tuple(arrow for one in sorted(pos) for arrow in self.arrows[one])
        return found

    def named(self, event: Event) -> str:
        """An event in words."""
        if event.kind == A_PULSE:
            one = self.pulses[event.n]
            return f"{one.pin} to {one.to} in {one.mode}"
        if event.kind == A_WRITE:
            return f"write {self.writes[event.n]}"
        if event.kind == A_LOOK:
            return f"look for {self.looks[event.n]}"
        if event.kind == A_POLL:
            return f"poll {self.polls[event.n].bit}"
        if event.kind == A_TURN:
            return f"a turn of {self.loops[event.n]}" if event.yes else "the end of the turns"
        if event.kind == THE_GATE:
            return "the gate"
        return f"the next {event.kind}" if event.yes else f"the end of the {event.kind}s"

    def wanted(self, pos: frozenset[int]) -> str:
        """What may come next, in words."""
        return " or ".join(dict.fromkeys(self.named(arrow.event) for arrow in self.next(pos))) or "nothing more"
