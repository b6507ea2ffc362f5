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
MEANT_TIMINGS = (
    *("tAS", "tAH", "tDS", "tDH", "tVCS", "tVS", "tVH", "tVR", "tPRT", "tACC", "tCE", "tOE", "tDF"),
    *("tCS", "tCH", "tOES", "tOEH", "tOEHP", "tWPH", "tWPH2"),  # of bus writes and polls
)
# What the chip takes at most, not what it asks of the rig: over several maker rows the slowest counts.
RESPONSE_TIMINGS = ("tACC", "tCE", "tOE", "tDF", "tWC")
DATA_WORDS = ("in", "out", "Z")
POLL_BITS = ("DQ7", "DQ6")
TECHNOLOGIES = ("eprom", "eeprom", "flash")

_IDENT = r"[a-z][a-z0-9_]*"
_ROLE = ROLE_NAME = "|".join(ROLES) + r"|(?:CE|OE|WE|CS)[0-9]"
_ALIAS = r"[AD][0-9]{1,2}"
_LEVEL = rf"L|H|X|Z|VCC|(?:{'|'.join(SUPPLIES)})\.{_IDENT}"
_VOLTAGE = r"\s*[+-]?\d+(?:\.\d+)?\s*(?:V|mV)\s*"
_MAXIMUM = rf"{_VOLTAGE}|VCC\s*[+-]{_VOLTAGE}|VCC"
TIMING_NAME = r"t[A-Z][A-Za-z0-9]*"
CYCLE = r"([0-9A-Fa-f]{1,4})@([0-9A-Fa-f]{1,6})"  # a bus write cycle: word, address


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
_CYCLES = ListOf(Text(pattern=CYCLE, wanted='a bus cycle such as "AA@5555", word and address in hex'))
_WRITES = Either(
    (
        Text(pattern=_IDENT, wanted="the name of a command, or a list of bus cycles"),
        ListOf(Text(pattern=rf"{CYCLE}|image", wanted='a bus cycle such as "AA@5555", both in hex, or "image"')),
    ),
    wanted='the name of a command, or a list of bus cycles such as ["AA@5555", "55@2AAA", "image"]',
)
_COMMAND = Either(
    (Text(pattern=_IDENT, wanted="the name of a command, or a list of bus cycles"), _CYCLES),
    wanted='the name of a command, or a list of bus cycles such as ["AA@5555", "55@2AAA"]',
)
_TIMING_REF = Text(pattern=TIMING_NAME, wanted='the name of a timing parameter such as "tWC"')
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
            about="once for each word that is to be written, or for each page that has such words",
            keys={"each": Text(choices=("word", "page")), "steps": _STEPS},
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
            about="sample D and compare; at the top of a repeat's list equal ends the repeat",
            keys={
                "expect": _VALUE,
                "mask": Whole(low=1, high=0xFFFF),
                "else": Named("steps", table=False, about="done when it differs; ends in the mode it began in"),
            },
        ),
        "write": Table(
            about="bus write cycles, back to back, as [write] makes them",
            keys={"write": replace(_WRITES, about="a name in [commands], or a list of cycles")},
        ),
        "load": Table(
            about="the words of the page in hand, back to back, as bus write cycles",
            keys={"load": Text(choices=("page",))},
        ),
        "poll": Table(
            about="read the chip in `mode` until it has done its work; not done within the parameter's max: failed",
            keys={
                "poll": Text(choices=POLL_BITS, about="DQ7: as bit 7 of the word last written; DQ6: stops toggling"),
                "mode": Text(about="the mode it is read in"),
                "within": Text(about="a timing parameter with a max"),
            },
            required=("mode", "within"),
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


def _method(bits: tuple[str, ...], more: Mapping[str, Kind] | None = None) -> Table:
    return Table(
        keys={
            "bits": Text(choices=bits, about="which way it changes bits"),
            "unit": Text(choices=("word", "page", "sector", "chip"), about="what it writes or erases at once"),
            "steps": _STEPS,
            "method": Text(about="a step list in methods/NAME.toml, instead of `steps`"),
            "parameters": Anything({"type": "object"}, about="values for the method's $names"),
            "finally": Named("steps", table=False, about="steps at the end, whatever happened; they raise nothing"),
            **(more or {}),
        },
    )


_UNLOADED = {
    "unloaded": Text(
        choices=("kept", "undefined", "blank"), about="what becomes of the words of a page that are not loaded"
    )
}
_PROGRAM_BITS = ("1 to 0", "both")
_PROTECTED = replace(_method(_PROGRAM_BITS, _UNLOADED), about="how the part is written with its protection on")


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
    "geometry": Table(keys={"page": Whole(low=1, about="words of a page: a power of two that divides words")}),
    "commands": Table(
        about='named lists of bus write cycles "WORD@ADDRESS", both hex',
        keys={},
        others=_CYCLES,
        names=_IDENT,
        what="command",
        wanted="a name in small letters, such as protect_on",
    ),
    "write": Table(
        about="how a bus write cycle is made",
        keys={
            "mode": Text(about='the mode it is made in: D = "in", the strobe at its idle level'),
            "pin": Text(pattern=_ROLE, wanted="a control pin such as WE", about="the strobe"),
            "to": Text(choices=("L", "H"), about="where the strobe goes"),
            "time": replace(_TIMING_REF, about="width of the strobe: a timing parameter with a min"),
            "gap": replace(_TIMING_REF, about="window from load to load of one page"),
            "busy": replace(_TIMING_REF, about="the longest time the part works by itself after a write; needs a max"),
        },
        required=("mode", "pin", "to", "time"),
    ),
    "identify": Table(
        keys={
            "mode": Text(about="the mode in which the chip gives its ID bytes"),
            "kind": Text(choices=("none",), about="the part has no electronic ID"),
            "command": replace(_COMMAND, about="bus cycles after which the ID is read; only on flash"),
            "leave": replace(_COMMAND, about="bus cycles that lead back to reading"),
            "settle": Text(about='wait after each of the two: a timing parameter such as "tIDA", or a time'),
        },
    ),
    "program": _method(_PROGRAM_BITS, {**_UNLOADED, "protected": _PROTECTED}),
    "erase": _method(("to blank", "both")),
    "protect": Table(
        about="software data protection, switched on and off; from standby to standby, nothing raised",
        keys={"on": _STEPS, "off": _STEPS},
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
