"""chips, chip: what is defined, and one part with its connection diagram, mode table and algorithm."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from pulsewright.cli.desk import HIGH_VOLTAGE, Desk, Parser, add

if TYPE_CHECKING:
    from pulsewright.chip.model import Definition, Method


def add_commands(commands: argparse._SubParsersAction[Parser]) -> None:
    """The commands of this group."""
    add(commands, "chips", _chips, what="list the parts that are defined", example="pulsewright chips")
    one = add(
        commands,
        "chip",
        _chip,
        what="show one part: connection diagram in the rig's positions, mode table, supplies, algorithm",
        example="pulsewright chip 27e512",
        cautions=[HIGH_VOLTAGE],
    )
    one.add_argument("chip", metavar="CHIP", help="a shipped part (see `chips`) or the path of a definition")
    one.add_argument("--maker", metavar="NAME", help="the maker row to show")


def _chips(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.chip.load import shipped

    parts = shipped()
    width = max((len(part.name) for part in parts), default=0)
    lines = [f"{part.name:<{width}}  {part.about}" for part in parts]
    if desk.as_json:
        lines.insert(0, f"{len(parts)} parts are defined")
    rows = [{"name": part.name, "about": part.about, "file": str(part.path)} for part in parts]
    return desk.answer(lines, {"chips": rows})


def _chip(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.chip.load import load, memory_marked
    from pulsewright.report.algorithm import algorithm
    from pulsewright.report.modes import maxima_table, mode_table, supply_table, timing_table
    from pulsewright.report.pinout import connection_diagram
    from pulsewright.rig.file import load_rig

    definition, rig = load(args.chip, maker=args.maker), load_rig()
    lines = [
        f"{definition.name}: {definition.about}",
        f"{definition.words} words of {definition.width} bits, {definition.package}; erased state "
        f"{definition.blank:0{definition.width // 4}X}; erase: {definition.erase_kind}",
        f"source: {definition.source}",
        f"hash {definition.digest}",
        "",
        *connection_diagram(definition, rig),
        "",
        *mode_table(definition),
        "",
        *supply_table(definition),
        "",
        *maxima_table(definition),
        "",
        *timing_table(definition),
    ]
    lines += ["", *_identity(definition)]
    for name, method in _methods(definition):
        lines += ["", f"{name}, by {method.unit}, bits {method.bits}", *algorithm(definition, method)]
    if definition.notes:
        lines += ["", *(f"note: {note}" for note in definition.notes)]
    marked = memory_marked(definition)
    if marked:
        lines += [
            "",
            "check against a data sheet before a chip that matters is burnt:",
            *(f"  {mark}" for mark in marked),
        ]
    return desk.answer(lines, _facts(definition, marked))


def _methods(definition: Definition) -> list[tuple[str, Method]]:
    """The part's methods by name, those of software protection included."""
    from pulsewright.chip.model import Method

    protect = definition.protect
    switched = [Method("both", "chip", steps) for steps in (protect.on, protect.off)] if protect is not None else []
    named = [
        ("program", definition.program),
        ("program while protected", definition.protected),
        ("erase", definition.erase),
        *zip(("protection on", "protection off"), switched, strict=False),
    ]
    return [(name, method) for name, method in named if method is not None]


def _identity(definition: Definition) -> list[str]:
    from pulsewright.chip.load import maker_needed
    from pulsewright.jobs.translate import wanted_ids
    from pulsewright.report.algorithm import cycles_text

    if definition.identify == "none":
        lines = ["no electronic ID: only the print on the chip says what it is"]
        names = [row.maker for row in definition.makers]
        if definition.row is None and len(names) > 1:
            word = "must" if maker_needed(definition) else "may"
            lines.append(f"makers: {', '.join(names)}; --maker {word} name one, else what suits all of them is used")
        return lines
    command = definition.identify_command
    by = f", asked for by {cycles_text(definition, command.enter)}" if command is not None else ""
    return [f"ID{by}", *(f"  {text}" for text in wanted_ids(definition))]


def _facts(definition: Definition, marked: list[str]) -> dict[str, object]:
    return {
        "chip": definition.name,
        "about": definition.about,
        "file": definition.path,
        "hash": definition.digest,
        "words": definition.words,
        "width": definition.width,
        "package": definition.package,
        "pins": {role: list(pins) for role, pins in definition.pins.items()},
        "supplies": {
            name: {
                "typ_mv": step.typ_mv,
                "min_mv": step.min_mv,
                "max_mv": step.max_mv,
                "limits_known": step.limits_known,
            }
            for name, step in definition.supplies.items()
        },
        "makers": [row.maker for row in definition.makers],
        "unsourced": marked,
    }
