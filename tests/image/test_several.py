"""Several files as one image: places, overlaps with both names, formats mixed, what the job tells of each."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.errors import ImageMistake, UsageMistake
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


def test_a_name_with_an_at_sign_is_that_file(tmp_path: Path) -> None:
    """Whatever follows the @, a file of the whole name wins; and a strange place is told as one."""
    odd = made(tmp_path, "bell@0x10", b"\x99")
    assert load_files([odd])[0].segments == (Segment(0, b"\x99"),)
    plain = made(tmp_path, "bell.bin", b"\x99")
    with pytest.raises(UsageMistake, match="is no address"):
        load_files([f"{plain}@tower"])


def test_an_image_of_parts_is_its_bytes() -> None:
    """Where the bytes came from does not make images differ."""
    one = image_of(b"\x01\x02")
    assert Image(one.segments, "x", parts=(one,)) == one
