"""All that the rules look up, made once for a proof: rows, pulses, steps of VCC, numbers in ticks; and the findings."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Final

from pulsewright.chip.model import Definition
from pulsewright.rig.model import Rig
from pulsewright.sequence.proof.algorithm import Course, Pulse
from pulsewright.sequence.proof.course import course_of
from pulsewright.sequence.proof.electrical import Sums
from pulsewright.sequence.proof.modes import (
    Pins,
    Row,
    line_at,
    lines_fit,
    make_row,
    map_pins,
    may_drive,
    switches_fit,
    vcc_steps,
)
from pulsewright.sequence.proof.shape import Shape
from pulsewright.sequence.proof.state import State
from pulsewright.sequence.proof.timing import Timing, at_least
from pulsewright.sequence.types import Finding
from pulsewright.wire.permit import Permit, VccStep

MOST_FINDINGS: Final = 200
RAISED_VCC_MV: Final = 5500  # design: VCC above this counts as raised

# Seating facts, one bit each; from SEAT_POSITION on one for each raised switch, from SEAT_POWER on one for each line
# that is a supply position of another package.
SEAT_OFF: Final = 1 << 0  # VCC off: no data line stands up
SEAT_PROBE: Final = 1 << 1  # through the probe resistor VCC stands
SEAT_UP: Final = 1 << 2  # outputs off: D follows the bias up
SEAT_DOWN: Final = 1 << 3  # outputs off: D follows the bias down
SEAT_HELD: Final = 1 << 4  # outputs on: D holds against the bias
SEAT_DEAD: Final = 1 << 5  # VCC off: it was measured to be gone
SEAT_POSITION: Final = 1 << 8
SEAT_POWER: Final = 1 << 24


@dataclass(frozen=True)
class Active:
    """Levels at which a mode is pulsed: where its raised levels stand, they may hold inside a pulse only."""

    mode: str
    lines: Mapping[int, str]
    raised: int  # mask of switches


@dataclass
class Tables:
    """Everything the rules need to know besides the state; `offset` is the op being judged."""

    definition: Definition
    rig: Rig
    permit: Permit
    pins: Pins
    rows: tuple[Row, ...]
    course: Course
    pulse_lines: tuple[int | None, ...]  # line of each pulse's pin
    actives: tuple[Active, ...]
    vcc_sums: dict[str, dict[int, Sums]]
    vcc_ok: dict[str, frozenset[int]]  # supply step -> steps of the permit that serve it
    vcc_permit: dict[int, VccStep]
    patterns: tuple[dict[int, str], ...]  # control lines in which the chip drives D
    timing: Timing
    word_mask: int
    gap_ticks: int = 0  # past this the upper bound of a load's age no longer matters
    used_raised: set[int] = field(default_factory=set)  # switches that some path closes past the gate
    used_vcc: set[int] = field(default_factory=set)
    used_busy: bool = False  # some path writes on the bus past the gate
    used_load: bool = False  # some path loads a page
    shape: Shape | None = None
    offset: int = 0
    index: int = 0
    findings: dict[tuple[str, int, str], Finding] = field(default_factory=dict)

    def find(self, rule: str, text: str, wanted: object = "", got: object = "") -> None:
        """Notes a finding at the op being judged, once for each rule and text."""
        if len(self.findings) < MOST_FINDINGS:
            key = (rule, self.offset, text)
            self.findings.setdefault(key, Finding(rule, self.offset, text, str(wanted), str(got)))

    def need(self, holds: bool, rule: str, text: str, wanted: object = "", got: object = "") -> bool:
        """Notes a finding unless something holds; returns whether it does."""
        if not holds:
            self.find(rule, text, wanted, got)
        return holds

    def vcc_serves(self, row: Row, state: State) -> bool:
        """Whether VCC stands, measured, at a step that serves the row."""
        return state.range == 2 and state.vcc_good and state.vcc in self.vcc_ok.get(row.vcc, ())

    def matching(self, state: State) -> list[Row]:
        """The rows of the mode table that the state is exactly in."""
        return [
            row
            for row in self.rows
            if not row.unreachable
            and switches_fit(row, state)
            and lines_fit(row, state.levels)
            and self.vcc_serves(row, state)
        ]

    def may_drive(self, *levels: tuple[str, ...]) -> bool:
        """Whether the chip could drive D at these lines (each at any of the levels given)."""
        return may_drive(self.patterns, *levels)

    @property
    def pulses(self) -> list[Pulse]:
        """Every pulse of the definition's steps."""
        return self.course.pulses

    def line_of(self, pin: str) -> int | None:
        """The line of a pin that is one pin of the package."""
        return _line(self.definition, self.rig, pin)

    @property
    def write_row(self) -> Row | None:
        """The row in which bus write cycles are made."""
        write = self.definition.write
        return None if write is None else next((row for row in self.rows if row.name == write.mode), None)

    @property
    def command_row(self) -> Row | None:
        """The row in which an ID asked for by commands is read."""
        command = self.definition.identify_command
        if self.definition.identify != "command" or command is None:
            return None
        return next((row for row in self.rows if row.name == command.mode), None)

    @property
    def identify_row(self) -> Row | None:
        """The identify row of a part that has one."""
        if self.definition.identify != "mode":
            return None
        return next((row for row in self.rows if row.name == self.definition.identify_mode), None)

    def quiet_vcc(self) -> frozenset[int]:
        """Steps of VCC that may stand before the gate: those of the identify row, else of rows that only read."""
        row = self.identify_row
        rows = [one for one in self.rows if one.drives and not one.raised] if row is None else [row]
        steps = [self.vcc_ok.get(one.vcc, frozenset()) for one in rows]
        quiet: frozenset[int] = frozenset().union(*steps)
        return frozenset(one for one in quiet if self.rig.vcc.step(one).mv <= RAISED_VCC_MV)


def _vcc_ok(
    definition: Definition, rig: Rig, permit: Permit, sums: dict[str, dict[int, Sums]]
) -> dict[str, frozenset[int]]:
    scaling = rig.socket_vcc
    ok: dict[str, frozenset[int]] = {}
    for name, by_step in sums.items():
        supply = definition.supplies[name]
        low, high = scaling.count_at_least(supply.min_mv), scaling.count_at_most(supply.max_mv)
        ok[name] = frozenset(
            one.step
            for one in permit.vcc
            if one.step in by_step and by_step[one.step].fit and low <= one.low <= one.high <= high
        )
    return ok


def _line(definition: Definition, rig: Rig, pin: str) -> int | None:
    at = definition.pin_of(pin)
    return line_at(definition, rig, at[0]) if len(at) == 1 else None


def _actives(definition: Definition, rig: Rig, rows: tuple[Row, ...], course: Course) -> tuple[Active, ...]:
    wanted = {(pulse.mode, pulse.pin, pulse.to) for pulse in course.pulses}
    if definition.write is not None:
        wanted.add((definition.write.mode, definition.write.pin, definition.write.to))
    found = []
    for name, pin, to in sorted(wanted):
        row, line = next((one for one in rows if one.name == name), None), _line(definition, rig, pin)
        if row is not None and line is not None:
            mask = sum(1 << number for number in row.raised)
            found.append(Active(name, {**row.pattern, line: to}, mask))
    return tuple(found)


def make_tables(definition: Definition, rig: Rig, permit: Permit) -> Tables:
    """The tables of one proof."""
    pins = map_pins(definition, rig)
    rows = tuple(make_row(definition, rig, mode, pins) for mode in definition.modes.values())
    course = course_of(definition)
    lines = [_line(definition, rig, pulse.pin) for pulse in course.pulses]
    sums = vcc_steps(definition, rig, pins)
    timing = Timing(definition, rig, course.pulses)
    return Tables(
        definition=definition,
        rig=rig,
        permit=permit,
        pins=pins,
        rows=rows,
        course=course,
        pulse_lines=tuple(lines),
        actives=_actives(definition, rig, rows, course),
        vcc_sums=sums,
        vcc_ok=_vcc_ok(definition, rig, permit, sums),
        vcc_permit={one.step: one for one in permit.vcc},
        patterns=tuple(dict(row.pattern) for row in rows if row.drives),
        timing=timing,
        gap_ticks=at_least(timing.gap_ps()) + 1,
        word_mask=(1 << definition.width) - 1,
    )
