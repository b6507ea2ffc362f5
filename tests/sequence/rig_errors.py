"""A virtual rig that is off by what its rig file allows: levels, settling, rise and fall, drawn at random."""

from __future__ import annotations

from dataclasses import dataclass

from hypothesis import strategies as st

from pulsewright.rig.file import load_rig
from pulsewright.units import Rounding, ticks
from pulsewright.virtual.board import Board
from pulsewright.virtual.interface import ChipModel
from pulsewright.virtual.judge import Judge
from pulsewright.virtual.rig import VirtualRig
from pulsewright.virtual.seat import wiring
from pulsewright.virtual.socket import Socket

RIG = load_rig()


@dataclass(frozen=True)
class Errors:
    """Where this rig stands inside its file's limits: millivolts off, and parts of a thousand of the longest times."""

    vcc_mv: int = 0
    raised_mv: int = 0
    settle: int = 1_000
    rise: int = 1_000
    fall: int = 1_000


@st.composite
def errors(draw: st.DrawFn) -> Errors:
    """Any rig that keeps its file; often one at a limit."""
    vcc = min(step.error_mv for step in RIG.vcc.steps if step.mv)
    raised = min(step.error_mv for step in RIG.raised.steps if step.mv)
    off = [st.one_of(st.sampled_from((-most, 0, most)), st.integers(-most, most)) for most in (vcc, raised)]
    part = st.one_of(st.just(1_000), st.integers(300, 1_000))
    return Errors(draw(off[0]), draw(off[1]), draw(part), draw(part), draw(part))


@dataclass(frozen=True)
class OffBoard(Board):
    """The board with its own rise and fall times."""

    rise: int = 1_000
    fall: int = 1_000

    def rise_ticks(self, mv: int) -> int:
        return _part(min(one.rise_ps for one in RIG.switches), self.rise)

    def fall_ticks(self, position: int, mv: int) -> int:
        switch = RIG.switch_at(position)
        return _part(switch.fall_ps if switch else 0, self.fall)


def _part(ps: int, thousandths: int) -> int:
    return max(1, ticks(ps * thousandths // 1_000, Rounding.AT_MOST))


class OffSocket(Socket):
    """The socket with a VCC rail that is off."""

    vcc_off_mv = 0

    def set_rail(self, t: int, mv: int) -> None:
        super().set_rail(t, mv + self.vcc_off_mv if mv else 0)


def rig_with(chip: ChipModel, off: Errors) -> tuple[VirtualRig, Judge]:
    """The rig with the chip in its socket, its button held, and the judge at the pins."""
    judge = Judge(chip.limits, busy=getattr(chip, "is_busy", None))
    socket = OffSocket(chip, wiring(chip.limits.package), (judge,))
    socket.vcc_off_mv = off.vcc_mv
    board = OffBoard(
        button=True,
        raised_offset_mv=off.raised_mv,
        vcc_settle_ticks=_part(RIG.vcc.settle_ps, off.settle),
        raised_settle_ticks=_part(RIG.raised.settle_ps, off.settle),
        rise=off.rise,
        fall=off.fall,
    )
    return VirtualRig(socket, boot=1, board=board), judge
