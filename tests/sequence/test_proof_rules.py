"""Each rule of the proof seen to refuse: a good program or permit, bent in one place, by the rule it breaks."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from pulsewright.rig.file import load_rig
from pulsewright.sequence.proof import prove
from pulsewright.wire.ops import Label, ins, line_byte
from pulsewright.wire.tables import Identity, Level, Op
from tests.sequence.proof_programs import (
    CE,
    MS,
    OFF,
    ON,
    US,
    Items,
    before,
    by_rule,
    changed,
    encoded,
    lines,
    measure,
    permit,
    place,
    program,
    rules,
    without,
)

RIG = load_rig()
CHIP = load("27e512", maker="DA")
Bend = Callable[[Items], Items]


def found(kind: str, bend: Bend, rule: str, definition: Definition = CHIP) -> str:
    """The findings of one rule for a bent program, as one text; all findings where that rule has none."""
    code = encoded(kind, bend(program(kind)))
    proof = prove(code, permit(kind, code), definition, RIG)
    return "\n".join(map(str, by_rule(proof, rule) or proof.findings))


def swap(op: Op, turn: int = 0) -> Bend:
    """Swaps an op with the one behind it."""

    def bend(items: Items) -> Items:
        at = place(items, op, turn)
        return [*items[:at], items[at + 1], items[at], *items[at + 2 :]]

    return bend


def drop(op: Op, turn: int = 0) -> Bend:
    """Leaves an op out."""
    return lambda items: without(items, op, turn)


def put(op: Op, turn: int, *new: Any) -> Bend:
    """Puts ops before one."""
    return lambda items: before(items, op, turn, *new)


def set_(op: Op, turn: int = 0, **args: Any) -> Bend:
    """Changes arguments of an op."""
    return lambda items: changed(items, op, turn, **args)


def put_after(op: Op, turn: int, *new: Any) -> Bend:
    """Puts ops behind one."""

    def bend(items: Items) -> Items:
        at = place(items, op, turn) + 1
        return [*items[:at], *new, *items[at:]]

    return bend


def wait_after(op: Op, turn: int, ticks: int) -> Bend:
    """Sets the first wait behind an op."""
    return lambda items: changed(items, Op.WAIT, place_of_wait_after(items, op, turn), ticks=ticks)


def no_wait_after(op: Op, turn: int = 0) -> Bend:
    """Takes the wait out that follows an op."""

    def bend(items: Items) -> Items:
        at = place(items, op, turn) + 1
        assert getattr(items[at], "op", None) is Op.WAIT
        return [*items[:at], *items[at + 1 :]]

    return bend


def burn_at_14_v(items: Items) -> Items:
    """The raised rail goes to 14 V for the program pulses."""
    rail = [ins(Op.RAIL, rail=1, step=5), ins(Op.WAIT, ticks=25 * MS), measure(1, 475, 491)]
    return before(items, Op.SWITCHES, 2, *rail)


def pulse_twice(items: Items) -> Items:
    """Two pulses in one turn of the loop."""
    at = place(items, Op.PULSE)
    return [*items[: at + 1], ins(Op.WAIT, ticks=3 * US), *items[at:]]


def gate_early(items: Items) -> Items:
    """The gate right behind the switch."""
    for _ in range(2):
        items = without(items, Op.WAIT, place_of_wait_after(items, Op.SWITCHES))
    return items


def place_of_wait_after(items: Items, op: Op, turn: int = 0) -> int:
    """Which wait (by count) is the first behind an op."""
    at = place(items, op, turn)
    return sum(1 for item in items[:at] if getattr(item, "op", None) is Op.WAIT)


def address_early(items: Items) -> Items:
    """The address lines move right behind the drop of A9."""
    at = place(items, Op.SWITCHES, 1) + 1
    return [*items[:at], ins(Op.ADDRESS, at=0), *items[at:]]


CASES: list[tuple[str, str, str, Bend, str]] = [
    # H1: VCC measured and seating really checked before anything is raised
    ("unseated", "H1", "burn", drop(Op.SEATED), "a raised level before the seating check"),
    ("no look with VCC off", "H1", "identify", drop(Op.SAMPLE), "before the look with VCC off"),
    ("bias up at the first look", "H1", "identify", drop(Op.BIAS), "before the look with VCC off"),
    ("a position not looked at", "H1", "identify", drop(Op.MEASURE, 3), "before the look with VCC off"),
    ("VCC not seen to be off", "H1", "identify", drop(Op.MEASURE, 5), "before the look with VCC off"),
    ("VCC may stand at 1 V", "H1", "identify", set_(Op.MEASURE, 5, high=125), "before the look with VCC off"),
    ("position may stand at 5 V", "H1", "identify", set_(Op.MEASURE, 1, high=200), "before the look with VCC off"),
    ("no probe", "H1", "identify", drop(Op.RANGE), "full VCC before it was measured through the probe"),
    ("probe below 1.5 V", "H1", "identify", set_(Op.MEASURE, 6, low=180), "measured through the probe resistor"),
    ("a supply position not sensed", "H1", "identify", drop(Op.SENSE, 1), "supply position at line 32"),
    ("bias up not looked at", "H1", "identify", set_(Op.COMPARE, 1, word=0xFE), "outputs off, bias up"),
    ("bias down half looked at", "H1", "identify", set_(Op.COMPARE, 2, mask=0x7F), "outputs off, bias down"),
    ("kept nothing", "H1", "identify", drop(Op.KEEP), "outputs on, both ways"),
    ("kept compared in part", "H1", "identify", set_(Op.COMPARE_KEPT, mask=0x0F), "outputs on, both ways"),
    ("mismatch not acted on", "H1", "identify", set_(Op.BRANCH, 3, when=2), "outputs off, bias up"),
    ("the pull has no time", "H1", "identify", wait_after(Op.BIAS, -2, 4), "before the weak pull had its effect"),
    # H2: before the gate only the identify step, and the gate itself
    ("no gate", "H2", "burn", drop(Op.GATE), "before the gate"),
    ("no gate, nothing done", "H2", "identify", drop(Op.GATE), "without having passed the gate"),
    ("no look", "H2", "read", drop(Op.GATE_LOOK), "without the look before it"),
    ("look waits differently", "H2", "read", set_(Op.GATE_LOOK, wait=21), "wait differently"),
    ("level kept after the gate", "H2", "read", swap(Op.GATE), "without the identify level alone"),
    ("op before the drop", "H2", "read", put(Op.SWITCHES, 1, ins(Op.WAIT, ticks=1)), "than the drop of the identify"),
    ("14 V before the gate", "H2", "read", set_(Op.RAIL, 1, step=5), "only the identify step"),
    ("OE before the gate", "H2", "burn", set_(Op.SWITCHES, 0, on=4), "another switch than the identify"),
    ("both before the gate", "H2", "erase", set_(Op.SWITCHES, 0, on=0x14), "another switch than the identify"),
    ("D before the gate", "H2", "identify", put(Op.GATE_LOOK, 0, ins(Op.DRIVE, word=1)), "D is driven before the gate"),
    ("read before the gate", "H2", "read", put(Op.GATE_LOOK, 0, ins(Op.SAMPLE)), "read before the gate"),
    # H3: only what a mode of the definition wants, at these lines
    ("12 V erase", "H3", "erase", set_(Op.RAIL, 2, step=1), "no mode wants at these lines"),
    ("14 V program", "H3", "burn", burn_at_14_v, "no mode wants at these lines"),
    ("erase without A9", "H3", "erase", set_(Op.SWITCHES, 2, on=4), "no mode wants at these lines"),
    ("outputs on under VPP", "H3", "burn", put(Op.PULSE, 0, ins(Op.LINES, lines=lines(l22="L"))), "no mode wants"),
    ("A9 line low under 14 V", "H3", "erase", set_(Op.ADDRESS, 3, at=0), "the line at raised position 26"),
    ("a switch that is not there", "H3", "burn", set_(Op.SWITCHES, 2, on=0x44), "not in the permit"),
    ("another VCC step", "H3", "read", put(Op.READ_RUN, 0, ins(Op.RAIL, rail=0, step=7)), "not in the permit"),
    ("OE up while A9 falls", "H3", "burn", no_wait_after(Op.SWITCHES, 1), "while another still falls"),
    # H4: raised only while VCC stands
    ("VCC cut under raised", "H4", "erase", put(Op.PULSE, 0, ins(Op.RANGE, which=0)), "with raised switches closed"),
    ("VCC moved under raised", "H4", "erase", put(Op.PULSE, 0, ins(Op.RAIL, rail=0, step=1)), "raised switches closed"),
    ("rail moved under raised", "H4", "erase", put(Op.PULSE, 0, ins(Op.RAIL, rail=1, step=1)), "with switches closed"),
    ("rail up before VCC", "H4", "read", put(Op.RANGE, 0, ins(Op.RAIL, rail=1, step=1)), "before VCC stands"),
    ("VCC moved too soon", "H4", "erase", put_after(Op.SWITCHES, 3, ins(Op.RAIL, rail=0, step=1)), "while a raised"),
    # the form of programs: H5
    ("past the end", "H5", "identify", drop(Op.END), "past its end"),
    ("a loop unclosed", "H5", "erase", drop(Op.NEXT), "a loop is never closed"),
    ("a loop closed twice", "H5", "erase", put(Op.NEXT, 0, ins(Op.NEXT)), "closes no loop"),
    ("wrong depth", "H5", "burn", set_(Op.BRANCH, -1, depth=1), "another depth"),
    ("blocks taken in twice", "H5", "read", put(Op.END, 0, ins(Op.READ_RUN, wait=20)), "not taken in once for each"),
    ("blocks never taken in", "H5", "read", drop(Op.READ_RUN), "not taken in once for each"),
    ("unreachable", "H5", "read", lambda items: [*items, ins(Op.END)], "no path reaches"),
    # D and lines: H6
    ("D against the chip", "H6", "burn", put(Op.SAMPLE, -1, ins(Op.DRIVE_WORD)), "while the chip may drive it"),
    ("outputs on under D", "H6", "burn", drop(Op.RELEASE), "enabled while the rig drives D"),
    ("no float time", "H6", "burn", no_wait_after(Op.LINES, -1), "tDF"),
    ("a data line", "H6", "read", put(Op.READ_RUN, 0, ins(Op.LINES, lines=lines(l13="L"))), "is a data line"),
    ("the VCC line", "H6", "read", put(Op.READ_RUN, 0, ins(Op.LINES, lines=lines(l30="H"))), "supply pin"),
    ("no such line", "H6", "read", put(Op.READ_RUN, 0, ins(Op.LINES, lines=lines(l50="H"))), "no line 50"),
    ("lines crossing under D", "H6", "burn", put(Op.RELEASE, 0, ins(Op.LINES, lines=ON)), "while the rig drives D"),
    # H7: pulses, waits, repeats
    ("pulse too short", "H7", "burn", set_(Op.PULSE, width=94 * US), "pulse width outside tPW"),
    ("pulse too long", "H7", "burn", set_(Op.PULSE, width=106 * US, max=106 * US), "pulse width outside tPW"),
    ("bound too long", "H7", "burn", set_(Op.PULSE, max=106 * US), "pulse bound outside tPW"),
    ("erase as long as a program pulse", "H7", "erase", set_(Op.PULSE, width=1600, max=1680), "outside tEW"),
    ("another line pulsed", "H7", "burn", set_(Op.PULSE, line=26), "no step of the definition pulses line 26"),
    ("pulsed the wrong way", "H7", "burn", set_(Op.PULSE, line=line_byte(CE, Level.HIGH)), "no step of the definition"),
    ("pulse without VPP", "H7", "burn", drop(Op.SWITCHES, 4), "no step of the definition"),
    ("VPP set-up too short", "H7", "burn", wait_after(Op.SWITCHES, 4, 105), "set-up of the raised level"),
    ("erase set-up too short", "H7", "erase", wait_after(Op.SWITCHES, 2, 105), "set-up of the raised level"),
    ("data hold", "H7", "burn", put_after(Op.PULSE, 0, ins(Op.RELEASE)), "data hold after the pulse"),
    ("address hold", "H7", "burn", put_after(Op.PULSE, 0, ins(Op.ADDRESS, at=1)), "address hold after the pulse"),
    ("raised hold", "H7", "burn", wait_after(Op.PULSE, 0, 47), "raised hold after the pulse"),
    ("recovery", "H7", "burn", wait_after(Op.RELEASE, 1, 31), "outputs are enabled too soon after a raised level"),
    ("access after enabling", "H7", "burn", wait_after(Op.LINES, -2, 31), "sampled too soon after the enabling edge"),
    ("access after address", "H7", "read", set_(Op.READ_RUN, wait=18), "sampled too soon after the address"),
    ("access of a scan", "H7", "erase", set_(Op.SCAN, wait=3 * US - 1), "sampled too soon after the address"),
    ("26 pulses a word", "H7", "burn", set_(Op.LOOP, count=26), "repetitions of the steps"),
    ("21 erase pulses", "H7", "erase", set_(Op.LOOP, count=21), "repetitions of the steps"),
    ("65536 erase pulses", "H7", "erase", set_(Op.LOOP, count=0), "repetitions of the steps"),
    ("pulsed twice a turn", "H7", "burn", pulse_twice, "a second pulse without a look"),
    ("never compared", "H7", "burn", set_(Op.BRANCH, -1, when=2), "in the middle of the steps"),
    ("wrong word compared", "H7", "erase", set_(Op.SCAN, word=0), "not compared with what it must be"),
    ("half the chip scanned", "H7", "erase", set_(Op.SCAN, count=32_768), "not compared with what it must be"),
    ("verified at 5 V", "H7", "erase", drop(Op.RAIL, 3), "another mode than its verify mode"),
    ("erased again though clean", "H7", "erase", swap(Op.BRANCH, -1), "while what was written is not read back"),
    ("stale address", "H7", "burn", drop(Op.ADDRESS_WORD), "not the word's in hand"),
    ("stale data", "H7", "burn", drop(Op.DRIVE_WORD), "D during the pulse of program"),
    ("wrong erase data", "H7", "erase", set_(Op.DRIVE, word=0xFE), "D during the pulse of erase"),
    ("a bus write", "H7", "burn", put(Op.END, -1, ins(Op.POLL, kind=0, enable=b"", access=1, disable=b"", gap=1,
                                                      mantissa=1, exponent=1)), "allows the op poll"),
    ("A9 has not risen", "H7", "read", gate_early, "has not risen yet"),
    ("address line moves as A9 falls", "H7", "read", address_early, "still falls"),
    ("ID cells as A9 falls", "H7", "read", put_after(Op.SWITCHES, 1, ins(Op.GATE_LOOK, wait=20)), "raised level falls"),
    # H8: measured before used
    ("VCC unmeasured", "H8", "read", drop(Op.MEASURE, 7), "before VCC was measured"),
    ("VCC unmeasured after a move", "H8", "erase", drop(Op.MEASURE, -2), "before VCC was measured"),
    ("VCC in a wide window", "H8", "read", set_(Op.MEASURE, 7, low=500), "another window than its step's"),
    ("rail unmeasured", "H8", "erase", drop(Op.MEASURE, 10), "whose rail was not measured"),
    ("OE unmeasured", "H8", "burn", drop(Op.MEASURE, -1), "never measured at its position"),
    ("A9 unmeasured at the gate", "H8", "read", drop(Op.MEASURE, 9), "not measured at its position"),
    ("A9 unmeasured before the pulse", "H8", "erase", drop(Op.MEASURE, 12), "never measured at its position"),
    ("OE in a wide window", "H8", "burn", set_(Op.MEASURE, -1, high=430), "a window that no supply has"),
    ("rail only in the ID's window", "H8", "burn", drop(Op.MEASURE, 10), "in another window than VPP.program's"),
    ("VCC measured on its way", "H8", "erase", set_(Op.WAIT, -1, ticks=5 * MS), "VCC is measured before it has"),
    ("rail measured on its way", "H8", "erase", set_(Op.WAIT, -9, ticks=24 * MS), "rail is measured before it has"),
    ("OE measured on its way", "H8", "erase", set_(Op.WAIT, -8, ticks=70), "switch 2 is measured before it has"),
    # H11: nothing above VCC
    ("driven without VCC", "H11", "read", put(Op.RANGE, 0, ins(Op.HIGH, how=1)), "H is driven while VCC is low"),
    ("driven into 3.75 V", "H11", "erase", drop(Op.HIGH, 1), "VCC moves below what driven lines need"),
    ("driven at 3.75 V", "H11", "erase", put(Op.SCAN, 0, ins(Op.HIGH, how=1)), "H is driven while VCC is low"),
    ("high while probing", "H11", "read", put(Op.RANGE, 1, ins(Op.LINES, lines=OFF)), "above a socket without VCC"),
    ("address up without VCC", "H11", "read", set_(Op.ADDRESS, at=1), "above a socket without VCC"),
    ("bias up without VCC", "H11", "read", put(Op.RANGE, 0, ins(Op.BIAS, groups=1, how=2)), "bias up without full VCC"),
    ("lines never set", "H11", "read", drop(Op.LINES), "lines were never set"),
]  # fmt: skip


@pytest.mark.parametrize(("rule", "kind", "bend", "text"), [case[1:] for case in CASES], ids=[c[0] for c in CASES])
def test_a_bent_program_is_refused_by_its_rule(rule: str, kind: str, bend: Bend, text: str) -> None:
    """The rule that the change breaks finds it and says what it is."""
    told = found(kind, bend, rule)

    assert told.startswith(rule)
    assert text in told


# ---- permits --------------------------------------------------------------------------------------------------------

PERMITS: list[tuple[str, str, str, dict[str, Any], str]] = [
    ("no identity", "H9", "burn", {"identity": Identity.NONE}, "does not want it"),
    ("vouched over an ID", "H9", "burn", {"identity": Identity.VOUCHED_NONE}, "does not want it"),
    ("another ID", "H2", "burn", {"alternatives": (((0, 0xDA), (1, 0x09)),)}, "ID cells are not the row's"),
    ("half an ID", "H2", "burn", {"alternatives": (((0, 0xDA),),)}, "ID cells are not the row's"),
    ("an ID too many", "H2", "burn", {"alternatives": (((0, 0xDA), (1, 8)), ((0, 1), (1, 1)))}, "not the row's"),
    ("no ID cell", "H2", "burn", {"alternatives": ()}, "ID cells are not the row's"),
    ("identify at another pin", "H2", "burn", {"identify_switch": 3}, "not at the identify pin"),
    ("identify at 14 V", "H2", "burn", {"identify_step": 5}, "does not hold VH.identify at A9"),
    ("identify ceiling too high", "H2", "burn", {"identify_ceiling": 432}, "ceiling of switch 4 above"),
    ("identify ceiling too low", "H2", "burn", {"identify_ceiling": 410}, "ceiling of switch 4 under"),
    ("burn ceiling of the erase", "H3", "burn", {"raised": ((2, 491),)}, "ceiling of switch 2 above what OE takes"),
    ("ceiling under the step", "H3", "burn", {"raised": ((2, 415),)}, "under the step's own reach"),
    ("ceiling above the board's", "H3", "erase", {"raised": ((2, 491), (4, 501))}, "above the board's"),
    ("a raised pair unused", "H3", "read", {"raised": ((2, 422),)}, "never uses"),
    ("a switch no mode wants", "H3", "burn", {"raised": ((2, 422), (0, 422))}, "no mode of the definition wants"),
    ("a switch twice", "H3", "burn", {"raised": ((2, 422), (2, 421))}, "stands twice"),
    ("a switch the rig lacks", "H3", "burn", {"raised": ((2, 422), (9, 422))}, "the rig has no switch 9"),
    ("VCC elsewhere", "H3", "burn", {"vcc_to": 6}, "VCC to other positions"),
    ("safe drives D", "H5", "burn", {"safe": ON}, "the chip drives D"),
    ("safe is the pulse", "H5", "burn", {"safe": lines(l22="L", l24="H")}, "is the pulse of program"),
    ("safe forgets a line", "H5", "burn", {"safe": lines(l22="H")}, "does not set just the control lines"),
    ("safe releases a line", "H5", "burn", {"safe": lines(l22="H", l24="Z")}, "leaves a line released"),
    ("safe names a level that is none", "H5", "burn", {"safe": b"\xd6\x58"}, "names no level"),
    ("drives forgotten", "H6", "burn", {"drives": ()}, "does not know that the chip drives D"),
    ("drives too narrow", "H6", "burn", {"drives": (lines(l22="L", l24="L", l26="H"),)}, "does not know"),
]


@pytest.mark.parametrize(("rule", "kind", "bend", "text"), [case[1:] for case in PERMITS], ids=[c[0] for c in PERMITS])
def test_a_bent_permit_is_refused_by_its_rule(rule: str, kind: str, bend: dict[str, Any], text: str) -> None:
    """A good program under a permit with one wrong field is refused, by name and with the numbers."""
    code = encoded(kind, program(kind))
    proof = prove(code, permit(kind, code, **bend), CHIP, RIG)

    assert any(text in str(one) for one in by_rule(proof, rule)), list(map(str, proof.findings))


@pytest.mark.parametrize(
    ("bend", "rule", "text"),
    [
        ({"low": 593}, "H3", "serves no supply"),
        ({"high": 657}, "H3", "serves no supply"),
        ({"step": 4}, "H3", "serves no supply"),
        ({"settle": 5 * MS}, "H8", "settling time"),
        ({"settle": 60 * MS}, "H8", "settling time"),
    ],
)
def test_vcc_of_the_permit_keeps_to_the_sheet(bend: dict[str, int], rule: str, text: str) -> None:
    """A VCC step of the permit lies in a window of the definition with all its errors, and settles in time."""
    code = encoded("read", program("read"))
    good = permit("read", code)
    proof = prove(code, replace(good, vcc=(replace(good.vcc[0], **bend),)), CHIP, RIG)

    assert any(text in one.text for one in by_rule(proof, rule))


@pytest.mark.parametrize(
    ("bend", "rule"),
    [({"width": 16}, "H7"), ({"words": 65_537}, "H7"), ({"block_words": 0}, "H5"), ({"address": (3, 4)}, "H6")],
)
def test_the_header_is_the_chips(bend: dict[str, Any], rule: str) -> None:
    """Word width, bound of words, block size and address lines of the header are judged."""
    code = encoded("read", program("read"), **bend)

    assert rule in rules(prove(code, permit("read", code), CHIP, RIG))


def test_the_bent_programs_cover_every_rule() -> None:
    """H1 to H8 and H11 by programs, H9's side by permits: each stands in the tables above."""
    by_program, by_permit = {case[1] for case in CASES}, {case[1] for case in PERMITS}

    assert by_program == {"H1", "H2", "H3", "H4", "H5", "H6", "H7", "H8", "H11"}
    assert "H9" in by_permit


def test_labels_of_the_good_programs_are_their_own() -> None:
    """No good program names a label twice (a bent one would jump elsewhere)."""
    for kind in ("identify", "read", "burn", "erase"):
        labels = [item.name for item in program(kind) if isinstance(item, Label)]
        assert len(labels) == len(set(labels))
