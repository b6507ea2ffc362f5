"""S-records exchanged both ways with srec_cat, objcopy and the library bincopy, fixed and random images."""

from __future__ import annotations

import hashlib
import subprocess
from pathlib import Path

import bincopy  # type: ignore[import-untyped]  # it has no types of its own
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pulsewright.errors import ImageMistake
from pulsewright.image.intel_hex import parse_intel_hex, write_intel_hex
from pulsewright.image.load import load, save
from pulsewright.image.memory import Image, image_of
from pulsewright.image.s_record import parse_s_records, write_s_records
from tests.image.sparse import sparse_images


def run(*command: object) -> None:
    """Run a tool; its own words are the failure."""
    done = subprocess.run([str(part) for part in command], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


def noise(size: int) -> bytes:
    """Bytes without a pattern."""
    return hashlib.shake_256(b"exchange").digest(size)


SIZES = [1, 17, 65_536, 65_537, 524_288]


@pytest.mark.parametrize("size", SIZES)
def test_ours_loads_there(tmp_path: Path, size: int) -> None:
    """Both tools read our S-records and give back the bytes."""
    save(tmp_path / "ours.s19", noise(size))
    run("srec_cat", tmp_path / "ours.s19", "-o", tmp_path / "a.bin", "-binary")
    run("objcopy", "-I", "srec", "-O", "binary", tmp_path / "ours.s19", tmp_path / "b.bin")
    assert (tmp_path / "a.bin").read_bytes() == noise(size)
    assert (tmp_path / "b.bin").read_bytes() == noise(size)


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("length", [2, 3, 4])
def test_srec_cat_loads_here(tmp_path: Path, size: int, length: int) -> None:
    """S1, S2 and S3 files made by srec_cat, with its header and count records."""
    if size > 65_536 and length == 2:
        length = 3
    (tmp_path / "in.bin").write_bytes(noise(size))
    out = tmp_path / "theirs.srec"
    run("srec_cat", tmp_path / "in.bin", "-binary", "-o", out, "-motorola", f"-address-length={length}")
    assert out.read_text().splitlines()[1][:2] == f"S{length - 1}"
    assert load(out) == image_of(noise(size))


@pytest.mark.parametrize("size", SIZES)
def test_objcopy_loads_here(tmp_path: Path, size: int) -> None:
    """S-records made by objcopy, which writes no count."""
    (tmp_path / "in.bin").write_bytes(noise(size))
    run("objcopy", "-I", "binary", "-O", "srec", tmp_path / "in.bin", tmp_path / "theirs.srec")
    assert load(tmp_path / "theirs.srec") == image_of(noise(size))


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder for the files of random cases, each of which writes them anew."""
    return tmp_path_factory.mktemp("random")


# Each case costs two or three processes, of which each carries a whole sparse image: few cases go a long way.
PROCESSES = settings(max_examples=25, deadline=None)


@given(sparse_images(), st.integers(1, 60))
@PROCESSES
def test_random_images_go_through_srec_cat_both_ways(folder: Path, image: Image, length: int) -> None:
    """Sparse images as S-records and HEX, with odd record lengths, come back the same in the other format."""
    (folder / "ours.s37").write_text(write_s_records(image), "ascii")
    (folder / "ours.hex").write_text(write_intel_hex(image), "ascii")
    run("srec_cat", folder / "ours.s37", "-o", folder / "a.hex", "-intel", f"-output-block-size={length}")
    run("srec_cat", folder / "ours.hex", "-intel", "-o", folder / "b.srec", "-motorola", f"-output-block-size={length}")
    assert load(folder / "a.hex") == image
    assert load(folder / "b.srec") == image
    lines = (folder / "a.hex").read_text().splitlines()
    assert max(int(line[1:3], 16) for line in lines if line[7:9] == "00") <= length


@given(sparse_images(), st.integers(1, 60))
@PROCESSES
def test_random_images_go_through_objcopy_both_ways(folder: Path, image: Image, length: int) -> None:
    """From our HEX to its S-records, of odd lengths, and from our S-records to its HEX, gaps kept."""
    (folder / "ours.srec").write_text(write_s_records(image), "ascii")
    (folder / "ours.hex").write_text(write_intel_hex(image), "ascii")
    run("objcopy", "-I", "srec", "-O", "ihex", folder / "ours.srec", folder / "a.hex")
    run("objcopy", "-I", "ihex", "-O", "srec", f"--srec-len={length}", folder / "ours.hex", folder / "b.srec")
    assert load(folder / "a.hex") == image
    assert load(folder / "b.srec") == image


def theirs(image: Image) -> bincopy.BinFile:
    """The image in the library's hands."""
    file = bincopy.BinFile()
    for segment in image.segments:
        file.add_binary(segment.data, segment.start)
    return file


def runs_over(text: str) -> bool:
    """Whether a HEX record crosses FFFF in a file without a base: the format does not say what that means."""
    lines = text.splitlines()
    crossing = any(line[7:9] == "00" and int(line[3:7], 16) + int(line[1:3], 16) > 0x1_0000 for line in lines)
    return crossing and not any(line[7:9] == "04" for line in lines)


@given(st.data(), st.sampled_from([16, 24, 32]), st.integers(1, 200))
@settings(max_examples=100, deadline=None)
def test_random_images_go_through_the_library_both_ways(data: st.DataObject, bits: int, length: int) -> None:
    """What bincopy writes we read, and what we write it reads, as S-records of each address size and as HEX."""
    image = data.draw(sparse_images(address_bytes=bits // 8))
    assert parse_s_records(theirs(image).as_srec(length, bits)) == image
    text = theirs(image).as_ihex(length)
    if runs_over(text):
        with pytest.raises(ImageMistake, match="past address FFFF"):
            parse_intel_hex(text)
    else:
        assert parse_intel_hex(text) == image
    back = bincopy.BinFile()
    back.add_srec(write_s_records(image))
    assert [(one.address, bytes(one.data)) for one in back.segments] == [(s.start, s.data) for s in image.segments]
    back = bincopy.BinFile()
    back.add_ihex(write_intel_hex(image))
    assert [(one.address, bytes(one.data)) for one in back.segments] == [(s.start, s.data) for s in image.segments]
