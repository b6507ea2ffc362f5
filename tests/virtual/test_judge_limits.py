"""The waveform judge at its limits: what stands exactly on a limit is allowed, and what comes between is forgotten."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from pulsewright.virtual.judge import Judge
from pulsewright.virtual.models.e512_limits import LIMITS
from tests.virtual.test_judge import rules, watched
from tests.virtual.waveform import A9, CE, HIGH, MS, OE, US, VCC, A, Bus, D, pulse, ready_to_program, wind_down


def highest_vcc(bus: Bus) -> None:
    """VCC at its absolute maximum."""
    bus.power(7_000)


def lowest_level(bus: Bus) -> None:
    """A pin 0.6 V below ground."""
    bus.set({D[0]: -600})


def highest_line(bus: Bus) -> None:
    """A pin 0.3 V above VCC, OE as well."""
    bus.set({A[3]: 5_300, OE: 5_300})


def line_under_falling_vcc(bus: Bus) -> None:
    """VCC lowered to 0.3 V below a line that stays, OE as well."""
    bus.set({A[3]: 3_863, OE: 3_863})
    bus.set({VCC: 3_563, CE: 3_563})


def whole_hold(bus: Bus) -> None:
    """Address and D move 2 us after the pulse, not before."""
    ready_to_program(bus)
    pulse(bus)
    bus.wait(2 * US)
    bus.address(6)
    bus.drive(0xF0)


def whole_release(bus: Bus) -> None:
    """D is released 2 us after the pulse."""
    ready_to_program(bus)
    pulse(bus)
    bus.wait(2 * US)
    bus.release()


def whole_setup(bus: Bus) -> None:
    """Address and D move 2 us before the pulse."""
    ready_to_program(bus)
    bus.address(6)
    bus.drive(0xF0)
    bus.wait(2 * US)
    pulse(bus)


def steepest_rise(bus: Bus) -> None:
    """A raised level in 62.5 ns; 50 ns are asked for."""
    bus.ramp({OE: 12_000}, 1)


def quick_float(bus: Bus) -> None:
    """D sampled, and then driven, three ticks after the outputs went off."""
    bus.read(5)
    bus.set({CE: 0, OE: 0})
    bus.wait(US)
    bus.set({OE: HIGH})
    bus.wait(3)
    bus.sample()
    bus.drive(0xFF)


def lowest_vcc(bus: Bus) -> None:
    """A pulse at each end of VCC's window."""
    for mv in (4_750, 5_250):
        bus.power(mv)
        bus.program(5, 0x0F)


def most_pulses(bus: Bus) -> None:
    """25 program pulses on each of two words, 20 erase pulses, and as many again after a power-down."""
    for _ in range(2):
        for word in (5, 6):
            for _ in range(25):
                bus.program(word, 0x0F)
        for _ in range(20):
            bus.erase()
        bus.down()
        bus.up()


def pulses_after_pulses_of_the_other_kind(bus: Bus) -> None:
    """An erase lets a word have its 25 pulses again, and a program pulse the chip its 20."""
    for _ in range(2):
        for _ in range(25):
            bus.program(5, 0x0F)
        for _ in range(20):
            bus.erase()


def lowest_high(bus: Bus) -> None:
    """A pulse with lines at just 2.0 V and just 0.8 V, CE at 0.8 V as well."""
    bus.set({A[0]: 2_000, A[1]: 800})
    bus.drive(0xFF)
    bus.set(dict.fromkeys(D, 2_000))
    bus.raise_to({OE: 12_000})
    bus.wait(2 * US)
    bus.set({CE: 800})
    bus.wait(100 * US)
    bus.set({CE: HIGH})
    wind_down(bus)


def quick_read_after_power_down(bus: Bus) -> None:
    """A verify needs 1 us, and the first read after the next power-up 150 ns again."""
    bus.program(5, 0x0F)
    bus.down()
    bus.up()
    bus.read(5, access=3)


def quick_walk_in_a_verify(bus: Bus) -> None:
    """With CE low for long a new address needs 150 ns, after a pulse too."""
    bus.program(5, 0x0F)
    bus.set({CE: 0, OE: 0})
    bus.wait(US)
    bus.sample()
    bus.address(6)
    bus.wait(3)
    bus.sample()


@pytest.mark.parametrize(
    "wave",
    [
        *(highest_vcc, lowest_level, highest_line, line_under_falling_vcc, whole_hold, whole_release, whole_setup),
        *(steepest_rise, quick_float, lowest_vcc, lowest_high, quick_read_after_power_down, quick_walk_in_a_verify),
        *(most_pulses, pulses_after_pulses_of_the_other_kind),
    ],
)
def test_the_limit_itself_is_allowed(wave: Callable[[Bus], None]) -> None:
    """A value exactly on its limit breaks no rule."""
    judge, bus = watched()
    wave(bus)
    assert judge.violations == []


def test_a9_is_an_address_pin_as_well() -> None:
    """At TTL levels an edge of A9 needs the access time and the address set-up like any other."""
    judge, bus = watched()
    bus.set({CE: 0, OE: 0})
    bus.wait(US)
    bus.set({A9: HIGH})
    bus.wait(2)
    bus.sample()
    assert rules(judge) == {"access time"}
    judge, bus = watched()
    ready_to_program(bus)
    bus.set({A9: HIGH})
    bus.wait(2 * US - 1)
    pulse(bus)
    assert rules(judge) == {"address setup"}


def test_a_new_address_does_not_shorten_the_wait_for_ce() -> None:
    """After CE in a verify 1 us is due, whether or not the address moves shortly before that is over."""
    judge, bus = watched()
    bus.program(5, 0x0F)
    bus.set({CE: 0, OE: 0})
    bus.wait(4)
    bus.address(6)
    bus.wait(4)
    bus.sample()
    assert rules(judge) == {"access time"}


def test_the_slower_of_two_raised_pins_counts() -> None:
    """OE at its level long ago, A9 a tick less than 2 us ago: the set-up time is A9's."""
    judge, bus = watched()
    bus.address(0)
    bus.drive(0xFF)
    bus.set({A9: HIGH})
    bus.raise_to({OE: 14_000})
    bus.wait(10 * US)
    bus.raise_to({A9: 14_000})
    bus.wait(2 * US - 1)
    pulse(bus, 100 * MS)
    assert "raised setup" in rules(judge)
    assert judge.seen()["erase raised setup"] == (2 * US - 1, 2 * US - 1, 1)


def test_a_fight_that_the_socket_saw_is_reported() -> None:
    """When rig and chip both drove pins with CE and OE high, the socket knows it and the judge says it."""
    judge, bus = watched()
    bus.wait(MS)
    judge.edges(bus.t, bus.levels, [D[0]], (D[0],))
    assert rules(judge) == {"bus fight"}
    turned = Judge(LIMITS, misplaced=True)
    turned.edges(bus.t, bus.levels, [D[0]], (D[0],))
    assert turned.violations == []


def test_a_turned_chip_may_be_driven_against() -> None:
    """What the rig drives means nothing to a chip that sits turned: no fight is reported."""
    judge = Judge(LIMITS, misplaced=True)
    bus = Bus(judge)
    bus.power()
    bus.drive(0xFF)
    bus.set({CE: 0, OE: 0})
    bus.sample()
    assert judge.violations == []


def test_seen_keeps_the_least_and_the_most() -> None:
    """Three pulses of different widths, in any order: least, most, number."""
    judge, bus = watched()
    for width in (100, 97, 103):
        bus.program(5, 0x0F, width * US)
    assert judge.seen()["program pulse"] == (97 * US, 103 * US, 3)


def test_a_rig_at_rest_drives_d() -> None:
    """Before the rig lets go of D for the first time it holds it low: outputs that go on then are a fight."""
    judge = Judge(LIMITS)
    bus = Bus()
    bus.watchers = (judge,)
    bus.set(dict.fromkeys(D, 0))
    bus.power()
    assert rules(judge) == {"bus fight"}
