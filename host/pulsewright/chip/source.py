"""From the text of a definition to one plain tree for one maker row: rows merged, methods put in, sources set aside."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from pulsewright.chip.kinds import Examiner, Table, Text, any_of, nearest, shown
from pulsewright.chip.lines import KeyPath, Places, SourceText, dotted, scan, syntax_line
from pulsewright.chip.schema import DEFINITION, KINDS
from pulsewright.chip.words import FORMAT
from pulsewright.errors import DefinitionMistake, FileMistake, Problem, Where

Node = dict[str, Any]
METHOD_FILE = Table(
    keys={
        "format": Text(),
        "about": Text(),
        "parameters": Text(),
        "bits": Text(),
        "unit": Text(),
        "steps": Text(),
        "finally": Text(),
    },
    required=("format", "steps"),
)
MEMORY = "from memory"
METHOD_TABLES: tuple[KeyPath, ...] = (("program",), ("program", "protected"), ("erase",))


@dataclass(frozen=True)
class Parsed:
    """A definition file as read: its tree as TOML gives it, and the lines of its keys. Nothing is checked yet."""

    path: Path
    tree: Node
    text: SourceText


@dataclass
class Tree:
    """A definition resolved for one row (None: the file without its rows); `plain` has no sources and no methods."""

    parsed: Parsed
    row: int | None
    merged: Node  # with sources, methods expanded: what the digest is taken of
    plain: Node
    sources: dict[KeyPath, str]
    places: Places
    problems: list[Problem] = field(default_factory=list)
    written: Node = field(default_factory=dict)  # as `plain`, before wrong values were taken out

    def source_of(self, path: KeyPath) -> str:
        """The source noted at a key or below it, else at the nearest table around it; "" is the chip's own.

        `from memory` outweighs any other below a key: a window is as good as its weakest limit.
        """
        below = [text for at, text in self.sources.items() if at[: len(path)] == path]
        if below:
            return next((text for text in below if MEMORY in text), below[0])
        around = (self.sources.get(path[:length]) for length in range(len(path) - 1, 0, -1))
        return next((text for text in around if text), "")

    def names(self, *path: str | int) -> tuple[str, ...]:
        """The names written in a table, the wrong ones included: a reference to those is no further mistake."""
        node: Any = self.written
        for part in path:
            in_list = isinstance(node, list) and isinstance(part, int) and part < len(node)
            if in_list or (isinstance(node, Mapping) and part in node):
                node = node[part]
            else:
                return ()
        return tuple(node) if isinstance(node, Mapping) else ()


def read_toml(path: Path, what: str) -> tuple[Node, SourceText]:
    """Tree and lines of a TOML file; FileMistake if it cannot be read, DefinitionMistake if it is not TOML."""
    try:
        text = path.read_bytes().decode("utf-8")
    except OSError as error:
        raise FileMistake(f"cannot read the {what}: {error.strerror}", where=Where(str(path))) from error
    except UnicodeDecodeError as error:
        line = error.object[: error.start].count(b"\n") + 1
        problem = Problem(
            Where(str(path), line), "not a text file", f"byte {error.start}: {error.reason}", "UTF-8 text"
        )
        raise DefinitionMistake(f"the {what} is not a text file", [problem]) from error
    try:
        tree = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        line, message = syntax_line(error, text)
        stands = text.splitlines()[line - 1].strip() if line <= len(text.splitlines()) else ""
        problem = Problem(Where(str(path), line), f"not TOML: {message}", stands, "TOML, each key once")
        raise DefinitionMistake(f"the {what} is not TOML", [problem]) from error
    return tree, SourceText(str(path), scan(text))


def read(path: Path) -> Parsed:
    """A definition file, read; FileMistake or DefinitionMistake as `read_toml`."""
    tree, text = read_toml(path, "definition")
    return Parsed(path, tree, text)


def row_count(parsed: Parsed) -> int:
    """How many maker rows a file has."""
    makers = parsed.tree.get("makers")
    return len(makers) if isinstance(makers, list) else 0


def maker_of(parsed: Parsed, row: int) -> str:
    """The maker's name in a row, "" where it is missing."""
    makers = parsed.tree.get("makers")
    entry = makers[row] if isinstance(makers, list) else {}
    return str(entry.get("maker", "")) if isinstance(entry, Mapping) else ""


def overrides_of(row: object) -> Node:
    """What a maker row overrides: its tables, without its name, ID and source."""
    if not isinstance(row, Mapping):
        return {}
    return {key: value for key, value in row.items() if key in DEFINITION.keys and key not in ("makers", "format")}


def flattened(tree: Mapping[str, Any]) -> dict[str, object]:
    """Leaves of nested tables by dotted key."""
    return {dotted(path): value for path, value in _leaves(tree).items()}


def _leaves(tree: Mapping[str, Any], before: KeyPath = ()) -> dict[KeyPath, object]:
    leaves: dict[KeyPath, object] = {}
    for key, value in tree.items():
        if isinstance(value, Mapping) and value:
            leaves.update(_leaves(value, (*before, key)))
        else:
            leaves[*before, key] = value
    return leaves


def resolve_tree(parsed: Parsed, row: int | None) -> Tree:
    """The tree for one maker row, its values not yet examined."""
    places = Places(parsed.text)
    merged = _copy(parsed.tree)
    entry = None if row is None else parsed.tree["makers"][row]
    if row is not None:
        _merge(merged, overrides_of(entry))
        places.mount((), parsed.text, ("makers", row), exact=True)
    problems: list[Problem] = []
    for path in METHOD_TABLES:
        table = _table_at(merged, path)
        if table is not None:
            _expand_method(table, path, parsed, places, problems, _inherited(parsed.tree, overrides_of(entry), path))
    sources: dict[KeyPath, str] = {}
    if isinstance(entry, Mapping) and isinstance(source := entry.get("from"), str):
        sources.update(dict.fromkeys(_leaves(overrides_of(entry)), source))
    plain = _unwrapped(merged, (), sources)
    return Tree(parsed, row, merged, plain, sources, places, problems, plain)


def _inherited(base: Node, over: Node, path: KeyPath) -> frozenset[str]:
    """Parameters of the base's method where the row names a method of its own: it takes those it knows."""
    if "method" not in (_table_at(over, path) or {}):
        return frozenset()
    of_base, of_row = (_table_at(tree, (*path, "parameters")) or {} for tree in (base, over))
    return frozenset(of_base) - frozenset(of_row)


def _table_at(tree: Node, path: KeyPath) -> Node | None:
    node: Any = tree
    for part in path:
        node = node.get(part) if isinstance(node, dict) else None
    return node if isinstance(node, dict) else None


def examined(tree: Tree) -> Tree:
    """The tree with every value examined by the model; what is wrong is reported in `problems` and taken out."""
    examiner = Examiner(tree.places, KINDS)
    cleaned = DEFINITION.examine(tree.plain, (), examiner)
    tree.problems += examiner.problems
    tree.plain = cleaned if isinstance(cleaned, dict) else {}
    return tree


def _copy(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {key: _copy(one) for key, one in value.items()}
    return [_copy(one) for one in value] if isinstance(value, list) else value


def _merge(base: Node, over: Mapping[str, Any], path: KeyPath = ()) -> None:
    _drop_what_is_answered(base, over, path)
    for key, value in over.items():
        if isinstance(value, Mapping) and isinstance(base.get(key), dict):
            _merge(base[key], value, (*path, key))
        else:
            base[key] = _copy(value)


def _drop_what_is_answered(base: Node, over: Mapping[str, Any], path: KeyPath) -> None:
    """Of two keys that exclude each other, the one the row gives takes the other's place."""
    apart: tuple[tuple[str, ...], ...] = ()
    if len(path) == 3 and path[0] == "supplies":
        apart = (("limits",), ("min", "max"))
    elif path == ("identify",):
        apart = (("mode", "command", "leave", "settle"), ("kind",))
    elif path in METHOD_TABLES:
        apart = (("steps",), ("method", "parameters"))
    for these, those in (apart, apart[::-1]) if apart else ():
        if any(key in over for key in these) and not any(key in over for key in those):
            for key in those:
                base.pop(key, None)


def _unwrapped(value: Any, path: KeyPath, sources: dict[KeyPath, str]) -> Any:
    """The tree without `{ value = ..., from = ... }` tables; the sources go to `sources` by path."""
    if isinstance(value, Mapping):
        if isinstance(value.get("from"), str):
            sources[path] = value["from"]
        if "value" in value and set(value) <= {"value", "from"}:
            return _unwrapped(value["value"], path, sources)
        rest = {key: one for key, one in value.items() if key != "from" or not isinstance(one, str)}
        return {key: _unwrapped(one, (*path, key), sources) for key, one in rest.items()}
    if isinstance(value, list):
        return [_unwrapped(one, (*path, index), sources) for index, one in enumerate(value)]
    return value


# ---- methods ------------------------------------------------------------------------------------


def _expand_method(
    table: Node, path: KeyPath, parsed: Parsed, places: Places, problems: list[Problem], inherited: frozenset[str]
) -> None:
    """Put the steps of `method = "name"` in their place, its parameters filled in; `inherited` ones may be unknown."""
    if "method" not in table:
        if "parameters" in table:
            where = places.where((*path, "parameters"))
            problems.append(Problem(where, "parameters without a method", wanted='method = "a name in methods/"'))
        return
    place = places.where((*path, "method"))
    if "steps" in table:
        problems.append(Problem(place, "steps and a method at once", wanted="one of steps, method"))
        return
    loaded = _load_method(table["method"], place, parsed.path, problems)
    if loaded is None:
        return
    body, text = loaded
    if isinstance(given := table.get("parameters"), dict) and isinstance(declared := body.get("parameters"), dict):
        table["parameters"] = {key: one for key, one in given.items() if key in declared or key not in inherited}
    values = _parameter_values(body, text, table.get("parameters", {}), places, (*path, "parameters"), problems)
    for key in ("bits", "unit", "steps", "finally"):
        if key in body and key not in table:
            table[key] = _filled(body[key], (key,), values, text, problems)
            places.mount((*path, key), text, (key,), exact=False)


def _load_method(
    name: object, place: Where, definition: Path, problems: list[Problem]
) -> tuple[Node, SourceText] | None:
    folders = method_folders(definition)
    known = sorted({file.stem for folder in folders for file in folder.glob("*.toml")})
    if not isinstance(name, str) or name not in known:
        problems.append(Problem(place, "unknown method", shown(name), any_of(known or ["none"]), nearest(name, known)))
        return None
    path = next(folder / f"{name}.toml" for folder in folders if (folder / f"{name}.toml").is_file())
    try:
        body, text = read_toml(path, "method")
    except DefinitionMistake as mistake:
        problems.extend(mistake.problems)
        return None
    for key in body:
        if key not in METHOD_FILE.keys:
            close = nearest(key, METHOD_FILE.keys)
            where = Where(text.file, text.lines.get((key,), 0), key)
            problems.append(Problem(where, "unknown key of a method", key, any_of(METHOD_FILE.keys), close))
    if body.get("format") != FORMAT:
        where = Where(text.file, text.lines.get(("format",), 0), "format")
        problems.append(
            Problem(where, "format of a method", shown(body.get("format", "nothing")), f"format = {FORMAT}")
        )
        return None
    return body, text


def method_folders(definition: Path) -> list[Path]:
    """Where methods are looked for: beside the definition first, then the shipped ones."""
    from pulsewright.chip.shipped import shipped_folder

    return [definition.parent / "methods", shipped_folder() / "methods"]


def _parameter_values(
    body: Node, text: SourceText, given: object, places: Places, path: KeyPath, problems: list[Problem]
) -> dict[str, object]:
    declared = body.get("parameters", {})
    if not isinstance(declared, Mapping) or not isinstance(given, Mapping):
        found = given if isinstance(declared, Mapping) else declared
        where = places.where(path) if isinstance(declared, Mapping) else Where(text.file, 0, "parameters")
        problems.append(Problem(where, "not a value for this key", shown(found), "a table of parameters"))
        return {}
    values: dict[str, object] = dict.fromkeys(declared)
    for name, rule in declared.items():
        if isinstance(rule, Mapping) and rule.get("required") is True:
            if name not in given:
                what = f"a parameter of method {Path(text.file).stem} is missing"
                problems.append(Problem(places.where((*path, name)), what, wanted=name))
        else:
            values[name] = rule.get("default") if isinstance(rule, Mapping) else rule
    for name, value in given.items():
        if name in declared:
            values[name] = value
        else:
            where = places.where((*path, name))
            problems.append(
                Problem(where, "unknown parameter", name, any_of(declared or ["none"]), nearest(name, declared))
            )
    return values


def _filled(value: Any, path: KeyPath, values: Mapping[str, object], text: SourceText, problems: list[Problem]) -> Any:
    """A method's step list with "$name" replaced by the parameter's value."""
    if isinstance(value, Mapping):
        return {key: _filled(one, (*path, key), values, text, problems) for key, one in value.items()}
    if isinstance(value, list):
        return [_filled(one, (*path, index), values, text, problems) for index, one in enumerate(value)]
    if not isinstance(value, str) or not value.startswith("$"):
        return value
    name = value[1:]
    if name not in values:
        where = Where(text.file, text.lines.get(path, 0), dotted(path))
        wanted = any_of([f'"${one}"' for one in values] or ["a [parameters] table"])
        close = nearest(name, values)
        problems.append(
            Problem(where, "no such parameter of this method", shown(value), wanted, close and f'"${close}"')
        )
        return None
    return _copy(values[name])
