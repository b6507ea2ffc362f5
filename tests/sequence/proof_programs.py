"""Good programs for the 27e512, written op by op from the wire's meanings: what the proof's tests bend.

Line n meets position n; CE is line 22, OE line 24, A9 line 26. Switch 2 is at OE, switch 4 at A9. Ticks are 1/16 us.
"""

from __future__ import annotations

import zlib
from collections.abc import Callable, Iterable
from dataclasses import replace
from typing import Any

from pulsewright.sequence.types import Finding, Proof
from pulsewright.wire.ops import Header, Instruction, Label, assemble, ins, line_byte
from pulsewright.wire.permit import Permit, VccStep
from pulsewright.wire.tables import Fail, Flow, Identity, Level, Op

US, MS = 16, 16_000
CE, OE, A9 = 22, 24, 26
ADDRESS = (12, 11, 10, 9, 8, 7, 6, 5, 27, 26, 23, 25, 4, 28, 29, 3)
Item = Instruction | Label
Items = list[Item]


def lines(**levels: str) -> bytes:
    """Line bytes of lines given by number, as l22="H"."""
    named = {"L": Level.LOW, "H": Level.HIGH, "Z": Level.RELEASED}
    return bytes(line_byte(int(name[1:]), named[level]) for name, level in levels.items())


ON = lines(l22="L", l24="L")  # outputs on
OFF = lines(l22="H", l24="H")  # standby


def _or_fail(name: str, why: Fail) -> Items:
    return [ins(Op.BRANCH, when=1, depth=0, to=name), ins(Op.FAIL, why=why), Label(name)]


def measure(channel: int, low: int, high: int) -> Instruction:
    """A measurement with 2 ms of patience."""
    return ins(Op.MEASURE, channel=channel, low=low, high=high, limit=2 * MS)


def seating() -> Items:
    """VCC off, probe, full; outputs off and on against the bias."""
    both = [
        ins(Op.RELEASE),
        ins(Op.LINES, lines=ON),
        ins(Op.ADDRESS, at=0),
        ins(Op.BIAS, groups=1, how=1),
        ins(Op.WAIT, ticks=60 * US),
        ins(Op.SAMPLE),
        ins(Op.COMPARE, word=0, mask=0xFF),
        *_or_fail("off", Fail.SEAT_STANDS_UP),
        *[measure(16 + number, 0, 10) for number in range(5)],
        measure(2, 0, 37),
        ins(Op.RAIL, rail=0, step=3),
        ins(Op.RANGE, which=1),
        ins(Op.WAIT, ticks=6 * MS),
        measure(2, 190, 656),
        ins(Op.LINES, lines=lines(l28="Z", l32="Z")),
        ins(Op.BIAS, groups=4, how=1),
        ins(Op.WAIT, ticks=60 * US),
        ins(Op.SENSE, line=28, **{"is": 0}),
        *_or_fail("power28", Fail.SEAT_OTHER_POWER),
        ins(Op.SENSE, line=32, **{"is": 0}),
        *_or_fail("power32", Fail.SEAT_OTHER_POWER),
        ins(Op.ADDRESS, at=0),
        ins(Op.RANGE, which=2),
        ins(Op.WAIT, ticks=6 * MS),
        measure(2, 600, 650),
        ins(Op.HIGH, how=1),
        ins(Op.LINES, lines=OFF),
    ]
    looks: Items = []
    for name, how, word, why in (("up", 2, 0xFF, Fail.SEAT_DATA_LOW), ("down", 1, 0, Fail.SEAT_DATA_HIGH)):
        looks += [ins(Op.BIAS, groups=1, how=how), ins(Op.WAIT, ticks=60 * US), ins(Op.SAMPLE)]
        looks += [ins(Op.COMPARE, word=word, mask=0xFF), *_or_fail(name, why)]
    held = [
        ins(Op.LINES, lines=ON),
        ins(Op.BIAS, groups=1, how=2),
        ins(Op.WAIT, ticks=60 * US),
        ins(Op.SAMPLE),
        ins(Op.KEEP),
        ins(Op.BIAS, groups=1, how=1),
        ins(Op.WAIT, ticks=60 * US),
        ins(Op.SAMPLE),
        ins(Op.COMPARE_KEPT, mask=0xFF),
        *_or_fail("held", Fail.SEAT_FLOATING),
        ins(Op.BIAS, groups=1, how=0),
        ins(Op.SEATED),
    ]
    return [*both, *looks, *held]


def gate() -> Items:
    """The look, the identify level at A9, the gate, and everything quiet again."""
    return [
        ins(Op.GATE_LOOK, wait=20),
        ins(Op.LINES, lines=OFF),
        ins(Op.RAIL, rail=1, step=1),
        ins(Op.WAIT, ticks=25 * MS),
        measure(1, 397, 431),
        ins(Op.ADDRESS, at=0x200),
        ins(Op.SWITCHES, on=0x10),
        ins(Op.WAIT, ticks=80),
        measure(20, 397, 431),
        ins(Op.LINES, lines=ON),
        ins(Op.WAIT, ticks=80),
        ins(Op.GATE, wait=20),
        ins(Op.SWITCHES, on=0),
        ins(Op.WAIT, ticks=14 * US),
        ins(Op.LINES, lines=OFF),
        ins(Op.WAIT, ticks=3 * US),
    ]


def read_work() -> Items:
    """Words by the block."""
    return [ins(Op.LINES, lines=ON), ins(Op.WAIT, ticks=20), ins(Op.READ_RUN, wait=20), ins(Op.END)]


def burn_work() -> Items:
    """12 V at OE measured once, then each word pulsed and read back, primitive by primitive."""
    return [
        measure(1, 406, 422),
        ins(Op.SWITCHES, on=4),
        ins(Op.WAIT, ticks=80),
        measure(18, 406, 422),
        ins(Op.SWITCHES, on=0),
        ins(Op.WAIT, ticks=14 * US),
        ins(Op.EACH_BLOCK, to="end"),
        ins(Op.EACH_WORD, to="block"),
        ins(Op.LOOP, count=25),
        ins(Op.ADDRESS_WORD),
        ins(Op.DRIVE_WORD),
        ins(Op.SWITCHES, on=4),
        ins(Op.WAIT, ticks=110),
        ins(Op.PULSE, line=CE, width=100 * US, max=105 * US),
        ins(Op.WAIT, ticks=3 * US),
        ins(Op.SWITCHES, on=0),
        ins(Op.WAIT, ticks=10 * US),
        ins(Op.RELEASE),
        ins(Op.WAIT, ticks=2 * US),
        ins(Op.LINES, lines=ON),
        ins(Op.WAIT, ticks=2 * US),
        ins(Op.SAMPLE),
        ins(Op.LINES, lines=OFF),
        ins(Op.WAIT, ticks=20),
        ins(Op.COMPARE_WORD),
        ins(Op.BRANCH, when=1, depth=2, to="good"),
        ins(Op.NEXT),
        ins(Op.FAIL, why=Fail.PROGRAM),
        Label("good"),
        ins(Op.NEXT_WORD),
        Label("block"),
        ins(Op.NEXT_BLOCK),
        Label("end"),
        ins(Op.END),
    ]


def erase_work() -> Items:
    """14 V at OE and A9, up to 20 pulses, every word read at VCC 3.75 V after each."""
    return [
        ins(Op.RAIL, rail=1, step=5),
        ins(Op.WAIT, ticks=25 * MS),
        measure(1, 475, 491),
        ins(Op.LOOP, count=20),
        ins(Op.ADDRESS, at=0x200),
        ins(Op.DRIVE, word=0xFF),
        ins(Op.SWITCHES, on=0x14),
        ins(Op.WAIT, ticks=110),
        measure(18, 475, 491),
        measure(20, 475, 491),
        ins(Op.PULSE, line=CE, width=100 * MS, max=105 * MS),
        ins(Op.WAIT, ticks=3 * US),
        ins(Op.SWITCHES, on=0),
        ins(Op.WAIT, ticks=14 * US),
        ins(Op.RELEASE),
        ins(Op.HIGH, how=0),
        ins(Op.WAIT, ticks=2 * US),
        ins(Op.RAIL, rail=0, step=1),
        ins(Op.WAIT, ticks=6 * MS),
        measure(2, 446, 492),
        ins(Op.LINES, lines=ON),
        ins(Op.WAIT, ticks=2 * US),
        ins(Op.SCAN, first=0, count=65_536, word=0xFF, wait=3 * US),
        ins(Op.LINES, lines=OFF),
        ins(Op.WAIT, ticks=3 * US),
        ins(Op.RAIL, rail=0, step=3),
        ins(Op.WAIT, ticks=6 * MS),
        measure(2, 600, 650),
        ins(Op.HIGH, how=1),
        ins(Op.BRANCH, when=1, depth=0, to="clean"),
        ins(Op.NEXT),
        ins(Op.FAIL, why=Fail.ERASE),
        Label("clean"),
        ins(Op.END),
    ]


WORK: dict[str, Callable[[], Items]] = {
    "identify": lambda: [ins(Op.END)],
    "read": read_work,
    "erase": erase_work,
    "burn": burn_work,
}
_FLOWS = {"read": Flow.READ, "burn": Flow.WRITE}
_RAISED: dict[str, tuple[tuple[int, int], ...]] = {"erase": ((2, 491), (4, 491)), "burn": ((2, 422),)}


def program(kind: str) -> Items:
    """A whole good program."""
    return [*seating(), *gate(), *WORK[kind]()]


def header(kind: str) -> Header:
    """Its routine header."""
    flow = _FLOWS.get(kind, Flow.NONE)
    return Header(8, flow, ADDRESS, 0 if flow is Flow.NONE else 65_536, 256)


def encoded(kind: str, items: Iterable[Item], **changes: Any) -> bytes:
    """A program's bytes; `changes` are made to the header."""
    return assemble(replace(header(kind), **changes), items)[0]


def permit(kind: str, code: bytes, **changes: Any) -> Permit:
    """The permit that goes with it, for these bytes."""
    steps = [VccStep(3, 594, 656, 6 * MS)]
    if kind == "erase":
        steps.insert(0, VccStep(1, 446, 492, 6 * MS))
    good = Permit(
        identity=Identity.WANTED,
        alternatives=(((0, 0xDA), (1, 0x08)),),
        identify_switch=4,
        identify_step=1,
        identify_ceiling=431,
        raised=_RAISED.get(kind, ()),
        vcc=tuple(steps),
        vcc_to=2,
        drives=(ON,),
        safe=OFF,
        self_timed=0,
        crc32=zlib.crc32(code),
    )
    return replace(good, **changes)


# ---- bending --------------------------------------------------------------------------------------------------------


def place(items: Items, op: Op, turn: int = 0) -> int:
    """Index of an op's nth appearance (negative: from the end)."""
    return [at for at, item in enumerate(items) if isinstance(item, Instruction) and item.op is op][turn]


def without(items: Items, op: Op, turn: int = 0) -> Items:
    """The list without one op."""
    at = place(items, op, turn)
    return [*items[:at], *items[at + 1 :]]


def changed(items: Items, op: Op, turn: int = 0, **args: Any) -> Items:
    """The list with other arguments of one op."""
    at = place(items, op, turn)
    old = items[at]
    assert isinstance(old, Instruction)
    return [*items[:at], Instruction(op, {**old.args, **args}), *items[at + 1 :]]


def before(items: Items, op: Op, turn: int, *new: Item) -> Items:
    """The list with ops put before one."""
    at = place(items, op, turn)
    return [*items[:at], *new, *items[at:]]


def rules(proof: Proof) -> set[str]:
    """The rules that found something."""
    return {finding.rule for finding in proof.findings}


def by_rule(proof: Proof, rule: str) -> list[Finding]:
    """The findings of one rule."""
    return [finding for finding in proof.findings if finding.rule == rule]
