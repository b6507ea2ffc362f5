"""The model of a 27C256, maker by maker: held to the published windows, which are typed again from the fact table."""

from __future__ import annotations

import json

import pytest

from pulsewright.errors import UsageMistake
from pulsewright.virtual import models
from pulsewright.virtual.faults import ChipFaults
from pulsewright.virtual.models.c256 import make_chip
from pulsewright.virtual.models.c256_limits import MAKERS
from pulsewright.virtual.models.uv_eprom import UvEprom
from tests.virtual.uv_wave import VPP, UvBus
from tests.virtual.waveform import A9, CE, HIGH, MS, OE, US, VCC

WORDS = 32_768
# maker: ID; VCC and VPP of program and verify; absolute maximum of VPP and A9, typed again from the fact table
MAKER_ROWS = {
    "st": ((0x20, 0x8D), (6_000, 6_500), (12_500, 13_000), 14_000, 13_500),  # [S11]
    "atmel": ((0x1E, 0x8C), (6_250, 6_750), (12_750, 13_250), 14_000, 14_000),  # [S17]
    "ti": ((0x97, 0x04), (6_250, 6_750), (12_750, 13_250), 14_000, 13_500),  # [S30], from memory, tightest
    "national": ((0x8F, 0x04), (6_000, 6_500), (12_500, 13_000), 13_500, 13_500),  # [S27, S66], tightest
    "amd": ((0x01, 0x10), (6_000, 6_500), (12_500, 13_000), 13_500, 13_500),  # from memory
}
makers = pytest.mark.parametrize("maker", MAKER_ROWS)


def fresh(contents: int = 0xFF, maker: str = "st", **faults: object) -> tuple[UvEprom, UvBus]:
    """A chip on a bus, full of one byte, powered and in standby."""
    chip = make_chip(maker)
    chip.cells[:] = bytes([contents]) * WORDS
    chip.take_faults(ChipFaults(**faults))  # type: ignore[arg-type]  # the fields of ChipFaults, by name
    bus = UvBus(chip=chip)
    bus.up()
    return chip, bus


# ---- read and identify ----


def test_a_read_gives_the_cell_after_the_access_time() -> None:
    """80 ns [S11] after address and enable, two ticks, the cell stands on D; before it something else does."""
    chip, bus = fresh()
    chip.cells[0x1234] = 0x5A
    assert bus.read(0x1234, access=2) == 0x5A
    assert bus.read(0x1234, access=1) != 0x5A


@pytest.mark.parametrize("line", range(15))
def test_every_address_line_counts(line: int) -> None:
    """Each of the fifteen address pins [S11, S17] selects its own half of the cells."""
    chip, bus = fresh(0)
    chip.cells[1 << line] = 0xA5
    assert bus.read(1 << line) == 0xA5
    assert bus.read(0) == 0


@pytest.mark.parametrize(
    ("aside", "right"), [(0, True), (250, True), (600, True), (601, False), (-300, True), (-301, False), (HIGH, False)]
)
def test_a_read_needs_vpp_at_about_vcc(aside: int, right: bool) -> None:
    """VPP = VCC in read [S11, S17]: more than 0.6 V below or 0.3 V above (common practice) gives wrong data."""
    _chip, bus = fresh(0x3C)
    bus.set({VPP: HIGH - aside})
    assert (bus.read(7) == 0x3C) is right
    assert (bus.identify() == (0x20, 0x8D)) is right


@makers
def test_the_identify_level_gives_the_makers_id(maker: str) -> None:
    """The maker's two bytes at A9 = 11.5..12.5 V, and the cells below and above it."""
    _chip, bus = fresh(0x33, maker)
    for level in (11_500, 12_000, 12_500):
        assert bus.identify(level, access=4) == MAKER_ROWS[maker][0]
    for level in (11_499, 12_501):
        assert bus.identify(level, access=4) == (0x33, 0x33)


def test_another_makers_id_can_be_given() -> None:
    """The fault wrong-id changes both bytes."""
    _chip, bus = fresh(wrong_id=(0x89, 0x8D))
    assert bus.identify() == (0x89, 0x8D)


@pytest.mark.parametrize("pin", [CE, OE])
def test_outputs_float_with_ce_or_oe_high(pin: int) -> None:
    """Standby and output disable leave D free, at most 130 ns after the edge [S11, S17]."""
    chip, bus = fresh(0)
    bus.set({CE: 0, OE: 0})
    bus.wait(3)
    assert chip.drive(bus.t) == (0xFF, 0)
    bus.set({pin: HIGH})
    assert chip.drive(bus.t)[0] == 0xFF
    bus.wait(3)
    assert chip.drive(bus.t) == (0, 0)


def test_without_vcc_nothing_is_driven() -> None:
    """A chip without supply drives no pin, whatever CE and OE are, and draws nothing."""
    chip = make_chip()
    bus = UvBus(chip=chip)
    bus.set({CE: 0, OE: 0})
    assert chip.drive(bus.t) == (0, 0)
    assert [chip.draw_ua(bus.t, pin) for pin in (VCC, VPP, A9)] == [0, 0, 0]


# ---- program and verify ----


@makers
@pytest.mark.parametrize(
    ("vcc", "vpp", "width", "programs"),
    [
        ((0, 0), (0, 0), 95 * US, True),
        ((1, 0), (1, 0), 105 * US, True),
        ((0, -1), (0, 0), 100 * US, False),
        ((1, 1), (1, 0), 100 * US, False),
        ((0, 0), (0, -1), 100 * US, False),
        ((1, 0), (1, 1), 100 * US, False),
        ((0, 0), (0, 0), 95 * US - 1, False),
    ],
)
def test_a_pulse_needs_both_supplies_and_its_time(
    maker: str, vcc: tuple[int, int], vpp: tuple[int, int], width: int, programs: bool
) -> None:
    """95 us with VCC and VPP in the maker's windows program a cell; a millivolt beside either, a tick less, does not.

    `vcc` and `vpp` are (end of the window, millivolts past it).
    """
    chip, bus = fresh(maker=maker)
    row = MAKER_ROWS[maker]
    bus.one(0x4321, 0x0F, width, row[1][vcc[0]] + vcc[1], row[2][vpp[0]] + vpp[1])
    assert chip.cells[0x4321] == (0x0F if programs else 0xFF)
    assert chip.cells.count(0xFF) == WORDS - programs
    assert chip.stressed == []


def test_st_levels_do_not_program_an_atmel_chip() -> None:
    """VCC 6.2 V with VPP 12.7 V is inside ST's windows [S11] and outside Atmel's [S17]."""
    for maker, programs in (("st", True), ("atmel", False)):
        chip, bus = fresh(maker=maker)
        bus.one(9, 0, vcc=6_200, vpp=12_700)
        assert (chip.cells[9] == 0) is programs


def test_a_verify_under_vpp_gives_the_cell() -> None:
    """CE high, OE low, VPP up [S11]: the cell stands on D 100 ns after OE, and not before."""
    _chip, bus = fresh()
    bus.enter()
    bus.word(9, 0x42)
    assert bus.verify(9, access=2) == 0x42
    assert bus.verify(9, access=1) != 0x42


@pytest.mark.parametrize(("vcc", "vpp"), [(5_999, 12_750), (6_250, 12_499), (6_250, 13_001), (HIGH, 12_750)])
def test_a_verify_outside_the_windows_gives_something_else(vcc: int, vpp: int) -> None:
    """VPP up is no read mode but in the program windows [S11]."""
    _chip, bus = fresh(0x42)
    bus.enter(vcc, vpp)
    assert bus.verify(9) != 0x42


def test_programming_only_clears_bits() -> None:
    """A bit goes from 1 to 0 and never back by a program pulse [S11]."""
    chip, bus = fresh()
    bus.enter()
    bus.word(7, 0x0F)
    bus.word(7, 0xF3)
    assert chip.cells[7] == 0x03


def test_a_pulse_with_oe_low_programs_nothing() -> None:
    """The program row wants OE high [S11]; on Atmel the same pins are the verify row [S17]."""
    for maker, notes in (("st", ["a program pulse with a control pin at the wrong level"]), ("atmel", list[str]())):
        chip, bus = fresh(maker=maker)
        bus.enter(6_500, 13_000)
        bus.set({OE: 0})
        bus.give(on=True)
        bus.wait(100 * US)
        bus.give(on=False)
        assert chip.cells.count(0xFF) == WORDS
        assert chip.stressed == notes


def test_oe_that_dips_in_a_pulse_spoils_it() -> None:
    """A pulse whose OE was low for a while has programmed nothing (invented) and leaves a note."""
    chip, bus = fresh()
    bus.enter()
    bus.address(9)
    bus.drive(0)
    bus.give(on=True)
    bus.wait(50 * US)
    bus.set({OE: 0})
    bus.wait(US)
    bus.set({OE: bus.high_mv})
    bus.wait(50 * US)
    bus.give(on=False)
    assert chip.cells[9] == 0xFF
    assert len(chip.stressed) == 1


def test_a_longer_pulse_leaves_a_note() -> None:
    """More than 105 us [S11] is stress, and named."""
    chip, bus = fresh()
    bus.one(7, 0, 105 * US)
    assert chip.stressed == []
    bus.one(7, 0, 105 * US + 1)
    assert chip.stressed == ["a program pulse longer than 105 us"]


def test_an_address_that_moves_inside_a_pulse_hits_both_cells() -> None:
    """Each of the two cells gets its part of the pulse, and a note is left."""
    chip, bus = fresh()
    bus.enter()
    bus.address(1)
    bus.drive(0)
    bus.give(on=True)
    bus.wait(100 * US)
    bus.address(2)
    bus.wait(100 * US)
    bus.give(on=False)
    assert (chip.cells[1], chip.cells[2], chip.cells[3]) == (0, 0, 0xFF)
    assert "address moved" in chip.stressed[0]


def test_a_level_at_a9_ends_a_pulse() -> None:
    """VPP and A9 raised together are no row of the mode table: nothing is programmed, and D reads wrong."""
    chip, bus = fresh(0xF0)
    bus.enter()
    bus.address(0)
    bus.set({A9: bus.high_mv})
    bus.raise_to({A9: 12_000})
    bus.drive(0)
    bus.give(on=True)
    bus.wait(100 * US)
    bus.give(on=False)
    bus.release()
    bus.set({OE: 0})
    bus.wait(3)
    assert bus.sample() not in {0xF0, 0x20}
    assert chip.cells.count(0xF0) == WORDS


# ---- faults, erase, damage ----


def test_slow_cells_need_more_program_pulses() -> None:
    """With all cells slow, the third of three pulses programs; a bench file keeps the first two."""
    chip, bus = fresh(slow_percent=100, slow_pulses=3)
    bus.enter()
    for wanted in (0xFF, 0xFF):
        bus.word(9, 0x42)
        assert bus.verify(9) == wanted
    again, other = fresh(slow_percent=100, slow_pulses=3)
    again.restore(json.loads(json.dumps(chip.state())))
    assert again.state() == chip.state()
    other.one(9, 0x42)
    assert again.cells[9] == 0x42


def test_stuck_bits_never_change() -> None:
    """Bits under the mask keep their value through program and lamp; the others work."""
    chip, bus = fresh(stuck=((5, 0x11, 0x10),))
    assert bus.read(5) == 0xFE
    bus.one(5, 0x00)
    assert bus.read(5) == 0x10
    chip.uv_erase()
    assert bus.read(5) == 0xFE
    assert chip.cells[6] == 0xFF


def test_the_lamp_erases_every_cell() -> None:
    """UV brings all cells to 1 [S11], and what half pulses had begun is gone."""
    chip, bus = fresh(0)
    bus.one(9, 0x42, 60 * US)
    chip.uv_erase()
    assert chip.cells.count(0xFF) == WORDS
    bus.one(9, 0x42, 60 * US)
    assert chip.cells[9] == 0xFF


def test_a_fading_bit_shows_at_the_program_step_and_not_at_4_2_v() -> None:
    """ST's final reads at 6 V and 4.2 V [S15 sibling] are there to find it."""
    chip, bus = fresh(0x00, weak=((9, 0x80, 5_500, False),))
    assert bus.read(9) == 0x00
    bus.power(6_000)
    assert bus.read(9) == 0x80
    bus.power(4_200)
    assert bus.read(9) == 0x00
    bus.power(HIGH)
    bus.enter()
    assert bus.verify(9) == 0x80
    assert chip.cells[9] == 0x00


@makers
def test_levels_past_the_maximum_destroy_the_chip(maker: str) -> None:
    """VPP and A9 have the maker's maximum, VCC and plain pins 7 V [S11, S17]: above, the cells are lost."""
    _id, _vcc, _vpp, most_vpp, most_a9 = MAKER_ROWS[maker]
    for pin, most in ((VPP, most_vpp), (A9, most_a9), (VCC, 7_000), (CE, 7_000), (3, 7_000)):
        for level, damaged in ((most, False), (most + 1, True)):
            chip, bus = fresh(0x77, maker)
            bus.set({pin: level})
            assert chip.damaged is damaged
            assert chip.cells.count(0x77) == (0 if damaged else WORDS)


def test_currents_stay_within_the_published_ones() -> None:
    """ST: 50 mA at most on VCC and VPP in a pulse, 100 uA on VPP in read [S11]; 200 uA at A9, as a 28F020 takes it."""
    chip, bus = fresh()
    assert 0 < chip.draw_ua(bus.t, VPP) <= 100
    assert 0 < chip.draw_ua(bus.t, VCC) <= 1_000
    bus.enter()
    standing = chip.draw_ua(bus.t, VPP)
    bus.give(on=True)
    assert standing < chip.draw_ua(bus.t, VPP) <= 50_000
    assert 1_000 < chip.draw_ua(bus.t, VCC) <= 50_000
    bus.set({VPP: 9_000})
    assert chip.draw_ua(bus.t, VPP) > standing
    bus.give(on=False)
    bus.leave()
    assert chip.draw_ua(bus.t, A9) == 0
    bus.set({A9: HIGH})
    bus.raise_to({A9: 12_000})
    assert chip.draw_ua(bus.t, A9) == 200


@makers
def test_times_and_currents_of_each_maker(maker: str) -> None:
    """Address to data, OE to data under VPP, VPP in a pulse and in read: typed again, ns and uA.

    ST 80, 100 ns, 50 mA, 100 uA [S11]; Atmel 150, 150, 25 mA, 10 uA [S17]; TI 250 [S30], National 250, AMD 250, 30 mA
    (from memory), 100 uA [S33]; what is unknown as the slowest and the most of the known.
    """
    access, verify, pulse, rest = {
        "st": (80, 100, 50_000, 100),
        "atmel": (150, 150, 25_000, 10),
        "ti": (250, 150, 50_000, 100),
        "national": (250, 150, 50_000, 100),
        "amd": (250, 150, 30_000, 100),
    }[maker]
    chip, bus = fresh(0x5A, maker)
    ticks = -(-access * 10 // 625)
    assert bus.read(3, access=ticks) == 0x5A
    assert bus.read(5, access=ticks - 1) != 0x5A
    assert chip.draw_ua(bus.t, VPP) == rest
    bus.enter(MAKER_ROWS[maker][1][0], MAKER_ROWS[maker][2][0])
    ticks = -(-verify * 10 // 625)
    bus.address(7)
    bus.wait(MS)
    assert bus.verify(7, access=ticks) == 0x5A
    assert bus.verify(7, access=ticks - 1) != 0x5A
    bus.give(on=True)
    assert chip.draw_ua(bus.t, VPP) == pulse


def test_a_power_down_ends_everything() -> None:
    """VPP and VCC gone inside a pulse: the part that there was is no whole pulse."""
    chip, bus = fresh()
    bus.enter()
    bus.address(9)
    bus.drive(0)
    bus.give(on=True)
    bus.wait(50 * US)
    bus.raise_to({VPP: 0})
    bus.wait(MS)
    bus.power(0)
    assert chip.cells[9] == 0xFF
    assert chip.stressed == []


# ---- by name ----


def test_the_registry_knows_the_makers() -> None:
    """Each name of the registry makes that maker's chip, in any case; none named is the first."""
    assert models.MAKERS["27c256"].names == tuple(MAKERS)
    for maker, row in MAKER_ROWS.items():
        chip = models.make_model("27C256", maker.upper())
        assert chip.limits.maxima_mv[VPP] == row[3]
        assert chip.limits == make_chip(maker).limits
    assert models.make_model("27c256").limits == make_chip("st").limits


def test_an_unknown_maker_is_refused() -> None:
    """A slip gets the nearest name, a part of one maker only says so."""
    with pytest.raises(UsageMistake) as caught:
        models.make_model("27c256", "atmal")
    assert caught.value.hint == "did you mean atmel?"
    with pytest.raises(UsageMistake, match="one maker only"):
        models.make_model("27e512", "st")
