"""S-records exchanged both ways with srec_cat, objcopy and the library bincopy, fixed and random images."""

from __future__ import annotations

import hashlib
import subprocess
from pathlib import Path
from random import Random

import bincopy  # type: ignore[import-untyped]  # it has no types of its own
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pulsewright.image.intel_hex import parse_intel_hex, write_intel_hex
from pulsewright.image.load import load, save
from pulsewright.image.memory import Image, Segment, image_of
from pulsewright.image.s_record import parse_s_records, write_s_records


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


def sparse(random: Random, top: int) -> Image:
    """Some runs of bytes with gaps between them."""
    at, segments = random.randrange(top // 8), []
    for _ in range(random.randrange(1, 8)):
        data = random.randbytes(random.randrange(1, 400))
        if at + len(data) >= top:
            break
        segments.append(Segment(at, data))
        at += len(data) + random.randrange(1, top // 16)
    return Image(tuple(segments)) if segments else image_of(b"\x00")


@pytest.mark.parametrize("seed", range(6))
def test_random_images_go_through_srec_cat_both_ways(tmp_path: Path, seed: int) -> None:
    """Sparse images as S-records and HEX, with odd line lengths, come back the same in either format."""
    random = Random(seed)
    image = sparse(random, [0x1_0000, 0x100_0000, 0xF000_0000][seed % 3])
    (tmp_path / "ours.s37").write_text(write_s_records(image), "ascii")
    (tmp_path / "ours.hex").write_text(write_intel_hex(image), "ascii")
    width = f"-line-length={random.randrange(40, 250)}"
    run("srec_cat", tmp_path / "ours.s37", "-o", tmp_path / "a.hex", "-intel", width)
    run("srec_cat", tmp_path / "ours.hex", "-intel", "-o", tmp_path / "b.srec", "-motorola", width)
    assert load(tmp_path / "a.hex") == image
    assert load(tmp_path / "b.srec") == image


def test_a_random_image_goes_through_objcopy_both_ways(tmp_path: Path) -> None:
    """From our HEX to its S-records and from our S-records to its HEX, gaps kept."""
    image = sparse(Random(7), 0x10_0000)
    (tmp_path / "ours.srec").write_text(write_s_records(image), "ascii")
    (tmp_path / "ours.hex").write_text(write_intel_hex(image), "ascii")
    run("objcopy", "-I", "srec", "-O", "ihex", tmp_path / "ours.srec", tmp_path / "a.hex")
    run("objcopy", "-I", "ihex", "-O", "srec", tmp_path / "ours.hex", tmp_path / "b.srec")
    assert load(tmp_path / "a.hex") == image
    assert load(tmp_path / "b.srec") == image


def theirs(image: Image) -> bincopy.BinFile:
    """The image in the library's hands."""
    file = bincopy.BinFile()
    for segment in image.segments:
        file.add_binary(segment.data, segment.start)
    return file


@given(st.integers(0, 1 << 32), st.sampled_from([0x1_0000, 0x100_0000, 0xF000_0000]), st.integers(1, 200))
@settings(max_examples=60, deadline=None)
def test_random_images_go_through_the_library_both_ways(seed: int, top: int, line: int) -> None:
    """What bincopy writes we read, and what we write it reads, as S-records and as HEX."""
    image = sparse(Random(seed), top)
    bits = 32 if image.last >= 1 << 24 else 24 if image.last >= 1 << 16 else 16
    assert parse_s_records(theirs(image).as_srec(line, bits)) == image
    assert parse_intel_hex(theirs(image).as_ihex(line)) == image
    back = bincopy.BinFile()
    back.add_srec(write_s_records(image))
    assert [(one.address, bytes(one.data)) for one in back.segments] == [(s.start, s.data) for s in image.segments]
    back = bincopy.BinFile()
    back.add_ihex(write_intel_hex(image))
    assert [(one.address, bytes(one.data)) for one in back.segments] == [(s.start, s.data) for s in image.segments]
