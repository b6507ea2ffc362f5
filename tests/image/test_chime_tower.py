"""The sample images are fresh and fit for the guide: mostly used, with gaps, and in need of an erase."""

from __future__ import annotations

import runpy
from pathlib import Path

import pytest

from pulsewright.image.checksum import crc
from pulsewright.image.compare import compare
from pulsewright.image.load import load
from pulsewright.image.memory import fit

FOLDER = Path(__file__).resolve().parents[2] / "samples" / "chime-tower"
CHIP_BYTES = 65536


@pytest.fixture(scope="module")
def made() -> dict[str, bytes]:
    """The files as the script makes them now."""
    files: dict[str, bytes] = runpy.run_path(str(FOLDER / "make_samples.py"))["make"]()
    return files


def test_the_samples_are_fresh(made: dict[str, bytes]) -> None:
    """The committed files are, byte for byte, what the script makes."""
    assert sorted(made) == ["chime.hex", "tower-dump.bin"]
    assert {name: (FOLDER / name).read_bytes() for name in made} == made


def test_the_image_fills_most_of_the_chip_and_has_gaps() -> None:
    """At least 50 KB are given, not as FF, in several parts with gaps between them."""
    image = load(FOLDER / "chime.hex")
    data = b"".join(segment.data for segment in image.segments)
    assert len(data) - data.count(0xFF) >= 50 * 1024
    assert len(image.gaps()) >= 3
    assert image.last == CHIP_BYTES - 1


def test_the_guide_states_the_images_size() -> None:
    """The numbers in the guide are those of the file."""
    image = load(FOLDER / "chime.hex")
    assert f"{image.size} bytes in six parts" in (FOLDER / "README.md").read_text("utf-8")
    assert len(image.segments) == 6


def test_the_new_version_needs_an_erase() -> None:
    """The chip as dumped has 0s where the new version wants 1s, and 1s where it wants 0s, in code and in tunes."""
    dump = (FOLDER / "tower-dump.bin").read_bytes()
    fitted = fit(load(FOLDER / "chime.hex"), CHIP_BYTES)
    result = compare(fitted.data, dump, fitted.used)
    assert len(dump) == CHIP_BYTES
    assert result.needs_erase > 100
    assert result.burn_missing > 100
    assert compare(fitted.data[0xA000:0xC800], dump[0xA000:0xC800]).needs_erase > 20
    assert compare(fitted.data[0xE000:0xFF00], dump[0xE000:0xFF00], fitted.used[0xE000:0xFF00]).equal


def test_each_version_holds_its_own_crc() -> None:
    """The last two bytes are the CRC of all the parts before the trailer, as the controller would check it."""
    image = load(FOLDER / "chime.hex")
    body = b"".join(segment.data for segment in image.segments[:-1])
    assert image.segments[-1].data[-2:] == crc("CRC-16/IBM-3740", body).to_bytes(2, "big")
