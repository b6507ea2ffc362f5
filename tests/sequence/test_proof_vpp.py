"""The proof on VPP that stands over many words, blind passes, pulses upwards, and an ID asked for by command."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from pulsewright.chip.model import Definition, Method
from pulsewright.sequence.compile import compile_read
from pulsewright.sequence.proof import prove
from pulsewright.wire.ops import ins, line_byte
from pulsewright.wire.tables import Identity, Level, Op
from tests.sequence.proof_bends import (
    RIG,
    Bend,
    bent,
    both,
    compiled,
    drop,
    kinds_of,
    opened,
    part_of,
    put,
    put_after,
    set_,
    told,
    wait_after,
)
from tests.sequence.proof_programs import MS, Items, lines, measure, place

ST, BLIND = part_of("27c256", "ST"), part_of("27c256", "Atmel")
NMOS, PGM = part_of("2716"), part_of("27c64", "AMD")
FLASH = part_of("39sf020", "SST")
CE = 22


@pytest.mark.parametrize(
    ("name", "maker"),
    [("27c256", maker) for maker in ("ST", "Atmel", "TI", "National", "AMD")]
    + [("27c64", "Intel"), ("27c64", "AMD"), ("2716", "")],
)
def test_every_sequence_of_these_parts_is_accepted(name: str, maker: str) -> None:
    """VPP up over many words, a blind first pass, PGM pulsed behind CE, a pulse upwards: nothing is found."""
    part = part_of(name, maker)
    for kind in kinds_of(part):
        assert bent(part, kind) == (), kind


@pytest.mark.parametrize("kind", ["identify", "read", "blank", "burn", "erase"])
def test_a_flash_that_tells_its_id_by_command_is_accepted(kind: str) -> None:
    """Commands before and behind the gate and before each word, and an erase of the whole chip: nothing is found."""
    assert bent(FLASH, kind) == ()


OPEN = opened(Op.PULSE_VERIFY)
ERASE = tuple(zip((0x5555, 0x2AAA) * 3, (0xAA, 0x55, 0x80, 0xAA, 0x55, 0x10), strict=True))
VPP_LOW = ins(Op.LINES, lines=lines(l3="L"))
LOW = ins(Op.LINES, lines=lines(l22="L"))


def swap(op: Op, turn: int = 0) -> Bend:
    """Swaps an op with the one behind it."""

    def bend(items: Items) -> Items:
        at = place(items, op, turn)
        return [*items[:at], items[at + 1], items[at], *items[at + 2 :]]

    return bend


def blind_twice(items: Items) -> Items:
    """Each word of the blind pass gets two pulses."""
    at = place(items, Op.PULSE)
    return [*items[: at + 2], *items[at:]]


BENT: list[tuple[str, str, Definition, str, Bend, str]] = [
    # VPP that stands
    ("VPP unmeasured", "H8", ST, "burn", drop(Op.MEASURE, -3), "never measured at its position"),
    ("VPP before VCC", "H3", ST, "burn", drop(Op.RAIL, 2), "no mode wants at these lines"),
    ("VCC down under VPP", "H4", ST, "burn", drop(Op.SWITCHES, -1), "with raised switches closed"),
    ("VCC down as VPP falls", "H4", ST, "burn", wait_after(Op.SWITCHES, -1, 9), "while a raised level falls"),
    ("6.25 V before the gate", "H2", ST, "burn", set_(Op.RAIL, 0, step=6), "another step than the one to read at"),
    ("VCC unmeasured", "H8", ST, "burn", drop(Op.MEASURE, -5), "before VCC was measured"),
    ("the VPP line low", "H3", ST, "burn", both(OPEN, put(Op.PULSE, 0, VPP_LOW)), "raised position"),
    ("CE and OE low", "H3", ST, "burn", both(OPEN, put(Op.PULSE, 0, LOW)), "no mode wants at these lines"),
    ("CE low under VPP", "H7", ST, "burn", both(OPEN, put(Op.PULSE, 0, LOW)), "stand outside a pulse"),
    ("read with VPP low", "H7", ST, "read", put(Op.READ_RUN, 0, ins(Op.LINES, lines=lines(l3="L")),
        ins(Op.WAIT, ticks=30)), "sampled in no mode"),
    ("26 pulses", "H7", ST, "burn", both(OPEN, set_(Op.LOOP, count=26)), "repetitions of the steps"),
    ("D against the chip", "H6", ST, "burn", drop(Op.RELEASE, -1), "while the rig drives D"),
    ("OE low at once", "H7", ST, "burn", both(OPEN, wait_after(Op.RELEASE, -1, 9)), "too soon after D was let go"),
    ("wrong verify", "H7", ST, "burn", both(OPEN, set_(Op.BRANCH, -1, when=2)), "out of its turn"),
    ("address early", "H7", ST, "burn", both(OPEN, wait_after(Op.DRIVE_WORD, 0, 31)), "set-up before the pulse"),
    ("CE early", "H7", replace(PGM, timing={**PGM.timing, "tCS": replace(PGM.timing["tCS"], min_ps=9 * 10**6)}), "burn",
     wait_after(Op.DRIVE_WORD, 0, 60), "set-up of control lines"),
    ("a pin of no connection", "H6", PGM, "read", put(Op.READ_RUN, 0, ins(Op.LINES, lines=lines(l28="H"))),
     "not connected"),
    # a blind pass
    ("blind twice", "H7", BLIND, "burn", blind_twice, "a pulse out of its turn"),
    ("blind, then a look", "H7", BLIND, "burn", swap(Op.EACH_WORD), "not the word's in hand"),
    ("never looked", "H7", BLIND, "burn", lambda items: [*items[: place(items, Op.EACH_BLOCK, 1)],
        *items[place(items, Op.NEXT_BLOCK, -1) + 2 :]], "in the middle of the steps"),
    ("11 more pulses", "H7", BLIND, "burn", set_(Op.LOOP, count=11), "repetitions of the steps"),
    ("unequal, yet not pulsed", "H7", BLIND, "burn", set_(Op.BRANCH, -2, when=2), "out of its turn"),
    # a pulse upwards
    ("CE high under VPP", "H7", NMOS, "burn", put(Op.PULSE, 0, ins(Op.LINES, lines=lines(l22="H"))), "outside a pulse"),
    ("CE released under VPP", "H7", NMOS, "burn", put(Op.EACH_BLOCK, 0, ins(Op.LINES, lines=lines(l22="Z"))),
     "stand outside a pulse"),
    ("CE high before VPP has gone", "H7", NMOS, "burn", wait_after(Op.SWITCHES, -1, 9), "stand outside a pulse"),
    ("CE high as VPP rises", "H7", NMOS, "burn", put(Op.SWITCHES, 0, ins(Op.LINES, lines=lines(l22="H"))), "outside a"),
    ("pulsed down", "H7", NMOS, "burn", set_(Op.PULSE, line=line_byte(CE, Level.LOW)), "no step of the definition"),
    ("a second pulse", "H7", NMOS, "burn", put_after(Op.PULSE, 0, ins(Op.WAIT, ticks=99), ins(
        Op.PULSE, line=line_byte(CE, Level.HIGH), width=50 * MS, max=55 * MS)), "without a look at what the first"),
    # nothing takes for ever
    ("an endless wait", "H7", ST, "burn", set_(Op.WAIT, -1, ticks=16_000_000), "a wait longer than anything asks for"),
    ("an endless measurement", "H8", ST, "burn", set_(Op.MEASURE, -1, limit=16_000_000), "may take for ever"),
    ("an endless look", "H7", ST, "read", set_(Op.GATE_LOOK, wait=16_000_000), "a wait longer than anything asks for"),
    # an ID by command
    ("no look first", "H2", FLASH, "identify", drop(Op.GATE_LOOK), "a command before the look"),
    ("the look behind the command", "H2", FLASH, "identify", put(Op.GATE, 0, ins(Op.GATE_LOOK, wait=19)),
     "comes after a command"),
    ("half the command", "H7", FLASH, "identify", set_(Op.BUS_WRITES, cycles=((0x5555, 0xAA),)), "a group of bus"),
    ("another command", "H7", FLASH, "identify", set_(Op.BUS_WRITES, cycles=((0x5555, 0xAA), (0x2AAA, 0x55), (
        0x5555, 0xA0))), "that the steps do not have here"),
    ("no command", "H7", FLASH, "identify", drop(Op.BUS_WRITES), "the gate out of its turn"),
    ("left in the ID", "H7", FLASH, "identify", drop(Op.BUS_WRITES, 1), "in the middle of the steps"),
    ("read in the ID", "H7", FLASH, "identify", put_after(Op.GATE, 0, ins(Op.SAMPLE)), "while it shows its ID"),
    ("erase before the gate", "H2", FLASH, "erase", set_(Op.BUS_WRITES, cycles=ERASE), "a bus write before the gate"),
    ("erased, not scanned", "H7", FLASH, "erase", drop(Op.SCAN), "in the middle of the steps"),
]  # fmt: skip


@pytest.mark.parametrize(
    ("rule", "part", "kind", "bend", "text"), [one[1:] for one in BENT], ids=[one[0] for one in BENT]
)
def test_a_bent_sequence_is_refused(rule: str, part: Definition, kind: str, bend: Bend, text: str) -> None:
    """The rule that the change breaks finds it and says what it is."""
    found = bent(part, kind, bend)
    assert told(found, rule, text), list(map(str, found))


PERMITS: list[tuple[str, str, Definition, str, dict[str, Any], str]] = [
    ("standby is the pulse", "H5", NMOS, "burn", {"safe": lines(l22="H", l24="H", l25="H")}, "is the pulse of program"),
    ("VPP low when safe", "H5", NMOS, "burn", {"safe": lines(l22="L", l24="H", l25="L")}, "that no mode has low"),
    ("no pass", "H5", ST, "burn", {"header": {"passes": 0}}, "once for each pass"),
    ("one pass of two", "H5", BLIND, "burn", {"header": {"passes": 1}}, "once for each pass"),
    ("words of three passes", "H7", BLIND, "burn", {"header": {"words": 98_304}}, "more words than the chip has"),
    ("no identity", "H9", FLASH, "erase", {"identity": Identity.NONE}, "the permit does not want it"),
    ("an identify level", "H2", FLASH, "identify", {"identify_switch": 4}, "that the definition does not want"),
    ("25 V without a word", "H2", NMOS, "burn", {"identity": Identity.NONE}, "yet raised levels past the gate"),
]


@pytest.mark.parametrize(
    ("rule", "part", "kind", "bend", "text"), [one[1:] for one in PERMITS], ids=[one[0] for one in PERMITS]
)
def test_a_bent_permit_or_header_is_refused(
    rule: str, part: Definition, kind: str, bend: dict[str, Any], text: str
) -> None:
    """A good program under a permit or header with one wrong field is refused by name."""
    found = bent(part, kind, **bend)
    assert told(found, rule, text), list(map(str, found))


def test_nothing_is_raised_in_the_steps_that_end_a_method() -> None:
    """Had the 27C256 steps for its end, a level that goes up again after a failure is refused."""
    assert ST.program is not None
    standby = ST.program.steps[-1:]
    part = replace(ST, program=replace(ST.program, finally_=standby))
    assert bent(part, "burn") == ()
    again = (ins(Op.SWITCHES, on=0), ins(Op.WAIT, ticks=200), ins(Op.SWITCHES, on=1), measure(16, 432, 448))
    assert told(bent(part, "burn", put_after(Op.FAILING, 0, *again)), "H3", "raised in the steps that end a method")


SHEETS: list[tuple[Definition, dict[str, int], str]] = [
    (ST, {"tVS": 50}, "set-up of the raised level before the pulse"),
    (ST, {"tAS": 10}, "address set-up before the pulse"),
    (ST, {"tDS": 10}, "data set-up before the pulse"),
    (ST, {"tDH": 10}, "data hold after the pulse"),
    (ST, {"tAH": 200}, "address hold after the pulse"),
    (ST, {"tVCS": 500_000}, "set-up of VCC before the pulse"),
    (ST, {"tOES": 10}, "outputs are enabled too soon after D was let go"),
    (PGM, {"tCS": 10}, "set-up of control lines before the pulse"),
    (NMOS, {"tOEH": 10}, "control hold after the pulse"),
]


@pytest.mark.parametrize(("part", "times", "text"), SHEETS)
def test_another_sheet_refuses_what_this_one_lets_pass(part: Definition, times: dict[str, int], text: str) -> None:
    """Each time of a pulse is held to the definition: had the sheet a longer one, the same bytes are refused."""
    timing = dict(part.timing)
    for name, us in times.items():
        timing[name] = replace(timing[name], min_ps=us * 10**6)
    found = bent(part, "burn", judged_by=replace(part, timing=timing))
    assert told(found, "H7", text), list(map(str, found))


def test_the_command_settles_before_the_gate() -> None:
    """Had the flash a longer way into its ID, the same bytes are refused."""
    command = FLASH.identify_command
    assert command is not None
    slow = replace(FLASH, identify_command=replace(command, settle_ps=10**7))
    assert told(bent(FLASH, "identify", judged_by=slow), "H7", "before the identify command has settled")


@pytest.mark.parametrize(
    ("part", "text"),
    [
        (replace(FLASH, technology="eeprom"), "of a part that is no flash"),
        (replace(FLASH, modes={**FLASH.modes, "program": ST.modes["identify"]},
                 supplies={**FLASH.supplies, **ST.supplies}), "of a part that has raised levels"),
    ],
)  # fmt: skip
def test_only_flash_at_5_v_is_asked_by_command(part: Definition, text: str) -> None:
    """A command is a write to a chip that nobody knows yet: refused where it could do harm."""
    assert told(bent(FLASH, "identify", judged_by=part), "H2", text)


def test_vcc_above_5_5_v_needs_the_word_where_there_is_no_id() -> None:
    """VCC above 5.5 V counts as raised: identity none does not reach it (H9)."""
    modes = {name: mode for name, mode in ST.modes.items() if name != "identify"}
    part = replace(ST, identify="none", identify_mode="", modes=modes)
    high = compile_read(part, RIG, 0, 9, mode="check_high")
    nobody = replace(high.permit, identity=Identity.NONE, alternatives=())
    assert told(prove(high.code, nobody, part, RIG).findings, "H9", "VCC above 5.5 V")
    vouched = replace(nobody, identity=Identity.VOUCHED_NONE)
    assert prove(high.code, vouched, part, RIG).findings == ()


def test_steps_that_are_not_understood_allow_nothing() -> None:
    """A repeat with nothing that ends it leads nowhere: its pulses are in no turn, whatever the compiler made."""
    assert ST.program is not None
    steps = tuple(one for one in ST.program.steps if type(one).__name__ != "EachStep")
    part = replace(ST, program=Method("1 to 0", "word", steps))
    found = prove(compiled(ST, "burn").code, compiled(ST, "burn").permit, part, RIG).findings
    assert told(found, "H7", "no step of the definition pulses")
