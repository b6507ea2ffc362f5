"""The registers and the state of the reference firmware while it runs one sequence. It knows no chip."""

from __future__ import annotations

from collections.abc import Callable, Generator, Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pulsewright.virtual.board import (
    DATA_POSITIONS,
    POSITIONS,
    RAISED_FULL_MV,
    VCC_FULL_MV,
    VCC_STEPS_MV,
    Board,
    count_of,
)
from pulsewright.virtual.contacts import NEVER
from pulsewright.virtual.socket import Socket
from pulsewright.wire.ops import line_of
from pulsewright.wire.permit import NO_SWITCH, Permit, VccStep
from pulsewright.wire.tables import READINGS, Fault, Identity, Level, Outcome, Range

if TYPE_CHECKING:
    from pulsewright.virtual.blocks import Blocks

# A step of the firmware that takes time: yields the tick it waits for, None to let what is due happen first.
Waiting = Generator[int | None, None, int]


class Trip(Exception):
    """The sequence ends here: a fault's code with what was read and what was wanted, in raw counts."""

    def __init__(
        self, code: Fault, got: int = 0, low: int = 0, high: int = 0, outcome: Outcome = Outcome.TRIPPED
    ) -> None:
        super().__init__(code.name)
        self.code = code
        self.got = got
        self.low = low
        self.high = high
        self.outcome = outcome


class Ended(Exception):
    """The `end` op."""


@dataclass(frozen=True)
class Noted:
    """Where and why the work failed, before the chip was put in order."""

    why: int
    pc: int
    address: int
    sample: int
    kept: int


class Machine:
    """One run of one program. Times are ticks; every refusal is a Trip raised before anything moved."""

    def __init__(  # noqa: PLR0915  # the registers, one line each
        self, socket: Socket, board: Board, permit: Permit, address: tuple[int, ...], t: int
    ) -> None:
        self.socket = socket
        self.board = board
        self.permit = permit
        self.address_lines = address
        self.t = t
        self.edge = t  # the last time anything may have moved; waits count from it
        self.next_event = NEVER  # nothing outside the program happens before
        self.next_other = NEVER  # the same, but for the ends of ramps
        self.code: list[Callable[[], int]] = []
        self.offsets: list[int] = []  # byte offset of the op that each entry of `code` came from
        self.op_codes: list[int] = []
        self.writing: set[int] = set()  # entries of `code` inside a loop over blocks that are written
        self.pc = 0
        self.slow: Waiting | None = None
        self.blocks: Blocks | None = None
        self.address = 0
        self.word = 0
        self.at = 0  # address of the word in hand
        self.sample = 0
        self.kept = 0
        self.flag = False
        self.tries = 0
        self.wrote = False  # the word in hand was driven in this turn of the word loop
        self.noted: Noted | None = None  # what `failing` noted
        self.turns = [0, 0, 0]
        self.words: Iterator[tuple[int, int]] = iter(())
        self.report = bytearray()
        self.readings: dict[int, int] = {}
        self.id_bytes = b""
        self.matched = 0xFF
        self.look: list[int] | None = None  # cells as read without the identify level
        self.cells: list[int] = []
        self.safe_fault: Trip | None = None  # met while making safe
        # what stands
        # control lines that are low, one bit each; address and data lines are not in it; at rest all are low
        self.low = sum(1 << line for line in range(1, POSITIONS + 1) if line not in (*address, *DATA_POSITIONS))
        self.high = 0
        self.driving = socket.driving
        self.may_drive = False  # the lines are as in a pattern of the permit in which the chip may drive D
        self.pulsing: tuple[int, int] | None = None  # line and idle level of the pulse under way
        self.pulsed = False  # a pulse was made: the chip may be busy by itself
        self.cut = False  # a pulse was cut short: its word is undefined
        self.high_driven = False
        self.range = Range.OFF
        self.vcc_step = 0
        self.vcc_measured = False
        self.vcc_settled_at = 0
        self.raised_step = 0
        self.raised_measured = False
        self.raised_reading = 0
        self.raised_low = 0  # low end of the window the raised rail was measured in: the monitor holds it there
        self.raised_strikes = 0  # looks that found it lower since it was set
        self.strike = (0, 0, 0)  # reading, low and high of the last of them
        self.closed = 0  # raised switches, one bit each
        self.closed_lines = 0
        self.closed_bits = 0  # address bits whose line sits at a closed switch
        self.vcc_lines = 0
        self.seated = False
        self.gate = False
        self.pulled_up = 0  # bias groups that are pulled up
        self.approved: set[int] = set()
        self.safe = False  # making safe: monitor and dead-man look away
        self.hurry = False  # a second interrupt: no self-timed wait
        self.monitor_at = NEVER
        self.dead_at = NEVER
        self._patterns = tuple(self._pattern(lines) for lines in permit.drives)
        self._matches: dict[tuple[int, int], bool] = {}
        self.may_drive = self.matches(self.low, 0)
        self.vcc_windows: dict[int, VccStep] = {entry.step: entry for entry in permit.vcc}
        # Writes before the gate: only where the ID is asked for by commands, without a level.
        self.writes_early = permit.identity is Identity.WANTED and permit.identify_switch == NO_SWITCH

    def _pattern(self, lines: bytes) -> tuple[int, int]:
        """Masks of the lines a pattern wants low and high. Address lines are taken as matching."""
        low = high = 0
        for entry in lines:
            line, level = line_of(entry)
            if line in self.address_lines:
                continue
            if level is Level.LOW:
                low |= 1 << line
            elif level is Level.HIGH:
                high |= 1 << line
        return low, high

    def matches(self, low: int, high: int) -> bool:
        """Whether the chip may drive D with these control lines low and high; a released line matches both."""
        key = (low, high)
        known = self._matches.get(key)
        if known is None:
            known = any(not (wants_low & high or wants_high & low) for wants_low, wants_high in self._patterns)
            self._matches[key] = known
        return known

    def may_be_driven(self, step: int) -> bool:
        """Whether H may be driven now, with VCC bound for (or at) this step: whole, measured, at or above the floor."""
        floor = self.board.driven_from_mv
        whole = self.range is Range.FULL and self.vcc_measured
        return whole and VCC_STEPS_MV[step] >= floor and VCC_STEPS_MV[self.vcc_step] >= floor

    @property
    def standing(self) -> bool:
        """VCC or a raised position stands."""
        return self.range is not Range.OFF or bool(self.closed)

    def next_is_no_later_than(self, t: int) -> None:
        """Something other than the end of a ramp will happen at `t`."""
        self.next_other = min(self.next_other, t)
        self.next_event = min(self.next_event, t)

    def ramps_moved(self) -> None:
        """A ramp began: its end is an event."""
        self.next_event = min(self.next_event, self.socket.next_end)

    def vcc_count(self) -> int:
        """VCC at the socket as converted now."""
        return count_of(self.socket.socket_vcc_mv(self.t), VCC_FULL_MV)

    def rail_count(self) -> int:
        """The raised rail as converted now."""
        return count_of(self.socket.rail_mv(self.t), RAISED_FULL_MV)

    def keep_reading(self, offset: int, count: int) -> None:
        """Keeps the last reading of each of the first `READINGS` measure ops."""
        if offset in self.readings or len(self.readings) < READINGS:
            self.readings[offset] = count

    def forget_approval(self) -> None:
        """Something changed that `switches` was approved under."""
        self.approved.clear()


def until(m: Machine, t: int) -> Waiting:
    """Waits to a tick; what happens meanwhile is served on the way."""
    while m.t < t:
        yield t
    return 0
