"""Verify and blank check: what they say of a chip that is not as it should be, at every VCC or at one only."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from random import Random
from typing import Any

import pytest

from pulsewright.chip.load import load
from pulsewright.errors import ChipFault, Difference, Interrupted, PulsewrightError
from pulsewright.image.memory import Fitted
from pulsewright.jobs.blank import blank
from pulsewright.jobs.burn import burn
from pulsewright.jobs.plan import unchanging_lines
from pulsewright.jobs.verify import verify, with_pins
from pulsewright.link.results import RunResult, Trouble
from pulsewright.sequence.types import Sequence
from pulsewright.wire.tables import Fault, Outcome
from tests.jobs.fake import FakeSession, context

PART = load("28c256")  # its margins on the reference rig: 5.0 V and 5.25 V
WORDS = PART.words


@pytest.fixture(autouse=True)
def state(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A state folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    return tmp_path / "state"


def image(data: bytes, used: int = WORDS) -> Fitted:
    """An image that gives the first so many words."""
    whole = data + b"\xff" * (WORDS - len(data))
    return Fitted(whole, b"\x01" * used + bytes(WORDS - used), used)


def holding(data: bytes) -> FakeSession:
    """A session on a chip that holds this."""
    return FakeSession(bytearray(data + b"\xff" * (WORDS - len(data))))


def failed(session: FakeSession, fitted: Fitted, **options: Any) -> tuple[Difference, dict[str, Any]]:
    """The error of a verify, and its values for `--json`."""
    with pytest.raises(Difference) as found:
        verify(context(session, definition=PART, **options), fitted)
    return found.value, found.value.more


GOOD = Random(3).randbytes(WORDS)


def test_every_pass_is_compared_before_the_verdict() -> None:
    """A chip that is wrong at each VCC: both passes are told with their numbers, and that VCC changes nothing."""
    session = holding(GOOD[:0x100] + b"\x00" * 16 + GOOD[0x110:])
    error, more = failed(session, image(GOOD))
    assert session.kinds == ["read", "read"]
    assert [(one["vcc_mv"], one["differing"]) for one in more["passes"]] == [
        (5000, more["mismatch"]["differing"]),
        (5250, more["mismatch"]["differing"]),
    ]
    assert "the same words at every VCC: no matter of margins" in error.facts
    assert more["unsteady_bytes"] == 0


def test_a_word_that_is_wrong_at_one_vcc_only_is_told_by_physics() -> None:
    """0 in the image, 1 at the high VCC: a fading 0, with its value at each VCC; the rest is equal."""
    session = holding(GOOD)
    at = GOOD.index(0x00)

    def high(sequence: Sequence, turn: int) -> RunResult | None:
        session.cells[at] = 0x00 if turn == 1 else 0x01
        return None

    session.before = high
    error, more = failed(session, image(GOOD))
    assert [(one["address"], one["kind"]) for one in more["unsteady"]] == [(at, "fading")]
    assert error.what.startswith("1 of 32768 words differ at VCC 5.25 V")
    assert any(fact == "at VCC 5.0 V (±0.034 V): all 32768 words equal" for fact in error.facts)


def test_the_image_says_what_a_word_that_turns_should_be() -> None:
    """0 at the first VCC and 1 at the higher one, in the place of a 1: under-erased or slow, and no fading 0."""
    session = holding(GOOD)
    at = GOOD.index(0xFF)

    def high(sequence: Sequence, turn: int) -> RunResult | None:
        session.cells[at] = 0xFE if turn == 1 else 0xFF
        return None

    session.before = high
    _, more = failed(session, image(GOOD))
    assert [(one["address"], one["kind"]) for one in more["unsteady"]] == [(at, "under-erased")]


def test_words_that_the_image_does_not_give_are_no_mismatch() -> None:
    """A byte outside the image that turns with VCC is not told by a verify of it, be the rest right or wrong."""
    session = holding(GOOD)

    def high(sequence: Sequence, turn: int) -> RunResult | None:
        session.cells[0x200] = turn
        return None

    session.before = high
    assert verify(context(session, definition=PART), image(GOOD, used=0x200)).lines[0].startswith("512 words verified")
    session.cells[0] ^= 1
    _, more = failed(session, image(GOOD, used=0x200))
    assert (more["mismatch"]["differing"], more["unsteady_bytes"]) == (1, 0)


@pytest.mark.parametrize(
    ("data", "cause", "pins", "hint"),
    [
        (GOOD[: WORDS // 2] * 2, "address line stuck", "A14 (pin 1) reads", "contacts"),
        (bytes(v | 1 for v in GOOD), "data line stuck", "D0 (pin 11) reads", "contacts"),
        (bytes(v ^ 0xFF for v in GOOD), "data inverted", "every bit", "board"),
        (bytes(3) + GOOD[:-3], "image moved", "3 bytes too high", "--origin"),
        (b"", "blank", "a blank chip", "--passes"),
    ],
)
def test_a_likely_cause_is_told_with_pins_and_what_to_try(data: bytes, cause: str, pins: str, hint: str) -> None:
    """The last fact is the cause, each line with its pin; what to try fits it; --json has the numbers."""
    error, more = failed(holding(data), image(GOOD))
    (found,) = more["mismatch"]["causes"]
    assert (found["cause"], found["explained"] + found["beyond"]) == (cause, more["mismatch"]["differing"])
    told = next(fact for fact in error.facts if "explains all" in fact)
    assert pins in told
    assert hint in error.hint


def test_a_burn_says_the_same_of_what_it_wrote() -> None:
    """A data line that sticks after the burn: exit 4, the cause with its pin, and contacts before a worn chip."""
    session = FakeSession(bytearray(b"\xff" * WORDS))

    def stick(sequence: Sequence, turn: int) -> RunResult | None:
        if "burn" in session.kinds[:-1]:
            session.cells[:] = bytes(v & 0xFE for v in session.cells)
        return None

    session.before = stick
    with pytest.raises(ChipFault) as found:
        burn(context(session, definition=PART), image(GOOD))
    assert any("D0 (pin 11) reads always 0" in fact for fact in found.value.facts)
    assert "contacts" in found.value.hint


def test_a_repeated_image_leaves_a_doubt_about_the_pin() -> None:
    """An image that is the same twice verifies with an open A14 as well: the answer says so."""
    twice = GOOD[: WORDS // 2] * 2
    result = verify(context(holding(twice), definition=PART), image(twice))
    assert "the data never changes with A14 (pin 1): open pin or repeated image" in result.lines
    assert result.facts["unchanging_lines"] == ["A14"]


def test_an_address_line_is_looked_at_within_a_range_too() -> None:
    """Lines that change inside the range are told of; those above it, and what is too little or uniform, are not."""
    part = bytes(GOOD[at & ~2] for at in range(0x300))
    assert unchanging_lines(part, 0x100, WORDS) == [1]
    assert unchanging_lines(GOOD[0x100:0x400], 0x100, WORDS) == []
    assert unchanging_lines(part[:62], 0x100, WORDS) == []
    assert unchanging_lines(bytes(0x300), 0x100, WORDS) == []
    odd = bytes(GOOD[at & ~0x40] for at in range(0x33, 0x222))
    assert unchanging_lines(odd, 0x33, WORDS) == [6]


def test_pins_are_named_for_lines_alone() -> None:
    """Every line has its pin behind it; numbers and lines that the part has not got are left alone."""
    assert with_pins("A0 and D7: 14 bytes", PART) == "A0 (pin 10) and D7 (pin 19): 14 bytes"
    assert with_pins("A19", PART) == "A19"


def test_a_blank_check_counts_what_is_not_blank() -> None:
    """One read more, on failure only: how many words, within which addresses, the first of them."""
    session = FakeSession()
    for at in range(0x8001, 0x8015):
        session.cells[at] = 0xFE
    session.cells[0xFFFF] = 0x00
    with pytest.raises(Difference, match="word 8001 reads FE") as found:
        blank(context(session))
    assert session.kinds == ["blank", "read"]
    assert "21 words of 65536 not blank, within 8001..FFFF" in found.value.facts
    assert "8001: FE" in found.value.facts
    assert "and 5 more" in found.value.facts
    assert found.value.more["not_blank_words"] == 21


def test_a_word_that_reads_blank_the_second_time_is_noise() -> None:
    """The check found a word, the read finds none: that is said, and contacts are to be cleaned."""
    session = FakeSession()

    def settle(sequence: Sequence, turn: int) -> RunResult | None:
        session.cells[5] = 0xFE if turn == 1 else 0xFF
        return None

    session.before = settle
    with pytest.raises(Difference) as found:
        blank(context(session))
    assert found.value.more["not_blank_words"] == 0
    assert "contacts" in found.value.hint


@pytest.mark.parametrize(
    ("outcome", "fault", "error"),
    [(Outcome.TRIPPED, Fault.VCC_OUTSIDE, Difference), (Outcome.ABORTED, Fault.ABORTED, Interrupted)],
)
def test_not_blank_stands_when_the_read_for_it_fails(
    outcome: Outcome, fault: Fault, error: type[PulsewrightError]
) -> None:
    """A read that trips leaves exit 1 and says that the number is unknown; an interrupt is one."""
    session = FakeSession()
    session.cells[5] = 0
    trouble = Trouble(int(fault), fault.name.lower())

    def fail(sequence: Sequence, turn: int) -> RunResult | None:
        return replace(session.done(), outcome=outcome, trouble=trouble) if turn == 2 else None

    session.before = fail
    with pytest.raises(error) as found:
        blank(context(session))
    unknown = any("how many are not is unknown" in fact for fact in found.value.facts)
    assert unknown == (error is Difference)
