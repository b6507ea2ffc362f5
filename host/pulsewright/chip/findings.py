"""What the checks share: the definition under check, its tree, and the list of problems found."""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass, field

from pulsewright import units
from pulsewright.chip.kinds import any_of, nearest
from pulsewright.chip.lines import KeyPath
from pulsewright.chip.model import Definition, SupplyStep
from pulsewright.chip.source import Tree
from pulsewright.chip.words import ROLE_NAME, UNDRIVEN_ROLES
from pulsewright.errors import Problem, Where

VCC_RAISED_ABOVE_MV = 5_500  # design: VCC above 5.5 V counts as raised


@dataclass
class Findings:
    """Problems of one definition resolved for one row."""

    tree: Tree
    defn: Definition
    problems: list[Problem] = field(default_factory=list)

    def at(
        self,
        place: KeyPath | Where,
        what: str,
        *,
        found: str = "",
        wanted: str = "",
        nearest: str = "",
        warning: bool = False,
    ) -> None:
        """Note a problem at a key of the tree or at a place."""
        where = place if isinstance(place, Where) else self.tree.places.where(place)
        self.problems.append(Problem(where, what, found, wanted, nearest, warning))

    def unknown(self, place: KeyPath | Where, kind: str, name: str, known: Iterable[str]) -> None:
        """Note a name that refers to nothing."""
        known = list(known)
        self.at(place, f"unknown {kind}", found=name, wanted=any_of(known or ["none"]), nearest=nearest(name, known))

    def has_mode(self, name: str) -> bool:
        """Whether a mode of this name is written in the file, right or wrong."""
        return name in self.tree.names("modes")

    def control_roles(self) -> list[str]:
        """Roles a mode must set: all but A, D, VCC, GND and pins nobody drives; a VPP pin of its own is one."""
        passive = ("A", "D", *UNDRIVEN_ROLES)
        return [role for role in self.tree.names("pins") if role not in passive and re.fullmatch(ROLE_NAME, role)]

    def read_max_mv(self) -> int:
        """The read step's maximum: what stands above it is raised."""
        read = self.defn.supplies.get("VCC.read")
        return read.max_mv if read is not None else VCC_RAISED_ABOVE_MV

    def raised(self, level: str) -> SupplyStep | None:
        """The supply step a pin's level names, if it is a raised one."""
        step = self.defn.supplies.get(level)
        if step is None or step.supply == "VCC":
            return None
        return step if step.max_mv > self.read_max_mv() else None

    def raised_levels(self, mode: str) -> dict[str, SupplyStep]:
        """Raised steps of a mode by the pin they stand at."""
        found = self.defn.modes.get(mode)
        levels = {} if found is None else found.levels
        return {role: step for role, level in levels.items() if (step := self.raised(level)) is not None}

    def raised_pins(self, mode: str) -> list[str]:
        """Pins of a mode at a raised level, VCC among them where it stands above 5.5 V."""
        row = self.defn.modes.get(mode)
        vcc = self.defn.supplies.get(row.vcc) if row is not None else None
        high = ["VCC"] if vcc is not None and vcc.max_mv > VCC_RAISED_ABOVE_MV else []
        return [*self.raised_levels(mode), *high]


def is_time(text: str) -> bool:
    """Whether a text is a time with its unit."""
    try:
        units.parse_ps(text)
    except units.UnitMistake:
        return False
    return True
