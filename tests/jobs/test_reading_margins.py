"""Bytes that do not read the same: which, at which VCC, what that means, and that no reading is lost."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from pulsewright.chip.load import load
from pulsewright.chip.model import VerifyPass
from pulsewright.errors import Difference, Where
from pulsewright.jobs.erase import save_first
from pulsewright.jobs.margins import KEPT, LISTED, Look, as_facts, told, unsteady, voted
from pulsewright.jobs.read import KEPT_READINGS, read
from pulsewright.jobs.record import read_record, record_paths
from pulsewright.link.results import RunResult
from pulsewright.sequence.types import Sequence
from tests.jobs.fake import WORDS, FakeSession, context, noise


@pytest.fixture(autouse=True)
def state(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A state folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    return tmp_path / "state"


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


def test_a_bit_that_is_unsteady_about_its_turn_still_turns() -> None:
    """Passes that disagree at the middle VCC make no noise of what is 0 below and 1 above: it is not voted."""
    looks = [Look(USUAL, (b"\x00", b"\x01")), Look(LOW, (b"\x00",)), Look(HIGH, (b"\x01",))]
    assert [one.kind for one in unsteady(looks, 0)] == ["turning"]
    assert [one.kind for one in unsteady(looks, 0, truth=b"\x00")] == ["fading"]
    assert [one.kind for one in unsteady(looks, 0, truth=b"\x01")] == ["under-erased"]


def test_noise_in_one_bit_does_not_hide_another_that_turns() -> None:
    """A byte with a noisy bit and a fading one counts as fading, and is not to be voted."""
    looks = [Look(USUAL, (b"\x00", b"\x80")), Look(HIGH, (b"\x01", b"\x81"))]
    assert [one.kind for one in unsteady(looks, 0)] == ["fading"]


def test_an_image_says_which_value_was_right() -> None:
    """0 at the low VCC and 1 above is a fading 0 where the image has a 0, else a 1 that is under-erased or slow."""
    looks = [Look(LOW, (b"\x00",)), Look(HIGH, (b"\x01",))]
    assert [one.kind for one in unsteady(looks, 0, truth=b"\x00")] == ["fading"]
    assert [one.kind for one in unsteady(looks, 0, truth=b"\x01")] == ["under-erased"]


def test_a_vote_takes_what_more_than_half_of_the_passes_read() -> None:
    """Byte by byte; where no value has more than half there is no vote."""
    assert voted([b"\x01\x05", b"\x02\x05", b"\x01\x06"]) == b"\x01\x05"
    assert voted([b"\x01", b"\x02"]) is None
    assert voted([b"\x01", b"\x02", b"\x03"]) is None


def test_facts_are_capped_and_their_number_is_exact() -> None:
    """Of very many bytes the first, of very many passes the first values; the counts are of all."""
    passes = (bytes(KEPT + 5),) * 30 + (b"\x01" * (KEPT + 5),)
    facts = as_facts(unsteady([Look(USUAL, passes)], 0))
    assert facts["unsteady_bytes"] == KEPT + 5
    kept = facts["unsteady"]
    assert isinstance(kept, list)
    assert len(kept) == KEPT
    assert kept[0]["reads"] == [{"vcc_mv": USUAL, "values": ["00"] * LISTED, "counts": {"00": 30, "01": 1}}]


class Flicker:
    """Cells of which some change before a turn and change back after it."""

    def __init__(self, session: FakeSession, changes: dict[int, int]) -> None:
        self.session, self.changes = session, changes  # turn -> address
        session.before = self.before

    def before(self, sequence: Sequence, turn: int) -> RunResult | None:
        """Turns one bit for one read."""
        for at in (self.changes.get(turn), self.changes.get(turn - 1)):
            if at is not None:
                self.session.cells[at] ^= 1
        return None


def failed(session: FakeSession, **options: Any) -> tuple[Difference, dict[str, Any]]:
    """The error of a read whose passes or margins do not agree, and its values for `--json`."""
    with pytest.raises(Difference) as found:
        read(context(session, **options))
    return found.value, found.value.more


def test_every_pass_is_made_and_the_vote_is_kept_with_the_readings() -> None:
    """Two of five passes differ, each in a byte of its own: both bytes are listed, and the vote is the chip itself."""
    session = FakeSession(noise())
    right = bytes(session.cells)
    Flicker(session, {2: 0x10, 4: 0x20})
    error, more = failed(session, passes=5)
    assert session.kinds == ["read"] * 5
    assert [one["address"] for one in more["unsteady"]] == [0x10, 0x20]
    readings = more["readings"]
    assert [one["what"] for one in readings] == ["pass 1 of 5", "pass 2 of 5", "pass 4 of 5"]
    assert Path(readings[0]["file"]).read_bytes() == right  # the vote too, which needs no file of its own
    assert error.did == "VCC off; the file that was asked for is not written"
    assert "--passes" in error.hint


def test_a_vote_that_no_pass_read_is_kept() -> None:
    """Each of three passes is wrong somewhere: what most of them read is a reading of its own, and right."""
    session = FakeSession(noise())
    right = bytes(session.cells)
    Flicker(session, {1: 0x10, 2: 0x20, 3: 0x30})
    readings = failed(session, passes=3)[1]["readings"]
    assert readings[-1]["what"] == "each byte as most passes read it"
    assert Path(readings[-1]["file"]).read_bytes() == right


def test_very_noisy_readings_fill_no_disk() -> None:
    """Of seven passes that all differ the first four are kept, and the vote."""
    session = FakeSession(noise())
    Flicker(session, {turn: turn * 0x10 for turn in range(1, 8)})
    readings = failed(session, passes=7)[1]["readings"]
    assert len(readings) == KEPT_READINGS + 1


def test_a_record_keeps_the_bytes_that_do_not_agree() -> None:
    """The record has the list that --json has."""
    session = FakeSession(noise())
    Flicker(session, {2: 0x10})
    _, more = failed(session, passes=2)
    kept = read_record(record_paths()[-1])["error"]
    assert isinstance(kept, dict)
    assert kept["unsteady"] == more["unsteady"]
    assert kept["readings"] == more["readings"]


def test_what_changes_with_vcc_is_never_voted() -> None:
    """Noise at the usual VCC and a byte that turns above it: every reading is kept, and no vote is made."""
    session = FakeSession(noise())

    def high(sequence: Sequence, turn: int) -> RunResult | None:
        for at in (1, 2, 3):
            session.cells[at] = turn == at  # noise, of which each of the three passes at the usual VCC has its own
        session.cells[0x20] = 0xFF if turn > 3 else 0
        return None

    session.before = high
    _, more = failed(session, definition=load("28c256"), passes=3, margins=True)
    assert {one["address"]: one["kind"] for one in more["unsteady"]} == {
        **dict.fromkeys((1, 2, 3), "unsteady"),
        0x20: "fading",
    }
    assert [(one["vcc_mv"], one["what"]) for one in more["readings"]] == [
        *((5000, f"pass {number} of 3") for number in (1, 2, 3)),
        (5250, "pass 1 of 3"),
    ]


def test_where_the_rig_has_no_margin_that_is_said() -> None:
    """A second pass at the usual VCC is no margin: none is read, and the answer says why."""
    session = FakeSession(noise())
    result = read(context(session, margins=True))
    assert session.kinds == ["read"]
    assert result.facts["margins_vcc_mv"] == []
    assert any(
        line.startswith("no margin was read") and "besides 5.0 V" in line and "4.75 V to 5.25 V" in line
        for line in result.lines
    )


def test_a_definitions_own_pass_at_the_usual_vcc_is_no_margin() -> None:
    """Where a maker's verify is a plain read, the margins are those of the rig."""
    part = load("28c256")
    own = replace(part, verify=(VerifyPass("read", Where()),))
    result = read(context(FakeSession(noise()), definition=own, margins=True, last=0xFF))
    assert result.facts["margins_vcc_mv"] == [5250]


def test_a_pass_that_raises_a_level_is_no_read() -> None:
    """A definition that verifies with VPP up: a read of margins leaves that pass out and says so."""
    part = load("27c256", maker="ST")
    raising = replace(part, verify=(VerifyPass("verify", Where()), *part.verify))
    session = FakeSession(noise())
    session.cells[:] = session.cells[:32768]
    result = read(context(session, definition=raising, margins=True, last=0xFF))
    assert result.facts["margins_vcc_mv"] == [6000, 4200]
    assert any(line.startswith("not read: verify at") and "raises a level" in line for line in result.lines)


def test_a_save_that_reads_two_ways_stops_what_would_change_the_chip() -> None:
    """The look before an erase or a burn: the chip is as it was, and both readings are kept."""
    session = FakeSession(noise())
    Flicker(session, {2: 0x10})
    with pytest.raises(Difference) as found:
        save_first(context(session), 0, WORDS - 1)
    assert found.value.did == "VCC off; the chip is as it was"
    more: dict[str, Any] = found.value.more
    assert len(more["readings"]) == 2


def test_readings_that_cannot_be_kept_hide_nothing(state: Path) -> None:
    """A state folder that cannot be written: the bytes are told all the same, and that nothing was kept."""
    state.write_bytes(b"")  # a file where the folder would be
    session = FakeSession(noise())
    Flicker(session, {2: 0x10})
    error, more = failed(session, passes=2)
    assert more["unsteady_bytes"] == 1
    assert any("could not be kept" in fact for fact in error.facts)
