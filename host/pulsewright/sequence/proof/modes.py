"""The mode table as the rig's lines and switches see it, made from the definition's side alone."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from pulsewright.chip.model import PACKAGE_PINS, Definition, Mode, SupplyStep
from pulsewright.rig.model import Rig, Switch
from pulsewright.sequence.proof.electrical import Sums, raised_sums, vcc_sums
from pulsewright.sequence.proof.state import HIGH, LOW, RELEASED, State

_SUPPLY_PINS = ("VCC", "GND")
_UNCONNECTED = ("NC", "DC")


@dataclass(frozen=True)
class Raised:
    """A raised level that a mode wants at a switch: its supply, the steps that serve it, the sums of each step."""

    switch: Switch
    supply: SupplyStep
    role: str
    top_mv: int  # the lower of window's and pin's maximum
    steps: frozenset[int]
    sums: Mapping[int, Sums]


@dataclass(frozen=True)
class Row:
    """A row of the mode table: what each line must be, what each raised switch must carry, VCC, who drives D."""

    name: str
    lines: Mapping[int, str]  # line -> levels it may have, as a text of level letters
    pattern: Mapping[int, str]  # control lines that the row wants L or H
    raised: Mapping[int, Raised]  # by switch number
    vcc: str  # supply step
    data: str | int
    access: str
    unreachable: str = ""  # why the rig cannot make this row

    @property
    def drives(self) -> bool:
        """True when the chip drives D in this row."""
        return self.data == "out"


@dataclass(frozen=True)
class Pins:
    """Where the chip's pins meet the rig's lines."""

    address: tuple[int, ...]  # line of each address bit
    control: Mapping[int, str]  # line -> role
    data: tuple[int, ...]
    supply_lines: frozenset[int]  # lines at VCC, GND, outputs and pins without a role in any mode: never to be driven
    open_lines: frozenset[int]  # lines at pins that are not connected: low or released
    vcc_mask: int
    power_lines: tuple[int, ...]  # supply positions of the packages that this chip is not
    problems: tuple[str, ...]

    @property
    def inputs(self) -> tuple[int, ...]:
        """Every line that may be driven."""
        return (*self.address, *self.control)


def line_at(definition: Definition, rig: Rig, pin: int) -> int | None:
    """The line that reaches a package pin."""
    position = rig.site.positions.get(rig.site.position_of(definition.package, pin))
    return None if position is None else position.line


def switch_of(definition: Definition, rig: Rig, pin: int) -> Switch | None:
    """The raised switch at a package pin."""
    return rig.switch_at(rig.site.position_of(definition.package, pin))


def _power_lines(definition: Definition, rig: Rig, own: tuple[int, ...]) -> tuple[int, ...]:
    tops = sorted(PACKAGE_PINS[name] + offset for name, offset in rig.site.packages.items() if name in PACKAGE_PINS)
    lines = [rig.site.positions[top].line for top in tops if top in rig.site.positions and top not in own]
    return tuple(line for line in lines if line is not None)


def map_pins(definition: Definition, rig: Rig) -> Pins:
    """Lines of the chip's pins, and everything that keeps the part off this rig's first site."""
    named = {name for mode in definition.modes.values() for name in mode.levels}
    problems: list[str] = []
    address: list[int] = []
    control: dict[int, str] = {}
    closed: set[int] = set()
    loose: set[int] = set()
    data: list[int] = []
    for role, pins in definition.pins.items():
        for pin in pins:
            line = line_at(definition, rig, pin)
            if role in _UNCONNECTED and role not in named:
                loose |= set() if line is None else {line}
            elif role in _SUPPLY_PINS or (role not in ("A", "D") and role not in named):
                closed |= set() if line is None else {line}
            elif line is None:
                problems.append(f"no line of the rig reaches pin {pin} ({role})")
            elif role == "D":
                data.append(line)
            elif role == "A":
                address.append(line)
            else:
                control[line] = role
    if tuple(data) != rig.site.data_lines[: len(data)]:
        problems.append("the chip's data pins do not meet the site's data lines in order")
    own = tuple(rig.site.position_of(definition.package, pin) for pin in definition.pins.get("VCC", ()))
    mask = 0
    for position in own:
        switch = rig.vcc_switch_at(position)
        if switch is None:
            problems.append(f"no VCC switch at position {position}")
        else:
            mask |= 1 << switch.number
    power = _power_lines(definition, rig, own)
    own_lines, unused = frozenset(closed), frozenset(loose)
    return Pins(tuple(address), control, tuple(data), own_lines, unused, mask, power, tuple(problems))


def _raised_at(definition: Definition, rig: Rig, mode: Mode, role: str, pin: int, supply: SupplyStep) -> Raised | None:
    switch = switch_of(definition, rig, pin)
    if switch is None:
        return None
    low_vcc = definition.supplies[mode.vcc].min_mv
    sums = {
        step.number: raised_sums(definition, rig, supply, role, switch, step, low_vcc)
        for step in rig.raised.steps
        if step.number
    }
    top = min((one.max_mv for one in sums.values()), default=0)
    return Raised(switch, supply, role, top, frozenset(n for n, one in sums.items() if one.fit), sums)


_ALLOWED = {"L": LOW, "H": HIGH, "Z": RELEASED, "VCC": HIGH + RELEASED}


def make_row(definition: Definition, rig: Rig, mode: Mode, pins: Pins) -> Row:
    """One row; a level the rig cannot make leaves it `unreachable`."""
    any_address = "LHWSU"
    lines = dict.fromkeys(pins.address, any_address)
    pattern: dict[int, str] = {}
    raised: dict[int, Raised] = {}
    problem = "" if mode.vcc in definition.supplies else f"{mode.vcc} is not a supply step"
    levels = dict(mode.levels)
    rest = levels.pop("A", "X")
    if rest in _ALLOWED:
        lines = dict.fromkeys(pins.address, _ALLOWED[rest])
    for name, level in levels.items():
        for pin in definition.pin_of(name) if name not in _SUPPLY_PINS else ():
            line = line_at(definition, rig, pin)
            if line is None or problem:
                problem = problem or f"no line reaches {name}"
            elif level in _ALLOWED:
                lines[line] = _ALLOWED[level]
                if level in ("L", "H"):
                    pattern[line] = level
            elif level in definition.supplies:
                want = _raised_at(definition, rig, mode, name, pin, definition.supplies[level])
                if want is None:
                    problem = f"no raised switch at {name}"
                else:
                    raised[want.switch.number] = want
                    lines[line] = HIGH + RELEASED
            elif level != "X":
                problem = f"{name} = {level} is not understood"
    if mode.data == "out" and not problem:
        wanted = (mode.access,) if mode.access else ("tACC", "tCE")
        missing = [one for one in wanted if one not in definition.timing or not definition.timing[one].max_ps]
        problem = f"no longest access time: {missing[0]}" if missing else ""
    return Row(mode.name, lines, pattern, raised, mode.vcc, mode.data, mode.access, problem)


def vcc_steps(definition: Definition, rig: Rig, pins: Pins) -> dict[str, dict[int, Sums]]:
    """By VCC supply step: the sums of every step of the rig's VCC rail."""
    drops = [switch.drop_mv for switch in rig.vcc_switches if pins.vcc_mask >> switch.number & 1]
    return {
        name: {
            step.number: vcc_sums(definition, rig, supply, step, max(drops, default=0))
            for step in rig.vcc.steps
            if step.number
        }
        for name, supply in definition.supplies.items()
        if supply.supply == "VCC"
    }


def lines_fit(row: Row, levels: tuple[str, ...]) -> bool:
    """Whether every line is what the row wants."""
    return all(levels[line] in allowed for line, allowed in row.lines.items())


def switches_fit(row: Row, state: State) -> bool:
    """Whether exactly the row's raised levels stand, at steps that serve them."""
    mask = 0
    for number, want in row.raised.items():
        if state.rail not in want.steps:
            return False
        mask |= 1 << number
    return mask == state.on


def may_drive(patterns: tuple[Mapping[int, str], ...], *levels: tuple[str, ...]) -> bool:
    """Whether the chip could drive D at lines that are each at one of the given levels: anything unknown counts."""
    definite = {LOW, HIGH}
    for pattern in patterns:
        if all(any(at[line] == level or at[line] not in definite for at in levels) for line, level in pattern.items()):
            return True
    return False
