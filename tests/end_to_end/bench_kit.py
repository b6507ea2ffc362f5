"""A bench and the commands on it, for tests that go the whole way from a definition to the judge."""

from __future__ import annotations

import json
from pathlib import Path
from random import Random
from typing import Any

import pytest

from pulsewright.cli.main import main

ROOT = Path(__file__).parents[2]
PARTS, MODELS = ROOT / "tests" / "parts", ROOT / "tests" / "models"


class Bench:
    """One kept bench; each call is one command line with --json, its answer as values."""

    def __init__(self, folder: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
        monkeypatch.setenv("PULSEWRIGHT_HOME", str(folder / "home"))
        self.folder = folder
        self.path = folder / "tower.bench"
        self._capsys = capsys

    def call(self, *words: str) -> dict[str, Any]:
        """A command's JSON answer; exit code and `exit` must agree."""
        self._capsys.readouterr()
        code = main([*words, "--json"])
        answer: dict[str, Any] = json.loads(self._capsys.readouterr().out)
        assert answer["exit"] == code
        return answer

    def new(self, chip: str, *, contents: str = "blank", options: tuple[str, ...] = ()) -> None:
        """A fresh chip on the bench."""
        answer = self.call("bench", "new", str(self.path), "--chip", chip, "--contents", contents, *options)
        assert answer["exit"] == 0, answer

    def job(self, *words: str) -> dict[str, Any]:
        """A job on the bench."""
        return self.call(*words, "--rig", f"virtual:{self.path}")

    def image(self, words: int, seed: int = 5, name: str = "image.bin") -> Path:
        """A random image in a file."""
        path = self.folder / name
        path.write_bytes(Random(seed).randbytes(words))
        return path

    def contents(self) -> bytes:
        """What the chip holds now."""
        saved = self.folder / "contents.bin"
        assert self.call("bench", "show", str(self.path), "--save", str(saved))["exit"] == 0
        return saved.read_bytes()

    def seen(self) -> dict[str, Any]:
        """What the judge and the pins have seen."""
        return self.call("bench", "show", str(self.path))

    def clean(self) -> bool:
        """No violation, no stress, no damage, nothing written by a probe."""
        seen = self.seen()
        return not (seen["violations"] or seen["stressed"] or seen["damaged"] or seen["probe_wrote"])


@pytest.fixture
def bench(tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Bench:
    """A bench of its own."""
    return Bench(tmp_path, capsys, monkeypatch)
