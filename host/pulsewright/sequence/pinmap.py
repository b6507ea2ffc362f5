"""Where a part's pins land on a rig's site: lines, raised switches, VCC switches. Pure look-ups."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from pulsewright.chip.model import Definition, Mode
from pulsewright.errors import CannotMake
from pulsewright.rig.model import Rig, Switch
from pulsewright.wire.ops import line_byte
from pulsewright.wire.tables import Level

_NOT_CONTROL = ("A", "D", "VCC", "GND", "NC", "DC")
_LEVELS = {"L": Level.LOW, "H": Level.HIGH}


@dataclass(frozen=True)
class PinMap:
    """A definition seated in the first site of a rig."""

    definition: Definition
    rig: Rig

    def position(self, pin: int) -> int:
        """The site's position under a package pin; CannotMake for a package the site does not take."""
        site = self.rig.site
        if self.definition.package not in site.packages:
            raise CannotMake(
                f"the site does not take a {self.definition.package}",
                wanted=self.definition.package,
                got=", ".join(site.packages),
            )
        return site.position_of(self.definition.package, pin)

    def line(self, name: str) -> int:
        """The line of a pin role or alias; CannotMake where no line reaches it."""
        position = self.position(self.definition.pin_of(name)[0])
        line = self.rig.site.positions[position].line
        if line is None:
            raise CannotMake(f"no line of the rig reaches {name}", got=f"position {position}")
        return line

    @property
    def address_lines(self) -> tuple[int, ...]:
        """Lines of the address bits from bit 0 up."""
        return tuple(self.line(f"A{bit}") for bit in range(len(self.definition.pins["A"])))

    @property
    def control_roles(self) -> tuple[str, ...]:
        """Roles that a line holds L or H in some mode: CE, OE, ..."""
        return tuple(role for role in self.definition.pins if role not in _NOT_CONTROL)

    def switch(self, name: str) -> Switch:
        """The raised switch of a pin role or alias; CannotMake where the position has none."""
        position = self.position(self.definition.pin_of(name)[0])
        switch = self.rig.switch_at(position)
        if switch is None:
            raise CannotMake(f"the rig cannot raise {name}", got=f"position {position} has no raised switch")
        return switch

    @property
    def vcc_mask(self) -> int:
        """Mask of the VCC switches of the part's VCC pins; CannotMake where a pin has none."""
        mask = 0
        for pin in self.definition.pins["VCC"]:
            switch = self.rig.vcc_switch_at(self.position(pin))
            if switch is None:
                raise CannotMake(f"the rig cannot bring VCC to pin {pin}", got=f"position {self.position(pin)}")
            mask |= 1 << switch.number
        return mask

    def raised_levels(self, mode: Mode) -> Mapping[str, str]:
        """Pin role or alias -> supply step, for the raised pins of a mode."""
        return {name: level for name, level in mode.levels.items() if level in self.definition.supplies}

    def control_levels(self, mode: Mode) -> dict[str, Level]:
        """Line level of each control role in a mode; a raised pin's line is H, X and Z keep what they are."""
        levels = {}
        for role in self.control_roles:
            level = mode.levels.get(role, "X")
            if level in self.definition.supplies or level == "VCC":
                levels[role] = Level.HIGH
            elif level in _LEVELS:
                levels[role] = _LEVELS[level]
        return levels

    def pattern(self, mode: Mode) -> bytes:
        """The mode's control lines as line bytes, in the order of roles."""
        return bytes(line_byte(self.line(role), level) for role, level in self.control_levels(mode).items())

    def enabling(self, mode: Mode) -> bytes:
        """Line bytes of the control lines that a mode holds at L or H by itself: what makes the chip drive D in it."""
        own = [role for role in self.control_roles if mode.levels.get(role) in _LEVELS]
        return bytes(line_byte(self.line(role), _LEVELS[mode.levels[role]]) for role in own)

    def raised_address_bits(self, mode: Mode) -> int:
        """Address bits that stand raised in a mode: their lines must be H."""
        bits = 0
        for name in self.raised_levels(mode):
            if name.startswith("A") and name[1:].isdigit():
                bits |= 1 << int(name[1:])
        return bits
