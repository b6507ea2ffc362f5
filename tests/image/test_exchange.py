"""Images exchanged both ways with Debian's srec_cat and objcopy, and a real option ROM through HEX and back."""

from __future__ import annotations

import hashlib
import subprocess
from pathlib import Path

import pytest

from pulsewright.image.checksum import option_rom
from pulsewright.image.intel_hex import write_intel_hex
from pulsewright.image.load import load, save
from pulsewright.image.memory import Image, Segment, fit, image_of

OPTION_ROMS = sorted(Path("/usr/share/seabios").glob("vgabios-*.bin"))  # Debian package seabios


def run(*command: object) -> None:
    """Run a tool; its own words are the failure."""
    done = subprocess.run([str(part) for part in command], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


def noise(size: int) -> bytes:
    """Bytes without a pattern."""
    return hashlib.shake_256(b"exchange").digest(size)


# Sizes around the 64K border, where a second kind of record comes in.
SIZES = [1, 15, 16, 17, 65535, 65536, 65537, 131072, 524288]


@pytest.mark.parametrize("size", SIZES)
def test_ours_loads_there(tmp_path: Path, size: int) -> None:
    """Both tools read our HEX and give back the bytes."""
    data = noise(size)
    save(tmp_path / "ours.hex", data)
    run("srec_cat", tmp_path / "ours.hex", "-intel", "-o", tmp_path / "a.bin", "-binary")
    run("objcopy", "-I", "ihex", "-O", "binary", tmp_path / "ours.hex", tmp_path / "b.bin")
    assert (tmp_path / "a.bin").read_bytes() == data
    assert (tmp_path / "b.bin").read_bytes() == data


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("addressing", ["-address-length=4", "-address-length=3"])
def test_srec_cat_loads_here(tmp_path: Path, size: int, addressing: str) -> None:
    """HEX made by srec_cat, with linear (4) or segment (3) bases, gives the bytes."""
    (tmp_path / "in.bin").write_bytes(noise(size))
    run("srec_cat", tmp_path / "in.bin", "-binary", "-o", tmp_path / "theirs.hex", "-intel", addressing)
    bases = {line[7:9] for line in (tmp_path / "theirs.hex").read_bytes().split(b"\n")} & {b"02", b"04"}
    assert bases == {b"04" if "4" in addressing else b"02"}
    assert load(tmp_path / "theirs.hex") == image_of(noise(size))


@pytest.mark.parametrize("size", SIZES)
def test_objcopy_loads_here(tmp_path: Path, size: int) -> None:
    """HEX made by objcopy gives the bytes; it ends lines with carriage return and line feed."""
    (tmp_path / "in.bin").write_bytes(noise(size))
    run("objcopy", "-I", "binary", "-O", "ihex", tmp_path / "in.bin", tmp_path / "theirs.hex")
    assert b"\r\n" in (tmp_path / "theirs.hex").read_bytes()
    assert load(tmp_path / "theirs.hex") == image_of(noise(size))


def test_gaps_and_high_addresses_are_exchanged(tmp_path: Path) -> None:
    """An image with gaps and at a high address goes through srec_cat and comes back the same."""
    image = Image((Segment(0x30, b"\x01\x02\x03"), Segment(0xFFF0, noise(64)), Segment(0x8_1000, noise(33))))
    (tmp_path / "ours.hex").write_text(write_intel_hex(image), "ascii")
    run("srec_cat", tmp_path / "ours.hex", "-intel", "-o", tmp_path / "theirs.hex", "-intel", "-line-length=76")
    assert (tmp_path / "theirs.hex").read_bytes() != (tmp_path / "ours.hex").read_bytes()
    assert load(tmp_path / "theirs.hex") == image


def test_an_offset_image_lands_by_its_origin(tmp_path: Path) -> None:
    """HEX that srec_cat has moved to F0000 lands at chip address 0 with that origin."""
    (tmp_path / "in.bin").write_bytes(noise(1000))
    run("srec_cat", tmp_path / "in.bin", "-binary", "-offset", "0xF0000", "-o", tmp_path / "moved.hex", "-intel")
    assert fit(load(tmp_path / "moved.hex"), 65536, origin=0xF0000).data[:1000] == noise(1000)


def test_the_option_roms_are_there() -> None:
    """The package has given several images; without them the next test would say nothing."""
    assert len(OPTION_ROMS) >= 5


@pytest.mark.parametrize("path", OPTION_ROMS, ids=lambda path: path.stem)
def test_a_real_option_rom_keeps_its_rule(tmp_path: Path, path: Path) -> None:
    """A real option ROM goes through HEX onto a 64K chip and back, and 55 AA, length and sum 00 hold on what came."""
    data = path.read_bytes()
    run("objcopy", "-I", "binary", "-O", "ihex", path, tmp_path / "rom.hex")
    fitted = fit(load(tmp_path / "rom.hex"), 65536, fill=0xFF)
    save(tmp_path / "chip.hex", fitted.data)
    chip = load(tmp_path / "chip.hex").segments[0].data
    rom = option_rom(chip)
    assert rom is not None
    assert (rom.length_bytes, rom.sum_is_right) == (len(data), True)
    assert chip[: len(data)] == data
    broken = bytearray(chip)
    broken[0x100] ^= 0x20
    damaged = option_rom(bytes(broken))
    assert damaged is not None
    assert damaged.sum_is_right is False
