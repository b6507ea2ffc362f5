"""Commands to the model of a 28C256, and what questions meant for other parts do to it; numbers from the fact table."""

from __future__ import annotations

import json

import pytest

from pulsewright.virtual.bench import Bench
from pulsewright.virtual.models.ee256 import make_chip
from tests.virtual.bus_wave import DISABLE, ENABLE, ERASE, PROBE, EeBus
from tests.virtual.models.test_ee256 import PAGE, WE, WORDS, fresh, judge_of, makers, settle
from tests.virtual.waveform import A9, CE, HIGH, MS, OE, US

# ---- software protection ----


@makers
def test_the_prefix_protects_and_writes(maker: str) -> None:
    """AA 55 A0 with a page: the page is stored, the command is not, and an unprefixed page then is not either [S4b]."""
    chip, bus = fresh(0x22, maker)
    bus.page(0x100, b"\x33" * PAGE, ENABLE)
    settle(chip, bus)
    assert chip.protected
    assert bytes(chip.cells[0x100:0x140]) == b"\x33" * PAGE
    assert chip.cells.count(0x22) == WORDS - PAGE
    bus.page(0x100, b"\x44" * PAGE)
    bus.wait(2 * MS)
    assert chip.is_busy(bus.t)  # the timer runs all the same
    settle(chip, bus)
    assert bytes(chip.cells[0x100:0x140]) == b"\x33" * PAGE
    bus.page(0x100, b"\x55" * PAGE, ENABLE)
    settle(chip, bus)
    assert bytes(chip.cells[0x100:0x140]) == b"\x55" * PAGE
    assert judge_of(bus).violations == []


@makers
def test_the_six_bytes_take_protection_off(maker: str) -> None:
    """AA 55 80 AA 55 20, with a page behind it or without [S35, S41]; no byte of the command is stored."""
    for page in (b"", b"\x33" * 5):
        chip, bus = fresh(0x22, maker, protected=True)
        bus.page(0x100, page, DISABLE)
        settle(chip, bus)
        assert not chip.protected
        assert bytes(chip.cells[0x100:0x105]) == (page or b"\x22" * 5)
        assert chip.cells.count(0x22) == WORDS - len(page)
        bus.loads([(0x200, 0x66)])
        settle(chip, bus)
        assert chip.cells[0x200] == 0x66


def test_protection_alone_can_be_switched_on() -> None:
    """Three bytes and no page."""
    chip, bus = fresh(0x22)
    bus.loads(ENABLE)
    settle(chip, bus)
    assert chip.protected
    assert chip.cells.count(0x22) == WORDS


def test_a_command_that_stalls_is_no_command() -> None:
    """The third byte too late: the write cycle of the first two has begun, and protection stays off."""
    chip, bus = fresh(0x22)
    bus.loads(ENABLE[:2])
    bus.wait(150 * US)
    bus.loads(ENABLE[2:])
    settle(chip, bus)
    assert not chip.protected
    assert [violation.rule for violation in judge_of(bus).violations] == ["load gap"]


@pytest.mark.parametrize("wrong", [(0x1555, 0xAA), (0x5555, 0xAB)])
def test_a_wrong_address_or_byte_is_no_command(wrong: tuple[int, int]) -> None:
    """A14..A0 are decoded, and the bytes."""
    chip, bus = fresh(0x22)
    bus.loads((wrong, *ENABLE[1:]))
    settle(chip, bus)
    assert not chip.protected


def test_protection_survives_power_off_and_the_bench_file() -> None:
    """State is JSON, and comes back."""
    chip, bus = fresh(0x22)
    bus.loads(ENABLE)
    settle(chip, bus)
    bus.down()
    bus.up()
    assert chip.protected
    again = make_chip()
    again.restore(json.loads(json.dumps(chip.state())))
    assert again.protected
    assert again.state() == chip.state()


def test_power_lost_in_the_cycle_leaves_protection_as_it_was() -> None:
    """Neither on nor off takes before its write cycle is over (invented)."""
    chip, bus = fresh(0x22)
    bus.loads(ENABLE)
    bus.wait(MS)
    bus.down()
    assert not chip.protected


# ---- erase ----


def test_atmels_software_erase_clears_the_chip_and_keeps_protection() -> None:
    """AA 55 80 AA 55 10, 20 ms at most, protection stays on [S77]."""
    chip, bus = fresh(0x22, protected=True)
    bus.loads(ERASE)
    bus.wait(20 * MS - 200 * US)
    assert chip.is_busy(bus.t)
    assert chip.cells.count(0x22) == WORDS
    bus.wait(200 * US)
    assert not chip.is_busy(bus.t)
    assert chip.cells.count(0xFF) == WORDS
    assert chip.protected
    assert judge_of(bus).violations == []


@pytest.mark.parametrize("maker", ["xicor", "catalyst"])
def test_the_others_take_an_erase_for_bytes(maker: str) -> None:
    """No such command there: what fell in the page of 5555 is written, and is told as a probe's doing."""
    chip, bus = fresh(0x22, maker)
    bus.loads(ERASE)
    settle(chip, bus)
    assert chip.cells[0x5555] == 0x10
    assert chip.cells.count(0x22) == WORDS - 1
    assert chip.probe_wrote == ["5555: 22 is now 10"]


def test_the_hardware_erase_of_an_atmel() -> None:
    """OE at 12 V, CE and WE low for 10 ms [S74] clear it; a shorter one does not, and both are noted."""
    for ticks, blank in ((10 * MS - 1, False), (10 * MS, True)):
        chip, bus = fresh(0x22)
        bus.set({OE: 12_000, CE: 0})
        bus.wait(5 * US)
        bus.set({WE: 0})
        bus.wait(ticks)
        bus.set({WE: HIGH})
        assert (chip.cells.count(0xFF) == WORDS) is blank
        assert len(chip.stressed) == 1
        assert not chip.damaged


# ---- what the wrong questions do ----


@pytest.mark.parametrize("probe", [PROBE, ((0x555, 0xAA), (0x2AA, 0x55), (0x555, 0x90))])
def test_a_flash_probe_writes_an_unprotected_chip(probe: tuple[tuple[int, int], ...]) -> None:
    """AA 55 90 are bytes like others: what they changed stands in `probe_wrote` [five-volt, trap 8]."""
    chip, bus = fresh(0x22)
    bus.loads(probe)
    settle(chip, bus)
    at = probe[0][0]
    assert chip.cells[at] == 0x90
    assert chip.probe_wrote[0] == f"{at:04X}: 22 is now 90"
    assert chip.stressed == []  # told once, as what it is
    assert chip.state()["probe_wrote"] == chip.probe_wrote


def test_a_slow_flash_probe_writes_too() -> None:
    """Each byte in a window of its own: the first is stored, the next come while that runs."""
    chip, bus = fresh(0x22)
    for at, word in PROBE:
        bus.load(at, word)
        bus.wait(MS)
    settle(chip, bus)
    assert chip.cells[0x5555] == 0xAA
    assert chip.probe_wrote == ["5555: 22 is now AA"]


def test_a_flash_probe_leaves_a_protected_chip() -> None:
    """The timer runs, nothing is stored."""
    chip, bus = fresh(0x22, protected=True)
    bus.loads(PROBE)
    bus.wait(2 * MS)
    assert chip.is_busy(bus.t)
    settle(chip, bus)
    assert chip.cells.count(0x22) == WORDS
    assert chip.probe_wrote == []
    assert chip.protected


def test_bench_show_tells_what_a_probe_wrote() -> None:
    """The list is in the bench's report."""
    bench = Bench.fresh("28c256", b"\x22" * WORDS)
    bus = EeBus(chip=bench.chip)
    bus.up()
    bus.loads(PROBE)
    bus.wait(50 * MS)
    bus.down()
    assert "5555: 22 is now 90" in bench.report()["probe_wrote"]


def test_a9_at_12_v_opens_atmels_user_bytes() -> None:
    """64 bytes at 7FC0-7FFF [S74], read without harm at 11.5..12.5 V [S3b]; the cells are what other levels show."""
    chip, bus = fresh(0x22)
    chip.user[:] = bytes(range(64))
    for level, opened in ((11_499, False), (11_500, True), (12_500, True), (12_501, False)):
        bus.address(0x7FC5)
        bus.set({A9: level, CE: 0, OE: 0})
        bus.wait(4)
        assert bus.sample() == (5 if opened else 0x22)
        bus.standby()
    assert (chip.damaged, chip.stressed, chip.probe_wrote) == (False, [], [])
    assert {violation.rule for violation in judge_of(bus).violations} == {"above VCC"}


def test_a_write_at_12_v_on_a9_is_told() -> None:
    """It goes to a user byte, which `probe_wrote` names, and leaves the cell."""
    chip, bus = fresh(0x22)
    bus.address(0x7FC5)
    bus.drive(0x33)
    bus.set({CE: 0, A9: 12_000})
    bus.wait(6)
    bus.set({WE: 0})
    bus.wait(3)
    bus.set({WE: HIGH})
    settle(chip, bus)
    assert (chip.user[5], chip.cells[0x7FC5]) == (0x33, 0x22)
    assert chip.probe_wrote == ["user byte 7FC5: FF is now 33"]
    again = make_chip()
    again.restore(json.loads(json.dumps(chip.state())))
    assert again.user == chip.user


@pytest.mark.parametrize(
    ("maker", "pin", "mv", "dies"),
    [
        ("atmel", A9, 13_500, False),  # [S3b]
        ("atmel", A9, 13_501, True),
        ("atmel", OE, 13_501, True),
        ("atmel", WE, 6_250, False),
        ("atmel", WE, 6_251, True),
        ("xicor", A9, 7_000, False),  # [S78b]
        ("xicor", A9, 7_001, True),
        ("xicor", A9, 12_000, True),
        ("catalyst", A9, 12_000, True),  # [S79]
        ("catalyst", 28, 7_000, False),
        ("catalyst", 28, 7_001, True),
    ],
)
def test_absolute_maxima(maker: str, pin: int, mv: int, dies: bool) -> None:
    """A level past the maker's maximum loses the cells; 12 V on A9 is past it on Xicor and Catalyst."""
    chip, bus = fresh(0x22, maker)
    bus.set({pin: mv})
    assert chip.damaged is dies
    assert (chip.cells.count(0x22) == WORDS) is not dies
    assert ("absolute maximum" in {violation.rule for violation in judge_of(bus).violations}) is dies
