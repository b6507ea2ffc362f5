"""Everything a careful colleague would find in a definition file, in one run."""

from __future__ import annotations

from pathlib import Path

from pulsewright.chip import check_bus, check_identify, check_levels, check_lock, check_pins, check_steps
from pulsewright.chip.build import build
from pulsewright.chip.findings import Findings
from pulsewright.chip.source import Parsed, Tree, examined, maker_of, read, resolve_tree, row_count
from pulsewright.chip.tighten import tightest
from pulsewright.errors import DefinitionMistake, Problem

_PARTS = (
    check_pins.check,
    check_levels.check,
    check_identify.check,
    check_bus.check,
    check_steps.check,
    check_steps.check_waits,
    check_lock.check,
)


def check_file(path: Path) -> list[Problem]:
    """Every problem of the file, in the order of its lines; warnings are marked so. FileMistake: it cannot be read."""
    try:
        parsed = read(path)
    except DefinitionMistake as mistake:
        return list(mistake.problems)
    return check(parsed)


def check(parsed: Parsed) -> list[Problem]:
    """Every problem of a file that was read, over all its maker rows; each problem once."""
    return examine_rows(parsed)[0]


def examine_rows(parsed: Parsed) -> tuple[list[Problem], list[Tree]]:
    """Every problem, and the examined tree for each maker row (or for the file as it stands, if it has none)."""
    trees = [examined(resolve_tree(parsed, row)) for row in (range(row_count(parsed)) or [None])]
    rows = [Findings(tree, build(tree)) for tree in trees]
    for found in rows:
        for part in _PARTS:
            part(found)
    check_levels.check_unused(rows)
    problems = [problem for found in rows for problem in found.tree.problems + found.problems]
    problems += _equal_makers(parsed, trees[0])
    if not any(not one.warning for one in problems):
        problems += tightest([found.defn for found in rows]).problems
    unique = list(dict.fromkeys(problems))
    return sorted(unique, key=lambda one: (one.where.file != str(parsed.path), one.where.file, one.where.line)), trees


def _equal_makers(parsed: Parsed, tree: Tree) -> list[Problem]:
    """`--maker NAME` must pick one row."""
    problems: list[Problem] = []
    seen: list[str] = []
    for row in range(row_count(parsed)):
        name = maker_of(parsed, row)
        if name and name.lower() in seen:
            where = tree.places.main_where(("makers", row, "maker"))
            problems.append(Problem(where, "two rows of one maker", name, "a name of its own"))
        seen.append(name.lower())
    return problems
