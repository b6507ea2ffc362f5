"""H7's numbers in ticks, from the definition's windows and the rig's rise and fall times; minima up, maxima down."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from pulsewright.chip.model import Definition, WaitStep
from pulsewright.chip.steps import steps_of
from pulsewright.rig.model import Rig
from pulsewright.sequence.proof.algorithm import Pulse
from pulsewright.sequence.proof.modes import Row
from pulsewright.sequence.proof.state import NO_PULSE, State
from pulsewright.units import Rounding, ticks


def at_least(ps: int) -> int:
    """Ticks that last `ps` or longer."""
    return ticks(ps, Rounding.AT_LEAST)


def at_most(ps: int) -> int:
    """Ticks that last `ps` or shorter."""
    return ticks(ps, Rounding.AT_MOST)


# A weak pull needs this long to move a position: two time constants of 100 kohm on 200 pF of cable, socket and chip.
# Shorter, and an empty socket still holds what the pull before left there, as a chip would.
BIAS_SETTLE_PS: Final = 40_000_000
_LEEWAY_PS: Final = 1_000_000_000  # 1 ms, where everything stated is short


@dataclass(frozen=True)
class Timing:
    """The definition's parameters by their trade names, 0 where it does not give one; picoseconds."""

    definition: Definition
    rig: Rig
    pulses: Sequence[Pulse] = ()

    def least(self, *names: str) -> int:
        """The longest minimum among the named parameters."""
        found = [self.definition.timing[name].min_ps or 0 for name in names if name in self.definition.timing]
        return max(found, default=0)

    def most(self, *names: str) -> int:
        """The longest maximum among the named parameters."""
        found = [self.definition.timing[name].max_ps or 0 for name in names if name in self.definition.timing]
        return max(found, default=0)

    def busy_ps(self) -> int | None:
        """Longest time the chip may work by itself after a bus write, its load gap included; None: not stated."""
        write = self.definition.write
        if write is None or not write.busy or not self.most(write.busy):
            return None
        return self.most(write.busy) + self.begun_ps()

    def gap_ps(self) -> int:
        """Longest time between two loads of a page; 0: the definition states none."""
        return self.most(self.definition.write.gap) if self.definition.write is not None else 0

    def begun_ps(self) -> int:
        """Time after the last load by which the part has surely begun to write, whichever row it is of."""
        write = self.definition.write
        return 0 if write is None else max(self.gap_ps(), write.begin_ps)

    def line_ps(self, state: State) -> int:
        """How long an edge of a line may take, either way."""
        up = self.rig.driven_rise_ps if state.driven else self.rig.released_rise_ps.get(state.vcc)
        if up is None:  # a step for which the rig file has no figure: the slowest it knows
            up = max(self.rig.released_rise_ps.values(), default=self.rig.driven_rise_ps)
        return max(up, self.rig.line_fall_ps)

    def rise_ps(self, mask: int) -> int:
        """Longest rise of the raised switches in a mask."""
        return max((one.rise_ps for one in self.rig.switches if mask >> one.number & 1), default=0)

    def fall_ps(self, mask: int) -> int:
        """Longest fall of the raised switches in a mask."""
        return max((one.fall_ps for one in self.rig.switches if mask >> one.number & 1), default=0)

    def access_ps(self, row: Row) -> tuple[int, int]:
        """Longest time from an address, and from a control edge, to data valid in a row."""
        if row.access:
            bound = self.most(row.access)
            return bound, bound
        return self.most("tACC"), self.most("tCE", "tOE")

    @property
    def float_ps(self) -> int:
        """Longest time the chip holds D after its outputs were disabled."""
        return self.most("tDF", "tHZ")

    def recovery_ticks(self, mask: int) -> int:
        """From raised switches opened to the next enabling edge: the level gone, then the recovery time."""
        return at_least(self.fall_ps(mask) + self.least("tVR")) if mask else 0

    def fall_ticks(self, mask: int) -> int:
        """From raised switches opened to their levels gone."""
        return at_least(self.fall_ps(mask))

    def hold_ticks(self, kind: str, last: int, state: State) -> int:
        """From the end of a pulse or strobe to the next edge of a kind: address, data, control, raised or vcc."""
        names = {
            "address": ("tAH",), "data": ("tDH",), "raised": ("tVH",), "control": ("tOEH", "tCH"),
            "vcc": ("tAH", "tDH", "tVH"),
        }[kind]  # fmt: skip
        after = self.pulses[last].after_ps if last >= 0 else 0
        return at_least(max(self.least(*names), after) + self.line_ps(state)) if last != NO_PULSE else 0

    @property
    def longest_ticks(self) -> int:
        """What no single wait of a program has a reason to exceed: twice the longest time anybody states."""
        windows = [time for one in self.definition.timing.values() for time in (one.min_ps, one.typ_ps, one.max_ps)]
        steps = [one.ps for one in steps_of(self.definition) if isinstance(one, WaitStep)]
        rig = [self.rig.vcc.settle_ps, self.rig.raised.settle_ps, self.rig.fall_limit_ps, self.rig.off_limit_ps]
        settle = [one.settle_ps for one in self.definition.supplies.values()]
        return at_least(2 * max(*(time or 0 for time in windows), *steps, *settle, *rig, 0) + _LEEWAY_PS)
