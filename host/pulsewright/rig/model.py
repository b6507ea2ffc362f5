"""What a rig file says, as plain values: site, positions, rails, switches, converters. Millivolts, microamperes, ps."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from pulsewright.errors import Where


@dataclass(frozen=True)
class Scaling:
    """A converter input: raw count = mv * counts / full_mv, 0..counts-1; `error_mv` is its worst reading error."""

    full_mv: int
    counts: int = 1024
    error_mv: int = 0

    def count_at_most(self, mv: int) -> int:
        """The highest count that stands for no more than `mv`."""
        return max(0, min(self.counts - 1, mv * self.counts // self.full_mv))

    def count_at_least(self, mv: int) -> int:
        """The lowest count that stands for no less than `mv`."""
        return max(0, min(self.counts - 1, -(-mv * self.counts // self.full_mv)))

    def mv(self, count: int) -> int:
        """Millivolts of a count, to the nearest."""
        return (count * self.full_mv + self.counts // 2) // self.counts


@dataclass(frozen=True)
class RailStep:
    """A step a rail can make: its number on the wire, nominal level, and how far the truth may be off."""

    number: int
    mv: int
    error_mv: int  # static, both ways
    overshoot_mv: int = 0  # above, at a load's release
    dip_mv: int = 0  # below, at a load step
    dip_us: int = 0  # how long such a dip lasts


@dataclass(frozen=True)
class Rail:
    """A source of the rig that can be set to steps and measured."""

    name: str  # "VCC" or "RAISED"
    number: int
    steps: tuple[RailStep, ...]  # step 0 is off, 0 mV
    settle_ps: int  # longest time from a step's command to the new level
    limit_ua: int  # what it can deliver
    scaling: Scaling

    def step(self, number: int) -> RailStep:
        """The step with a wire number; KeyError if there is none."""
        for step in self.steps:
            if step.number == number:
                return step
        raise KeyError(number)


@dataclass(frozen=True)
class Switch:
    """A raised switch: its bit on the wire, its position, its ceiling and what it loses at the definition's current."""

    number: int
    position: int
    ceiling_mv: int
    drop_mv: int  # at `drop_at_ua`
    drop_at_ua: int
    limiter: bool  # True: passes through the 1 mA limiter
    rise_ps: int  # switch-on to the whole level, longest
    fall_ps: int  # switch-off to below 0.8 V, longest
    rise_fastest_ps: int  # 10-90 %, shortest
    scaling: Scaling


@dataclass(frozen=True)
class VccSwitch:
    """A switch that brings VCC to a position."""

    number: int
    position: int
    drop_mv: int


@dataclass(frozen=True)
class Position:
    """One contact of a site and what can reach it; a line's number, or None."""

    number: int
    line: int | None
    gnd: bool = False


@dataclass(frozen=True)
class Site:
    """A socket of the rig: its positions, and which lines are the data bus and the fixed low address bits."""

    name: str
    positions: Mapping[int, Position]
    data_lines: tuple[int, ...]
    packages: Mapping[str, int]  # package -> offset added to a package pin to get the position

    def position_of(self, package: str, pin: int) -> int:
        """The position a package pin sits in; KeyError for a package the site does not take."""
        return pin + self.packages[package]


@dataclass(frozen=True)
class Rig:
    """A whole rig file."""

    path: str
    name: str
    sites: tuple[Site, ...]
    vcc: Rail
    raised: Rail
    switches: tuple[Switch, ...]
    vcc_switches: tuple[VccSwitch, ...]
    socket_vcc: Scaling
    probe_ohm: int
    driven_from_mv: int  # driven lines are allowed from this VCC up
    released_rise_ps: Mapping[int, int]  # VCC step number -> rise of a released line to VIH, longest
    driven_rise_ps: int
    line_fall_ps: int
    a9_unstated_ua: int  # what an identify or erase current that no source gives counts as
    dip_ignored_us: int
    fall_limit_ps: int  # a raised position must be below VCC + 0.3 V by then
    off_limit_ps: int  # VCC must be below 0.5 V by then
    over_voltage: str  # what guards against it: "comparator" or "clamp"
    port_limit_ua: int
    where: Where = field(default_factory=Where)

    @property
    def site(self) -> Site:
        """The first site, where byte-wide parts sit."""
        return self.sites[0]

    def switch_at(self, position: int) -> Switch | None:
        """The raised switch of a position, if it has one."""
        return next((switch for switch in self.switches if switch.position == position), None)

    def vcc_switch_at(self, position: int) -> VccSwitch | None:
        """The VCC switch of a position, if it has one."""
        return next((switch for switch in self.vcc_switches if switch.position == position), None)
