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
    Tables,
    Text,
    Whole,
    any_of,
)
from pulsewright.chip.model import PACKAGE_PINS

FORMAT = 1
SUPPLIES = ("VCC", "VPP", "VH")
# Pin roles of the data sheets; a part with several of one kind numbers them (CE1, CE2, CS1 ...).
CONTROL_ROLES = ("CE", "OE", "WE", "PGM", "CS", "BYTE", "RESET", "WP")
ROLES = ("A", "D", *CONTROL_ROLES, "VPP", "VCC", "GND", "BUSY", "NC", "DC")
UNDRIVEN_ROLES = ("VCC", "GND", "BUSY", "NC", "DC")  # a mode never sets these
# Timing parameters the proof gives a meaning to by their name alone; README.md of chipdefs explains each.
MEANT_TIMINGS = ("tAS", "tAH", "tDS", "tDH", "tVCS", "tVS", "tVH", "tVR", "tPRT", "tACC", "tCE", "tOE", "tDF")
# What the chip takes at most, not what it asks of the rig: over several maker rows the slowest counts.
RESPONSE_TIMINGS = ("tACC", "tCE", "tOE", "tDF", "tWC")
DATA_WORDS = ("in", "out", "Z")

_IDENT = r"[a-z][a-z0-9_]*"
_ROLE = ROLE_NAME = "|".join(ROLES) + r"|(?:CE|OE|WE|CS)[0-9]"
_ALIAS = r"[AD][0-9]{1,2}"
_LEVEL = rf"L|H|X|Z|VCC|(?:{'|'.join(SUPPLIES)})\.{_IDENT}"
_VOLTAGE = r"\s*[+-]?\d+(?:\.\d+)?\s*(?:V|mV)\s*"
_MAXIMUM = rf"{_VOLTAGE}|VCC\s*[+-]{_VOLTAGE}|VCC"
TIMING_NAME = r"t[A-Z][A-Za-z0-9]*"


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
    names=_IDENT,
    what="step name",
    wanted="a name in small letters, such as read or program",
)
_MAXIMUM_TEXT = Text(pattern=_MAXIMUM, wanted='a voltage such as "14.5 V" or "VCC + 0.5 V"')
_MAXIMUM_KIND = Either(
    wanted='a voltage such as "14.5 V" or "VCC + 0.5 V", or { max = ..., from = ... }',
    kinds=(
        _MAXIMUM_TEXT,
        Table(keys={"max": _MAXIMUM_TEXT, "min": _voltage("deepest undershoot", low=-100_000)}, required=("max",)),
    ),
)
_DATA_CONSTANT = Whole(high=0xFFFF)
_MODE = Table(
    about="a row of the mode table: what each pin is at",
    keys={
        "VCC": Text(pattern=rf"VCC\.{_IDENT}", wanted='a step of VCC such as "VCC.read"'),
        "D": Either(
            (Text(choices=DATA_WORDS), _DATA_CONSTANT),
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
    others=Text(pattern=_LEVEL, wanted='"L", "H", "X", "Z", "VCC" or a supply step such as "VPP.program"'),
    names=rf"{_ROLE}|{_ALIAS}",
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
_VALUE = Either((Text(choices=("image",)), _DATA_CONSTANT), wanted='"image" or a constant such as 0xFF')
_STEPS = Named("steps", table=False)

_STEP = Tables(
    what="step",
    by_key={
        "repeat": Table(
            about="do the steps again until they match, at most `max` times",
            keys={
                "repeat": _STEPS,
                "max": Whole(low=1, high=0xFFFF, about="how often at most; then it has failed"),
                "until": Either(
                    (Text(choices=("match",)), Named("every")),
                    wanted='"match" or { every = "word", mode = ..., is = ... }',
                ),
            },
            required=("max",),
        ),
        "each": Table(
            about="once for each word that is to be written",
            keys={"each": Text(choices=("word",)), "steps": _STEPS},
            required=("steps",),
        ),
        "pulse": Table(
            about="from the pin's level in the mode in force to the other, for the parameter's time, and back",
            keys={
                "pulse": Text(pattern=_ROLE, wanted="a control pin such as CE"),
                "to": Text(choices=("L", "H")),
                "time": Text(about="a timing parameter with min and max"),
            },
            required=("to", "time"),
        ),
        "expect": Table(
            about="sample D and compare; ends the repeat around it when equal",
            keys={"expect": _VALUE, "mask": Whole(low=1, high=0xFFFF)},
        ),
        "wait": Table(
            about="wait at least a timing parameter, or a time",
            keys={"wait": Text(wanted='a timing parameter such as "tAS" or a time such as "2 us"')},
        ),
        "mode": Table(about="put the pins in a mode", keys={"mode": Text(), "D": _VALUE}),
    },
)
_EVERY = Table(
    about="read every word in a mode and compare",
    keys={"every": Text(choices=("word",)), "mode": Text(), "is": _DATA_CONSTANT},
    required=("every", "mode", "is"),
)


def _method(bits: tuple[str, ...]) -> Table:
    return Table(
        keys={
            "bits": Text(choices=bits, about="which way it changes bits"),
            "unit": Text(choices=("word", "page", "sector", "chip"), about="what it writes or erases at once"),
            "steps": _STEPS,
            "method": Text(about="a step list in methods/NAME.toml, instead of `steps`"),
            "parameters": Anything({"type": "object"}, about="values for the method's $names"),
            "finally": Named("steps", table=False),
        },
    )


KINDS: Mapping[str, Kind] = {
    "step": _STEP,
    "steps": ListOf(Named("step")),
    "every": _EVERY,
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
            "notes": ListOf(Text(), about="what a person at the bench should know"),
        },
        required=("name", "about", "words", "width", "package", "source"),
    ),
    "pins": Table(
        about="package pin numbers; address and data from bit 0 up",
        keys={"A": ListOf(Whole(low=1)), "D": ListOf(Whole(low=1))},
        required=("A", "D"),
        others=Either((Whole(low=1), ListOf(Whole(low=1))), wanted="a pin number or a list of them"),
        names=_ROLE,
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
        names=rf"{_ROLE}|{_ALIAS}",
        what="pin",
        wanted="a pin such as OE or A9, or other",
        words=ROLES,
    ),
    "modes": Table(
        keys={"read": Named("mode"), "standby": Named("mode")},
        required=("read", "standby"),
        others=Named("mode"),
        names=_IDENT,
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
    "identify": Table(
        keys={
            "mode": Text(about="the mode in which the chip gives its ID bytes"),
            "kind": Text(choices=("none",), about="the part has no electronic ID"),
        },
    ),
    "program": _method(("1 to 0", "both")),
    "erase": _method(("to blank", "both")),
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
