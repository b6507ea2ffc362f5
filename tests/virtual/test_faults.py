"""Faults of a bench: how they are written, and what bad contacts make of a chip."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from pulsewright.cli.main import main
from pulsewright.errors import UsageMistake
from pulsewright.virtual.bad_contacts import LINE_UA, SHORT_UA, AtPins, BadContacts
from pulsewright.virtual.bench import Bench
from pulsewright.virtual.faults import FAULTS, parse_faults
from pulsewright.virtual.judge import Judge
from pulsewright.virtual.socket import Socket
from pulsewright.wire.tables import Level, Range
from tests.virtual.kit import PIN_A9, PIN_CE, PIN_OE, PIN_VCC, PINS_A, PINS_D, WIRING, PlainChip, limits


def test_faults_mean_what_they_say() -> None:
    """Each fault's arguments arrive, with their units and bases."""
    faults = parse_faults(
        ["reversed", "wrong-id=C2,7", "stuck=0x1F0,0x81,1", "stuck=5,255,0", "slow=20,3", "rail-sag=20"]
    )
    more = parse_faults(["dead=0x40", "dead=7", "protected"]).chip
    rig = parse_faults(["rail-offset=-300", "vcc-offset=150", "slow-fall=40", "lifted=22", "lifted=3", "short=1,2"])
    weak = parse_faults(["weak=5,0x80,5100", "under-erased=6,1,4400"]).chip.weak
    assert faults.seat == "reversed"
    assert faults.chip.wrong_id == (0xC2, 7)
    assert faults.chip.stuck == ((0x1F0, 0x81, 1), (5, 255, 0))
    assert (faults.chip.slow_percent, faults.chip.slow_pulses) == (20, 3)
    assert faults.board == {"raised_limit_ua": 20_000}
    assert (more.dead, more.protected) == ((0x40, 7), True)
    assert not faults.chip.protected
    assert rig.board == {"raised_offset_mv": -300, "vcc_offset_mv": 150, "fall_more_ticks": 640}
    assert (rig.lifted, rig.touching) == ((22, 3), ((1, 2),))
    assert parse_faults(["vcc-slow-fall=1000"]).board == {"vcc_fall_more_ticks": 16_000}
    assert parse_faults(["other=28c256"]).other == "28c256"
    assert weak == ((5, 0x80, 5_100, False), (6, 1, 4_400, True))


@pytest.mark.parametrize(
    ("text", "word"),
    [
        ("reverse", "did you mean reversed?"),
        ("wrongid=1,2", "did you mean wrong-id?"),
        ("xyzzy", "bench new --help"),
    ],
)
def test_an_unknown_fault_gets_the_nearest_name(text: str, word: str) -> None:
    """A slip is answered with the right word, anything else with where the list is."""
    with pytest.raises(UsageMistake) as caught:
        parse_faults([text])
    assert word in caught.value.hint


@pytest.mark.parametrize(
    "text",
    [
        *(
            "absent=1",
            "absent=",
            "wrong-id=DA",
            "wrong-id=DA,8,1",
            "wrong-id=GG,1",
            "slow=0,3",
            "slow=101,3",
            "slow=5,0",
        ),
        *("slow=5", "stuck=1,2", "stuck=1,2,4", "stuck=-1,1,1", "rail-sag=x", "rail-sag", "rail-sag=-5", "lifted=0"),
        *("lifted=A9", "short=4", "short=4,4", "vcc-offset=high", "weak=1,0,5000", "slow-fall=-1", "other"),
    ],
)
def test_wrong_arguments_are_refused_with_the_form(text: str) -> None:
    """Too few, too many, not a number, out of range: the answer shows what stands there and what is wanted."""
    with pytest.raises(UsageMistake) as caught:
        parse_faults([text])
    assert caught.value.got == text
    assert caught.value.wanted


def test_a_chip_sits_in_one_way_only() -> None:
    """Two ways to sit contradict each other."""
    with pytest.raises(UsageMistake, match="one way"):
        parse_faults(["reversed", "absent"])


def test_every_fault_has_a_sentence_and_is_known() -> None:
    """The table that the help prints and what is understood are the same list."""
    arguments = {
        "HEX,HEX": "=1,2",
        "ADDR,MASK,BITS": "=1,3,2",
        "PERCENT,PULSES": "=1,2",
        "MA": "=1",
        "MV": "=1",
        "US": "=1",
        "PIN": "=1",
        "PIN,PIN": "=1,2",
        "ADDR,MASK,MV": "=1,1,1",
        "ADDR": "=1",
        "PART": "=28c256",
        "": "",
    }
    for name, (form, about) in FAULTS.items():
        assert parse_faults([name + arguments[form]]).texts
        assert about


def test_a_pin_that_the_chip_does_not_have_is_told() -> None:
    """Faults count the chip's own pins."""
    with pytest.raises(UsageMistake, match="no pin 30") as caught:
        Bench.fresh("27e512", faults=["lifted=30"])
    assert caught.value.wanted == "1..28"


# ---- contacts ------------------------------------------------------------------------------------------------------

PIN_GND = 14


def levels(**changed: int | None) -> list[int | None]:
    """A chip that reads out address 0, some pins otherwise."""
    given: list[int | None] = [0] * 29
    given[PIN_VCC] = 5_000
    for pin in PINS_D:
        given[pin] = None
    for name, level in changed.items():
        given[int(name[1:])] = level
    return given


def seen(contacts: BadContacts, **changed: int | None) -> tuple[int, int]:
    """What reaches the socket."""
    contacts.pins_changed(0, levels(**changed))
    return contacts.drive(0)


def test_good_contacts_change_nothing() -> None:
    """Without a fault it is the chip."""
    assert seen(BadContacts(PlainChip(b"\x5a"))) == (0xFF, 0x5A)


def test_a_chip_without_ground_lives_on_low_inputs() -> None:
    """Fed through many lines that are low it reads right; through two, its own current lifts its ground too far."""
    chip = PlainChip(b"\x5a".ljust(65_536, b"\x5a"))
    contacts = BadContacts(chip, [PIN_GND])
    chip.draw[PIN_VCC] = 20_000  # through 18 lines of 330 ohm 0.37 V, through two 3.3 V
    high = {f"p{pin}": 5_000 for pin in PINS_A}
    assert seen(contacts) == (0xFF, 0x5A)
    assert seen(contacts, **high) == (0, 0)
    sagging = {**high, f"p{PIN_VCC}": 5_250}
    chip.draw[PIN_VCC] = 8_000  # 1.42 V and a diode: it works, and its low is no low for the rig
    assert seen(contacts, **sagging) == (0xFF, 0xFF)
    chip.draw[PIN_VCC] = 2_000
    assert seen(contacts, **high) == (0xFF, 0x5A)
    assert seen(contacts, **high, **{f"p{pin}": 5_000 for pin in (PIN_CE, PIN_OE)}) == (0, 0)


def test_a_chip_without_vcc_lives_on_high_inputs() -> None:
    """Fed through an input that is high it answers, as far as its current lets it; with all low it is silent."""
    chip = PlainChip(b"\x5a".ljust(65_536, b"\x5a"))
    contacts = BadContacts(chip, [PIN_VCC])
    assert seen(contacts) == (0, 0)
    assert seen(contacts, **{f"p{PINS_A[0]}": 5_000}) == (0xFF, 0x5A)
    assert contacts.draw_ua(0, PIN_VCC) == 0
    chip.draw[PIN_VCC] = 20_000
    assert seen(contacts, **{f"p{PINS_A[0]}": 5_000}) == (0, 0)


def test_a_chip_without_either_is_silent() -> None:
    """Nothing feeds it."""
    contacts = BadContacts(PlainChip(b"\x5a"), [PIN_VCC, PIN_GND])
    assert seen(contacts, **{f"p{PINS_A[0]}": 5_000}) == (0, 0)


def test_a_lifted_output_reaches_nobody() -> None:
    """Only that bit is missing."""
    assert seen(BadContacts(PlainChip(b"\xff"), [PINS_D[3]])) == (0xF7, 0xF7)


def test_a_lifted_input_is_open_to_the_chip() -> None:
    """The chip sees None there, whatever the rig does."""
    chip = PlainChip(b"\x11\x22")
    contacts = BadContacts(chip, [PINS_A[0]])
    assert seen(contacts) == seen(contacts, **{f"p{PINS_A[0]}": 5_000})


def test_two_outputs_that_touch_read_low_where_they_differ() -> None:
    """Low is stronger than high."""
    contacts = BadContacts(PlainChip(b"\x01"), touching=[(PINS_D[0], PINS_D[1])])
    assert seen(contacts) == (0xFF, 0x00)
    contacts = BadContacts(PlainChip(b"\x03"), touching=[(PINS_D[0], PINS_D[1])])
    assert seen(contacts) == (0xFF, 0x03)


def test_an_output_that_touches_a_supply_is_held_there() -> None:
    """GND holds it low and VCC high, outputs on or off."""
    ground = BadContacts(PlainChip(b"\xff"), touching=[(PINS_D[2], PIN_GND)])
    assert seen(ground) == (0xFF, 0xFB)
    assert seen(ground, **{f"p{PIN_CE}": 5_000}) == (0x04, 0)
    supply = BadContacts(PlainChip(b"\x00"), touching=[(PINS_D[7], PIN_VCC)])
    assert seen(supply, **{f"p{PIN_CE}": 5_000}) == (0x80, 0x80)


def test_inputs_that_touch_see_the_lower_level() -> None:
    """An address pin held low pulls its neighbour along."""
    contacts = BadContacts(PlainChip(b"\x11\x22\x33\x44"), touching=[(PINS_A[0], PINS_A[1])])
    assert seen(contacts, **{f"p{PINS_A[0]}": 5_000}) == (0xFF, 0x11)
    assert seen(contacts, **{f"p{PINS_A[0]}": 5_000, f"p{PINS_A[1]}": 5_000}) == (0xFF, 0x44)


def test_a_supply_that_is_short_is_asked_for_too_much() -> None:
    """VCC at ground; VCC at a line that is low."""
    contacts = BadContacts(PlainChip(), touching=[(PIN_VCC, PIN_GND)])
    contacts.pins_changed(0, levels())
    assert contacts.draw_ua(0, PIN_VCC) == SHORT_UA
    contacts = BadContacts(PlainChip(), touching=[(PIN_VCC, 27)])
    contacts.pins_changed(0, levels())
    assert contacts.draw_ua(0, PIN_VCC) >= LINE_UA


def test_a_raised_level_reaches_the_pin_beside_it() -> None:
    """A line cannot hold a raised rail down: both pins stand at it, and the judge sees that; A9's limiter gives way."""
    contacts = BadContacts(PlainChip(), touching=[(PIN_OE, PIN_OE - 1)])
    judge = Judge(limits(), misplaced=True)
    raised = levels(**{f"p{PIN_OE}": 12_000})
    contacts.pins_changed(0, raised)
    AtPins(judge, contacts).edges(0, raised, (PIN_OE,))
    assert contacts.at_pins(raised)[PIN_OE - 1] == 12_000
    assert contacts.draw_ua(0, PIN_OE) == PlainChip().pulse_ua + LINE_UA
    assert ("absolute maximum", PIN_OE - 1) in {(one.rule, one.pin) for one in judge.violations}

    chip = PlainChip()
    chip.limits = replace(limits(), identify_pin=PIN_A9)
    limited = BadContacts(chip, touching=[(PIN_A9, PIN_A9 + 1)])
    raised = levels(**{f"p{PIN_A9}": 12_000})
    limited.pins_changed(0, raised)
    assert limited.at_pins(raised)[PIN_A9] == 0
    assert limited.draw_ua(0, PIN_A9) == SHORT_UA


def test_a_raised_pin_at_ground_is_a_short() -> None:
    """Ground holds against all."""
    contacts = BadContacts(PlainChip(), touching=[(PIN_OE, PIN_GND)])
    raised = levels(**{f"p{PIN_OE}": 12_000})
    contacts.pins_changed(0, raised)
    assert contacts.at_pins(raised)[PIN_OE] == 0
    assert contacts.draw_ua(0, PIN_OE) == SHORT_UA


def test_three_pins_that_touch_are_one() -> None:
    """Pairs that share a pin join: what stands at one end is at the other."""
    contacts = BadContacts(PlainChip(), touching=[(PINS_A[0], PINS_A[1]), (PINS_A[1], PINS_A[2])])
    given = {f"p{pin}": 5_000 for pin in PINS_A[:3]}
    assert contacts.at_pins(levels(**{**given, f"p{PINS_A[2]}": 0}))[PINS_A[0]] == 0
    assert contacts.at_pins(levels(**given))[PINS_A[0]] == 5_000


def test_a_line_that_is_let_go_shows_its_neighbour() -> None:
    """Its pull gives way to a neighbour that is held low; let go both, they stand up; at VCC it stands up unpulled."""
    socket = Socket(BadContacts(PlainChip(), touching=[(PIN_OE, 21), (27, PIN_VCC)]), WIRING)
    socket.touch([(PIN_OE, 21), (27, PIN_VCC)])
    socket.set_rail(0, 5_000)
    socket.set_range(0, Range.PROBE, (30,))
    socket.end_ramps(1_000_000)
    socket.set_lines(1_000_000, ((29, Level.RELEASED), (24, Level.RELEASED)))
    assert (socket.line(1_000_000, 29), socket.line(1_000_000, 24)) == (1, 0)
    socket.set_range(1_000_000, Range.FULL, (30,))
    assert socket.line(1_000_000, 24) == 0
    socket.set_lines(1_000_001, ((23, Level.RELEASED),))
    assert socket.line(1_000_001, 24) == 1


# ---- another chip, a slow supply -------------------------------------------------------------------------------------


def test_another_part_sits_in_the_socket() -> None:
    """The model is the other part's; a part that has none is told by its name; two chips do not fit."""
    assert Bench.fresh("27c256", "blank", faults=["other=28c256"]).chip.name == "28c256"
    with pytest.raises(UsageMistake, match="no model of the chip 28c257"):
        Bench.fresh("27c256", "blank", faults=["other=28c257"])
    with pytest.raises(UsageMistake, match="one other part"):
        parse_faults(["other=28c256", "other=27e512"])
    model = Path(__file__).parents[1] / "models" / "m2716.py"
    with pytest.raises(UsageMistake, match="one chip sits"):
        Bench("2716", faults=["other=28c256"], model=model)


def test_contents_are_fitted_to_the_chip_that_sits_there(tmp_path: Path) -> None:
    """64 KB fit into the 27e512 that sits in a 27c256's place, and are all there."""
    image = tmp_path / "image.bin"
    image.write_bytes(bytes(range(256)) * 256)
    bench = tmp_path / "tower.bench"
    words = ["bench", "new", str(bench), "--chip", "27c256", "--contents", str(image), "--fault", "other=27e512"]
    assert main(words) == 0
    assert bytes(Bench.load(bench).chip.cells) == image.read_bytes()


def test_vcc_falls_later() -> None:
    """The fault adds to the board's own time, to the tick."""
    ends = []
    for faults in ([], ["vcc-slow-fall=1000"]):
        socket = Bench.fresh("27e512", "blank", faults=faults).rig().socket
        socket.set_rail(0, 5_000)
        socket.set_range(0, Range.FULL, (30,))
        socket.end_ramps(1_000_000)
        socket.set_range(1_000_000, Range.OFF, (30,))
        ends.append(socket.next_end)
    assert ends[1] - ends[0] == 16_000
