"""Which step of a rail serves a window (H3): the level with all that pushes it up, and with all that pulls it down."""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.chip.model import Definition, SupplyStep
from pulsewright.errors import CannotMake
from pulsewright.rig.model import Rail, RailStep, Rig, Switch
from pulsewright.sequence.pinmap import PinMap
from pulsewright.units import show_mv


@dataclass(frozen=True)
class Sums:
    """Both sums of H3 for one rail step at one pin, in millivolts."""

    highest_mv: int
    ceiling_mv: int
    lowest_mv: int
    floor_mv: int

    @property
    def fits(self) -> bool:
        """Both sums stay inside."""
        return self.highest_mv <= self.ceiling_mv and self.lowest_mv >= self.floor_mv

    def __str__(self) -> str:
        return (
            f"at most {show_mv(self.highest_mv)} of {show_mv(self.ceiling_mv)}, "
            f"at least {show_mv(self.lowest_mv)} of {show_mv(self.floor_mv)}"
        )


def _ceiling_mv(definition: Definition, pin: str, step: SupplyStep) -> int:
    maximum = definition.maximum_of(pin)
    if maximum is None or maximum.above_vcc:
        return step.max_mv
    return min(step.max_mv, maximum.mv)


def _dip_mv(rail_step: RailStep, rig: Rig) -> int:
    return 0 if rail_step.dip_us <= rig.dip_ignored_us else rail_step.dip_mv


def _drop_mv(switch: Switch, current_ua: int) -> int:
    """Loss in switch and limiter at a current; it grows with the current, never counts less than stated below it."""
    if current_ua <= switch.drop_at_ua:
        return switch.drop_mv
    return -(-switch.drop_mv * current_ua // switch.drop_at_ua)


def top_mv(definition: Definition, rig: Rig, pin: str, step: SupplyStep) -> int:
    """The highest level a raised pin may stand at: the least of window, absolute maximum and the switch's ceiling."""
    return min(_ceiling_mv(definition, pin, step), PinMap(definition, rig).switch(pin).ceiling_mv)


def raised_sums(definition: Definition, rig: Rig, pin: str, step: SupplyStep, rail_step: RailStep) -> Sums:
    """The sums for a raised pin. A current that no source gives counts as the rig file's `unstated_current`."""
    switch = PinMap(definition, rig).switch(pin)
    current = rig.a9_unstated_ua if step.current_ua is None else step.current_ua
    lowest = rail_step.mv - rail_step.error_mv - _drop_mv(switch, current) - _dip_mv(rail_step, rig)
    return Sums(
        rail_step.mv + rail_step.error_mv + rail_step.overshoot_mv,
        top_mv(definition, rig, pin, step),
        lowest,
        step.min_mv,
    )


def vcc_sums(definition: Definition, rig: Rig, step: SupplyStep, rail_step: RailStep) -> Sums:
    """The sums for the VCC pins."""
    drop = 0
    for pin in definition.pins["VCC"]:
        switch = rig.vcc_switch_at(PinMap(definition, rig).position(pin))
        if switch is not None:
            drop = max(drop, switch.drop_mv)
    lowest = rail_step.mv - rail_step.error_mv - drop - _dip_mv(rail_step, rig)
    highest = rail_step.mv + rail_step.error_mv + rail_step.overshoot_mv
    return Sums(highest, _ceiling_mv(definition, "VCC", step), lowest, step.min_mv)


def _nearest(rail: Rail, typ_mv: int) -> list[RailStep]:
    return sorted((step for step in rail.steps if step.mv), key=lambda step: (abs(step.mv - typ_mv), step.number))


def choose_raised(definition: Definition, rig: Rig, wanted: dict[str, SupplyStep]) -> RailStep:
    """The raised rail's step that serves every pin of `wanted` at once; CannotMake with the sums of the nearest."""
    typ_mv = next(iter(wanted.values())).typ_mv
    tried = []
    for rail_step in _nearest(rig.raised, typ_mv):
        sums = {pin: raised_sums(definition, rig, pin, step, rail_step) for pin, step in wanted.items()}
        if all(each.fits for each in sums.values()):
            return rail_step
        tried += [f"{show_mv(rail_step.mv)} at {pin}: {each}" for pin, each in sums.items() if not each.fits]
    names = ", ".join(f"{step.name} at {pin}" for pin, step in wanted.items())
    raise CannotMake(
        f"no step of the raised rail serves {names}",
        wanted="; ".join(f"{show_mv(step.min_mv)} .. {show_mv(step.max_mv)} at {pin}" for pin, step in wanted.items()),
        got=tried[0] if tried else "no raised step",
        did="was not asked: nothing was sent",
        hint="trim the rail's error down in the rig, or add a step to the rig file",
        where=next(iter(wanted.values())).where,
    )


def vcc_choices(definition: Definition, rig: Rig, step: SupplyStep) -> list[RailStep]:
    """Steps of the VCC rail that with their error lie inside the step's window, lowest first."""
    fitting = [each for each in rig.vcc.steps if each.mv and vcc_sums(definition, rig, step, each).fits]
    return sorted(fitting, key=lambda each: each.mv)


def choose_vcc(definition: Definition, rig: Rig, step: SupplyStep) -> RailStep:
    """The VCC rail's step nearest typ that serves a step of VCC; CannotMake with the sums of the nearest."""
    fitting = vcc_choices(definition, rig, step)
    if fitting:
        return min(fitting, key=lambda each: abs(each.mv - step.typ_mv))
    nearest = _nearest(rig.vcc, step.typ_mv)[0]
    raise CannotMake(
        f"no step of the VCC rail serves {step.name}",
        wanted=f"{show_mv(step.min_mv)} .. {show_mv(step.max_mv)}",
        got=f"{show_mv(nearest.mv)}: {vcc_sums(definition, rig, step, nearest)}",
        did="was not asked: nothing was sent",
        hint="add a step to the rig file, or trim the rail's error down",
        where=step.where,
    )
