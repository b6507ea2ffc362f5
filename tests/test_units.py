"""Units: texts become exact integers, and integers become texts that read back as the same."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright import units
from pulsewright.units import Rounding, UnitMistake

PARSED = [
    (units.parse_mv, "12.75 V", 12_750),
    (units.parse_mv, "50 mV", 50),
    (units.parse_mv, "-0.3 V", -300),
    (units.parse_mv, "+5V", 5_000),
    (units.parse_mv, "  3.75   V ", 3_750),
    (units.parse_ua, "30 mA", 30_000),
    (units.parse_ua, "200 uA", 200),
    (units.parse_ua, "200 µA", 200),
    (units.parse_ua, "0.5 A", 500_000),
    (units.parse_ps, "100 us", 100_000_000),
    (units.parse_ps, "100 µs", 100_000_000),
    (units.parse_ps, "62.5 ns", 62_500),
    (units.parse_ps, "1 ps", 1),
    (units.parse_ps, "10.5 ms", 10_500_000_000),
    (units.parse_ps, "2 s", 2_000_000_000_000),
    (units.parse_mohm, "47 ohm", 47_000),
    (units.parse_mohm, "10 k", 10_000_000),
    (units.parse_address, "0x1F0", 0x1F0),
    (units.parse_address, "32K", 32_768),
    (units.parse_address, " 496 ", 496),
    (units.parse_address, "1M", 1_048_576),
]
REFUSED = [
    (units.parse_mv, text)
    for text in ("", "12", "12 v", "12 A", "V", "1,5 V", "1e3 V", ".5 V", "5. V", "0.0005 V", "12 V 5", "nan V")
]
REFUSED += [(units.parse_ua, text) for text in ("30", "30 ms", "0.1 uA", "30 MA")]
REFUSED += [(units.parse_ps, text) for text in ("100", "100 V", "0.5 ps", "100 Us", "1 min")]
REFUSED += [(units.parse_address, text) for text in ("", "-1", "0x", "1F0", "32k", "1.5K", "0x1G", "0100", "00x1")]


@pytest.mark.parametrize(("parse", "text", "value"), PARSED)
def test_a_text_with_its_unit_is_an_exact_integer(parse: Callable[[str], int], text: str, value: int) -> None:
    """Volts are millivolts, amperes microamperes, times picoseconds, all whole."""
    result = parse(text)
    assert result == value
    assert isinstance(result, int)


@pytest.mark.parametrize(("parse", "text"), REFUSED)
def test_a_text_without_its_unit_is_refused_with_what_is_wanted(parse: Callable[[str], int], text: str) -> None:
    """A missing or wrong unit, or a part of the smallest unit, is a mistake that says what would be right."""
    with pytest.raises(UnitMistake, match="such as|of whole"):
        parse(text)


@given(st.integers(-100_000, 100_000))
def test_a_printed_voltage_reads_back(mv: int) -> None:
    """What show_mv writes is what parse_mv reads, to the millivolt."""
    assert units.parse_mv(units.show_mv(mv)) == mv


@given(st.integers(0, 10_000_000))
def test_a_printed_current_reads_back(ua: int) -> None:
    """What show_ua writes is what parse_ua reads, to the microampere."""
    assert units.parse_ua(units.show_ua(ua)) == ua


@given(st.integers(0, 10**15))
def test_a_printed_time_reads_back(ps: int) -> None:
    """What show_ps writes is what parse_ps reads, to the picosecond."""
    assert units.parse_ps(units.show_ps(ps)) == ps


@given(st.integers(0, 2**24 - 1), st.integers(1, 2**24))
def test_a_printed_address_reads_back(at: int, words: int) -> None:
    """An address is shown in at least four hex digits, as many as the chip's last address has."""
    text = units.show_address(at, words)
    assert int(text, 16) == at
    assert len(text) >= max(4, len(f"{words - 1:X}"))


@given(st.integers(0, 10**15))
def test_rounding_goes_the_way_its_word_says(ps: int) -> None:
    """At least is never shorter, at most never longer, nearest off by half a tick at most; none by a whole tick."""
    exact = Fraction(ps, 62_500)
    at_least, at_most = units.ticks(ps, Rounding.AT_LEAST), units.ticks(ps, Rounding.AT_MOST)
    nearest = units.ticks(ps, Rounding.NEAREST)
    assert 0 <= at_least - exact < 1
    assert 0 <= exact - at_most < 1
    assert abs(nearest - exact) <= Fraction(1, 2)


@given(st.integers(0, 10**10))
def test_whole_ticks_stay_whole_whichever_way(count: int) -> None:
    """A time of whole ticks is that many ticks by every rounding word."""
    assert {units.ticks(count * 62_500, word) for word in Rounding} == {count}


def test_exact_refuses_what_is_not_whole() -> None:
    """A time that must be exact and is not is an error that names it."""
    with pytest.raises(ValueError, match=r"100 ns is not a whole number"):
        units.ticks(100_000, Rounding.EXACT)


def test_a_negative_time_is_refused() -> None:
    """No rounding word makes ticks of a negative time."""
    for word in Rounding:
        with pytest.raises(ValueError, match="negative"):
            units.ticks(-1, word)


def test_texts_a_person_reads() -> None:
    """Values print in their natural unit, without needless digits."""
    assert [units.show_mv(mv) for mv in (5000, 12750, -300, 3563)] == ["5.0 V", "12.75 V", "-0.3 V", "3.563 V"]
    assert [units.show_ps(ps) for ps in (62_500, 100_000_000, 50 * 10**9, 1)] == ["62.5 ns", "100 us", "50 ms", "1 ps"]
    assert [units.show_ua(ua) for ua in (200, 30_000, 1_500)] == ["200 uA", "30 mA", "1.5 mA"]
    assert units.show_ticks(1600) == "100 us"
