"""Real images that this project did not make: through general tools, burnt, read back, and their own rule held."""

from __future__ import annotations

import json
import subprocess
from pathlib import Path

import pytest

from pulsewright.cli.main import main

SEABIOS = Path("/usr/share/seabios")  # Debian's package seabios
ROMS = ("vgabios-stdvga.bin", "vgabios-cirrus.bin", "vgabios-bochs-display.bin")


@pytest.fixture
def bench(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A used chip on a bench of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "home"))
    path = tmp_path / "tower.bench"
    assert main(["bench", "new", str(path), "--chip", "27e512", "--contents", "noise:7"]) == 0
    return path


@pytest.mark.parametrize("name", ROMS)
def test_an_option_rom_survives_the_chip(name: str, bench: Path, tmp_path: Path) -> None:
    """An option ROM goes through srec_cat's HEX onto the chip and back; 55 AA, length and sum 0 hold on what came back.

    Rule: Plug and Play BIOS Specification 1.0A, page 16; that the bytes sum to 00 modulo 256 is from memory.
    """
    rom = (SEABIOS / name).read_bytes()
    image = tmp_path / "rom.hex"
    subprocess.run(
        ["srec_cat", str(SEABIOS / name), "-Binary", "-Output", str(image), "-Intel"], check=True, capture_output=True
    )
    assert main(["burn", "27e512", str(image), "--rig", f"virtual:{bench}", "--erase"]) == 0
    dump = tmp_path / "dump.bin"
    assert main(["read", "27e512", "-o", str(dump), "--rig", f"virtual:{bench}"]) == 0
    got = dump.read_bytes()
    size = got[2] * 512

    assert got[:2] == b"\x55\xaa"
    assert sum(got[:size]) % 256 == 0
    assert got[: len(rom)] == rom
    assert set(got[len(rom) :]) == {0xFF}  # the rest was erased and left


def test_objcopy_reads_what_we_wrote(bench: Path, tmp_path: Path) -> None:
    """A dump saved as HEX is read by objcopy into the very bytes that the bench says the chip holds."""
    dump, back, contents = tmp_path / "dump.hex", tmp_path / "back.bin", tmp_path / "contents.bin"
    assert main(["read", "27e512", "-o", str(dump), "--rig", f"virtual:{bench}"]) == 0
    subprocess.run(["objcopy", "-I", "ihex", "-O", "binary", str(dump), str(back)], check=True, capture_output=True)
    assert main(["bench", "show", str(bench), "--save", str(contents)]) == 0

    assert back.read_bytes() == contents.read_bytes()


def test_a_burn_breaks_no_published_limit(bench: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Erase and burn of the sample leave the judge without a finding, and no pin above its published maximum.

    OE/VPP and A9 at most 14.5 V, others 7 V: from memory, hv-eprom.md section 21.
    """
    sample = Path(__file__).parents[2] / "samples" / "chime-tower" / "chime.hex"
    assert main(["burn", "27e512", str(sample), "--rig", f"virtual:{bench}", "--erase"]) == 0
    capsys.readouterr()
    assert main(["bench", "show", str(bench), "--json"]) == 0
    shown = json.loads(capsys.readouterr().out)

    assert (shown["violations"], shown["stressed"], shown["damaged"]) == ([], [], False)
    raised = {"22", "24"}
    assert all(pin["max_mv"] <= (14_500 if name in raised else 7_000) for name, pin in shown["pins"].items())
    assert 13_750 <= shown["pins"]["22"]["max_mv"] <= 14_250
