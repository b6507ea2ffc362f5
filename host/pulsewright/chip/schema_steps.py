"""The kinds of step, and of the tables that hold steps."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from pulsewright.chip.kinds import Anything, Either, Kind, ListOf, Named, Table, Tables, Text, Whole
from pulsewright.chip.words import CYCLE, IDENT, POLL_BITS, ROLE_NAME, TIMING_NAME

DATA_CONSTANT = Whole(high=0xFFFF)
CYCLES = ListOf(Text(pattern=CYCLE, wanted='a bus cycle such as "AA@5555", word and address in hex'))
_WRITES = Either(
    (
        Text(pattern=IDENT, wanted="the name of a command, or a list of bus cycles"),
        ListOf(Text(pattern=rf"{CYCLE}|image", wanted='a bus cycle such as "AA@5555", both in hex, or "image"')),
    ),
    wanted='the name of a command, or a list of bus cycles such as ["AA@5555", "55@2AAA", "image"]',
)
COMMAND = Either(
    (Text(pattern=IDENT, wanted="the name of a command, or a list of bus cycles"), CYCLES),
    wanted='the name of a command, or a list of bus cycles such as ["AA@5555", "55@2AAA"]',
)
TIMING_REF = Text(pattern=TIMING_NAME, wanted='the name of a timing parameter such as "tWC"')
_VALUE = Either((Text(choices=("image",)), DATA_CONSTANT), wanted='"image" or a constant such as 0xFF')
STEPS = Named("steps", table=False)

STEP = Tables(
    what="step",
    by_key={
        "repeat": Table(
            about="do the steps again until they match, at most `max` times",
            keys={
                "repeat": STEPS,
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
            keys={"each": Text(choices=("word", "page")), "steps": STEPS},
            required=("steps",),
        ),
        "pulse": Table(
            about="from the pin's level in the mode in force to the other, for the parameter's time, and back",
            keys={
                "pulse": Text(pattern=ROLE_NAME, wanted="a control pin such as CE"),
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
EVERY = Table(
    about="read every word in a mode and compare",
    keys={"every": Text(choices=("word",)), "mode": Text(), "is": DATA_CONSTANT},
    required=("every", "mode", "is"),
)


def method(bits: tuple[str, ...], more: Mapping[str, Kind] | None = None) -> Table:
    """The kind of a table that holds a flow chart; `more`: keys beyond those that each has."""
    return Table(
        keys={
            "bits": Text(choices=bits, about="which way it changes bits"),
            "unit": Text(choices=("word", "page", "sector", "chip"), about="what it writes or erases at once"),
            "steps": STEPS,
            "method": Text(about="a step list in methods/NAME.toml, instead of `steps`"),
            "parameters": Anything({"type": "object"}, about="values for the method's $names"),
            "finally": Named("steps", table=False, about="steps at the end, whatever happened; they raise nothing"),
            **(more or {}),
        },
    )


UNLOADED = {
    "unloaded": Text(
        choices=("kept", "undefined", "blank"), about="what becomes of the words of a page that are not loaded"
    )
}
PROGRAM_BITS = ("1 to 0", "both")
PROTECTED = replace(method(PROGRAM_BITS, UNLOADED), about="how the part is written with its protection on")
