"""From an examined tree to a `Definition`. What is missing or was wrong is left out: the checker has told of it, and
`load` refuses such a file, so only the checker ever sees a definition with gaps.
"""

from __future__ import annotations

import hashlib
import json
import re
from collections.abc import Iterable, Mapping
from typing import Any

from pulsewright import units
from pulsewright.chip.build_steps import StepBuilder, windows
from pulsewright.chip.lines import KeyPath
from pulsewright.chip.model import (
    BusWrite,
    CommandIdentify,
    Definition,
    IdCell,
    MakerRow,
    Maximum,
    Method,
    Mode,
    Protect,
    SupplyStep,
    VerifyPass,
)
from pulsewright.chip.source import Tree, flattened, overrides_of

_TOLERANCE_PERCENT = 5  # of a step whose source gives no limits (common practice)
_MAXIMUM = re.compile(r"\s*(VCC)?\s*(?:([+-])?\s*(\d.*))?\Z")


def five_percent_mv(typ_mv: int) -> tuple[int, int]:
    """Lowest and highest whole millivolts inside typ ±5 %: never more than 5 % on either side."""
    low = -(-typ_mv * (100 - _TOLERANCE_PERCENT) // 100)
    high = typ_mv * (100 + _TOLERANCE_PERCENT) // 100
    return low, high


def build(tree: Tree) -> Definition:
    """The definition an examined tree describes."""
    plain = tree.plain
    chip = plain.get("chip", {})
    width = chip.get("width", 8)
    identify = plain.get("identify", {})
    rows = _rows(tree)
    steps = StepBuilder(tree)
    return Definition(
        path=str(tree.parsed.path),
        name=chip.get("name", ""),
        about=chip.get("about", ""),
        words=chip.get("words", 0),
        width=width,
        package=chip.get("package", ""),
        source=chip.get("source", ""),
        blank=chip.get("blank", (1 << width) - 1),
        erase_kind=chip.get("erase", "electrical" if "erase" in plain else "none"),
        pins={role: _pins(value) for role, value in plain.get("pins", {}).items()},
        supplies=_supplies(tree),
        maxima=_maxima(tree),
        modes=_modes(tree),
        timing=windows(tree),
        identify="none" if "kind" in identify else "command" if "command" in identify else "mode",
        identify_mode="" if "command" in identify else identify.get("mode", ""),
        makers=rows,
        row=rows[tree.row] if tree.row is not None and tree.row < len(rows) else None,
        program=_method(steps, ("program",)),
        erase=_method(steps, ("erase",)),
        verify=_passes(tree),
        notes=tuple(note for note in chip.get("notes", ()) if note),
        page=plain.get("geometry", {}).get("page", 0),
        write=_write(tree),
        commands=steps.commands,
        identify_command=_identify_command(steps),
        protect=_protect(steps),
        protected=_method(steps, ("program", "protected"), plain.get("program", {})),
        technology=chip.get("technology", ""),
        digest=digest_of(tree),
        raw=tree.merged,
    )


def digest_of(tree: Tree) -> str:
    """SHA-256 over canonical JSON of the resolved tree: values, sources, methods, all rows, and which row is chosen."""
    content = {"row": tree.row, "tree": tree.merged}
    text = json.dumps(content, sort_keys=True, separators=(",", ":"), ensure_ascii=False, default=str)
    return hashlib.sha256(text.encode("utf-8")).hexdigest()


def _pins(value: object) -> tuple[int, ...]:
    if isinstance(value, list):
        return tuple(pin for pin in value if isinstance(pin, int))
    return (value,) if isinstance(value, int) else ()


def _supplies(tree: Tree) -> dict[str, SupplyStep]:
    steps = {}
    for supply, table in tree.plain.get("supplies", {}).items():
        for name, entry in table.items():
            path = ("supplies", supply, name)
            step = supply_step(f"{supply}.{name}", entry, tree, path) if isinstance(entry, Mapping) else None
            if step is not None:
                steps[step.name] = step
    return steps


def supply_step(name: str, entry: Mapping[str, str], tree: Tree, path: KeyPath) -> SupplyStep | None:
    """One named voltage, None while its values do not say its window."""
    unknown = "limits" in entry
    if "typ" not in entry or (not unknown and not ("min" in entry and "max" in entry)):
        return None
    typ_mv = units.parse_mv(entry["typ"])
    low, high = five_percent_mv(typ_mv) if unknown else (units.parse_mv(entry["min"]), units.parse_mv(entry["max"]))
    return SupplyStep(
        name=name,
        typ_mv=typ_mv,
        min_mv=low,
        max_mv=high,
        limits_known=not unknown,
        current_ua=units.parse_ua(entry["current"]) if "current" in entry else None,
        settle_ps=units.parse_ps(entry["settle"]) if "settle" in entry else 0,
        source=tree.source_of(path),
        where=tree.places.where(path),
    )


def parse_maximum(text: str) -> tuple[int, bool]:
    """Millivolts of "14.5 V" or "VCC + 0.5 V", and whether they stand above VCC; UnitMistake otherwise."""
    match = _MAXIMUM.match(text)
    if match is None or not (match[1] or match[3]):
        raise units.UnitMistake('a voltage such as "14.5 V" or "VCC + 0.5 V"')
    mv = units.parse_mv(match[3]) if match[3] else 0
    return (-mv if match[2] == "-" else mv), bool(match[1])


def _maxima(tree: Tree) -> dict[str, Maximum]:
    maxima = {}
    for role, entry in tree.plain.get("maxima", {}).items():
        path = ("maxima", role)
        table = entry if isinstance(entry, Mapping) else {"max": entry}
        if "max" not in table:
            continue
        mv, above_vcc = parse_maximum(table["max"])
        low = units.parse_mv(table["min"]) if "min" in table else None
        maxima[role] = Maximum(mv, above_vcc, tree.source_of(path), tree.places.where(path), min_mv=low)
    return maxima


def _modes(tree: Tree) -> dict[str, Mode]:
    modes = {}
    for name, entry in tree.plain.get("modes", {}).items():
        if not isinstance(entry, Mapping) or "VCC" not in entry or "D" not in entry:
            continue
        levels = {role: level for role, level in entry.items() if role not in ("VCC", "D", "access")}
        access = entry.get("access", "")
        modes[name] = Mode(name, levels, entry["VCC"], entry["D"], access, tree.places.where(("modes", name)))
    return modes


def _rows(tree: Tree) -> tuple[MakerRow, ...]:
    rows = []
    for index, entry in enumerate(tree.plain.get("makers", ())):
        path: KeyPath = ("makers", index)
        if not isinstance(entry, Mapping):
            rows.append(MakerRow("", where=tree.places.where(path)))
            continue
        listed = entry.get("id", [])
        alternatives = [listed] if listed and all(isinstance(one, Mapping) for one in listed) else listed
        nested = bool(listed) and alternatives is listed
        ids = tuple(
            _cells(cells, (*path, "id", number) if nested else (*path, "id"), tree)
            for number, cells in enumerate(alternatives)
            if isinstance(cells, list)
        )
        overrides = flattened(overrides_of(tree.parsed.tree["makers"][index]))
        source = tree.sources.get(path) or tree.source_of((*path, "id"))
        rows.append(MakerRow(entry.get("maker", ""), ids, overrides, source, tree.places.where(path)))
    return tuple(rows)


def _cells(cells: Iterable[Any], path: KeyPath, tree: Tree) -> tuple[IdCell, ...]:
    return tuple(
        IdCell(
            at=cell["at"],
            is_=cell["is"],
            what=cell.get("what", ""),
            where=tree.places.where((*path, index)),
            source=tree.sources.get((*path, index), ""),
        )
        for index, cell in enumerate(cells)
        if isinstance(cell, Mapping) and "at" in cell and "is" in cell
    )


def _passes(tree: Tree) -> tuple[VerifyPass, ...]:
    listed = tree.plain.get("verify", {}).get("passes", ())
    return tuple(
        VerifyPass(entry["mode"], tree.places.where(("verify", "passes", index)))
        for index, entry in enumerate(listed)
        if isinstance(entry, Mapping) and "mode" in entry
    )


# ---- what holds steps ---------------------------------------------------------------------------


def _method(builder: StepBuilder, path: KeyPath, around: Mapping[str, str] | None = None) -> Method | None:
    """The method at a table; what it does not say of bits, unit and unloaded words it takes of the table `around`."""
    table: Any = builder.tree.plain
    for name in path:
        table = table.get(name) if isinstance(table, Mapping) else None
    if not isinstance(table, Mapping):
        return None
    bits, unit, unloaded = (table.get(key, (around or {}).get(key, "")) for key in ("bits", "unit", "unloaded"))
    return Method(
        bits=bits,
        unit=unit,
        steps=builder.steps(table.get("steps", ()), (*path, "steps")),
        finally_=builder.steps(table.get("finally", ()), (*path, "finally")),
        where=builder.tree.places.where(path),
        unloaded=unloaded,
    )


def _protect(builder: StepBuilder) -> Protect | None:
    table = builder.tree.plain.get("protect")
    if not isinstance(table, Mapping):
        return None
    on, off = (builder.steps(table.get(key, ()), ("protect", key)) for key in ("on", "off"))
    return Protect(on, off, builder.tree.places.where(("protect",)))


def _write(tree: Tree) -> BusWrite | None:
    table = tree.plain.get("write")
    if not isinstance(table, Mapping) or any(key not in table for key in ("mode", "pin", "to", "time")):
        return None
    return BusWrite(
        mode=table["mode"],
        pin=table["pin"],
        to=table["to"],
        timing=table["time"],
        gap=table.get("gap", ""),
        busy=table.get("busy", ""),
        where=tree.places.where(("write",)),
        begin_ps=_longest(tree, table.get("gap", "")),
    )


def _longest(tree: Tree, name: str) -> int:
    """The maximum of a timing parameter, 0 where it has none."""
    window = windows(tree).get(name)
    return window.max_ps or 0 if window is not None else 0


def _identify_command(builder: StepBuilder) -> CommandIdentify | None:
    table = builder.tree.plain.get("identify", {})
    if "command" not in table or "leave" not in table or "mode" not in table or "kind" in table:
        return None
    return CommandIdentify(
        enter=builder.cycles(table["command"], ("identify", "command")),
        leave=builder.cycles(table["leave"], ("identify", "leave")),
        mode=table["mode"],
        settle_ps=builder.least_ps(table["settle"]) or 0 if "settle" in table else 0,
        where=builder.tree.places.where(("identify",)),
    )
