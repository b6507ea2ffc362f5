"""Where the shipped definitions are: inside an installed wheel, or at the top of the repository."""

from __future__ import annotations

from pathlib import Path

import pulsewright
from pulsewright.errors import FileMistake

_NAME = "chipdefs"


def find_chipdefs(package: Path) -> Path:
    """The `chipdefs` folder that belongs to the package folder `package`; FileMistake when there is none.

    A wheel carries it inside the package. An editable install has it beside the `pyproject.toml` of the repository;
    only there, so that some folder of the same name further up is never taken for ours.
    """
    inside = package / _NAME
    if inside.is_dir():
        return inside
    for folder in package.parents:
        if (folder / "pyproject.toml").is_file():
            if (folder / _NAME).is_dir():
                return folder / _NAME
            break
    raise FileMistake(
        "the shipped definitions are missing from this installation",
        wanted=f"a folder {inside}, or {_NAME}/ beside the pyproject.toml above {package}",
        hint="install again, or give the path of a definition file instead of a name",
    )


def shipped_folder() -> Path:
    """The folder of the shipped definitions, with its `methods/`; FileMistake when the installation has lost it."""
    return find_chipdefs(Path(pulsewright.__file__).resolve().parent)
