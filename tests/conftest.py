"""Settings of every test: how hypothesis draws, and a home of its own for what the program keeps."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

# No deadline: wall time is never a verdict. In CI the draws are the same each time; at a desk each run draws anew.
settings.register_profile("desk", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.register_profile("ci", settings.get_profile("desk"), derandomize=True)
settings.load_profile("ci" if os.environ.get("CI") else "desk")


def _move_home(monkeypatch: pytest.MonkeyPatch, home: Path) -> None:
    monkeypatch.setenv("HOME", str(home))
    for name in ("XDG_DATA_HOME", "XDG_CONFIG_HOME", "XDG_STATE_HOME", "XDG_CACHE_HOME"):
        monkeypatch.delenv(name, raising=False)


@pytest.fixture(autouse=True, scope="session")
def shared_home(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Path]:
    """The home folder of fixtures that live longer than a test; never that of the person who tests."""
    home = tmp_path_factory.mktemp("shared-home")
    with pytest.MonkeyPatch.context() as monkeypatch:
        _move_home(monkeypatch, home)
        yield home


@pytest.fixture(autouse=True)
def own_home(tmp_path_factory: pytest.TempPathFactory, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A fresh home folder for each test, so that no record, consent or bench of one test reaches another."""
    home = tmp_path_factory.mktemp("home")
    _move_home(monkeypatch, home)
    return home
