"""The shipped definitions are found from a wheel and from an editable install."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.chip.shipped import find_chipdefs, shipped_folder
from pulsewright.errors import FileMistake

REPOSITORY = Path(__file__).resolve().parents[2]


def _folder(path: Path) -> Path:
    path.mkdir(parents=True)
    return path


def test_editable_install_finds_the_repository() -> None:
    """The tests run from an editable install, whose definitions are the repository's own files."""
    assert shipped_folder() == REPOSITORY / "chipdefs"
    assert (shipped_folder() / "27e512.toml").is_file()


def test_wheel_carries_its_own(tmp_path: Path) -> None:
    """A folder inside the package comes first, even below a repository that has one as well."""
    (tmp_path / "pyproject.toml").touch()
    _folder(tmp_path / "chipdefs")
    inside = _folder(tmp_path / "host" / "pulsewright" / "chipdefs")
    assert find_chipdefs(inside.parent) == inside


def test_walks_up_to_the_pyproject(tmp_path: Path) -> None:
    """Without one inside, the folder beside the nearest pyproject.toml above the package is taken."""
    (tmp_path / "pyproject.toml").touch()
    beside = _folder(tmp_path / "chipdefs")
    assert find_chipdefs(_folder(tmp_path / "host" / "pulsewright")) == beside


def test_stranger_folder_is_not_taken(tmp_path: Path) -> None:
    """A chipdefs folder with no pyproject.toml beside it belongs to somebody else; the error says what is wanted."""
    _folder(tmp_path / "chipdefs")
    package = _folder(tmp_path / "lib" / "pulsewright")
    with pytest.raises(FileMistake) as caught:
        find_chipdefs(package)
    assert caught.value.exit_code == 2
    assert str(package / "chipdefs") in caught.value.wanted


def test_never_past_the_nearest_pyproject(tmp_path: Path) -> None:
    """The search ends at the nearest pyproject.toml, so an outer project's folder is not taken."""
    (tmp_path / "pyproject.toml").touch()
    _folder(tmp_path / "chipdefs")
    package = _folder(tmp_path / "inner" / "host" / "pulsewright")
    (tmp_path / "inner" / "pyproject.toml").touch()
    with pytest.raises(FileMistake):
        find_chipdefs(package)
