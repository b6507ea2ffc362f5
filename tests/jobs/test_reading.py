"""Identify, read and blank check on a fake session: what they tell, what they do not let pass."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.errors import Difference
from pulsewright.jobs.blank import blank
from pulsewright.jobs.identify import identify
from pulsewright.jobs.read import read
from pulsewright.link.results import RunResult
from pulsewright.sequence.types import Sequence
from tests.jobs.fake import ID, WORDS, FakeSession, context, noise


@pytest.fixture(autouse=True)
def state(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A state folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    return tmp_path / "state"


def test_identify_names_the_maker_row() -> None:
    """ID bytes, their places and the row."""
    result = identify(context(FakeSession()))
    assert "ID DA at 0000 (manufacturer), 08 at 0001 (device)" in result.lines[0]
    assert result.facts["id"] == ID.hex(" ").upper()
    assert result.facts["maker"] == "DA"


def test_read_gives_the_range_and_compares_passes() -> None:
    """Three passes over a range: its bytes, and one sequence a pass."""
    session = FakeSession(noise())
    result = read(context(session, first=0x100, last=0x2FF, passes=3))
    assert result.data == bytes(session.cells[0x100:0x300])
    assert session.kinds == ["read"] * 3


def test_passes_that_disagree_are_listed() -> None:
    """A byte that reads two ways is named with both values, and nothing counts as read."""
    session = FakeSession(noise())

    def fade(sequence: Sequence, turn: int) -> RunResult | None:
        if turn == 2:
            session.cells[0x1234] ^= 0x80
        return None

    session.before = fade
    old = session.cells[0x1234]
    with pytest.raises(Difference) as found:
        read(context(session, passes=2))
    assert f"1234: {old:02X}, {old ^ 0x80:02X}" in found.value.facts


def test_margins_name_the_bytes_that_change_with_vcc() -> None:
    """A 0 that reads 1 at a margin: Difference, the byte with both values, and what that direction says."""
    session = FakeSession(noise())
    assert any("the same at VCC 5.0 V" in line for line in read(context(session, margins=True)).lines)
    session = FakeSession(bytearray(WORDS))

    def fade(sequence: Sequence, turn: int) -> RunResult | None:
        session.cells[0x40] = turn - 1
        return None

    session.before = fade
    with pytest.raises(Difference) as found:
        read(context(session, margins=True, first=0x20))
    facts = "\n".join(found.value.facts)
    assert "0040: wanted 00, got 01" in facts
    assert "high VCC" in facts


def test_an_address_line_that_changes_nothing_is_told() -> None:
    """Half a chip twice: A15 with its pin."""
    half = bytes(noise(7)[: WORDS // 2])
    result = read(context(FakeSession(bytearray(half + half))))
    assert result.facts["unchanging_lines"] == ["A15"]
    assert any("A15 (pin 1)" in line and "open pin or repeated image" in line for line in result.lines)


def test_blank_check_tells_words_and_vcc() -> None:
    """A blank chip is a fact with numbers; one word that is not is a difference."""
    assert blank(context(FakeSession())).lines == ("blank: 65536 words, 0000..FFFF, read FF at VCC 5.0 V",)
    session = FakeSession()
    session.cells[0x8001] = 0xFE
    with pytest.raises(Difference, match="word 8001 reads FE"):
        blank(context(session))
