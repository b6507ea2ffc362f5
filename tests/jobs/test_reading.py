"""Identify, read and blank check on a fake session: what they tell, what they do not let pass."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.errors import Difference
from pulsewright.jobs.blank import blank
from pulsewright.jobs.erase import save_first
from pulsewright.jobs.identify import identify
from pulsewright.jobs.margins import Look, told, unsteady
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


def test_margins_name_the_bytes_that_change_with_vcc() -> None:
    """A 0 that reads 1 at a margin: Difference, the byte with both values, and what that direction says."""
    session = FakeSession(noise())
    assert any("the same at VCC 5.0 V" in line for line in read(context(session, margins=True)).lines)


LOW, USUAL, HIGH = 4_500, 5_000, 5_500


def kinds(usual: bytes, *margins: tuple[int, bytes]) -> dict[int, str]:
    """Address -> kind of the bytes that change between the usual VCC and margins."""
    looks = [Look(USUAL, (usual,)), *(Look(vcc_mv, (data,)) for vcc_mv, data in margins)]
    return {one.address: one.kind for one in unsteady(looks, 0)}


def test_the_direction_of_a_change_tells_fading_from_under_erased() -> None:
    """A 0 that reads 1 at a high VCC fades; a 1 that reads 0 at a low VCC is under-erased or slow; else it is noise."""
    assert kinds(b"\x00\xff", (HIGH, b"\x01\xff")) == {0: "fading"}
    assert kinds(b"\x00\xff", (LOW, b"\x00\x7f")) == {1: "under-erased"}
    assert kinds(b"\x00\xff", (LOW, b"\x00\x7f"), (HIGH, b"\x01\xff")) == {0: "fading", 1: "under-erased"}
    assert kinds(b"\x00\xff", (HIGH, b"\x00\x7f")) == {1: "against"}
    assert kinds(b"\x00\xff", (LOW, b"\x01\xff")) == {0: "against"}
    assert kinds(b"\x00\xff", (LOW, b"\x00\xff")) == {}


def test_a_change_at_one_vcc_is_no_matter_of_margins() -> None:
    """Two looks at the same VCC are passes of one: only such bytes may be voted on."""
    assert kinds(b"\x00", (USUAL, b"\x01")) == {0: "unsteady"}
    found = unsteady([Look(USUAL, (b"\x00", b"\x01", b"\x00"))], 0x40)
    assert found[0].text(0x100) == "0040: 00 (2x)/01 (1x) at 5.0 V: changes at one VCC: contact, supply or noise"


def test_a_long_list_is_cut_and_counted() -> None:
    """The first sixteen, how many more, and how many of each kind."""
    lines = told(unsteady([Look(USUAL, (bytes(40),)), Look(HIGH, (b"\x01" * 40,))], 0), 40)
    assert lines[0].startswith("40 bytes: a 0 that fades")
    assert lines[-1] == "and 24 more"
    assert len(lines) == 18


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
