"""`--range` through the command line: files of a part of a chip, and a burn that leaves the rest alone."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.cli.main import main
from tests.cli.test_end_to_end import Desk


@pytest.fixture(autouse=True)
def home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """State and working folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    monkeypatch.chdir(tmp_path)


@pytest.fixture
def desk(capsys: pytest.CaptureFixture[str]) -> Desk:
    """A desk with a chip full of noise on its bench."""
    desk = Desk(capsys)
    desk.bench("--contents", "noise:5")
    return desk


def test_a_part_read_into_hex_is_found_where_it_was(desk: Desk) -> None:
    """HEX of a range carries the chip's addresses: verify finds it equal without a word about where it belongs."""
    before = desk.contents()
    assert desk("read", "27e512", "--rig", "virtual:b.bench", "--range", "0x100..0x1FF", "-o", "part.hex")["exit"] == 0
    answer = desk("verify", "27e512", "part.hex", "--rig", "virtual:b.bench")
    assert (answer["exit"], answer["words"]) == (0, 256)
    assert before[0x100:0x200] != before[:0x100]


def test_a_part_read_raw_says_where_it_begins(desk: Desk, capsys: pytest.CaptureFixture[str]) -> None:
    """Raw bytes have no addresses: the answer tells the first one's, as text and as a fact."""
    words = ["read", "27e512", "--rig", "virtual:b.bench", "--range", "0x100..0x1FF", "-o", "part.bin"]
    assert desk(*words)["file_first"] == 0x100
    assert main(words) == 0
    assert "the first one is that of chip address 0100" in capsys.readouterr().out


def test_a_burn_of_a_range_touches_nothing_else(desk: Desk) -> None:
    """Words outside the range keep what they held, and what the range held is saved with its addresses."""
    before = desk.contents()
    Path("zero.bin").write_bytes(bytes(0x10000))
    answer = desk("burn", "27e512", "zero.bin", "--rig", "virtual:b.bench", "--range", "0x100..0x1FF")
    assert answer["exit"] == 0
    assert desk.contents() == before[:0x100] + bytes(0x100) + before[0x200:]
    desk.clean()
    assert desk("verify", "27e512", answer["saved"], "--rig", "virtual:b.bench")["exit"] == 1
    back = desk("burn", "27e512", answer["saved"], "--rig", "virtual:b.bench")
    assert back["exit"] == 1  # needs an erase: nothing is written
    assert desk.contents() == before[:0x100] + bytes(0x100) + before[0x200:]
