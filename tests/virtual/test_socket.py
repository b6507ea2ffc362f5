"""What stands at the pins: lines, pulls, ramps, drops, wrong seats, and what the watchers hear of it."""

from __future__ import annotations

import pytest

from pulsewright.virtual.board import Board
from pulsewright.virtual.rails import Ramp
from pulsewright.virtual.socket import Socket
from pulsewright.virtual.supplied import vcc_positions
from pulsewright.wire.tables import Bias, Level, Range
from tests.virtual.kit import (
    ADDRESS,
    CE,
    MS,
    OE,
    PIN_A9,
    PIN_CE,
    PIN_OE,
    PIN_VCC,
    PINS_D,
    REVERSED,
    SHIFTED,
    US,
    WIRING,
    PlainChip,
)
from tests.virtual.pin_log import Log

VCC_AT = vcc_positions(0b10)
DATA = (13, 14, 15, 17, 18, 19, 20, 21)


def powered(chip: PlainChip | None = None, *, wiring: dict[int, int] | None = None) -> tuple[Socket, Log]:
    """A socket with VCC 5 V whole, CE and OE high, D let go, at 10 ms."""
    log = Log()
    socket = Socket(chip or PlainChip(), WIRING if wiring is None else wiring, (log,))
    socket.set_address_lines(ADDRESS)
    socket.release(0)
    socket.set_rail(0, 5_000)
    socket.set_range(0, Range.FULL, VCC_AT)
    socket.end_ramps(10 * MS)
    socket.set_high(10 * MS, driven=True)
    socket.set_lines(10 * MS, ((CE, Level.HIGH), (OE, Level.HIGH)))
    return socket, log


def test_a_ramp_goes_straight_and_stays() -> None:
    """Half way at half time; a new move begins where the old one is."""
    ramp = Ramp()
    ramp.move(100, 5_000, 1_000)
    assert [ramp.level(t) for t in (0, 100, 600, 1_100, 9_999)] == [0, 0, 2_500, 5_000, 5_000]
    ramp.move(600, 0, 500)
    assert [ramp.level(t) for t in (600, 850, 1_100)] == [2_500, 1_250, 0]


def test_vcc_comes_to_its_pin_before_the_lines_that_hang_on_it() -> None:
    """Begin and end of the ramp name the VCC pin; pulled-up pins follow in a group of their own, and go before it."""
    log = Log()
    socket = Socket(PlainChip(), WIRING, (log,))
    socket.set_lines(0, ((CE, Level.HIGH), (OE, Level.HIGH)))  # released: nothing to pull them up yet
    socket.set_rail(0, 5_000)
    socket.set_range(0, Range.FULL, VCC_AT)
    socket.end_ramps(10 * MS)
    rises = log.levels_of(PIN_VCC)
    assert [level for _, level in rises] == [0, 5_000]
    assert [PIN_VCC in dict(changed) for t, changed in log.groups if t == rises[1][0]] == [True, False]
    socket.set_range(11 * MS, Range.OFF, ())
    socket.end_ramps(12 * MS)
    falling = [dict(changed) for t, changed in log.groups if t == 11 * MS + 150 * US]
    assert [PIN_VCC in group for group in falling] == [False, True]
    assert falling[0][PIN_CE] is None


@pytest.mark.parametrize(("step_mv", "ticks"), [(14_000, 40), (25_000, 74)])
def test_a_raised_position_rises_and_falls_as_the_circuit_does(step_mv: int, ticks: int) -> None:
    """Two groups each way; the times are those of the simulated circuit, the drop that of the switch."""
    socket, log = powered()
    socket.set_raised_rail(10 * MS, step_mv)
    t = 40 * MS
    log.groups.clear()
    socket.set_raised(t, (OE,))
    assert socket.mv(t + ticks // 2, OE) == pytest.approx((5_000 + step_mv) / 2, abs=200)
    socket.end_ramps(t + ticks)
    assert log.levels_of(PIN_OE) == [(t, 5_000), (t + ticks, step_mv)]
    socket.set_raised(2 * t, ())
    socket.end_ramps(3 * t)
    fall = 101 if step_mv == 14_000 else 160
    assert log.levels_of(PIN_OE)[2:] == [(2 * t, step_mv), (2 * t + fall, 5_000)]


def test_the_limiter_at_a9_loses_what_the_circuit_says() -> None:
    """12.0 V: 11.909 at no load, 11.876 at 200 uA [circuit: 11.909, 11.877]."""
    chip = PlainChip()
    socket, log = powered(chip)
    socket.set_raised_rail(10 * MS, 12_000)
    socket.set_raised(40 * MS, (26,))
    socket.end_ramps(41 * MS)
    assert log.levels_of(PIN_A9)[-1][1] == 11_909
    chip.draw[PIN_A9] = 200
    socket.weigh(42 * MS, always=True)
    assert log.levels_of(PIN_A9)[-1][1] == 11_876


def test_a_rail_past_its_limit_sags_and_comes_back() -> None:
    """A load of half as much again leaves two thirds of the level, as long as it lasts; no load pulls under 7.5 V."""
    chip = PlainChip()
    socket, log = powered(chip)
    socket.board = Board(raised_limit_ua=10_000)
    chip.draw[PIN_OE] = 100
    socket.set_raised_rail(10 * MS, 12_000)
    socket.set_raised(40 * MS, (OE,))
    socket.end_ramps(41 * MS)
    chip.draw[PIN_OE] = 15_000
    socket.weigh(42 * MS)
    assert (socket.mv(42 * MS, OE), socket.rail_mv(42 * MS)) == (7_993, 8_000)
    chip.draw[PIN_OE] = 30_000
    socket.weigh(42 * MS)
    assert (socket.mv(42 * MS, OE), socket.rail_mv(42 * MS)) == (7_485, 7_500)
    chip.draw[PIN_OE] = 100
    socket.weigh(43 * MS)
    assert log.levels_of(PIN_OE)[-1] == (43 * MS, 12_000)


def test_the_probe_resistor_shows_the_load() -> None:
    """1 mA in 47 ohm takes 47 mV off VCC."""
    chip = PlainChip()
    socket = Socket(chip, WIRING)
    socket.set_rail(0, 5_000)
    socket.set_range(0, Range.PROBE, VCC_AT)
    socket.end_ramps(10 * MS)
    assert socket.socket_vcc_mv(10 * MS) == 4_953


@pytest.mark.parametrize("wiring", [REVERSED, SHIFTED], ids=["reversed", "shifted"])
def test_a_turned_or_shifted_chip_pulls_the_probe_down(wiring: dict[int, int]) -> None:
    """Its VCC pin sits at ground or at a line held low: VCC stays at a diode drop, and it drives nothing."""
    log = Log()
    socket = Socket(PlainChip(), wiring, (log,))
    socket.set_address_lines(ADDRESS)
    socket.release(0)
    socket.set_rail(0, 5_000)
    socket.set_range(0, Range.PROBE, VCC_AT)
    socket.end_ramps(10 * MS)
    assert socket.socket_vcc_mv(10 * MS) == 800
    assert not socket.alive
    assert all((level or 0) <= 800 for _, changed in log.groups for _, level in changed)


def test_a_chip_without_its_own_vcc_is_fed_through_diodes() -> None:
    """With the VCC pin lifted the probe reads high, and D does not follow a pull up."""
    lifted = {position: pin for position, pin in WIRING.items() if pin != PIN_VCC}
    socket, _ = powered(wiring=lifted)
    assert socket.socket_vcc_mv(11 * MS) > 4_000
    socket.set_bias(11 * MS, DATA, Bias.UP)
    assert socket.data(11 * MS) == 0x00
    whole, _ = powered()
    whole.set_bias(11 * MS, DATA, Bias.UP)
    assert whole.data(11 * MS) == 0xFF


def test_an_empty_socket_reads_what_the_pulls_give() -> None:
    """No chip: D follows the bias both ways, with the outputs on as well."""
    socket = Socket(None, {})
    socket.release(0)
    socket.set_rail(0, 5_000)
    socket.set_range(0, Range.FULL, VCC_AT)
    socket.end_ramps(10 * MS)
    for how, word in ((Bias.UP, 0xFF), (Bias.DOWN, 0x00), (Bias.OFF, 0xFF)):
        socket.set_bias(10 * MS, DATA, how)
        assert socket.data(10 * MS) == word
    assert socket.levels == [None]


def test_the_chip_is_read_only_where_its_pins_are() -> None:
    """With D3 lifted that bit follows the pulls and the others the chip."""
    chip = PlainChip(b"\x08")
    lifted = {position: pin for position, pin in WIRING.items() if position != 17}
    socket, _ = powered(chip, wiring=lifted)
    socket.set_lines(11 * MS, ((CE, Level.LOW), (OE, Level.LOW)))
    for how, word in ((Bias.UP, 0x08), (Bias.DOWN, 0x00)):
        socket.set_bias(12 * MS, DATA, how)
        assert socket.data(12 * MS) == word
    whole, _ = powered(PlainChip(b"\x08"))
    whole.set_lines(11 * MS, ((CE, Level.LOW), (OE, Level.LOW)))
    assert whole.data(12 * MS) == 0x08


def test_what_the_chip_drives_stands_at_its_pins() -> None:
    """With the outputs on, the levels at D are the chip's."""
    socket, log = powered(PlainChip(b"\xa5"))
    socket.set_lines(11 * MS, ((CE, Level.LOW), (OE, Level.LOW)))
    assert [socket.levels[pin] for pin in PINS_D] == [5_000, 0, 5_000, 0, 0, 5_000, 0, 5_000]
    assert PINS_D[1] in dict(log.groups[-1][1])


def test_a_bus_fight_is_told() -> None:
    """The rig driving D against the chip: the watchers get the pins that both drive, and the socket counts it."""
    socket, log = powered(PlainChip(b"\x00"))
    socket.drive(11 * MS, 0xFF)
    assert (socket.fights, log.fights) == (0, [])
    socket.set_lines(12 * MS, ((CE, Level.LOW), (OE, Level.LOW)))
    assert (socket.fights, log.fights) == (1, [PINS_D])


def test_watchers_hear_samples_and_when_the_rig_drives() -> None:
    """`sampled` at a sample; `rig_drives` once at each beginning and end."""
    socket, log = powered()
    log.driving.clear()
    socket.drive(11 * MS, 1)
    socket.drive(12 * MS, 2)
    socket.release(13 * MS)
    socket.sample(14 * MS)
    assert log.driving == [(11 * MS, True), (13 * MS, False)]
    assert log.samples == [14 * MS]


def test_vcc_beside_the_power_positions_stands_a_diode_lower() -> None:
    """At positions 1, 3 and 25 VCC comes through a Schottky diode: 4.75 V of 5.0 V at next to no load [circuit]."""
    socket = Socket(PlainChip(), WIRING)
    socket.set_rail(0, 5_000)
    socket.set_range(0, Range.FULL, vcc_positions(0b10010))
    socket.end_ramps(10 * MS)
    assert (socket.levels[PIN_VCC], socket.levels[1]) == (5_000, 4_750)


def test_an_address_moves_as_one_group() -> None:
    """Only the pins whose bits changed are named, at the levels they have now."""
    socket, log = powered()
    log.groups.clear()
    socket.set_address(11 * MS, 0x0003)
    socket.set_address(12 * MS, 0x0004)
    assert [changed for _, changed in log.groups] == [
        ((10, 5_000), (9, 5_000)), ((10, 0), (9, 0), (8, 5_000)),
    ]


def test_an_address_under_a_raised_level_leaves_it_alone() -> None:
    """With A9 raised its pin keeps its level while the other lines move."""
    socket, log = powered()
    socket.set_address(11 * MS, 1 << 9)
    socket.set_raised_rail(11 * MS, 12_000)
    socket.set_raised(40 * MS, (26,))
    socket.end_ramps(41 * MS)
    log.groups.clear()
    socket.set_address(42 * MS, 1 << 9 | 3)
    assert log.levels_of(PIN_A9) == []
    assert socket.levels[PIN_A9] == 11_909


def test_driven_high_without_vcc_lifts_a_line() -> None:
    """A line driven high with VCC off stands at 1.7 V [circuit]: what the firmware has to prevent can be seen."""
    socket = Socket(PlainChip(), WIRING)
    socket.set_high(0, driven=True)
    socket.set_lines(0, ((CE, Level.HIGH),))
    assert socket.levels[PIN_CE] == 1_700
