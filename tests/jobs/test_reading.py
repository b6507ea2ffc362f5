"""Identify, read and blank check on a fake session: what they tell, what they do not let pass."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.errors import Difference
from pulsewright.jobs.blank import blank
from pulsewright.jobs.erase import save_first
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
    changes = f"1234: {old:02X} (1x)/{old ^ 0x80:02X} (1x) at 5.0 V: changes at one VCC: contact, supply or noise"
    assert changes in found.value.facts
    assert found.value.more["unsteady_bytes"] == 1


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


def test_a_burn_tells_the_same_doubts_before_it_writes() -> None:
    """Half a chip twice, looked at before a burn: the address line with its pin, while it can still be stopped."""
    half = bytes(noise(7)[: WORDS // 2])
    session = FakeSession(bytearray(half + half))
    looked = context(session)
    _, _, lines = save_first(looked, 0, WORDS - 1)
    assert any("A15 (pin 1)" in line for line in lines)
    _, _, lines = save_first(context(session), 0, WORDS // 2 - 1)
    assert not any("A15" in line for line in lines)
