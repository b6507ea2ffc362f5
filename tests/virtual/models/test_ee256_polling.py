"""How the model of a 28C256 tells that it is busy; numbers typed again from the fact table."""

from __future__ import annotations

import pytest

from tests.virtual.models.test_ee256 import MAKER_ROWS, fresh, judge_of, makers
from tests.virtual.waveform import CE, HIGH, MS, OE, US


@makers
def test_bit_7_is_the_complement_until_done(maker: str) -> None:
    """Bit 7 of the last byte, at its address [S3, S4, S26]; the true byte when tWC is over, not a look sooner."""
    _chip, bus = fresh(0x22, maker)
    bus.loads([(0x100, 0x81), (0x101, 0x7E)])
    rose = bus.t - bus.pause - 3
    bus.wait(MAKER_ROWS[maker][1] * US)
    assert bus.look(0x101) & 0x80 == 0x80
    bus.poll(0x101, 0x7E, 20 * MS)
    assert abs(bus.t - rose - MAKER_ROWS[maker][0] * MS) < 20 * US
    assert bus.look(0x101) == 0x7E
    assert judge_of(bus).violations == []


def test_the_other_bits_are_wrong_while_busy() -> None:
    """A host that compares the whole byte, or looks at another address, learns nothing true."""
    _chip, bus = fresh(0x22)
    bus.loads([(0x100, 0x81), (0x101, 0x7E)])
    bus.wait(MS)
    assert (bus.look(0x101) ^ 0x7E) & 0x3F == 0x3F
    assert bus.look(0x100) & 0x80 == 0  # as if done, for the last byte's bit 7 is 0


def test_bit_6_toggles_from_look_to_look() -> None:
    """Between two reads at one address, OE off for 150 ns [S1g, S76]; it stands still when done, and when rushed."""
    _chip, bus = fresh(0x22)
    bus.loads([(0x100, 0x00)])
    bus.wait(MS)
    looks = [bus.look(0x100) & 0x40 for _ in range(4)]
    assert looks in ([0, 0x40, 0, 0x40], [0x40, 0, 0x40, 0])
    rushed = [bus.look(0x100, off=2) & 0x40 for _ in range(3)]
    assert rushed[1] == rushed[2]
    bus.wait(20 * MS)
    assert [bus.look(0x100) & 0x40 for _ in range(3)] == [0, 0, 0]


def test_bit_6_wants_its_address_fixed() -> None:
    """Looks at changing addresses do not see it move [S76]."""
    _chip, bus = fresh(0x22)
    bus.loads([(0x100, 0x00)])
    bus.wait(MS)
    assert len({bus.look(at) & 0x40 for at in (0x100, 0x101, 0x100, 0x101)}) == 1


@pytest.mark.parametrize("pin", [CE, OE])
def test_ce_strobes_the_toggle_bit_as_oe_does(pin: int) -> None:
    """OE or CE toggled between reads [S4, S27]."""
    chip, bus = fresh(0x22)
    bus.loads([(0x100, 0x00)])
    bus.wait(MS)
    bus.set({CE: 0, OE: 0})
    seen = []
    for _ in range(3):
        bus.wait(5)
        seen.append(chip.drive(bus.t)[1] & 0x40)
        bus.set({pin: HIGH})
        bus.wait(3)
        bus.set({pin: 0})
    assert seen[0] == seen[2] != seen[1]


@makers
def test_a_look_in_the_load_window(maker: str) -> None:
    """Atmel's can be polled at once (from memory); the others show the byte as if done, on purpose (invented)."""
    _chip, bus = fresh(0x22, maker)
    bus.loads([(0x100, 0x81)])
    busy = bus.look(0x100) & 0x80 == 0
    assert busy is (maker == "atmel")


def test_a_faster_chip_is_done_sooner() -> None:
    """`cycle_percent` of the longest write cycle."""
    chip, bus = fresh(0x22)
    chip.cycle_percent = 50
    bus.loads([(0x100, 0x81)])
    bus.wait(5 * MS - 10 * US)
    assert chip.is_busy(bus.t)
    bus.wait(10 * US)
    assert not chip.is_busy(bus.t)
