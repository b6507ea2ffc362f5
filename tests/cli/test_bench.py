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


def test_bench_new_takes_a_maker(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The maker is said when a bench is made and when it is shown; a wrong one is a usage mistake."""
    bench = str(tmp_path / "b.bench")
    assert main(["bench", "new", bench, "--chip", "27c256", "--maker", "atmel"]) == 0
    assert "27c256 of atmel" in capsys.readouterr().out
    assert main(["bench", "show", bench]) == 0
    assert capsys.readouterr().out.startswith("27c256 of atmel, ")
    assert main(["bench", "new", bench, "--chip", "27c256", "--maker", "atmal"]) == 2
    assert "did you mean atmel?" in capsys.readouterr().err
