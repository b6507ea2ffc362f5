"""The connection diagram of a part in the data sheet's form, as text: the package from above, pins round it, and which
position of the rig's site each pin meets.
"""

from __future__ import annotations

from pulsewright.chip.model import PACKAGE_PINS, Definition
from pulsewright.rig.model import Rig

_BODY = 15  # characters between the two rows of pins


def pin_name(definition: Definition, pin: int) -> str:
    """What a data sheet writes at the pin: "A9", "OE/VPP" where a mode puts VPP there, "NC" where no role names it."""
    role = definition.role_of(pin)
    if not role:
        return "NC"
    raised = {
        level.split(".", 1)[0]
        for mode in definition.modes.values()
        for name, level in mode.levels.items()
        if name != "VCC" and name not in definition.supplies and "." in level and pin in definition.pin_of(name)
    }
    shown = sorted(supply for supply in raised if supply == "VPP" and role != "VPP")
    return "/".join([role, *shown])


def positions_of(definition: Definition, rig: Rig) -> dict[int, int]:
    """The position of the rig's first site that each package pin meets; empty: the site does not take the package."""
    if definition.package not in rig.site.packages:
        return {}
    pins = PACKAGE_PINS[definition.package]
    return {pin: rig.site.position_of(definition.package, pin) for pin in range(1, pins + 1)}


def connection_diagram(definition: Definition, rig: Rig) -> list[str]:
    """Lines of text: package seen from above with its notch, pin names outside, pin numbers at the edge, positions."""
    pins = PACKAGE_PINS[definition.package]
    positions = positions_of(definition, rig)
    left = [pin_name(definition, pin) for pin in range(1, pins // 2 + 1)]
    width = max(len(name) for name in [*left, "signal"])
    top = "+" + "-" * ((_BODY - 3) // 2) + "\\_/" + "-" * ((_BODY - 3) // 2) + "+"
    edge = " " * (width + 15)
    lines = [
        f"{definition.package}, seen from above",
        f"{'signal':>{width}}  position  pin{' ' * (_BODY + 2)}pin  position  signal",
        f"{edge}{top}".rstrip(),
    ]
    for row in range(pins // 2):
        one, other = row + 1, pins - row
        lines.append(
            f"{left[row]:>{width}}  {positions.get(one, '-'):>8}  {one:>3}|{' ' * _BODY}|{other:<3}"
            f"  {positions.get(other, '-'):<8}  {pin_name(definition, other)}"
        )
    lines.append(f"{edge}+{'-' * _BODY}+")
    return lines
