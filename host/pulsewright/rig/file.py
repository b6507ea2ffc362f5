"""Reads a rig file: every mistake in one run, each with its line; the reference rig's file ships with the package."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from pulsewright import units
from pulsewright.chip.kinds import Examiner, ListOf, Quantity, Table, Text, Whole, shown
from pulsewright.chip.lines import Places
from pulsewright.chip.source import read_toml
from pulsewright.errors import DefinitionMistake, Problem, RigFileMistake, Where
from pulsewright.rig.model import Position, Rail, RailStep, Rig, Scaling, Site, Switch, VccSwitch
from pulsewright.units import parse_mohm, parse_mv, parse_ps, parse_ua

REFERENCE = Path(__file__).with_name("reference.toml")
FORMAT = 1

_VOLTS = Quantity(parse=units.parse_mv, unit_names=("V", "mV"))
_AMPERES = Quantity(parse=units.parse_ua, unit_names=("A", "mA", "uA"))
_TIME = Quantity(parse=units.parse_ps, unit_names=("s", "ms", "us", "ns"))
_OHMS = Quantity(parse=units.parse_mohm, unit_names=("ohm", "k"))
_PLACE = Whole(low=1, high=64)
_CONVERTER = Table(
    {"full": _VOLTS, "counts": Whole(low=2, high=65_536), "error": _VOLTS}, required=("full", "counts", "error")
)
_STEP = Table(
    {
        "step": Whole(low=1, high=15),
        "level": _VOLTS,
        "error": _VOLTS,
        "overshoot": _VOLTS,
        "dip": _VOLTS,
        "dip_time": _TIME,
    },
    required=("step", "level", "error", "overshoot", "dip", "dip_time"),
)
_SWITCH = Table(
    {
        "switch": Whole(low=0, high=7),
        "position": _PLACE,
        "ceiling": _VOLTS,
        "drop": _VOLTS,
        "at": _AMPERES,
        "rise": _TIME,
        "fastest": _TIME,
        "fall": _TIME,
        "limiter": _AMPERES,
    },
    required=("switch", "position", "ceiling", "drop", "at", "rise", "fastest", "fall"),
)
_VCC_SWITCH = Table(
    {"switch": Whole(low=0, high=7), "position": _PLACE, "drop": _VOLTS}, required=("switch", "position", "drop")
)
_RISE = Table({"step": Whole(low=1, high=15), "rise": _TIME}, required=("step", "rise"))


def _all(keys: dict[str, Any]) -> Table:
    return Table(keys, required=tuple(keys))


_FILE = _all(
    {
        "format": Whole(low=FORMAT, high=FORMAT),
        "rig": _all({"name": Text(), "over_voltage": Text(choices=("comparator", "clamp")), "port_limit": _AMPERES}),
        "site": _all(
            {
                "name": Text(),
                "positions": _PLACE,
                "packages": Table({}, others=Whole(low=0, high=32), names=r"DIP-\d+", wanted='a package, "DIP-28"'),
                "gnd": ListOf(_PLACE),
                "data": ListOf(_PLACE),
            }
        ),
        "lines": _all({"driven_from": _VOLTS, "driven_rise": _TIME, "fall": _TIME, "released_rise": ListOf(_RISE)}),
        "vcc": _all(
            {
                "probe": _OHMS,
                "settle": _TIME,
                "limit": _AMPERES,
                "off_limit": _TIME,
                "converter": _CONVERTER,
                "steps": ListOf(_STEP),
                "switches": ListOf(_VCC_SWITCH),
            }
        ),
        "raised": _all(
            {
                "settle": _TIME,
                "limit": _AMPERES,
                "dip_ignored": _TIME,
                "fall_limit": _TIME,
                "unstated_current": _AMPERES,
                "converter": _CONVERTER,
                "steps": ListOf(_STEP),
                "switches": ListOf(_SWITCH),
            }
        ),
    }
)

Node = dict[str, Any]
_UNIQUE = (("steps", "step"), ("switches", "switch"), ("switches", "position"))


def _scaling(node: Node) -> Scaling:
    return Scaling(parse_mv(node["full"]), node["counts"], parse_mv(node["error"]))


def _steps(rows: list[Node]) -> tuple[RailStep, ...]:
    steps = [
        RailStep(
            number=row["step"],
            mv=parse_mv(row["level"]),
            error_mv=parse_mv(row["error"]),
            overshoot_mv=parse_mv(row["overshoot"]),
            dip_mv=parse_mv(row["dip"]),
            dip_us=-(-parse_ps(row["dip_time"]) // 10**6),
        )
        for row in rows
    ]
    return (RailStep(0, 0, 0), *steps)


def _switches(rows: list[Node], scaling: Scaling) -> tuple[Switch, ...]:
    return tuple(
        Switch(
            number=row["switch"],
            position=row["position"],
            ceiling_mv=parse_mv(row["ceiling"]),
            drop_mv=parse_mv(row["drop"]),
            drop_at_ua=parse_ua(row["at"]),
            limiter="limiter" in row,
            rise_ps=parse_ps(row["rise"]),
            fall_ps=parse_ps(row["fall"]),
            rise_fastest_ps=parse_ps(row["fastest"]),
            scaling=scaling,
        )
        for row in rows
    )


def _site(node: Node) -> Site:
    gnd = set(node["gnd"])
    positions = {
        number: Position(number, None if number in gnd else number, number in gnd)
        for number in range(1, node["positions"] + 1)
    }
    return Site(node["name"], positions, tuple(node["data"]), dict(node["packages"]))


def _doubles(tree: Node, places: Places) -> list[Problem]:
    """A step, switch or position that a list names twice, and one that is outside the site."""
    problems = []
    top = tree["site"]["positions"]
    lists = [(rail, name, key) for rail in ("vcc", "raised") for name, key in _UNIQUE]
    for table, name, key in lists:
        seen: dict[int, int] = {}
        for index, row in enumerate(tree[table][name]):
            path = (table, name, index, key)
            if row[key] in seen:
                problems.append(Problem(places.where(path), f"{key} {row[key]} stands twice", shown(row[key])))
            if key == "position" and row[key] > top:
                problems.append(Problem(places.where(path), "outside the site", shown(row[key]), f"1 to {top}"))
            seen[row[key]] = index
    return problems


def load_rig(path: Path | str | None = None) -> Rig:
    """The rig a file describes; None: the reference rig. RigFileMistake with every problem, or FileMistake."""
    file = REFERENCE if path is None else Path(path)
    try:
        tree, text = read_toml(file, "rig file")
    except DefinitionMistake as mistake:
        raise RigFileMistake(mistake.what, mistake.problems) from None
    places = Places(text)
    examiner = Examiner(places, {})
    _FILE.examine(tree, (), examiner)
    problems = examiner.problems or _doubles(tree, places)
    if problems:
        raise RigFileMistake(f"the rig file has {len(problems)} problems", problems)
    return _build(str(file), tree)


def _build(path: str, tree: Node) -> Rig:
    lines, vcc, raised = tree["lines"], tree["vcc"], tree["raised"]
    socket, high = _scaling(vcc["converter"]), _scaling(raised["converter"])
    return Rig(
        path=path,
        name=tree["rig"]["name"],
        sites=(_site(tree["site"]),),
        vcc=Rail("VCC", 0, _steps(vcc["steps"]), parse_ps(vcc["settle"]), parse_ua(vcc["limit"]), socket),
        raised=Rail("RAISED", 1, _steps(raised["steps"]), parse_ps(raised["settle"]), parse_ua(raised["limit"]), high),
        switches=_switches(raised["switches"], high),
        vcc_switches=tuple(
            VccSwitch(row["switch"], row["position"], parse_mv(row["drop"])) for row in vcc["switches"]
        ),
        socket_vcc=socket,
        probe_ohm=parse_mohm(vcc["probe"]) // 1000,
        driven_from_mv=parse_mv(lines["driven_from"]),
        released_rise_ps={row["step"]: parse_ps(row["rise"]) for row in lines["released_rise"]},
        driven_rise_ps=parse_ps(lines["driven_rise"]),
        line_fall_ps=parse_ps(lines["fall"]),
        a9_unstated_ua=parse_ua(raised["unstated_current"]),
        dip_ignored_us=parse_ps(raised["dip_ignored"]) // 10**6,
        fall_limit_ps=parse_ps(raised["fall_limit"]),
        off_limit_ps=parse_ps(vcc["off_limit"]),
        over_voltage=tree["rig"]["over_voltage"],
        port_limit_ua=parse_ua(tree["rig"]["port_limit"]),
        where=Where(path),
    )
