"""Intel HEX: worked records from outside, damaged ones with their exact error, and round trips."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.errors import ImageMistake
from pulsewright.image.intel_hex import parse_intel_hex, write_intel_hex
from pulsewright.image.memory import Image, Segment

BAD = Path(__file__).parent / "bad"
END = ":00000001FF\n"


def segments(text: str) -> dict[int, str]:
    """Start address and hex digits of each segment."""
    return {segment.start: segment.data.hex().upper() for segment in parse_intel_hex(text).segments}


def without_notes(path: Path) -> tuple[str, int, list[str]]:
    """The text of a damaged file, the number of its offending line, and the note beside it as fields."""
    lines, at, note = [], 0, ""
    for line in path.read_text("latin-1").split("\n"):
        if line.startswith("#"):
            continue
        text, mark, beside = line.partition("  <- ")
        lines.append(text)
        if mark:
            at, note = len(lines), beside
    return "\n".join(lines), at, [part.strip() for part in note.split(" | ")]


@pytest.mark.parametrize("path", sorted(BAD.glob("*.txt")), ids=lambda path: path.stem)
def test_each_damaged_file_gives_the_error_noted_in_it(path: Path) -> None:
    """Each kind of damage is one error with file, line, field, the value wanted and the value got."""
    text, line, (key, what, wanted, got) = without_notes(path)
    with pytest.raises(ImageMistake) as caught:
        parse_intel_hex(text, "chime.hex")
    error = caught.value
    assert error.where is not None
    assert (error.where.file, error.where.line, error.where.key) == ("chime.hex", line, key)
    assert (error.what, error.wanted, error.got) == (what, wanted, got)
    assert error.hint
    assert error.exit_code == 2


def test_there_is_a_damaged_file_for_every_kind() -> None:
    """The fixtures are found: fewer than the kinds of damage would mean that the test above saw none."""
    assert len(list(BAD.glob("*.txt"))) == 20


# Records from outside, with what they mean by the specification; sources beside them. The checksums were recomputed.
WORKED = {
    "Emerson PmT1/PmE1 manual 10002367-02, p. 8-24": (":04003000902BB4FD60\n", {0x30: "902BB4FD"}),
    "vendor online document on Intel HEX": (":0300300002337A1E\n", {0x30: "02337A"}),
    "Intel support article 000076770": (
        ":1000900089001C6B7EA7CA9200FE10D2AA00477D81\n:0B00A00080FA92006F3600C3A00076CB\n",
        {0x90: "89001C6B7EA7CA9200FE10D2AA00477D80FA92006F3600C3A00076"},
    ),
    "encyclopaedia example, from memory": (":0B0010006164647265737320676170A7\n", {0x10: b"address gap".hex().upper()}),
    "web note, type 02 with an address field that is not 0000": (
        ":02010002E0001B\n:04003000902BB4FD60\n",
        {0xE0030: "902BB4FD"},
    ),
    "encyclopaedia example of type 02, from memory": (
        ":020000021200EA\n:04003000902BB4FD60\n",
        {0x12030: "902BB4FD"},
    ),
    "encyclopaedia example of type 04, from memory": (
        ":02000004FFFFFC\n:04003000902BB4FD60\n",
        {0xFFFF0030: "902BB4FD"},
    ),
    "encyclopaedia examples of types 03 and 05, from memory": (
        ":0400000300003800C1\n:04000005000000CD2A\n:04003000902BB4FD60\n",
        {0x30: "902BB4FD"},
    ),
    "classic sample of 64 bytes, from memory": (
        (
            ":10010000214601360121470136007EFE09D2190140\n:100110002146017E17C20001FF5F16002148011928\n"
            ":10012000194E79234623965778239EDA3F01B2CAA7\n:100130003F0156702B5E712B722B732146013421C7\n"
        ),
        {
            0x100: "214601360121470136007EFE09D219012146017E17C20001FF5F160021480119"
            "194E79234623965778239EDA3F01B2CA3F0156702B5E712B722B732146013421"
        },
    ),
}


@pytest.mark.parametrize(("records", "wanted"), WORKED.values(), ids=WORKED.keys())
def test_worked_records_give_their_bytes(records: str, wanted: dict[int, str]) -> None:
    """Each published record that is right gives the bytes and addresses it stands for."""
    assert segments(records + END) == wanted


@pytest.mark.parametrize(
    "text",
    [
        ":04003000902BB4FD60\r\n:00000001FF\r\n",
        ":04003000902BB4FD60\r:00000001FF\r",
        ":04003000902BB4FD60\r\r\n:00000001FF\r\r\n",
        ":04003000902bb4fd60\n:00000001ff",
        "\n:04003000902BB4FD60\n\n  :00000001FF  \n\n\n",
        ":04003000902BB4FD60\n:00000001FF\n\x1a\x1a\x1a",
        ":04003000902BB4FD60\n:0000000000\n:00000001FF\n",
        ":04003000902BB4FD60\n:00003001CF\n",
    ],
    ids=[
        "crlf",
        "cr alone",
        "crcrlf",
        "lower case",
        "blank lines",
        "end-of-text padding",
        "an empty data record",
        "start address at the end",
    ],
)
def test_harmless_variants_are_taken(text: str) -> None:
    """Line ends, case, blank lines, padding and unused address fields do not matter."""
    assert segments(text) == {0x30: "902BB4FD"}


def test_a_type_02_offset_wraps_inside_64k() -> None:
    """With a segment base the byte after offset FFFF lands at offset 0000 of the same segment."""
    assert segments(":020000021000EC\n:04FFFE000102030AEF\n" + END) == {0x10000: "030A", 0x1FFFE: "0102"}


def test_a_type_04_offset_runs_on_past_64k() -> None:
    """With a linear base the byte after offset FFFF lands in the next 64K."""
    assert segments(":020000040001F9\n:04FFFE000102030AEF\n" + END) == {0x1FFFE: "0102030A"}


def test_a_type_04_address_wraps_at_4g() -> None:
    """The byte after address FFFFFFFF is the one at 0."""
    assert segments(":02000004FFFFFC\n:04FFFE000102030AEF\n" + END) == {0: "030A", 0xFFFFFFFE: "0102"}


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r", "\r\r\n"])
def test_lines_are_counted_as_an_editor_does(end: str) -> None:
    """Each kind of line's end is one end, blank lines count, and the fault's line is the one a person finds."""
    with pytest.raises(ImageMistake, match="checksum") as caught:
        parse_intel_hex(end.join([":04003000902BB4FD60", "", ":00000001FE", ""]), "chime.hex")
    assert str(caught.value.where) == "chime.hex:3 checksum"


def test_the_first_record_past_64k_is_named() -> None:
    """Of two, the one that stands first."""
    with pytest.raises(ImageMistake, match="past address FFFF") as caught:
        parse_intel_hex(":02FFFF000102FD\n:02FFFF000304F9\n" + END, "chime.hex")
    assert str(caught.value.where) == "chime.hex:1 address"


def test_a_base_of_0_may_change_its_kind() -> None:
    """As objcopy writes an image below and above 1M: 02 set to 0000 before the first 04, and so the other way."""
    below = ":020000021000EC\n:0100000001FE\n:020000020000FC\n:02000004001FDB\n:0100000002FD\n"
    assert segments(below + END) == {0x1_0000: "01", 0x1F_0000: "02"}
    above = ":02000004001FDB\n:0100000002FD\n:020000040000FA\n:020000021000EC\n:0100000001FE\n"
    assert segments(above + END) == {0x1_0000: "01", 0x1F_0000: "02"}


def test_a_record_past_64k_is_right_in_a_file_of_linear_bases() -> None:
    """As bincopy writes it: the record that crosses stands before the first base, which is a linear one."""
    assert segments(":03FFFE00010203FA\n:020000040001F9\n:0100010004FA\n" + END) == {0xFFFE: "01020304"}


def test_a_base_stays_in_force_until_the_next() -> None:
    """Every data record uses the last base above it."""
    text = ":020000040001F9\n:0100000001FE\n:0100100001EE\n:020000040002F8\n:0100000001FE\n" + END
    assert segments(text) == {0x10000: "01", 0x10010: "01", 0x20000: "01"}


@pytest.mark.parametrize("text", ["", "\n\n  \r\n", "\x1a"])
def test_an_empty_file_is_an_error(text: str) -> None:
    """A file with no record is refused as empty."""
    with pytest.raises(ImageMistake, match="empty"):
        parse_intel_hex(text, "chime.hex")


def test_each_byte_knows_its_line() -> None:
    """A byte's line is the line of the record that gave it, in whatever order the records stand."""
    image = parse_intel_hex(":0100400001BE\n:04003000902BB4FD60\n" + END, "chime.hex")
    assert [str(image.where(at)) for at in (0x30, 0x33, 0x40)] == ["chime.hex:2", "chime.hex:2", "chime.hex:1"]


@given(st.data())
def test_one_changed_digit_never_passes(data: st.DataObject) -> None:
    """Any single digit of a record changed to another is an error, never another image."""
    lines = write_intel_hex(Image((Segment(0x1F0, bytes(range(40))), Segment(0x3_0000, b"\x12\x34")))).split("\n")
    number = data.draw(st.integers(0, len(lines) - 2))
    at = data.draw(st.integers(1, len(lines[number]) - 1))
    digit = data.draw(st.sampled_from([d for d in "0123456789ABCDEF" if d != lines[number][at]]))
    lines[number] = lines[number][:at] + digit + lines[number][at + 1 :]
    with pytest.raises(ImageMistake):
        parse_intel_hex("\n".join(lines))


@st.composite
def images(draw: st.DrawFn) -> Image:
    """Images of a few segments, near 64K borders as often as not."""
    at = draw(st.sampled_from([0, 0x30, 0xFFF0, 0x1_0000, 0xFFFF_F000]))
    found = []
    for data in draw(st.lists(st.binary(min_size=1, max_size=60), min_size=1, max_size=5)):
        found.append(Segment(at, data))
        at += len(data) + draw(st.integers(1, 40))
    return Image(tuple(found))


@given(images())
def test_what_is_written_reads_back(image: Image) -> None:
    """An image written and read is the same, gaps and addresses past 64K included."""
    assert parse_intel_hex(write_intel_hex(image)) == image


def test_reading_does_not_load_the_library() -> None:
    """Only writing needs the intelhex library, so starting up and reading do without it."""
    code = (
        "import sys; from pulsewright.image import load, checksum, compare; "
        f"load.parse_intel_hex({':0100400001BE' + chr(10) + END!r}); "
        "print(sorted({'intelhex', 'crcmod'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout == "[]\n"
