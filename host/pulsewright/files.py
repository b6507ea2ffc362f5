"""Files written whole or not at all, and read with a plain error: what every image, record and bench file goes through.

A file that a job leaves half written is worse than none: a cut dump looks like a dump. So new contents go to a second
file in the same folder, are flushed to the disk, and only then take the name.
"""

from __future__ import annotations

import os
import stat
from pathlib import Path

from pulsewright.errors import FileMistake, Where


def read_whole(path: Path | str) -> bytes:
    """All bytes of the file; FileMistake if it is missing, a folder, or cannot be read."""
    try:
        return Path(path).read_bytes()
    except OSError as error:
        raise _mistake("cannot read", path, error, "check the name and the folder") from error


def write_whole(path: Path | str, data: bytes) -> None:
    """Make the file hold exactly `data`, or leave it as it was and raise FileMistake.

    A link keeps pointing where it points; an existing file keeps its permissions. A device or a pipe cannot be
    replaced, it is written to.
    """
    target = Path(path)
    try:
        mode = _mode_of(target)
        if mode is not None and not stat.S_ISREG(mode):
            with target.open("wb") as stream:  # a folder fails here, by its name
                stream.write(data)
            return
        _replace(target.resolve(), data, mode)
    except OSError as error:
        hint = "choose a folder that exists, has room and may be written"
        raise _mistake("cannot write", path, error, hint) from error


def _mode_of(path: Path) -> int | None:
    try:
        return path.stat().st_mode
    except FileNotFoundError:
        return None


def _replace(target: Path, data: bytes, mode: int | None) -> None:
    """Write beside `target`, flush, rename over it; the second file is gone whatever happens."""
    part = target.with_name(f".{target.name[:100]}.{os.urandom(4).hex()}.part")
    try:
        with part.open("xb") as stream:
            if mode is not None:
                os.fchmod(stream.fileno(), stat.S_IMODE(mode))
            stream.write(data)
            stream.flush()
            os.fsync(stream.fileno())
        part.replace(target)
    finally:  # also when the operator interrupts: no litter in the folder
        part.unlink(missing_ok=True)
    _flush_folder(target.parent)


def _flush_folder(folder: Path) -> None:
    """Flush the rename itself; some file systems cannot, and the file is in place by now."""
    try:
        handle = os.open(folder, os.O_RDONLY)
    except OSError:
        return
    try:
        os.fsync(handle)
    except OSError:
        return
    finally:
        os.close(handle)


def _mistake(what: str, path: Path | str, error: OSError, hint: str) -> FileMistake:
    reason = error.strerror or str(error)
    return FileMistake(f"{what} {path}: {reason}", where=Where(str(path)), hint=hint)
