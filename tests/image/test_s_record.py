"""S-records: the published examples, each fault by its line, and what is written reads back."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.errors import ImageMistake
from pulsewright.image.memory import Image, Segment
from pulsewright.image.s_record import parse_s_records, write_s_records

# Records of outside-checks.md section 2, with the marks of their sources.
GOOD = [
    ("S0030000FC\nS1090100010203040506E0\nS9030000FC", {0x100: "010203040506"}),  # [T7]
    ("S10D1000736F6D6520646174610074\nS9030000FC", {0x1000: b"some data\0".hex()}),  # [T8]
    (
        "S21D0100006461746120617420612068696768657220616464726573730034\nS804000000FB",
        {0x1_0000: b"data at a higher address\0".hex()},
    ),  # [T8]
    (
        "S00C000054455354312E4845586F\nS315CAFE0110000102030405060708090A0B0C0D0E0F99\n"
        "S315CAFE0150FFFFFFFFFFFFFFFFFFFFFFFFFFFFFFFFE1\nS70500000000FA",
        {0xCAFE0110: bytes(range(16)).hex(), 0xCAFE0150: "ff" * 16},
    ),  # [T10]
    ("S008763330627567736D\nS1090100010203040506E0\nS9030000FC", {0x100: "010203040506"}),  # [T4]: S0 without address
    (
        "S11F00007C0802A6900100049421FFF07C6C1B787C8C23783C6000003863000026\nS5030001FB\nS9030000FC",
        {0: "7C0802A6900100049421FFF07C6C1B787C8C23783C60000038630000"},
    ),  # from memory
]


@pytest.mark.parametrize(("text", "wanted"), GOOD)
def test_published_records_give_their_bytes(text: str, wanted: dict[int, str]) -> None:
    """Each published record, with an end record behind it, gives its bytes at its address."""
    image = parse_s_records(text)
    assert {one.start: one.data.hex() for one in image.segments} == {at: data.lower() for at, data in wanted.items()}


FIRST, END = "S1090100010203040506E0", "S9030000FC"
BAD = [
    (f"{FIRST[:-2]}E1\n{END}", 1, "checksum", "E0"),
    (f"{FIRST}\nS10A0100010203040506DF\n{END}", 2, "count and its digits", "10 bytes"),
    (f"{FIRST}\nS1090100010203040506E\n{END}", 2, "odd number", ""),
    (f"{FIRST}\nS10901000102030405G6E0\n{END}", 2, "no hex digit", ""),
    (f"{FIRST}\nS10201FC\n{END}", 2, "too short", ""),
    (f"{FIRST}\nS40301000000\n{END}", 2, "reserved", ""),
    (f"{FIRST}\nhello\n{END}", 2, "not a record", ""),
    (FIRST, 1, "end record is missing", "S9"),
    (f"{FIRST}\n{END}\n{FIRST}", 3, "after the end record", ""),
    (f"{FIRST}\n{FIRST}\n{END}", 2, "given twice", "once"),
    (f"{FIRST}\nS5030002FA\n{END}", 2, "counts another number", "1"),
    (f"{END}", 1, "holds no data", ""),
    (f"S104FFFE00FE\nS105FFFF0102F9\n{END}", 2, "runs past address FFFF", "at most 1"),
    (f"{FIRST}\nS9040000AA51", 2, "has data", ""),
]


@pytest.mark.parametrize(("text", "line", "what", "wanted"), BAD)
def test_each_fault_is_told_with_its_line(text: str, line: int, what: str, wanted: str) -> None:
    """What is wrong, on which line, what would be right, and something to try."""
    with pytest.raises(ImageMistake) as refused:
        parse_s_records(text, "bell.s19")
    error = refused.value
    assert what in error.what
    assert error.where is not None
    assert (error.where.file, error.where.line) == ("bell.s19", line)
    assert wanted in error.wanted
    assert error.hint


@pytest.mark.parametrize("text", [f"{FIRST}\r\n\r\n{END}\r\n\x1a", f"  {FIRST.lower()}\n{END.lower()}\n"])
def test_harmless_variants_are_taken(text: str) -> None:
    """Other line ends, blank lines, small letters, end-of-text padding."""
    assert parse_s_records(text).segments == (Segment(0x100, bytes(range(1, 7))),)


def test_a_count_at_the_end_shows_that_nothing_was_cut() -> None:
    """Some tools write no end record: the right count in its place is enough, and a wrong one is told."""
    assert parse_s_records(f"{FIRST}\nS5030001FB\n").size == 6
    with pytest.raises(ImageMistake, match="end record is missing"):
        parse_s_records(f"{FIRST}\nS5030001FB\nS1042000AA31\n")


def test_each_byte_knows_its_line() -> None:
    """A byte outside the chip is later named with the line that gave it."""
    image = parse_s_records(f"{FIRST}\nS1042000AA31\n{END}", "bell.s19")
    assert str(image.where(0x2000)) == "bell.s19:2"


@st.composite
def images(draw: st.DrawFn) -> Image:
    """Sparse images at addresses of any length."""
    top = draw(st.sampled_from([0xFF00, 0xFF_FF00, 0xFFFF_FF00]))
    starts = draw(st.lists(st.integers(0, top), min_size=1, max_size=4, unique=True))
    segments: list[Segment] = []
    for start in sorted(starts):
        if not segments or start > segments[-1].end:
            segments.append(Segment(start, draw(st.binary(min_size=1, max_size=60))))
    return Image(tuple(segments))


@given(images())
def test_what_is_written_reads_back(image: Image) -> None:
    """Any image, at 16-, 24- and 32-bit addresses."""
    assert parse_s_records(write_s_records(image)) == image


@given(st.data())
def test_one_changed_digit_never_passes(data: st.DataObject) -> None:
    """Length, checksum or mark finds any single changed digit of a data record."""
    text = write_s_records(Image((Segment(0x1234, data.draw(st.binary(min_size=1, max_size=20))),)))
    lines = text.splitlines()
    at = data.draw(st.integers(2, len(lines[1]) - 1))
    other = data.draw(st.sampled_from([digit for digit in "0123456789ABCDEF" if digit != lines[1][at]]))
    lines[1] = lines[1][:at] + other + lines[1][at + 1 :]
    with pytest.raises(ImageMistake):
        parse_s_records("\n".join(lines))
