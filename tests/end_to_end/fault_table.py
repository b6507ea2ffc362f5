"""Each fault of the bench on each part, and what the jobs say of it: the table that FAULTS.md shows.

Two jobs a cell, each on a bench of its own: a `read` of a used chip, and a `burn` of some words into a blank one. Only
where contacts are bad is the whole chip read, because only the whole shows an address line. What a job that ends well
has read or written is compared with the chip's cells.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from tests.end_to_end.bench_kit import MODELS, Bench

PARTS = ("27e512", "27c256", "28c256")
NOT_THERE = "-"  # the part has no such pin, or the fault is none of its
NOT_SEEN = "not seen (0)"
WRONG = "wrong, and not told"
WORDS = 24
DATA = tuple(f"D{bit}" for bit in range(8))


def _lifted(*names: str) -> dict[str, tuple[str, ...]]:
    return {f"lifted: {name}": ("lifted", name) for name in names}


def _short(*pairs: tuple[str, str]) -> dict[str, tuple[str, ...]]:
    return {f"short: {a} to {b}": ("short", a, b) for a, b in pairs}


# row -> how the fault is made: its text, or "lifted"/"short" and pins by role ("/": each of them gives the same cell)
ROWS: Mapping[str, tuple[str, ...]] = {
    "no chip": ("absent",),
    "reversed": ("reversed",),
    "one row off": ("shifted",),
    **_lifted("VCC", "GND", "CE", "OE", "WE", "VPP"),
    "lifted: D0 to D7, each": ("lifted", "/".join(DATA)),
    **_lifted("A0", "A1", "A9", "A14"),
    **_short(
        ("VCC", "GND"), ("VCC", "A14"), ("VCC", "WE"), ("VPP", "A12"), ("A0", "D0"), ("D0", "D1"), ("D6", "D7"),
        ("D2", "GND"), ("D7", "CE"), ("CE", "A10"), ("A10", "OE"), ("OE", "A11"), ("A11", "A9"), ("A9", "A8"),
        ("A13", "WE"), ("A1", "A2"), ("A12", "A7"),
    ),
    "another ID": ("wrong-id=C2,77",),
    "a bit stuck at 1": ("stuck=4,0x10,0x10",),
    "a word that takes nothing": ("dead=4",),
    "a fifth of the cells slow": ("slow=20,4",),
    "cells too slow": ("slow=20,40",),
    "protected": ("protected",),
    "a fading 0 (5.1 V)": ("weak=4,0xFF,5100",),
    "an under-erased 1 (4.9 V)": ("under-erased=4,0xFF,4900",),
    "raised rail sags at 20 mA": ("rail-sag=20",),
    "raised rail 150 mV high": ("rail-offset=150",),
    "raised rail 150 mV low": ("rail-offset=-150",),
    "raised rail 600 mV high": ("rail-offset=600",),
    "raised rail 600 mV low": ("rail-offset=-600",),
    "VCC 150 mV low": ("vcc-offset=-150",),
    "VCC 700 mV high": ("vcc-offset=700",),
    "VCC 700 mV low": ("vcc-offset=-700",),
    "raised positions fall 100 us later": ("slow-fall=100",),
    "raised positions fall 2 ms later": ("slow-fall=2000",),
    "VCC falls 1 ms later": ("vcc-slow-fall=1000",),
    "VCC falls 20 ms later": ("vcc-slow-fall=20000",),
    **{f"a {name} in its place": (f"other={name}",) for name in PARTS},
}  # fmt: skip
OTHERS = {"a 2716 (24 pins) in its place": "2716", "a 27C64 in its place": "27c64"}
# what the rig or the chip says -> what the table says
_SEATING = {
    "VCC off a data line": "D stands up with VCC off",
    "weak pull up": "D stays low",
    "weak pull down": "D stays high",
    "no chip answers": "D floats, every line",
    "outputs on, a data line": "D floats",
    "another package": "another power pin",
    "is not where it would be": "VCC",
}
_IDENTITY = {"no ID mode": "no ID mode", "is not that of": "other bytes"}
_TRIPS = {
    "did not come into its window": "out of its window",
    "raised rail left": "the raised rail",
    "VCC did not fall": "VCC does not fall",
    "raised position did not fall": "a raised position does not fall",
}


def _pin(part: Definition, name: str) -> int | None:
    pins = part.pin_of(name)
    return pins[0] if pins else None


def fault_texts(part: Definition, how: tuple[str, ...]) -> list[str]:
    """The faults of a row as `bench new --fault` takes them; none where the part has no such pin, or is the other."""
    if how == ("protected",) and part.protect is None:
        return []
    if how[0] not in ("lifted", "short"):
        return [] if how[0] == f"other={part.name}" else [how[0]]
    texts = []
    for name in how[1].split("/"):
        names = (name, *how[2:])
        pins = [_pin(part, one) for one in names]
        if None not in pins and ("VPP" not in names or "VPP" in part.pins):
            texts.append(f"{how[0]}={','.join(str(pin) for pin in pins)}")
    return texts


def _look(words: Mapping[str, str], result: str) -> str:
    """The table's words for a sentence; the sentence itself where it has none, so that the table shows it."""
    return next((short for part, short in words.items() if part in result), result)


def _told(answer: Mapping[str, Any], job: str) -> str:
    """What a job found, in a few words; "" where it found nothing."""
    error, result = answer.get("error", ""), answer["result"]
    if error == "SeatingRefused":
        return f"seating: {_look(_SEATING, result)}"
    if error == "IdentityRefused":
        return f"ID: {_look(_IDENTITY, result)}"
    if error == "Tripped":
        return f"{job}: rig trips, {_look(_TRIPS, result)}"
    if error == "ChipFault":
        return "burn: verify at the margins" if result.startswith("burnt, but") else "burn: the chip fails"
    if error == "Difference":
        return "read: at a margin" if job == "read" else "burn: not what was read before"
    if error:
        return f"{job}: {error}"
    if job == "read" and answer.get("unchanging_lines"):
        return f"read: {', '.join(answer['unchanging_lines'])} changes nothing"
    if job == "read" and answer.get("joined_lines"):
        return f"read: {' and '.join(answer['joined_lines'][0])} act as one"
    if job == "read" and answer.get("alike_data_lines"):
        return f"read: {' and '.join(answer['alike_data_lines'][0])} read alike"
    if answer.get("pulses", {}).get("worst_tries", 1) > 1:
        return "burn: takes more pulses"
    if answer.get("protection"):
        return "burn: told, and kept"
    return ""


def found(bench: Bench, name: str, fault: str | None, *, model: str = "") -> tuple[str, list[dict[str, Any]]]:
    """Where the two jobs on a part with one fault find it, with their exit codes, and what the pins saw in each."""
    options = ("--fault", fault) if fault else ()
    chip = name
    if model:
        chip, options = model, ("--model", str(MODELS / f"m{model}.py"))
    image = bench.image(WORDS, seed=3)
    image.write_bytes(b"\x00\xff\x5a\xa5\x00" + image.read_bytes()[5:])  # word 4 has every bit to burn
    cells, seen = [], []
    whole = fault is None or fault.startswith(("lifted", "short", "other"))
    for job, contents in (("read", "noise:9"), ("burn", "blank")):
        bench.new(chip, contents=contents, options=options)
        if job == "read":
            how = () if whole else ("--range", "0..31", "--margins")
            answer = bench.job("read", name, "-o", str(bench.folder / "out.bin"), *how)
        else:
            answer = bench.job("burn", name, str(image), "--range", f"0..{WORDS - 1}", "--no-save")
        seen.append(bench.seen())
        told = _told(answer, job)
        if not told and not _right(bench, job, image.read_bytes()):
            told = f"{job}: {WRONG}"
        harm = _harm(seen[-1])
        cells.append(f"{told or f'{job}: right'} ({answer['exit']}){harm}" if told or harm else "")
    return _both(*cells), seen


def _right(bench: Bench, job: str, image: bytes) -> bool:
    """Whether what a job that ended well has read, or written, is what the chip holds."""
    has = (bench.folder / "out.bin").read_bytes() if job == "read" else image
    return bench.contents()[: len(has)] == has


def _harm(seen: Mapping[str, Any]) -> str:
    return ", the chip is lost" if seen["damaged"] else ", overstressed" if seen["stressed"] else ""


def _both(read: str, burn: str) -> str:
    """One cell of both jobs; where they found the same, or one of them nothing, once."""
    if read == burn:
        return read or NOT_SEEN
    if not read:
        return burn if burn.startswith(("seating", "ID")) else f"read: right (0); {burn}"
    if read.replace("read:", "burn:") == burn and "trips" in burn:
        return read.replace("read:", "read and burn:")
    return f"{read}; {burn or 'burn: right (0)'}"


def table(cells: Mapping[str, Mapping[str, str]]) -> list[str]:
    """The rows as a Markdown table."""
    lines = [f"| fault | {' | '.join(PARTS)} |", f"| --- |{' --- |' * len(PARTS)}"]
    lines += [f"| {row} | {' | '.join(found[part] for part in PARTS)} |" for row, found in cells.items()]
    return lines


def parts() -> dict[str, Definition]:
    """The definitions of the parts in the table."""
    return {name: load(name) for name in PARTS}
