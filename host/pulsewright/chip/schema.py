"""The model of a definition file: every table, key and kind of value; the checker and the JSON Schema come from it.

`python -m pulsewright.chip.schema` writes chipdefs/definition.schema.json anew; a test keeps the committed file fresh.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from pulsewright import units
from pulsewright.chip.kinds import (
    Anything,
    Either,
    Kind,
    ListOf,
    Named,
    Quantity,
    Table,
    Text,
    Whole,
    any_of,
)
from pulsewright.chip.model import PACKAGE_PINS
from pulsewright.chip.schema_steps import (
    COMMAND,
    CYCLES,
    DATA_CONSTANT,
    EVERY,
    PROGRAM_BITS,
    PROTECTED,
    STEP,
    STEPS,
    TIMING_REF,
    UNLOADED,
    method,
)
from pulsewright.chip.words import (
    ALIAS,
    CONTROL_ROLES,
    DATA_WORDS,
    FORMAT,
    IDENT,
    LEVEL,
    MAXIMUM,
    MEANT_TIMINGS,
    ROLE_NAME,
    ROLES,
    SUPPLIES,
    TECHNOLOGIES,
    TIMING_NAME,
)


def _voltage(about: str, low: int = 0) -> Quantity:
    return Quantity(about=about, parse=units.parse_mv, unit_names=("V", "mV"), low=low)


def _time(about: str) -> Quantity:
    return Quantity(about=about, parse=units.parse_ps, unit_names=("s", "ms", "us", "µs", "ns", "ps"))


_SUPPLY_STEP = Table(
    about="a named voltage of a supply with the data sheet's window",
    keys={
        "typ": _voltage("the nominal voltage"),
        "min": _voltage("lowest voltage the data sheet allows"),
        "max": _voltage("highest voltage the data sheet allows"),
        "limits": Text(choices=("unknown",), about="the source gives no limits: typ ±5 % is taken, never more"),
        "current": Quantity(
            parse=units.parse_ua, unit_names=("A", "mA", "uA", "µA"), about="what the part may draw from this step"
        ),
        "settle": _time("wait after the supply is good"),
    },
    required=("typ",),
)
_SUPPLY = Table(
    keys={},
    others=Named("supply_step"),
    names=IDENT,
    what="step name",
    wanted="a name in small letters, such as read or program",
)
_MAXIMUM_TEXT = Text(pattern=MAXIMUM, wanted='a voltage such as "14.5 V" or "VCC + 0.5 V"')
_MAXIMUM_KIND = Either(
    wanted='a voltage such as "14.5 V" or "VCC + 0.5 V", or { max = ..., from = ... }',
    kinds=(
        _MAXIMUM_TEXT,
        Table(keys={"max": _MAXIMUM_TEXT, "min": _voltage("deepest undershoot", low=-100_000)}, required=("max",)),
    ),
)
_MODE = Table(
    about="a row of the mode table: what each pin is at",
    keys={
        "VCC": Text(pattern=rf"VCC\.{IDENT}", wanted='a step of VCC such as "VCC.read"'),
        "D": Either(
            (Text(choices=DATA_WORDS), DATA_CONSTANT),
            wanted='"in", "out", "Z" or the value the rig drives',
            about='"out": the chip drives; "in": the rig drives the word; "Z": nobody; a number: the rig drives that',
        ),
        "access": Text(
            pattern=TIMING_NAME,
            wanted='the name of a timing parameter such as "tDV"',
            about="parameter that says when D is valid in this mode; without it tACC, tCE and tOE",
        ),
    },
    required=("VCC", "D"),
    others=Text(pattern=LEVEL, wanted='"L", "H", "X", "Z", "VCC" or a supply step such as "VPP.program"'),
    names=rf"{ROLE_NAME}|{ALIAS}",
    what="pin",
    wanted="a pin such as CE or A9, or VCC, D, access",
    words=CONTROL_ROLES,
)
_WINDOW = Table(
    about="a timing parameter with the limits the data sheet gives",
    keys={"min": _time("at least"), "typ": _time("nominal; a pulse aims at it"), "max": _time("at most")},
)
_ID_CELL = Table(
    keys={
        "at": Whole(about="word address"),
        "is": Whole(high=0xFFFF, about="the value read there"),
        "what": Text(about='which it is: "manufacturer", "device"'),
    },
    required=("at", "is"),
)
KINDS: Mapping[str, Kind] = {
    "step": STEP,
    "steps": ListOf(Named("step")),
    "every": EVERY,
    "supply_step": _SUPPLY_STEP,
    "maximum": _MAXIMUM_KIND,
    "mode": _MODE,
    "window": _WINDOW,
}
_WHOLE_IN_ROWS = ("step", "steps", "every", "maximum")  # a row replaces these as a whole

_TABLES: dict[str, Kind] = {
    "chip": Table(
        keys={
            "name": Text(about="the part's number"),
            "about": Text(about="one line: size, technology, what is special"),
            "words": Whole(low=1, about="how many words"),
            "width": Whole(low=8, high=16, about="bits of a word: 8 or 16"),
            "package": Text(choices=tuple(PACKAGE_PINS)),
            "source": Text(about='title, number and revision of the data sheet, or "from memory"'),
            "blank": Whole(high=0xFFFF, about="a word in the erased state; all ones if not given"),
            "erase": Text(choices=("electrical", "uv", "none"), about="how the part is erased"),
            "technology": Text(
                choices=TECHNOLOGIES, about='what the cells are; only "flash" may be identified by command writes'
            ),
            "notes": ListOf(Text(), about="what a person at the bench should know"),
        },
        required=("name", "about", "words", "width", "package", "source"),
    ),
    "pins": Table(
        about="package pin numbers; address and data from bit 0 up",
        keys={"A": ListOf(Whole(low=1)), "D": ListOf(Whole(low=1))},
        required=("A", "D"),
        others=Either((Whole(low=1), ListOf(Whole(low=1))), wanted="a pin number or a list of them"),
        names=ROLE_NAME,
        what="pin",
        wanted=any_of(ROLES),
        words=ROLES,
    ),
    "supplies": Table(
        keys=dict.fromkeys(SUPPLIES, _SUPPLY),
        required=("VCC",),
        what="supply",
    ),
    "maxima": Table(
        about="absolute maximum ratings; nothing may ever exceed them",
        keys={"other": Named("maximum"), "VCC": Named("maximum")},
        required=("VCC", "other"),
        others=Named("maximum"),
        names=rf"{ROLE_NAME}|{ALIAS}",
        what="pin",
        wanted="a pin such as OE or A9, or other",
        words=ROLES,
    ),
    "modes": Table(
        keys={"read": Named("mode"), "standby": Named("mode")},
        required=("read", "standby"),
        others=Named("mode"),
        names=IDENT,
        what="mode",
        wanted="a name in small letters, such as read or erase_verify",
    ),
    "timing": Table(
        keys={name: Named("window") for name in MEANT_TIMINGS},
        others=Named("window"),
        names=TIMING_NAME,
        what="timing parameter",
        wanted="a name such as tAS or tPW",
    ),
    "geometry": Table(keys={"page": Whole(low=1, about="words of a page: a power of two that divides words")}),
    "commands": Table(
        about='named lists of bus write cycles "WORD@ADDRESS", both hex',
        keys={},
        others=CYCLES,
        names=IDENT,
        what="command",
        wanted="a name in small letters, such as protect_on",
    ),
    "write": Table(
        about="how a bus write cycle is made",
        keys={
            "mode": Text(about='the mode it is made in: D = "in", the strobe at its idle level'),
            "pin": Text(pattern=ROLE_NAME, wanted="a control pin such as WE", about="the strobe"),
            "to": Text(choices=("L", "H"), about="where the strobe goes"),
            "time": replace(TIMING_REF, about="width of the strobe: a timing parameter with a min"),
            "gap": replace(TIMING_REF, about="window from load to load of one page"),
            "busy": replace(TIMING_REF, about="the longest time the part works by itself after a write; needs a max"),
        },
        required=("mode", "pin", "to", "time"),
    ),
    "identify": Table(
        keys={
            "mode": Text(about="the mode in which the chip gives its ID bytes"),
            "kind": Text(choices=("none",), about="the part has no electronic ID"),
            "command": replace(COMMAND, about="bus cycles after which the ID is read; only on flash"),
            "leave": replace(COMMAND, about="bus cycles that lead back to reading"),
            "settle": Text(about='wait after each of the two: a timing parameter such as "tIDA", or a time'),
        },
    ),
    "program": method(PROGRAM_BITS, {**UNLOADED, "protected": PROTECTED}),
    "erase": method(("to blank", "both")),
    "protect": Table(
        about="software data protection, switched on and off; from standby to standby, nothing raised",
        keys={"on": STEPS, "off": STEPS},
        required=("on", "off"),
    ),
    "verify": Table(keys={"passes": ListOf(Table(keys={"mode": Text()}, required=("mode",)))}, required=("passes",)),
}
REQUIRED_TABLES = ("chip", "pins", "supplies", "maxima", "modes", "timing", "identify")


def _partial(kind: Kind) -> Kind:
    """The same kind with nothing required: what a maker row may hold."""
    if isinstance(kind, Table):
        others = None if kind.others is None else _partial(kind.others)
        keys = {name: _partial(one) for name, one in kind.keys.items()}
        return replace(kind, keys=keys, required=(), others=others)
    if isinstance(kind, Named) and kind.name not in _WHOLE_IN_ROWS:
        return Named(f"{kind.name}_in_row")
    return kind


ROW_KEYS: Mapping[str, Kind] = {
    "maker": Text(about="the maker's name; --maker picks the row by it"),
    "id": ListOf(
        Either(
            (_ID_CELL, ListOf(_ID_CELL)),
            wanted="a cell { at = ..., is = ... } or a list of cells",
        ),
        about="the ID bytes; several alternatives are lists of cells in a list",
    ),
}
MAKER_ROW = Table(
    about="a maker's ID bytes, and only what differs from the rest of the file, leaf by leaf",
    keys={**ROW_KEYS, **{name: Anything(_partial(kind).json(), about=kind.about) for name, kind in _TABLES.items()}},
    required=("maker",),
)
DEFINITION = Table(
    keys={"format": Whole(low=FORMAT, high=FORMAT), **_TABLES, "makers": ListOf(MAKER_ROW)},
    required=("format", *REQUIRED_TABLES),
)


def json_schema() -> dict[str, object]:
    """The model as JSON Schema (draft 2020-12), for editors that complete and check TOML."""
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "Definition of a part",
        **DEFINITION.json(),
        "$defs": {
            **{name: kind.described() for name, kind in KINDS.items()},
            **{
                f"{name}_in_row": _partial(kind).described()
                for name, kind in KINDS.items()
                if name not in _WHOLE_IN_ROWS
            },
        },
    }


def schema_text() -> str:
    """The text of definition.schema.json."""
    import json

    return json.dumps(json_schema(), indent=1, ensure_ascii=False) + "\n"


def _write() -> None:
    from pulsewright.chip.shipped import shipped_folder

    path = shipped_folder() / "definition.schema.json"
    path.write_text(schema_text(), encoding="utf-8")
    print(f"wrote {path}")


if __name__ == "__main__":
    _write()
