"""Records and saved dumps: whole files, found again."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from pulsewright.chip.load import load
from pulsewright.errors import ChipFault, FileMistake, UsageMistake
from pulsewright.image.load import load as load_image
from pulsewright.jobs.record import Record, find_record, read_record, record_paths, safe_name, save_dump, source_marks


@pytest.fixture(autouse=True)
def state(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A state folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    return tmp_path / "state"


def test_a_record_keeps_definition_result_and_notes() -> None:
    """The file holds format, digest, source marks, what the job gathered, and how it ended."""
    definition = load("27e512")
    record = Record("erase", definition)
    record.add("sequences", {"title": "erase the chip"})
    record.note("limits unknown")
    record.note("limits unknown")
    content = read_record(record.write("it went wrong", 4, ChipFault("it went wrong", wanted="FF", got="7F")))
    assert content["format"] == 1
    assert content["definition"] == {
        "name": "27e512",
        "file": definition.path,
        "digest": definition.digest,
        "sources": source_marks(definition),
    }
    assert content["sequences"] == [{"title": "erase the chip"}]
    assert content["notes"] == [*definition.notes, "limits unknown"]
    assert (content["result"], content["exit"]) == ("it went wrong", 4)
    assert content["error"] == {"error": "ChipFault", "what": "it went wrong", "wanted": "FF", "got": "7F"}


def test_source_marks_name_each_source_once() -> None:
    """The chip's own source comes first, `from memory` is among them."""
    definition = load("27e512")
    marks = source_marks(definition)
    assert marks[0] == definition.source
    assert marks.count("from memory") == 1


def test_records_are_listed_in_order_and_found_by_name() -> None:
    """Oldest first; by a beginning, by `last`, by a path; an ambiguous beginning is a mistake."""
    first, second = (Record(job, load("27e512")).write("done", 0) for job in ("read", "burn"))
    assert record_paths() == [first, second]
    assert find_record("last") == second
    assert find_record(first.name) == first
    assert find_record(str(second)) == second
    with pytest.raises(UsageMistake, match="2 records begin"):
        find_record("2")
    with pytest.raises(UsageMistake, match="no record"):
        find_record("nothing")


@pytest.mark.parametrize("text", ["", "[]", '{"format": 2}', "not JSON"])
def test_what_is_no_record_is_said(tmp_path: Path, text: str) -> None:
    """A file of another kind or format is a FileMistake, not a traceback."""
    path = tmp_path / "other.json"
    path.write_text(text)
    with pytest.raises(FileMistake):
        read_record(path)


def test_a_dump_is_named_by_chip_and_checksum(state: Path) -> None:
    """The CRC-32 of "123456789" is CBF43926 [CRC-32/ISO-HDLC of the catalogue]."""
    path = save_dump(load("27e512"), b"123456789", 0)
    assert path.parent == state / "saved"
    assert path.read_bytes() == b"123456789"
    assert path.name.startswith("27e512-")
    assert path.name.endswith("-CBF43926.bin")


def test_the_dump_of_a_part_lands_where_it_was(state: Path) -> None:
    """What begins above address 0 is kept with its addresses: burnt back, it lands in the same place."""
    path = save_dump(load("27e512"), b"123456789", 0x100)
    assert path.name.endswith("-CBF43926-from-100.hex")
    image = load_image(path)
    assert (image.first, image.last) == (0x100, 0x108)
    assert image.segments[0].data == b"123456789"


def test_a_chip_name_becomes_a_safe_file_name() -> None:
    """Slashes and dots of a name never leave the folder."""
    assert safe_name("../a b/27C256") == "___a_b_27C256"


def test_a_folder_that_cannot_be_made_is_a_file_mistake(state: Path) -> None:
    """A file in the folder's place is told by name."""
    state.write_text("in the way")
    with pytest.raises(FileMistake):
        Record("read", load("27e512")).write("done", 0)


def test_a_record_is_plain_json(tmp_path: Path) -> None:
    """Other programs can read it."""
    path = Record("read", load("27e512")).write("done", 0)
    assert json.loads(path.read_text("utf-8"))["job"] == "read"
