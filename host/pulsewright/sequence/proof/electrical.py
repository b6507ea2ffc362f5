"""H3's sums: can a step of the rig serve a named supply at a pin, with every error, drop and dip counted."""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.chip.model import Definition, SupplyStep
from pulsewright.rig.model import RailStep, Rig, Switch
from pulsewright.units import show_mv


@dataclass(frozen=True)
class Sums:
    """Highest and lowest level that may stand at the pin, and what the supply and the pin allow."""

    high_mv: int
    low_mv: int
    max_mv: int
    min_mv: int
    current_ua: int
    limit_ua: int

    @property
    def fit(self) -> bool:
        """True when both sums stay inside and the source can deliver the current."""
        return self.high_mv <= self.max_mv and self.low_mv >= self.min_mv and self.current_ua <= self.limit_ua

    @property
    def wanted(self) -> str:
        """The window, as text."""
        return f"{show_mv(self.min_mv)} to {show_mv(self.max_mv)}"

    @property
    def got(self) -> str:
        """Both sums, as text."""
        return f"{show_mv(self.low_mv)} to {show_mv(self.high_mv)}"


def _dip_mv(step: RailStep, rig: Rig) -> int:
    return 0 if step.dip_us <= rig.dip_ignored_us else step.dip_mv


def pin_max_mv(definition: Definition, role: str, vcc_min_mv: int) -> int | None:
    """Absolute maximum of a pin with VCC at least at `vcc_min_mv`; None where the definition gives none."""
    maximum = definition.maximum_of(role)
    if maximum is None:
        return None
    return maximum.mv + (vcc_min_mv if maximum.above_vcc else 0)


def vcc_sums(definition: Definition, rig: Rig, supply: SupplyStep, step: RailStep, drop_mv: int) -> Sums:
    """The sums of a VCC step for a VCC supply, through a VCC switch that loses `drop_mv`."""
    top = pin_max_mv(definition, "VCC", 0)
    return Sums(
        high_mv=step.mv + step.error_mv + step.overshoot_mv,
        low_mv=step.mv - step.error_mv - drop_mv - _dip_mv(step, rig),
        max_mv=supply.max_mv if top is None else min(supply.max_mv, top),
        min_mv=supply.min_mv,
        current_ua=supply.current_ua or 0,
        limit_ua=rig.vcc.limit_ua,
    )


def drop_mv(switch: Switch, current_ua: int) -> int:
    """What a raised switch loses at a current: in proportion to the one the rig file gives, never rounded down."""
    if not switch.drop_at_ua:
        return switch.drop_mv
    return -(-switch.drop_mv * current_ua // switch.drop_at_ua)


def raised_sums(
    definition: Definition, rig: Rig, supply: SupplyStep, role: str, switch: Switch, step: RailStep, vcc_min_mv: int
) -> Sums:
    """The sums of a raised step for a supply at the pin `role` behind a raised switch."""
    current_ua = supply.current_ua
    if (
        current_ua is None
    ):  # the source does not say: the rig file's figure behind the limiter, else the switch's rating
        current_ua = rig.a9_unstated_ua if switch.limiter else switch.drop_at_ua
    tops = [supply.max_mv, switch.ceiling_mv]
    top = pin_max_mv(definition, role, vcc_min_mv)
    if top is not None:
        tops.append(top)
    return Sums(
        high_mv=step.mv + step.error_mv + step.overshoot_mv,
        low_mv=step.mv - step.error_mv - drop_mv(switch, current_ua) - _dip_mv(step, rig),
        max_mv=min(tops),
        min_mv=supply.min_mv,
        current_ua=current_ua,
        limit_ua=min(rig.raised.limit_ua, 1000) if switch.limiter else rig.raised.limit_ua,
    )
