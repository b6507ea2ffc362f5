"""The format of an image file is told from its content, so that a damaged HEX file is never burnt as raw bytes."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.errors import FileMistake, ImageMistake, UsageMistake
from pulsewright.image.intel_hex import write_intel_hex
from pulsewright.image.load import INTEL_HEX, RAW, S_RECORD, load, save, tell_format
from pulsewright.image.memory import Segment, image_of
from pulsewright.image.several import load_files

RECORDS = b":04003000902BB4FD60\n:00000001FF\n"


@pytest.mark.parametrize(
    ("content", "name", "wanted"),
    [
        (RECORDS, "a.bin", INTEL_HEX),
        (b" \r\n" + RECORDS, "a", INTEL_HEX),
        (b"\xef\xbb\xbf" + RECORDS, "a.txt", INTEL_HEX),
        (b":0400\xb030009", "a.hex", INTEL_HEX),
        (b":04zz3000902BB4FD60\n", "a.bin", INTEL_HEX),
        (b":04\xb03000902BB4FD60\n" + RECORDS * 3, "a.bin", INTEL_HEX),
        (b"04003000902BB4FD60\n", "a.HEX", INTEL_HEX),
        (b":\x00\x01\x02", "a.bin", RAW),
        (b"\x3a0400\xff\x00", "a.bin", RAW),
        (b"\x55\xaa\x01", "a.hex", RAW),
        (b"\x00", "a.bin", RAW),
        (b"S0030000FC\r\nS1090100010203040506E0\r\nS9030000FC\r\n", "a.bin", S_RECORD),
        (b"S1090100010203zz0506E0\nS9030000FC\n", "a.srec", S_RECORD),
        (b"S\xb2090100010203zz0506E0\nS9030000FC\n", "a.srec", S_RECORD),
        (b"S1 is no record", "a.mot", S_RECORD),
        (b"1090100010203040506E0\n", "a.S19", S_RECORD),
        (b"\x53\x31\x00\x01\xff\xfe", "a.bin", RAW),
        (b"S1 is a patch", "a.bin", RAW),
        (b"U" * 4096, "a.bin", RAW),
        (b"U3" * 4096, "a.bin", RAW),
        (b"\xff" * 4096, "a.bin", RAW),
        (b"\xff\xfe" * 4096, "a.bin", RAW),
        (b"CHIME CONTROLLER V2\x00\x3e\x01", "a.bin", RAW),
    ],
)
def test_the_content_tells_the_format(content: bytes, name: str, wanted: str) -> None:
    """Records are HEX whatever the name; the name decides only about text that would be a damaged HEX file."""
    assert tell_format(content, name) == wanted


@pytest.mark.parametrize(
    ("content", "what"),
    [
        (b"04003000902BB4FD60\n", "readable text"),
        (b"S1 is not a record\n", "readable text"),
        (b"S1 is not a record", "readable text"),
        (b"[chip]\nname = 'x'\n", "readable text"),
        (b"a = 1\rb = 2\r", "readable text"),
        (b"[chip]\r\nname = 'x'\r\n\x1a\x1a", "readable text"),
        (b'{"format": 1, "chip": "27e512"}', "readable text"),
        (b"0000 3E 01\tLD A,1\n\x0c0002 C9\tRET\n", "readable text"),
        ("\u00fc\n".encode(), "readable text"),
        ("\u0437\u0432\u043e\u043d = 3\n".encode(), "readable text"),
        ("die Gr\u00f6\u00dfe der Glocke\n".encode("latin-1"), "readable text"),
        (b"\xef\xbb\xbfname = 1\n", "readable text"),
        (RECORDS.decode().encode("utf-16"), "text in UTF-16"),
        (b"\x7fELF\x01\x01\x01" + bytes(64), "an ELF object file"),
        (b"PK\x03\x04\x14" + bytes(64), "a ZIP archive"),
        (b"\x1f\x8b\x08" + bytes(64), "a gzip archive"),
    ],
)
def test_what_is_no_image_is_not_burnt_as_its_bytes(content: bytes, what: str, tmp_path: Path) -> None:
    """Text that is no records, object files and archives are refused, and `raw:` takes them all the same."""
    with pytest.raises(ImageMistake, match=what) as refused:
        tell_format(content, "a.bin")
    assert "raw:a.bin" in refused.value.hint
    (tmp_path / "a.txt").write_bytes(content)
    image, (file,) = load_files([f"raw:{tmp_path / 'a.txt'}"])
    assert (image.segments, file.format) == ((Segment(0, content),), RAW)


def test_a_hex_file_loads(tmp_path: Path) -> None:
    """A HEX file gives its bytes at their addresses, and its name."""
    (tmp_path / "a.hex").write_bytes(b"\xef\xbb\xbf" + RECORDS)
    image = load(tmp_path / "a.hex")
    assert image.segments == (Segment(0x30, bytes.fromhex("902BB4FD")),)
    assert str(image.where(0x31)) == f"{tmp_path / 'a.hex'}:1"


def test_a_raw_file_loads_from_address_0(tmp_path: Path) -> None:
    """A raw file gives its bytes from address 0, every value kept."""
    (tmp_path / "a.bin").write_bytes(bytes(range(256)))
    assert load(str(tmp_path / "a.bin")).segments == (Segment(0, bytes(range(256))),)


def test_a_named_format_wins(tmp_path: Path) -> None:
    """A format the user names is not doubted."""
    (tmp_path / "a.hex").write_bytes(RECORDS)
    assert load(tmp_path / "a.hex", format=RAW).segments == (Segment(0, RECORDS),)
    with pytest.raises(UsageMistake, match="not an image format"):
        load(tmp_path / "a.hex", format="hex")


@pytest.mark.parametrize("name", ["a.hex", "a.bin"])
@pytest.mark.parametrize("content", [b"", b"\n\r\n ", b"\xef\xbb\xbf"])
def test_an_empty_file_is_an_error(tmp_path: Path, name: str, content: bytes) -> None:
    """An empty file is refused by that name, in either format."""
    (tmp_path / name).write_bytes(content)
    with pytest.raises(ImageMistake, match="image file is empty") as refused:
        load(tmp_path / name)
    assert refused.value.hint


def test_blanks_are_bytes_for_who_insists(tmp_path: Path) -> None:
    """A chip full of 20 or 0A can be burnt, by raw:FILE, as the refusal says; a file of no bytes cannot."""
    (tmp_path / "a.bin").write_bytes(b" \n" * 8)
    with pytest.raises(ImageMistake, match="empty") as refused:
        load(tmp_path / "a.bin")
    assert f"raw:{tmp_path / 'a.bin'}" in refused.value.hint
    assert load_files([f"raw:{tmp_path / 'a.bin'}"])[0].segments == (Segment(0, b" \n" * 8),)
    (tmp_path / "a.bin").write_bytes(b"")
    with pytest.raises(ImageMistake, match="empty"):
        load_files([f"raw:{tmp_path / 'a.bin'}"])


def test_a_damaged_hex_file_names_its_line(tmp_path: Path) -> None:
    """A flipped bit that makes a digit a stranger byte is reported where it stands."""
    (tmp_path / "a.hex").write_bytes(RECORDS.replace(b"902B", b"9\xb02B"))
    with pytest.raises(ImageMistake, match="no hex digit") as caught:
        load(tmp_path / "a.hex")
    assert str(caught.value.where) == f"{tmp_path / 'a.hex'}:1 column 11"


def test_a_missing_file_is_a_plain_error(tmp_path: Path) -> None:
    """A file that is not there is named."""
    with pytest.raises(FileMistake, match="cannot read"):
        load(tmp_path / "none.hex")


@pytest.mark.parametrize("name", ["a.hex", "a.IHX"])
def test_saving_by_a_hex_name_writes_hex(tmp_path: Path, name: str) -> None:
    """A name that ends in .hex or .ihx gets Intel HEX, which begins at address 0."""
    save(tmp_path / name, b"\x01")
    assert (tmp_path / name).read_bytes() == b":0100000001FE\n:00000001FF\n"


def test_saving_a_part_keeps_its_addresses(tmp_path: Path) -> None:
    """HEX of a part of the chip begins at the part's own first address."""
    save(tmp_path / "a.hex", b"\x01", first=0x100)
    assert (tmp_path / "a.hex").read_bytes() == b":0101000001FD\n:00000001FF\n"


def test_saving_by_another_name_writes_raw(tmp_path: Path) -> None:
    """Any other name gets the bytes as they are; a named format wins."""
    save(tmp_path / "a.bin", b"\x01\x0d\x0a")
    assert (tmp_path / "a.bin").read_bytes() == b"\x01\x0d\x0a"
    save(tmp_path / "b.hex", b"\x01", format=RAW)
    assert (tmp_path / "b.hex").read_bytes() == b"\x01"


@pytest.mark.parametrize("name", ["a.s19", "a.s28", "a.s37", "a.SREC", "a.mot"])
def test_saving_by_an_s_record_name_writes_them(tmp_path: Path, name: str) -> None:
    """S-records keep the addresses; they end with a count and an end record."""
    save(tmp_path / name, bytes(range(1, 7)), first=0x100)
    assert (tmp_path / name).read_text() == "S0030000FC\nS1090100010203040506E0\nS5030001FB\nS9030000FC\n"


@given(st.binary(min_size=64, max_size=400))
def test_random_bytes_are_raw(data: bytes) -> None:
    """Bytes as a chip holds them, with 00 and FF among them, are never refused or taken for records."""
    assert tell_format(b"\xff\x00" + data, "a.bin") == RAW


@given(st.binary(min_size=1, max_size=300))
def test_hex_is_told_from_raw_whatever_the_bytes(data: bytes) -> None:
    """HEX that was written from any bytes is told as HEX under any name."""
    assert tell_format(write_intel_hex(image_of(data)).encode("ascii"), "a.bin") == INTEL_HEX
