"""The kinds of value a definition is made of; each can examine a value and can describe itself as JSON Schema.

`Examiner` walks a tree by its kind and gathers every problem. A value that is wrong is taken out of the tree (a list
element becomes None), so that later checks see only what is well formed and no mistake is told twice.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field

from pulsewright import units
from pulsewright.chip.lines import KeyPath, Places
from pulsewright.errors import Problem

_ABSENT = object()


def nearest(word: object, words: Iterable[str]) -> str:
    """The word most like `word`, "" if none is; letter case alone never keeps them apart."""
    by_lower = {name.lower(): name for name in words}
    close = difflib.get_close_matches(str(word).lower(), by_lower, n=1, cutoff=0.6)
    return by_lower[close[0]] if close else ""


def shown(value: object) -> str:
    """A TOML value as it is written, shortened."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f'"{value}"'
    if isinstance(value, Mapping):
        return "a table {" + ", ".join(str(key) for key in value) + "}"
    if isinstance(value, list):
        return f"a list of {len(value)}"
    return str(value)


def any_of(words: Iterable[str]) -> str:
    """Words as a choice: `one of CE, OE`; one alone: `CE`."""
    words = list(words)
    return words[0] if len(words) == 1 else "one of " + ", ".join(words)


class Examiner:
    """Gathers problems and cleans the tree; `kinds` resolves names of kinds, so that steps can hold steps."""

    def __init__(self, places: Places, kinds: Mapping[str, Kind]) -> None:
        self.places = places
        self.kinds = kinds
        self.problems: list[Problem] = []

    def report(
        self, path: KeyPath, what: str, *, found: str = "", wanted: str = "", nearest: str = "", warning: bool = False
    ) -> None:
        """Note a problem at a key."""
        self.problems.append(Problem(self.places.where(path), what, found, wanted, nearest, warning))


@dataclass(frozen=True)
class Kind:
    """What a value must be; `about` explains it to an editor."""

    about: str = field(default="", kw_only=True)

    def examine(self, value: object, path: KeyPath, to: Examiner) -> object:
        """The value, cleaned, or _ABSENT when it is wrong and reported."""
        raise NotImplementedError

    def fits(self, value: object) -> bool:
        """Whether the value has this kind's shape (not yet whether it is right)."""
        raise NotImplementedError

    def json(self) -> dict[str, object]:
        """This kind as JSON Schema."""
        raise NotImplementedError

    def described(self) -> dict[str, object]:
        """The JSON Schema with the explanation."""
        return {**self.json(), "description": self.about} if self.about else self.json()


@dataclass(frozen=True)
class Scalar(Kind):
    """A single value; `{ value = ..., from = "..." }` may stand in its place."""

    def described(self) -> dict[str, object]:
        plain = self.json()
        sourced = {
            "type": "object",
            "properties": {"value": plain, "from": {"type": "string"}},
            "required": ["value", "from"],
            "additionalProperties": False,
        }
        both: dict[str, object] = {"anyOf": [plain, sourced]}
        return {**both, "description": self.about} if self.about else both


@dataclass(frozen=True)
class Text(Scalar):
    """A text: any, one of `choices`, or one that matches `pattern` (explained by `wanted`)."""

    choices: tuple[str, ...] = ()
    pattern: str = ""
    wanted: str = "a text"

    def fits(self, value: object) -> bool:
        return isinstance(value, str)

    def examine(self, value: object, path: KeyPath, to: Examiner) -> object:
        wanted = any_of(f'"{word}"' for word in self.choices) if self.choices else self.wanted
        good = isinstance(value, str) and (not self.choices or value in self.choices)
        if good and (not self.pattern or re.fullmatch(self.pattern, str(value))):
            return value
        close = nearest(value, self.choices)
        to.report(path, "not a value for this key", found=shown(value), wanted=wanted, nearest=close and f'"{close}"')
        return _ABSENT

    def json(self) -> dict[str, object]:
        schema: dict[str, object] = {"type": "string"}
        if self.choices:
            schema["enum"] = list(self.choices)
        if self.pattern:
            schema["pattern"] = f"^(?:{self.pattern})$"
        return schema


@dataclass(frozen=True)
class Whole(Scalar):
    """A whole number from `low` to `high`."""

    low: int = 0
    high: int | None = None

    def fits(self, value: object) -> bool:
        return isinstance(value, int) and not isinstance(value, bool)

    def examine(self, value: object, path: KeyPath, to: Examiner) -> object:
        if isinstance(value, int) and not isinstance(value, bool) and value >= self.low:
            if self.high is None or value <= self.high:
                return value
        wanted = f"a whole number from {self.low}" + ("" if self.high is None else f" to {self.high}")
        to.report(path, "not a value for this key", found=shown(value), wanted=wanted)
        return _ABSENT

    def json(self) -> dict[str, object]:
        schema: dict[str, object] = {"type": "integer", "minimum": self.low}
        if self.high is not None:
            schema["maximum"] = self.high
        return schema


@dataclass(frozen=True)
class Quantity(Scalar):
    """A number with its unit, as a text: voltage, current or time."""

    parse: Callable[[str], int] = units.parse_mv
    unit_names: tuple[str, ...] = ()
    low: int = 0

    def fits(self, value: object) -> bool:
        return isinstance(value, str)

    def examine(self, value: object, path: KeyPath, to: Examiner) -> object:
        close = ""
        try:
            if self.parse(value if isinstance(value, str) else "") >= self.low:
                return value
            wanted = "a value that is not negative"
        except units.UnitMistake as mistake:
            wanted = str(mistake)
            parts = re.fullmatch(r"\s*([+-]?[\d.]+)\s*(\S+)\s*", str(value))
            unit = nearest(parts[2], self.unit_names) if parts else ""
            close = f'"{parts[1]} {unit}"' if parts and unit and unit != parts[2] else ""
        to.report(path, "not a value for this key", found=shown(value), wanted=wanted, nearest=close)
        return _ABSENT

    def json(self) -> dict[str, object]:
        sign = "[+-]?" if self.low < 0 else "[+]?"
        return {"type": "string", "pattern": rf"^\s*{sign}\d+(\.\d+)?\s*({'|'.join(self.unit_names)})\s*$"}


@dataclass(frozen=True)
class ListOf(Kind):
    """A list of at least `least` values of one kind."""

    item: Kind
    least: int = 1

    def fits(self, value: object) -> bool:
        return isinstance(value, list)

    def examine(self, value: object, path: KeyPath, to: Examiner) -> object:
        if not isinstance(value, list) or len(value) < self.least:
            what = "a list" + (f" of at least {self.least}" if self.least else "")
            to.report(path, "not a value for this key", found=shown(value), wanted=what)
            return _ABSENT
        cleaned = [self.item.examine(one, (*path, index), to) for index, one in enumerate(value)]
        return [None if one is _ABSENT else one for one in cleaned]

    def json(self) -> dict[str, object]:
        return {"type": "array", "items": self.item.described(), "minItems": self.least}


@dataclass(frozen=True)
class Either(Kind):
    """One of several kinds that differ in shape."""

    kinds: tuple[Kind, ...]
    wanted: str

    def fits(self, value: object) -> bool:
        return any(kind.fits(value) for kind in self.kinds)

    def examine(self, value: object, path: KeyPath, to: Examiner) -> object:
        for kind in self.kinds:
            if kind.fits(value):
                return kind.examine(value, path, to)
        to.report(path, "not a value for this key", found=shown(value), wanted=self.wanted)
        return _ABSENT

    def json(self) -> dict[str, object]:
        return {"anyOf": [kind.described() for kind in self.kinds]}


@dataclass(frozen=True)
class Named(Kind):
    """A kind that stands elsewhere under a name; lets kinds hold themselves."""

    name: str
    table: bool = True

    def fits(self, value: object) -> bool:
        return isinstance(value, Mapping) if self.table else isinstance(value, list)

    def examine(self, value: object, path: KeyPath, to: Examiner) -> object:
        return to.kinds[self.name].examine(value, path, to)

    def json(self) -> dict[str, object]:
        return {"$ref": f"#/$defs/{self.name}"}


@dataclass(frozen=True)
class Anything(Kind):
    """A value that is examined elsewhere, once it stands where it belongs; `schema` tells editors what it is."""

    schema: Mapping[str, object] = field(default_factory=dict)

    def fits(self, value: object) -> bool:
        return True

    def examine(self, value: object, path: KeyPath, to: Examiner) -> object:
        return value

    def json(self) -> dict[str, object]:
        return dict(self.schema)


@dataclass(frozen=True)
class Table(Kind):
    """A table: known `keys`, those `required`, and the kind of `others` whose names match `names`."""

    keys: Mapping[str, Kind]
    required: tuple[str, ...] = ()
    others: Kind | None = None
    names: str = ""  # pattern of the other names
    what: str = "key"  # what a name in here is: key, table, mode, pin ...
    wanted: str = ""  # what is wanted of a name, when the keys alone do not say it
    words: tuple[str, ...] = ()  # names to offer besides the keys, when one is misspelt

    def fits(self, value: object) -> bool:
        return isinstance(value, Mapping)

    def examine(self, value: object, path: KeyPath, to: Examiner) -> object:
        if not isinstance(value, Mapping):
            to.report(path, "not a value for this key", found=shown(value), wanted=f"a table with {self._key_list()}")
            return _ABSENT
        cleaned: dict[str, object] = {}
        for name, one in value.items():
            if one is None:
                continue  # a parameter that was not given: told where it is wanted
            kind = self._kind_of(name)
            if kind is None:
                close = nearest(name, (*self.keys, *self.words))
                to.report((*path, name), f"unknown {self.what}", found=name, wanted=self._key_list(), nearest=close)
                continue
            result = kind.examine(one, (*path, name), to)
            if result is not _ABSENT:
                cleaned[name] = result
        for name in self.required:
            if name not in value:
                what = "table" if isinstance(self.keys[name], (Table, Either)) and not path else self.what
                to.report((*path, name), f"a {what} is missing", wanted=name)
        return cleaned

    def _kind_of(self, name: str) -> Kind | None:
        if name in self.keys:
            return self.keys[name]
        if name == "from":
            return Text()
        if self.others is not None and re.fullmatch(self.names, name):
            return self.others
        return None

    def _key_list(self) -> str:
        return self.wanted or any_of(self.keys)

    def json(self) -> dict[str, object]:
        properties = {name: kind.described() for name, kind in self.keys.items()}
        properties.setdefault("from", {"type": "string", "description": "the source of what stands beside it"})
        schema: dict[str, object] = {"type": "object", "properties": properties, "additionalProperties": False}
        if self.required:
            schema["required"] = list(self.required)
        if self.others is not None:
            known = "|".join(properties)  # a known key is not one of the others, even where its name fits
            schema["patternProperties"] = {f"^(?!(?:{known})$)(?:{self.names})$": self.others.described()}
        return schema


@dataclass(frozen=True)
class Tables(Kind):
    """One of several tables, told apart by the one key that each must have."""

    by_key: Mapping[str, Table]
    what: str

    def fits(self, value: object) -> bool:
        return isinstance(value, Mapping)

    def examine(self, value: object, path: KeyPath, to: Examiner) -> object:
        if isinstance(value, Mapping):
            for key, table in self.by_key.items():
                if key in value:
                    return table.examine(value, path, to)
            close = next((near for name in value if (near := nearest(name, self.by_key))), "")
            first = (*path, next(iter(value))) if value else path
            to.report(first, f"unknown {self.what}", found=shown(value), wanted=any_of(self.by_key), nearest=close)
        else:
            wanted = f"a table with {any_of(self.by_key)}"
            to.report(path, "not a value for this key", found=shown(value), wanted=wanted)
        return _ABSENT

    def json(self) -> dict[str, object]:
        return {"anyOf": [table.described() for table in self.by_key.values()]}
