"""Several files as one image: places, overlaps with both names, formats mixed, what the job tells of each."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.errors import FileMistake, ImageMistake, UsageMistake
from pulsewright.image.intel_hex import write_intel_hex
from pulsewright.image.memory import Image, Segment, fit, image_of
from pulsewright.image.several import load_files


def made(folder: Path, name: str, data: bytes) -> str:
    """A file's path."""
    (folder / name).write_bytes(data)
    return str(folder / name)


def test_files_of_different_formats_become_one_image(tmp_path: Path) -> None:
    """HEX, S-records and raw bytes at a place of their own; touching ones join."""
    tune = made(tmp_path, "tune.hex", write_intel_hex(image_of(b"\x01\x02", start=0x10)).encode())
    bell = made(tmp_path, "bell.s19", b"S1090100010203040506E0\nS9030000FC\n")
    raw = made(tmp_path, "strike.bin", b"\x80\x81")
    image, files = load_files([tune, bell, f"{raw}@0x12"])
    assert image.segments == (Segment(0x10, b"\x01\x02\x80\x81"), Segment(0x100, bytes(range(1, 7))))
    assert [(file.format, file.first, file.last) for file in files] == [
        ("intel-hex", 0x10, 0x11), ("s-record", 0x100, 0x105), ("raw", 0x12, 0x13),
    ]  # fmt: skip
    assert files[2].crc32 == "E0E53902"  # zlib.crc32 of 80 81


def test_an_overlap_names_both_files_and_lines(tmp_path: Path) -> None:
    """The address, both files, the line where there is one, both bytes - equal bytes are an overlap as well."""
    bell = made(tmp_path, "bell.s19", b"S1090100010203040506E0\nS9030000FC\n")
    raw = made(tmp_path, "strike.bin", b"\x06\xff")
    with pytest.raises(ImageMistake) as refused:
        load_files([bell, f"{raw}@0x105"])
    error = refused.value
    assert "0105" in error.what
    assert bell in error.what
    assert raw in error.what
    assert f"06 in {bell}:1" in error.got
    assert "FILE@ADDR" in error.hint


def test_two_raw_files_need_places(tmp_path: Path) -> None:
    """Both would begin at address 0."""
    with pytest.raises(ImageMistake, match="given twice"):
        load_files([made(tmp_path, "a.bin", b"\xaa"), made(tmp_path, "b.bin", b"\xbb")])


def test_a_place_moves_records_too(tmp_path: Path) -> None:
    """FILE@ADDR adds the address to those of a HEX file, and to the places that errors name."""
    tune = made(tmp_path, "tune.hex", write_intel_hex(image_of(b"\x01\x02", start=0x10)).encode())
    image, _ = load_files([f"{tune}@16K"])
    assert image.segments == (Segment(0x4010, b"\x01\x02"),)
    with pytest.raises(ImageMistake) as refused:
        fit(image, 0x1000)
    assert str(refused.value.where) == f"{tune}:1"
    two = made(tmp_path, "two.hex", b":0100100001EE\n:0100200002DD\n:00000001FF\n")
    moved, _ = load_files([f"{two}@16K"])
    assert [str(moved.where(at)) for at in (0x4010, 0x4020)] == [f"{two}:1", f"{two}:2"]


def test_a_name_with_an_at_sign_is_that_file(tmp_path: Path) -> None:
    """Whatever follows the @, a file of the whole name wins; and a strange place is told as one."""
    odd = made(tmp_path, "bell@0x10", b"\x99")
    assert load_files([odd])[0].segments == (Segment(0, b"\x99"),)
    plain = made(tmp_path, "bell.bin", b"\x99")
    with pytest.raises(UsageMistake, match="is no address"):
        load_files([f"{plain}@tower"])
    with pytest.raises(UsageMistake, match="is no address"):  # 100 or 0x100? never guessed
        load_files([f"{plain}@0100"])
    with pytest.raises(FileMistake, match="cannot read"):
        load_files([str(tmp_path / "none@tower")])


def test_raw_is_a_mark_only_where_no_file_bears_it(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The bytes as they are, at a place as well; a file whose own name begins so is that file."""
    monkeypatch.chdir(tmp_path)
    made(tmp_path, "bell.hex", b":00000001FF\n")
    image, (file,) = load_files(["raw:bell.hex@0x20"])
    assert (image.segments, file.format, file.name) == ((Segment(0x20, b":00000001FF\n"),), "raw", "bell.hex")
    made(tmp_path, "raw:bell.hex", b"\x99")
    assert load_files(["raw:bell.hex"])[0].segments == (Segment(0, b"\x99"),)


def test_a_file_given_twice_is_an_overlap(tmp_path: Path) -> None:
    """The same file at the same place is told, not taken once."""
    bell = made(tmp_path, "bell.s19", b"S1090100010203040506E0\nS9030000FC\n")
    with pytest.raises(ImageMistake, match="0100 is given twice"):
        load_files([bell, bell])


def test_a_gap_between_files_is_left_or_filled(tmp_path: Path) -> None:
    """Between files, as between records: left alone, or the fill where one is given."""
    low, high = made(tmp_path, "low.bin", b"\x01\x02"), made(tmp_path, "high.bin", b"\x03")
    image, _ = load_files([high + "@5", low])
    left, filled = fit(image, 8), fit(image, 8, fill=0x76)
    assert (left.data, left.used) == (b"\x01\x02\xff\xff\xff\x03\xff\xff", b"\1\1\0\0\0\1\0\0")
    assert (filled.data, filled.used) == (b"\x01\x02\x76\x76\x76\x03\x76\x76", b"\1" * 8)


def test_a_byte_outside_the_chip_is_of_its_file(tmp_path: Path) -> None:
    """Of several files, the one that reaches outside is named, with its line."""
    low = made(tmp_path, "low.bin", b"\x01\x02")
    bell = made(tmp_path, "bell.s19", b"S1090100010203040506E0\nS9030000FC\n")
    with pytest.raises(ImageMistake) as refused:
        fit(load_files([low, bell])[0], 0x102)
    assert str(refused.value.where) == f"{bell}:1"
    assert "0102" in refused.value.what
    assert refused.value.hint


def test_an_image_of_parts_is_its_bytes() -> None:
    """Where the bytes came from does not make images differ."""
    one = image_of(b"\x01\x02")
    assert Image(one.segments, "x", parts=(one,)) == one
