"""Find, read, check and resolve definitions: what every command starts with."""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass, replace
from pathlib import Path

from pulsewright.chip.build import build, digest_of
from pulsewright.chip.check import examine_rows
from pulsewright.chip.kinds import any_of, nearest
from pulsewright.chip.model import Definition
from pulsewright.chip.shipped import shipped_folder
from pulsewright.chip.source import MEMORY, Parsed, Tree, examined, maker_of, read, resolve_tree, row_count
from pulsewright.chip.tighten import tightest
from pulsewright.errors import DefinitionMistake, FileMistake, Problem, UsageMistake, Where

_CHIP_TABLE = re.compile(r"^\[chip\][^\n]*\n(.*?)(?=^\[|\Z)", re.MULTILINE | re.DOTALL)


@dataclass(frozen=True)
class Shipped:
    """One shipped definition as the list of parts shows it."""

    name: str
    about: str
    path: Path


def find(name_or_path: str) -> Path:
    """The file of a shipped part (in any letter case) or of a path; DefinitionMistake with the nearest names."""
    folder = shipped_folder()
    by_name = {file.stem.lower(): file for file in sorted(folder.glob("*.toml"))}
    if name_or_path.lower() in by_name:
        return by_name[name_or_path.lower()]
    path = Path(name_or_path)
    looks_like_path = path.suffix.lower() == ".toml" or len(path.parts) > 1
    if path.is_file():
        return path
    if looks_like_path:
        raise FileMistake("no such definition file", where=Where(name_or_path), hint="see `chips` for what is shipped")
    close = nearest(name_or_path, by_name)
    wanted = f"a shipped part ({', '.join(by_name)}) or the path of a definition file"
    problem = Problem(Where(), "no such part", name_or_path, wanted, close)
    raise DefinitionMistake(f"no part is called {name_or_path}", [problem], hint="see `chips` for what is shipped")


def load(name_or_path: str, *, maker: str | None = None) -> Definition:
    """Find, read, check and resolve for a maker row; DefinitionMistake lists every problem (warnings do not count)."""
    return resolve(read(find(name_or_path)), maker)


def resolve(parsed: Parsed, maker: str | None) -> Definition:
    """The definition for a maker row; with one row that row, with several and no `maker` the tightest over all.

    DefinitionMistake: the file has problems. UsageMistake: no row has that maker.
    """
    problems, trees = examine_rows(parsed)
    errors = [one for one in problems if not one.warning]
    if errors:
        count = f"{len(errors)} mistake" + ("s" if len(errors) > 1 else "")
        raise DefinitionMistake(f"{parsed.path}: {count} in the definition", errors)
    if maker is not None:
        return build(trees[_row_of(parsed, maker)])
    return _over_all(parsed, trees)


def _over_all(parsed: Parsed, trees: list[Tree]) -> Definition:
    if len(trees) == 1:
        return build(trees[0])
    whole = examined(resolve_tree(parsed, None))  # it may lack what only rows have: that is no mistake
    merged = tightest([build(tree) for tree in trees], build(whole)).defn
    return replace(merged, digest=digest_of(whole), raw=whole.merged)


def _row_of(parsed: Parsed, maker: str) -> int:
    names = [maker_of(parsed, row) for row in range(row_count(parsed))]
    for row, name in enumerate(names):
        if name.lower() == maker.lower():
            return row
    close = nearest(maker, names)
    raise UsageMistake(
        f"no maker row is called {maker}",
        where=Where(str(parsed.path), key="makers"),
        wanted=any_of(names or ["none: the definition has no maker rows"]),
        got=maker,
        hint=f"--maker {close}" if close else "leave --maker out",
    )


def maker_needed(defn: Definition) -> list[str]:
    """The makers for --maker to choose from, where no ID tells rows apart whose differences no common limit settles.

    Those are levels, modes, pages, commands, the way of writing, steps, pins (`defn.apart`). [] where --maker may be
    left out: rows that differ in times and maxima alone are served by the tightest of them.
    """
    if defn.apart and any(not row.ids for row in defn.makers):
        return [row.maker for row in defn.makers]
    return []


def shipped() -> list[Shipped]:
    """Every shipped definition by name, without reading more than its [chip] table."""
    return [_glance(path) for path in sorted(shipped_folder().glob("*.toml"))]


def _glance(path: Path) -> Shipped:
    import tomllib

    match = _CHIP_TABLE.search(path.read_text(encoding="utf-8"))
    try:
        chip = tomllib.loads(match[1]) if match else {}
    except tomllib.TOMLDecodeError:
        chip = {}
    return Shipped(str(chip.get("name", path.stem)), str(chip.get("about", "")), path)


def is_shipped(defn: Definition) -> bool:
    """Whether the definition's file is one of the shipped set (H10)."""
    return Path(defn.path).resolve().parent == shipped_folder().resolve()


def memory_marked(defn: Definition) -> list[str]:
    """Levels, windows and maxima in use that are `from memory` or whose limits the source does not give (H10).

    In use: steps that a mode names, maxima of the pins (and `other`), every timing parameter. The texts
    name each by its key, so that consent can show them.
    """
    steps = {mode.vcc for mode in defn.modes.values()}
    steps |= {level for mode in defn.modes.values() for level in mode.levels.values() if "." in level}
    marked = []
    for name, step in defn.supplies.items():
        if name in steps and not step.limits_known:
            marked.append(f"supplies.{name}: limits unknown")
        elif name in steps and _remembered(step.source, defn):
            marked.append(f"supplies.{name}: {MEMORY}")
    marked += _marked("maxima", ((name, one.source) for name, one in defn.maxima.items()), defn)
    marked += _marked("timing", ((name, one.source) for name, one in defn.timing.items()), defn)
    return marked


def _marked(table: str, sources: Iterable[tuple[str, str]], defn: Definition) -> list[str]:
    return [f"{table}.{name}: {MEMORY}" for name, source in sources if _remembered(source, defn)]


def _remembered(source: str, defn: Definition) -> bool:
    return MEMORY in (source or defn.source)
