"""Each fault of the bench on each part, and what the jobs say of it: the table that FAULTS.md shows.

Two jobs a cell: a `read` of a used chip, then, where that sees nothing, a `burn` of some words into a blank one. Only
where contacts are bad is the whole chip read, because only the whole shows an address line.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from tests.end_to_end.bench_kit import MODELS, Bench

PARTS = ("27e512", "27c256", "28c256")
NOT_THERE = "-"  # the part has no such pin, or the fault is none of its
WORDS = 24


def _pin(part: Definition, name: str) -> int | None:
    pins = part.pin_of(name)
    return pins[0] if pins else None


def _lifted(*names: str) -> dict[str, tuple[str, ...]]:
    return {f"lifted: {name}": ("lifted", name) for name in names}


def _short(*pairs: tuple[str, str]) -> dict[str, tuple[str, ...]]:
    return {f"short: {a} to {b}": ("short", a, b) for a, b in pairs}


# row -> how the fault is made: its text, or "lifted"/"short" and pins by role
ROWS: Mapping[str, tuple[str, ...]] = {
    "no chip": ("absent",),
    "reversed": ("reversed",),
    "one row off": ("shifted",),
    **_lifted("VCC", "GND", "CE", "OE", "WE", "VPP", "D3", "A0", "A9", "A13"),
    **_short(
        ("VCC", "GND"), ("VCC", "A13"), ("VCC", "D7"), ("D2", "GND"), ("D0", "D1"), ("D0", "A0"), ("A5", "A6"),
        ("OE", "A10"), ("CE", "D7"), ("CE", "A10"), ("A9", "A8"), ("VPP", "A12"), ("WE", "A13"),
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
}  # fmt: skip
OTHERS = {"a 2716 (24 pins) in its place": "2716", "a 27C64 in its place": "27c64"}
_RAISED = ("raised", "another ID")


def fault_text(part: Definition, how: tuple[str, ...]) -> str | None:
    """The fault as `bench new --fault` takes it; None where the part has no such pin."""
    if how == ("protected",) and part.protect is None:
        return None
    if how[0] not in ("lifted", "short"):
        return how[0]
    pins = [_pin(part, name) for name in how[1:]]
    if None in pins or any(name == "VPP" and name not in part.pins for name in how[1:]):
        return None
    return f"{how[0]}={','.join(str(pin) for pin in pins)}"


def _shown(answer: Mapping[str, Any], job: str) -> str:
    """Where a job found the fault, in a few words; "" where it found none."""
    error = answer.get("error", "")
    named = {"SeatingRefused": "seating", "IdentityRefused": "ID", "Tripped": f"{job}: the rig trips"}
    if error in named:
        return named[error]
    if error == "ChipFault":
        return "burn: verify at the margins" if answer["result"].startswith("burnt, but") else "burn: the chip fails"
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


def found(bench: Bench, name: str, fault: str | None, *, model: str = "") -> tuple[str, dict[str, Any]]:
    """Where jobs on a part with one fault find it, and what the pins saw."""
    options = ("--fault", fault) if fault else ()
    chip = name
    if model:
        chip, options = model, ("--model", str(MODELS / f"m{model}.py"))
    image = bench.image(WORDS, seed=3)
    image.write_bytes(b"\x00\xff\x5a\xa5\x00" + image.read_bytes()[5:])  # word 4 has every bit to burn
    seen: dict[str, Any] = {}
    contacts = fault is None or fault.startswith(("lifted", "short"))
    for job, contents in (("read", "noise:9"), ("burn", "blank")):
        bench.new(chip, contents=contents, options=options)
        if job == "read":
            how = () if contacts else ("--range", "0..31", "--margins")
            answer = bench.job("read", name, "-o", str(bench.folder / "out.bin"), *how)
        else:
            answer = bench.job("burn", name, str(image), "--range", f"0..{WORDS - 1}", "--no-save")
        seen = bench.seen()
        where = _shown(answer, job)
        if where:
            return where, seen
    return "not seen", seen


def table(cells: Mapping[str, Mapping[str, str]]) -> list[str]:
    """The rows as a Markdown table."""
    lines = [f"| fault | {' | '.join(PARTS)} |", f"| --- |{' --- |' * len(PARTS)}"]
    lines += [f"| {row} | {' | '.join(found[part] for part in PARTS)} |" for row, found in cells.items()]
    return lines


def parts() -> dict[str, Definition]:
    """The definitions of the parts in the table."""
    return {name: load(name) for name in PARTS}
