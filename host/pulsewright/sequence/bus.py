"""Bus write cycles: command lists, the word in hand, loads of a page, and the polls that wait for the chip.

A strobe is as wide as its minimum and an edge of the rig want; set-ups and holds are the definition's minima on top of
the rig's edges. A maximum width (`max` of the timing parameter) binds where there is one.
"""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.chip.model import BusWrite, Cycle, PollStep, WriteStep
from pulsewright.errors import CannotMake
from pulsewright.sequence.build import Builder
from pulsewright.sequence.modes import enter
from pulsewright.units import Rounding, ticks
from pulsewright.wire.ops import line_byte
from pulsewright.wire.tables import Level, Op, PollKind

_SET_UPS = ("tAS", "tDS", "tOES", "tCS")
_HOLDS = ("tAH", "tDH", "tOEH", "tCH", "tWPH")
_KINDS = {"DQ7": PollKind.DATA_BIT_7, "DQ6": PollKind.TOGGLE_6}
_MOST_MANTISSA = 255
_COST_PS = 4_000_000  # what an op may cost a board beside its waits: 64 ticks
_LOOKS = 128  # so many looks in the longest time at most: the end is seen within 1 % of it


@dataclass(frozen=True)
class _Strobe:
    """A strobe's op arguments, in ticks."""

    line: int
    setup: int
    width: int
    hold: int


def bus_of(b: Builder) -> BusWrite:
    """The part's way of writing; CannotMake for a part that says none."""
    if b.definition.write is None:
        raise CannotMake(f"{b.definition.name} has bus writes in its steps but no table [write]")
    return b.definition.write


def _strobe(b: Builder, write: BusWrite) -> _Strobe:
    window = b.definition.timing[write.timing]
    edge_ps = b.line_settle_ps
    width_ps = (window.min_ps or 0) + edge_ps
    if window.max_ps is not None and width_ps > window.max_ps:
        width_ps = (window.min_ps or 0) + (window.max_ps - (window.min_ps or 0)) // 2
    setup_ps = edge_ps + max(b.timing_min_ps(name) for name in _SET_UPS)
    hold_ps = edge_ps + max(b.timing_min_ps(name) for name in _HOLDS)
    gap_ps = b.timing_min_ps(write.gap)
    level = Level.LOW if write.to == "L" else Level.HIGH
    width = ticks(width_ps, Rounding.AT_LEAST)
    setup = ticks(setup_ps, Rounding.AT_LEAST)
    hold = max(ticks(hold_ps, Rounding.AT_LEAST), ticks(gap_ps, Rounding.AT_LEAST) - width - setup)
    return _Strobe(line_byte(b.pins.line(write.pin), level), setup, width, hold)


def _begin(b: Builder) -> _Strobe:
    """Into the write mode, settled, with D released until a cycle drives it."""
    write = bus_of(b)
    if b.state.mode != write.mode:
        end_load(b)
        enter(b, write.mode)
    b.wait(0)
    return _strobe(b, write)


def _cycles(b: Builder, cycles: tuple[Cycle, ...]) -> None:
    strobe = _begin(b)
    b.emit(
        Op.BUS_WRITES,
        strobe=strobe.line,
        setup=strobe.setup,
        width=strobe.width,
        hold=strobe.hold,
        cycles=tuple((cycle.at, cycle.word) for cycle in cycles),
    )
    b.edge()
    b.state.addressed = False


def write_cycles(b: Builder, step: WriteStep) -> None:
    """The cycles of a write step, back to back; the word in hand last, where the step has it."""
    constant = tuple(cycle for cycle in step.cycles if cycle.word is not None)
    if constant:
        _cycles(b, constant)
    if len(constant) != len(step.cycles):
        _word(b)
    b.state.written = True


def commands(b: Builder, cycles: tuple[Cycle, ...]) -> None:
    """A command outside the steps of a method."""
    _cycles(b, cycles)
    b.state.written = True


def _word(b: Builder) -> None:
    """The word in hand at its own address."""
    strobe = _begin(b)
    b.state.addressed = False
    b.emit(Op.ADDRESS_WORD)
    b.emit(Op.DRIVE_WORD)
    b.emit(Op.WAIT, ticks=strobe.setup)
    b.emit(Op.PULSE, line=strobe.line, width=strobe.width, max=strobe.width)
    b.emit(Op.WAIT, ticks=strobe.hold)
    b.emit(Op.RELEASE)
    b.edge()
    b.state.addressed = True


def load_page(b: Builder) -> None:
    """The words of the block in hand, back to back; behind a command with the pause that some parts want there."""
    strobe = _begin(b)
    if b.state.written:
        b.wait(b.timing_min_ps("tWPH2"))
    b.emit(Op.PAGE_LOAD, strobe=strobe.line, setup=strobe.setup, width=strobe.width, hold=strobe.hold)
    b.edge()
    b.state.written, b.state.addressed = True, False


def end_load(b: Builder) -> None:
    """The part takes no more loads: it begins its own work at the latest when the load gap is over."""
    if b.state.written:
        write = bus_of(b)
        b.wait(write.begin_ps)
        b.state.written = False


def poll(b: Builder, step: PollStep) -> None:
    """Looks until the chip is done; the flag is set then, clear at the limit."""
    end_load(b)
    if step.bit not in _KINDS:
        raise CannotMake(f"a poll of {step.bit}", wanted=" or ".join(_KINDS), got=step.bit, where=step.where)
    mode = b.definition.modes[step.mode]
    wanted = b.pins.control_levels(mode)
    differ = [role for role, level in wanted.items() if b.state.lines.get(role) != level]
    if b.definition.modes[b.state.mode].vcc != mode.vcc or b.pins.raised_levels(mode):
        raise CannotMake(f"a poll in mode {step.mode} would move a supply", where=step.where)
    b.wait(0)
    access_ps = b.line_settle_ps + b.access_ps(step.mode)
    most_ps = b.timing_max_ps(step.timing)
    gap_ps = b.line_settle_ps + max(b.timing_max_ps("tDF"), b.timing_min_ps("tOEHP"), b.timing_min_ps("tOEH"))
    gap_ps = max(gap_ps, most_ps // _LOOKS)
    looks = 2 if step.bit == "DQ6" else 1  # two that agree, both behind the part's longest time
    limit = ticks(most_ps + looks * (access_ps + gap_ps + _COST_PS), Rounding.AT_LEAST)
    mantissa, exponent = _scaled(limit)
    b.emit(
        Op.POLL,
        kind=_KINDS[step.bit],
        enable=bytes(line_byte(b.pins.line(role), wanted[role]) for role in differ),
        access=ticks(access_ps, Rounding.AT_LEAST),
        disable=bytes(line_byte(b.pins.line(role), b.state.lines[role]) for role in differ),
        gap=ticks(gap_ps, Rounding.AT_LEAST),
        mantissa=mantissa,
        exponent=exponent,
    )
    b.edge()


def _scaled(limit: int) -> tuple[int, int]:
    """Mantissa and exponent of a limit, never below it."""
    exponent = 0
    while -(-limit >> exponent) > _MOST_MANTISSA:
        exponent += 1
    return max(1, -(-limit >> exponent)), exponent
