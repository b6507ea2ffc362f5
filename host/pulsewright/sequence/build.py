"""A program under construction: ops with their origins, waits that add up, and what stands at the pins."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from typing import Any

from pulsewright.chip.model import Definition
from pulsewright.errors import CannotMake, Where
from pulsewright.rig.model import RailStep, Rig
from pulsewright.sequence.pinmap import PinMap
from pulsewright.sequence.types import Origin
from pulsewright.units import Rounding, ticks
from pulsewright.wire.ops import Header, Instruction, Label, assemble, ins, line_byte
from pulsewright.wire.tables import Fail, Level, Op

US = 10**6  # picoseconds


@dataclass
class PinState:
    """What the compiler knows to stand at the pins at this point of the program."""

    lines: dict[str, Level] = field(default_factory=dict)
    data: str = "Z"  # "Z" released, "driven"
    outputs: bool = False  # the chip may drive D
    switches: int = 0
    vcc: RailStep | None = None
    raised: RailStep | None = None
    raised_low: int = 0  # counts of the window in which the raised rail was measured last
    raised_high: int = 0
    high_driven: bool = False
    mode: str = ""
    levels: dict[str, str] = field(default_factory=dict)  # raised pin -> supply step it stands at
    addressed: bool = False  # the address lines carry the word in hand
    written: bool = False  # a bus write may still be open: the part waits for more loads


Fork = tuple[PinState, int, int]  # what stood at a place, the settling still due there, and what was waited since


class Builder:
    """Collects ops. `part` and `where` go with each op into its Origin."""

    def __init__(self, definition: Definition, rig: Rig) -> None:
        self.definition = definition
        self.rig = rig
        self.pins = PinMap(definition, rig)
        self.state = PinState()
        self.items: list[tuple[Instruction | Label, Origin]] = []
        self.depth = 0
        self.vcc_looks: list[tuple[int, int]] = []  # index in `items` of each look at full VCC, its rail step
        self._part = "seating"
        self._text = ""
        self._where = Where()
        self._settle_ps = 0
        self._waited_ps = 0  # since the last edge: waits count from there
        self._labels = 0

    # ---- ops and their origins --------------------------------------------------------------------

    @contextmanager
    def about(self, text: str, *, part: str = "", where: Where | None = None) -> Iterator[None]:
        """Ops emitted inside carry this text, part and place."""
        kept = self._part, self._text, self._where
        self._part, self._text = part or self._part, text
        self._where = where if where is not None else self._where
        yield
        self._part, self._text, self._where = kept

    def emit(self, op: Op, **args: Any) -> None:
        """Appends an op."""
        self.items.append((ins(op, **args), Origin(0, self._part, self._text, self._where)))

    def label(self) -> Label:
        """A new label, not placed yet."""
        self._labels += 1
        return Label(f"L{self._labels}")

    def place(self, label: Label) -> None:
        """Puts a label here."""
        self.items.append((label, Origin(0, self._part, self._text, self._where)))

    def fail_unless(self, why: Fail) -> None:
        """Ends the sequence with `why` where the flag is clear."""
        good = self.label()
        self.emit(Op.BRANCH, when=1, depth=self.depth, to=good.name)
        self.emit(Op.FAIL, why=why)
        self.place(good)

    # ---- time -------------------------------------------------------------------------------------

    def edge(self, settle_ps: int = 0) -> None:
        """The op just emitted moved pins; they need `settle_ps` before any time counts."""
        self._settle_ps = max(self._settle_ps, settle_ps)
        self._waited_ps = 0

    def wait(self, ps: int) -> None:
        """At least `ps` after everything that moved has settled, and after what was waited for since."""
        more = self._settle_ps + ps
        self._settle_ps = 0
        if not more:
            return
        self._waited_ps += more
        count = ticks(self._waited_ps, Rounding.AT_LEAST)
        last = self.items[-1][0] if self.items else None
        if isinstance(last, Instruction) and last.op is Op.WAIT:
            self.items[-1] = (ins(Op.WAIT, ticks=count), self.items[-1][1])
        else:
            self.emit(Op.WAIT, ticks=count)

    # ---- paths ------------------------------------------------------------------------------------

    def fork(self) -> Fork:
        """What stands here, and what was waited: to come back to on another path."""
        state = self.state
        kept = replace(state, lines=dict(state.lines), levels=dict(state.levels))
        return kept, self._settle_ps, self._waited_ps

    def back_to(self, fork: Fork) -> None:
        """The program goes on as if only the path up to a fork had been taken."""
        state, self._settle_ps, self._waited_ps = fork
        self.state = replace(state, lines=dict(state.lines), levels=dict(state.levels))

    def join(self, fork: Fork, text: str) -> None:
        """Two paths meet: this one and that of a fork; CannotMake where the pins stand differently."""
        state, settle_ps, waited_ps = fork
        if state != self.state:
            raise CannotMake(
                f"{text}: the steps end in another state than they began in",
                wanted=f"mode {state.mode}",
                got=f"mode {self.state.mode}",
                where=self._where,
            )
        self._settle_ps, self._waited_ps = max(settle_ps, self._settle_ps), min(waited_ps, self._waited_ps)

    @property
    def line_settle_ps(self) -> int:
        """How long a line needs to its level, whichever way, as H is made now and at this VCC."""
        if self.state.high_driven:
            return max(self.rig.driven_rise_ps, self.rig.line_fall_ps)
        step = self.state.vcc.number if self.state.vcc else 0
        return max(self.rig.released_rise_ps.get(step, 0), self.rig.line_fall_ps)

    def access_ps(self, mode: str) -> int:
        """Longest time from a settled address or enable to valid data in a mode."""
        named = self.definition.modes[mode].access
        names = (named,) if named else ("tACC", "tCE", "tOE")
        times = [self.definition.timing[name].max_ps for name in names if name in self.definition.timing]
        return max((time for time in times if time is not None), default=0)

    def timing_min_ps(self, name: str) -> int:
        """The minimum of a timing parameter, 0 where there is none."""
        window = self.definition.timing.get(name)
        return window.min_ps or 0 if window else 0

    def timing_max_ps(self, name: str) -> int:
        """The maximum of a timing parameter, 0 where there is none."""
        window = self.definition.timing.get(name)
        return window.max_ps or 0 if window else 0

    # ---- lines and data ---------------------------------------------------------------------------

    def set_lines(self, levels: Mapping[str, Level]) -> None:
        """Moves the control lines that differ, as one group."""
        moved = {role: level for role, level in levels.items() if self.state.lines.get(role) != level}
        if not moved:
            return
        self.emit(Op.LINES, lines=bytes(line_byte(self.pins.line(role), level) for role, level in moved.items()))
        self.state.lines.update(moved)
        self.edge(self.line_settle_ps)

    def address(self, at: int) -> None:
        """Address lines to a constant."""
        self.emit(Op.ADDRESS, at=at)
        self.edge(self.line_settle_ps)
        self.state.addressed = False

    def address_word(self) -> None:
        """Address lines to the word in hand, if they do not carry it already."""
        if not self.state.addressed:
            self.emit(Op.ADDRESS_WORD)
            self.edge(self.line_settle_ps)
            self.state.addressed = True

    def release(self) -> None:
        """Data released, if it was driven."""
        if self.state.data != "Z":
            self.emit(Op.RELEASE)
            self.edge()
            self.state.data = "Z"

    # ---- the end ----------------------------------------------------------------------------------

    def assemble(self, header: Header) -> tuple[bytes, tuple[Origin, ...]]:
        """The encoded program and its origins with their byte offsets."""
        code, offsets = assemble(header, [item for item, _ in self.items])
        bare = [origin for item, origin in self.items if isinstance(item, Instruction)]
        origins = [Origin(at, o.part, o.text, o.where) for at, o in zip(offsets, bare, strict=True)]
        return code, tuple(origins)
