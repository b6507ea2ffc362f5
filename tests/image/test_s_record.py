"""S-records: the published examples, each fault by its line, and what is written reads back."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.errors import ImageMistake
from pulsewright.image.memory import Image, Segment
from pulsewright.image.s_record import parse_s_records, write_s_records
from tests.image.sparse import sparse_images

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
        "S11F00007C0802A6900100049421FFF07C6C1B787C8C23783C6000003863000026\nS1090100010203040506E0\n"
        "S10D1000736F6D6520646174610074\nS5030003F9\nS9030000FC",
        {
            0: "7C0802A6900100049421FFF07C6C1B787C8C23783C60000038630000",
            0x100: "010203040506",
            0x1000: b"some data\0".hex(),
        },
    ),  # the first record, S5 and S9 from memory; the two that make the count 3 [T7] [T8]
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
    (f"{FIRST}\nS\xb2090100010203040506E0\n{END}", 2, "not a record", "S and a digit"),
    (f"{FIRST}\nS\n{END}", 2, "not a record", "S and a digit"),
    (f"{FIRST}\nS1\n{END}", 2, "too short", "03"),
    (f"{FIRST}\n:00000001FF\n{END}", 2, "not a record", "S and a digit"),
    ("\n\x1a", 0, "empty", "begin with S"),
    (FIRST, 1, "end record is missing", "S9"),
    ("S20801000001020304EC", 1, "end record is missing", "S8"),
    ("S309CAFE01100102030413", 1, "end record is missing", "S7"),
    (f"{FIRST}\n{END}\n{FIRST}", 3, "after the end record", ""),
    (f"{FIRST}\n{FIRST}\n{END}", 2, "given twice", "once"),
    (f"{FIRST}\nS5030002FA\n{END}", 2, "counts another number", "1"),
    (f"{FIRST}\nS604000002F9\n{END}", 2, "counts another number", "1"),
    (f"{FIRST}\nS504000101F9\n{END}", 2, "counts another number", "1"),
    (f"{FIRST}\nS5030001FB\nS1042000AA31\n{END}", 3, "after the count record of line 2", "behind all"),
    (f"{FIRST}\nS5030001FB\nS0030000FC\nS1042000AA31\nS5030001FB\n{END}", 4, "after the count record of line 2", ""),
    (f"{END}", 1, "holds no data", ""),
    ("S0030000FC\nS5030000FC\n", 2, "holds no data", ""),
    ("S307FFFFFFFF0102F9\nS70500000000FA", 1, "runs past address FFFFFFFF", "at most 1"),
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


@pytest.mark.parametrize(
    "text",
    [
        f"{FIRST}\r\n\r\n{END}\r\n\x1a",
        f"  {FIRST.lower()}\n{END.lower()}\n",
        f"{FIRST}\r{END}\r",
        f"{FIRST}\nS604000001FA\n{END}",
        f"{FIRST}\nS5030001FB\nS5030001FB\n{END}",
        f"{FIRST}\nS1030200FA\nS5030002FA\n{END}",
        f"S001FE\n{FIRST}\n{END}",
        f"S00256A7\n{FIRST}\n{END}",
    ],
    ids=[
        "crlf",
        "lower case",
        "cr alone",
        "a count of three bytes",
        "the count twice",
        "an empty data record counts",
        "no header text",
        "a header of one letter",
    ],
)
def test_harmless_variants_are_taken(text: str) -> None:
    """Other line ends, blank lines, small letters, end-of-text padding, either count."""
    assert parse_s_records(text).segments == (Segment(0x100, bytes(range(1, 7))),)


def test_a_count_at_the_end_shows_that_nothing_was_cut() -> None:
    """Some tools write no end record: the right count in its place is enough, and a wrong one is told."""
    assert parse_s_records(f"{FIRST}\nS5030001FB\n").size == 6
    with pytest.raises(ImageMistake, match="counts another number"):
        parse_s_records(f"{FIRST}\nS5030002FA\n")


@pytest.mark.parametrize("end", ["S9030000FC", "S804000000FB", "S70500000000FA", "S9031234B6"])
def test_address_sizes_may_be_mixed(end: str) -> None:
    """Every address is absolute, whatever its size, and any end ends the file, with a start address or without."""
    image = parse_s_records(f"{FIRST}\nS205012000AA2F\nS306CAFE0110AB75\n{end}")
    assert [(one.start, one.data.hex()) for one in image.segments] == [
        (0x100, "010203040506"), (0x1_2000, "aa"), (0xCAFE_0110, "ab"),
    ]  # fmt: skip


@pytest.mark.parametrize(("record", "first"), [("S105FFFF0102F9", 0xFFFF), ("S206FFFFFF0102F9", 0xFF_FFFF)])
def test_a_record_runs_on_past_the_reach_of_its_address(record: str, first: int) -> None:
    """The bytes behind the last short address follow it, as srec_cat means it; nothing wraps."""
    assert parse_s_records(f"{record}\n{END}").segments == (Segment(first, b"\x01\x02"),)


def test_an_overlap_of_sizes_is_found() -> None:
    """An S1 and an S3 record that reach one address are told with both lines and both bytes."""
    with pytest.raises(ImageMistake, match="given twice, on lines 1 and 2") as refused:
        parse_s_records(f"{FIRST}\nS30600000105AA49\n{END}")
    assert refused.value.got == "06 on line 1, AA on line 2"


def test_each_byte_knows_its_line() -> None:
    """A byte outside the chip is later named with the line that gave it."""
    image = parse_s_records(f"{FIRST}\nS1042000AA31\n{END}", "bell.s19")
    assert str(image.where(0x2000)) == "bell.s19:2"


@given(sparse_images())
def test_what_is_written_reads_back(image: Image) -> None:
    """Any image, at 16-, 24- and 32-bit addresses."""
    assert parse_s_records(write_s_records(image)) == image


@pytest.mark.parametrize(("records", "count"), [(0xFFFF, "S503FFFFFE"), (0x1_0000, "S604010000FA")])
def test_a_long_file_has_a_longer_count(records: int, count: str) -> None:
    """S5 counts up to 65535 data records, S6 from there on; both are checked when read."""
    image = Image((Segment(0, bytes(16 * records)),))
    text = write_s_records(image)
    assert text.splitlines()[-2] == count
    assert parse_s_records(text) == image


def test_what_cannot_be_written_is_the_callers_mistake() -> None:
    """Past 4G no address reaches; the last byte below it is written."""
    assert parse_s_records(write_s_records(Image((Segment(0xFFFF_FFFF, b"\x01"),)))).first == 0xFFFF_FFFF
    with pytest.raises(ValueError, match="FFFFFFFF"):
        write_s_records(Image((Segment(0xFFFF_FFFF, b"\x01\x02"),)))


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
