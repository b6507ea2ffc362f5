"""bench show as a person reads it."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.cli.main import main


def test_bench_show_calls_the_pins_by_their_names(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """A high level is looked for by signal: A9 is pin 24, and identification raises it."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    bench = str(tmp_path / "b.bench")
    assert main(["bench", "new", bench, "--chip", "27e512"]) == 0
    assert main(["identify", "27e512", "--rig", f"virtual:{bench}"]) == 0
    capsys.readouterr()
    assert main(["bench", "show", bench]) == 0
    rows = {row[0]: row[1:] for row in map(str.split, capsys.readouterr().out.splitlines()) if len(row) == 4}
    assert rows["24"][0] == "A9"
    assert float(rows["24"][1]) > 11
    assert rows["22"][0] == "OE/VPP"
