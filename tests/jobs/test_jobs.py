"""The jobs' own logic, on a fake session: what is done in which order, what is refused, what is told."""

from __future__ import annotations

import dataclasses
from pathlib import Path

import pytest

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from pulsewright.errors import (
    CannotMake,
    ChipFault,
    ConsentNeeded,
    Difference,
    FileMistake,
    Interrupted,
    ProofRefused,
    UsageMistake,
    VouchNeeded,
)
from pulsewright.image.memory import Fitted, fit, image_of
from pulsewright.jobs import context as context_module
from pulsewright.jobs.blank import blank
from pulsewright.jobs.burn import burn
from pulsewright.jobs.erase import erase
from pulsewright.jobs.identify import identify
from pulsewright.jobs.read import read
from pulsewright.jobs.record import read_record, record_paths
from pulsewright.jobs.verify import verify
from pulsewright.link.results import RunResult
from pulsewright.sequence.types import Finding, Proof, Sequence
from pulsewright.wire.tables import Identity
from tests.jobs.fake import WORDS, FakeSession, context, noise


@pytest.fixture(autouse=True)
def state(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A state folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    return tmp_path / "state"


def image(data: bytes, start: int = 0) -> Fitted:
    """An image on the chip."""
    return fit(image_of(data, start=start), WORDS, name="27e512")


def saved(state: Path) -> list[Path]:
    """The dumps that were kept."""
    return sorted((state / "saved").glob("*")) if (state / "saved").exists() else []


def test_erase_saves_in_two_passes_first(state: Path) -> None:
    """Read, read, erase; the dump holds what the chip held."""
    session = FakeSession(noise(), erase_pulses=3)
    before = bytes(session.cells)
    result = erase(context(session))
    assert session.kinds == ["read", "read", "erase"]
    assert result.lines[0] == "erased in 3 of 20 pulses; 65536 words read FF at VCC 3.75 V"
    assert [path.read_bytes() for path in saved(state)] == [before]


def test_no_save_keeps_no_file_but_still_looks_twice(state: Path) -> None:
    """Without a file the two passes stay."""
    session = FakeSession(noise())
    erase(context(session, save=False))
    assert session.kinds == ["read", "read", "erase"]
    assert saved(state) == []


def test_a_chip_that_reads_unsteadily_is_not_erased() -> None:
    """When the two passes of the saving disagree, nothing changes the chip."""
    session = FakeSession(noise())

    def fade(sequence: Sequence, turn: int) -> RunResult | None:
        session.cells[5] ^= turn
        return None

    session.before = fade
    with pytest.raises(Difference):
        erase(context(session))
    assert "erase" not in session.kinds


def test_a_part_of_a_chip_cannot_be_erased() -> None:
    """A chip that erases as a whole refuses a range."""
    with pytest.raises(UsageMistake, match="erases as a whole"):
        erase(context(FakeSession(), first=0, last=255))


def test_erase_of_a_uv_part_explains_lamp_and_dose() -> None:
    """Exit 2, with the dose of the data sheets: 15 W·s/cm² at 253.7 nm [S8, S11, S13]."""
    uv = dataclasses.replace(load("27e512"), erase=None, erase_kind="uv")
    with pytest.raises(UsageMistake) as refused:
        erase(context(FakeSession(), definition=uv))
    assert "15 W·s/cm² at 253.7 nm" in "\n".join(refused.value.lines())
    with pytest.raises(UsageMistake):
        burn(context(FakeSession(), definition=uv, erase=True), image(b"\x00"))


def test_burn_on_a_blank_chip_writes_only_what_differs(state: Path) -> None:
    """Words of the image that are FF already are left; each other word is written once; then the whole is verified."""
    session = FakeSession()
    data = bytes([0x12, 0xFF, 0x34]) * 100
    result = burn(context(session), image(data, 0x40))
    assert session.kinds == ["read", "read", "burn", "read"]
    assert session.written == [0x40 + at for at, word in enumerate(data) if word != 0xFF]
    assert bytes(session.cells[0x40 : 0x40 + 300]) == data
    assert result.facts["burnt_words"] == 200
    assert any("words verified at VCC 5.0 V" in line for line in result.lines)
    assert len(saved(state)) == 1


def test_burn_again_skips_everything() -> None:
    """The second burn of an image writes nothing, and still verifies."""
    session = FakeSession()
    burn(context(session), image(b"\x01\x02\x03"))
    session.kinds.clear()
    result = burn(context(session), image(b"\x01\x02\x03"))
    assert session.kinds == ["read", "read", "read"]
    assert result.lines[0] == "nothing to burn: 3 words right already"


def test_a_burn_that_needs_an_erase_writes_nothing() -> None:
    """Without --erase: exit 1, how many words and which is the first."""
    session = FakeSession(bytearray(WORDS))
    session.cells[0x10:] = b"\xff" * (WORDS - 0x10)
    with pytest.raises(Difference) as found:
        burn(context(session), image(b"\x00" * 8 + b"\x01" * 100))
    assert found.value.exit_code == 1
    assert "8 words with a 0 that must become a 1" in found.value.what
    assert "0008, the first such word" in found.value.wanted
    assert "nothing was written" in found.value.did
    assert session.written == []
    assert session.kinds == ["read", "read"]


def test_a_burn_with_erase_erases_once_and_says_what_was_lost() -> None:
    """Look, look, erase, burn, verify; words outside the image that the erase cleared are counted."""
    session = FakeSession(bytearray(WORDS), erase_pulses=2)
    result = burn(context(session, erase=True), image(b"\x01" * 100))
    assert session.kinds == ["read", "read", "erase", "burn", "read"]
    assert result.lines[0].startswith("100 words burnt")
    assert result.lines[2].startswith("erased in 2 of 20 pulses")
    assert result.facts["cleared_words"] == WORDS - 100
    assert f"{WORDS - 100} words that the image does not give" in result.lines[3]


def test_an_erase_that_is_not_needed_is_not_made() -> None:
    """--erase erases only when a word needs a 0 to become a 1."""
    session = FakeSession()
    result = burn(context(session, erase=True), image(b"\x01"))
    assert "erase" not in session.kinds
    assert "no erase: no word needs a 0 to become a 1" in result.lines


def test_erase_with_a_range_saves_the_whole_chip(state: Path) -> None:
    """What the erase will clear is saved, not only the range that is burnt."""
    session = FakeSession()
    session.cells[:256] = noise()[:256]
    before = bytes(session.cells)
    fitted = fit(image_of(b"\xff" * 256), WORDS, first=0, last=255)
    burn(context(session, erase=True, first=0, last=255), fitted)
    assert [path.read_bytes() for path in saved(state)] == [before]


def test_a_word_that_fails_tells_how_far_it_came() -> None:
    """Exit 4: the word, wanted and got; how many words were burnt; that it can be run again."""
    session = FakeSession(stuck={0x120: 0x10})
    with pytest.raises(ChipFault) as failed:
        burn(context(session), image(bytes(0x200)))
    assert "word 0120" in failed.value.what
    assert (failed.value.wanted, failed.value.got) == ("00", "10")
    assert "at least 288 of 512 words burnt before that" in failed.value.facts
    assert "again" in failed.value.hint


def test_a_job_that_fails_names_the_dump(state: Path) -> None:
    """Whoever is left with a half-burnt chip is told in the error itself where its old contents are."""
    session = FakeSession(stuck={0x120: 0x10})
    with pytest.raises(ChipFault) as failed:
        burn(context(session), image(bytes(0x200)))
    (path,) = (state / "saved").iterdir()
    assert f"what the chip held before is saved in {path}" in failed.value.facts
    with pytest.raises(ChipFault) as failed:
        burn(context(session, save=False), image(bytes(0x200)))
    assert not any("saved in" in fact for fact in failed.value.facts)


def test_a_margin_that_fails_after_a_burn_is_the_chips_fault() -> None:
    """A word that read back while burning but differs in the verify pass: exit 4, with the direction's verdict."""
    session = FakeSession()

    def fade(sequence: Sequence, turn: int) -> RunResult | None:
        if sequence.kind == "read" and turn > 3:
            session.cells[2] |= 1
        return None

    session.before = fade
    with pytest.raises(ChipFault) as failed:
        burn(context(session), image(bytes(16)))
    assert any("high VCC" in fact for fact in failed.value.facts)


def test_verify_tells_classes_of_mismatch() -> None:
    """Missing burn and needed erase are counted apart, with addresses as on the chip."""
    session = FakeSession()
    session.cells[0x101] = 0x00
    with pytest.raises(Difference) as found:
        verify(
            context(session, first=0x100, last=0x101),
            fit(image_of(b"\x0f\x0f"), WORDS, origin=-0x100, first=0x100, last=0x101),
        )
    facts = "\n".join(found.value.facts)
    assert "a burn is missing (chip 1, image 0) in 1" in facts
    assert "an erase is needed (chip 0, image 1) in 1" in facts
    assert "0101: wanted 0F, got 00" in facts
    assert "high VCC" not in facts  # another image says nothing of margins


def test_verify_leaves_gaps_alone() -> None:
    """Bytes that the image does not give are not compared."""
    session = FakeSession(noise())
    fitted = fit(image_of(bytes(session.cells[0x200:0x210]), start=0x200), WORDS)
    assert verify(context(session), fitted).lines == ("16 words verified at VCC 5.0 V (±0.034 V)",)


def test_without_a_step_inside_the_window_there_is_no_verify() -> None:
    """A rig that cannot make the read VCC within its error cannot verify: exit 5, nothing burnt."""
    definition = load("27e512")
    narrow = dataclasses.replace(definition.supplies["VCC.read"], min_mv=4990, max_mv=5010)
    definition = dataclasses.replace(definition, supplies={**definition.supplies, "VCC.read": narrow})
    session = FakeSession()
    with pytest.raises(CannotMake):
        burn(context(session, definition=definition), image(b"\x00"))
    assert session.kinds == []


def test_a_refused_proof_sends_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """Exit 3, every finding with the definition's place, and the session is not asked."""
    finding = Finding("H7", 399, "a pulse without a window", "95 us", "1 us")
    monkeypatch.setattr(context_module, "prove", lambda *_: Proof((finding,), 10, 10))
    session = FakeSession()
    with pytest.raises(ProofRefused) as refused:
        read(context(session))
    assert session.kinds == []
    assert refused.value.exit_code == 3
    assert "H7 at 399: a pulse without a window" in refused.value.facts[0]
    assert "27e512.toml" in refused.value.facts[0]


def test_a_burn_whose_erase_is_not_proven_touches_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """Everything a burn may come to is proven before the first look."""
    finding = Finding("H3", 400, "too high")

    def judge(code: bytes, permit: object, *_: object) -> Proof:
        return Proof((finding,) if len(code) > 550 else (), 1, 1)

    monkeypatch.setattr(context_module, "prove", judge)
    session = FakeSession()
    with pytest.raises(ProofRefused, match="erase"):
        burn(context(session, erase=True), image(b"\x00"))
    assert session.kinds == []


def test_consent_comes_before_the_first_sequence() -> None:
    """H10: behind a port, without consent, the session is not asked at all."""
    session = FakeSession()
    for job in (identify, read, blank, erase):
        with pytest.raises(ConsentNeeded):
            job(context(session, in_process=False))
    with pytest.raises(ConsentNeeded):
        burn(context(session, in_process=False), image(b"\x00"))
    assert session.kinds == []


def test_consent_by_hash_lets_the_job_run() -> None:
    """H10: the hash of this definition agrees, and the record says how."""
    identify(context(FakeSession(), in_process=False, accepted=load("27e512").digest))
    assert read_record(record_paths()[-1])["consent"] == "given by --accept-voltages"


def test_a_word_over_an_id_is_refused_by_every_job() -> None:
    """H9: --vouch on a part with an ID is a mistake before anything is sent."""
    session = FakeSession()
    for job in (identify, read, blank, erase):
        with pytest.raises(UsageMistake, match="--vouch"):
            job(context(session, vouch="27E512"))
    assert session.kinds == []


def test_an_interrupt_between_sequences_stops_the_job() -> None:
    """Exit 130, and the next sequence is not run."""
    session = FakeSession()
    ctx = context(session, passes=3)
    ctx.interrupted = lambda: len(session.kinds) // 2
    with pytest.raises(Interrupted) as stopped:
        read(ctx)
    assert stopped.value.exit_code == 130
    assert session.kinds == ["read", "read"]


def test_every_job_leaves_one_record() -> None:
    """Done or not, a record with exit, result, sequences and rig."""
    session = FakeSession(noise())
    read(context(session))
    with pytest.raises(Difference):
        blank(context(session))
    done, failed = (read_record(path) for path in record_paths())
    assert (done["job"], done["exit"], failed["job"], failed["exit"]) == ("read", 0, "blank-check", 1)
    assert failed["error"]["error"] == "Difference"  # type: ignore[index]  # JSON values
    sequences = done["sequences"]
    assert isinstance(sequences, list)
    assert sequences[0]["rig_us"] == 1234
    assert done["rig"]["fingerprint"] == "A4572FA2"  # type: ignore[index]  # JSON values
    assert any("limits of VCC.read" in note for note in done["notes"])  # type: ignore[attr-defined]  # JSON values


def test_a_range_outside_the_chip_is_a_mistake() -> None:
    """Before anything is sent."""
    session = FakeSession()
    with pytest.raises(UsageMistake, match="range"):
        read(context(session, first=0, last=WORDS))
    assert session.kinds == []


def test_a_record_that_cannot_be_kept_does_not_hide_the_job(state: Path) -> None:
    """With no place for records the job's own result stands, done or not, and says that no record was kept."""
    state.write_text("a file where the folder should be")
    result = identify(context(FakeSession()))
    assert result.lines[0].startswith("seated")
    assert "no record could be kept" in result.lines[-1]
    session = FakeSession(noise())
    with pytest.raises(Difference) as found:
        blank(context(session))
    assert "no record could be kept" in found.value.facts[-1]


def test_a_dump_that_cannot_be_saved_stops_the_erase(state: Path) -> None:
    """Nothing is lost where nothing could be kept."""
    state.write_text("a file where the folder should be")
    session = FakeSession(noise())
    with pytest.raises(FileMistake):
        erase(context(session))
    assert "erase" not in session.kinds


def nameless() -> Definition:
    """The part as if nothing but its print said what it is."""
    return dataclasses.replace(load("27e512"), identify="none", identify_mode="", makers=(), row=None)


def test_a_raised_level_without_an_id_wants_the_word_before_anything_is_sent() -> None:
    """H9: erase and burn of a part without ID are refused without --vouch; reading it is not."""
    session = FakeSession()
    with pytest.raises(VouchNeeded):
        erase(context(session, definition=nameless()))
    with pytest.raises(VouchNeeded):
        burn(context(session, definition=nameless()), image(b"\x00"))
    assert session.kinds == []


def test_the_word_goes_into_the_permit_and_the_record() -> None:
    """H9: with --vouch every raising sequence goes out under `vouched none`, and the record keeps the words."""
    session = FakeSession(noise())
    erase(context(session, definition=nameless(), vouch="27E512 on the lid"))
    assert dict(zip(session.kinds, session.identities, strict=True)) == {
        "read": Identity.NONE,
        "erase": Identity.VOUCHED_NONE,
    }
    assert read_record(record_paths()[-1])["vouch"] == "27E512 on the lid"
