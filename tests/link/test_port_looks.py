"""What bytes that are no greeting look like."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.link.looks import looks
from pulsewright.wire.frames import Hello
from pulsewright.wire.tables import FINGERPRINT, HELLO_REQUEST, LAYOUT, Fault
from tests.link.port_kit import resampled

TEXT = b"tower ready\r\nT=0412 bell 3 ok\r\n" * 4


def test_the_programs_own_question_is_an_echo() -> None:
    """Whole questions, and one that is cut at the end."""
    assert "own question" in looks(HELLO_REQUEST * 3 + HELLO_REQUEST[:2]).what
    assert "own question" not in looks(HELLO_REQUEST[:3]).what


def test_the_text_of_another_device_is_shown() -> None:
    """Its first line is quoted, with its ends of lines visible and no more than forty signs of it."""
    look = looks(TEXT)
    assert look.what == r"a text ('tower ready\r\nT=0412 bell 3 ok\r\ntower rea')"
    assert "another device" in look.hint


def test_a_damaged_greeting_is_told_from_a_stranger() -> None:
    """One bit is enough to make a greeting none, and its beginning still tells that a rig sent it."""
    hello = bytearray(Hello(LAYOUT, 3, 2048, FINGERPRINT, 7, Fault.NONE).encode())
    hello[20] ^= 1
    assert "a greeting" in looks(bytes(hello)).what
    assert "cable" in looks(bytes(hello)).hint


def test_zeros_are_a_line_held_low() -> None:
    """A receive wire without supply behind it gives zeros, as long as it is looked at."""
    assert looks(bytes(12)).what == "all zero"


@pytest.mark.parametrize("baud", [2_400, 4_800, 9_600, 19_200])
@pytest.mark.parametrize("pause_bits", [0, 3])
def test_a_device_at_a_lower_rate_is_recognised(baud: int, pause_bits: int) -> None:
    """Text at each usual lower rate, through a model of a receiver at the rate of greetings."""
    what = looks(resampled(TEXT, baud, 38_400, pause_bits)).what
    assert what in {"as of a device at a lower rate", "all zero"}
    assert (what == "all zero") == (baud == 2_400)


@pytest.mark.parametrize("baud", [57_600, 115_200, 250_000])
def test_a_device_at_a_higher_rate_is_no_text(baud: int) -> None:
    """What it sends is neither text nor slow; the hint names another rate."""
    look = looks(resampled(TEXT, baud, 38_400))
    assert look.what == "no text"
    assert "another rate" in look.hint


def test_the_model_of_the_receiver_is_right_where_the_rates_agree() -> None:
    """At one rate, and at two that differ by 3 %, every byte comes through."""
    assert resampled(TEXT, 38_400, 38_400) == TEXT
    assert resampled(TEXT, 38_400, 39_500, pause_bits=1) == TEXT


@given(st.binary(min_size=1, max_size=64))
def test_any_bytes_get_a_look_and_a_thing_to_try(data: bytes) -> None:
    """No bytes are without words."""
    look = looks(data)
    assert look.what
    assert look.hint
