"""Where the program keeps what outlives a job: records, saved dumps, remembered consents.

`PULSEWRIGHT_HOME`, where it is set, holds all of it; else the places this system has for a user's data and settings.
"""

from __future__ import annotations

import os
from pathlib import Path

from pulsewright.errors import FileMistake, Where

HOME_VARIABLE = "PULSEWRIGHT_HOME"
_NAME = "pulsewright"


def data_folder(kind: str) -> Path:
    """The folder of "records" or "saved", not made yet."""
    return _home("data") / kind


def consents_file() -> Path:
    """The file of remembered consents: one digest a line."""
    return _home("config") / "accepted-voltages"


def _home(what: str) -> Path:
    own = os.environ.get(HOME_VARIABLE, "")
    if own:
        return Path(own).expanduser()
    import platformdirs

    return platformdirs.user_data_path(_NAME) if what == "data" else platformdirs.user_config_path(_NAME)


def made(folder: Path) -> Path:
    """The folder, made if it is missing; FileMistake if that cannot be."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise FileMistake(
            f"cannot make the folder {folder}: {error.strerror or error}",
            where=Where(str(folder)),
            hint=f"{HOME_VARIABLE}=FOLDER names another place",
        ) from error
    return folder
