"""A raised rail that cannot carry the chip's current, through the command line: the rail is blamed, not the chip."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.cli.test_end_to_end import Desk


@pytest.fixture(autouse=True)
def home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """State and working folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    monkeypatch.chdir(tmp_path)


@pytest.mark.parametrize("ma", [1, 5, 15, 28])
def test_a_rail_that_sags_under_a_pulse_is_the_rigs_fault(ma: int, capsys: pytest.CaptureFixture[str]) -> None:
    """30 mA is what a pulse takes: with less, erase and burn trip with exit 5, never as the chip's fault."""
    desk = Desk(capsys)
    Path("zeros.bin").write_bytes(bytes(64))
    for contents, job in (("noise:4", ["erase", "27e512"]), ("blank", ["burn", "27e512", "zeros.bin"])):
        desk.bench("--contents", contents, "--fault", f"rail-sag={ma}")
        answer = desk(*job, "--rig", "virtual:b.bench")
        assert (answer["exit"], answer["error"]) == (5, "Tripped")
        assert "raised rail" in answer["result"]
