"""Rig file and rig together, for a command: opened, said what it is, closed whatever happens."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

from pulsewright.cli.desk import Desk
from pulsewright.errors import UsageMistake

if TYPE_CHECKING:
    from pulsewright.link.open import OpenRig
    from pulsewright.rig.model import Rig


@contextmanager
def opened(
    name: str | None, chip_name: str | None, desk: Desk, *, maker: str = ""
) -> Iterator[tuple[Rig, OpenRig]]:
    """The rig file and the open rig of a `--rig` name; UsageMistake when none is given.

    `maker`: whose chip a fresh virtual bench has, where its makers' chips differ.
    """
    if name is None:
        raise UsageMistake(
            "no rig is named, and none is configured",
            wanted="--rig with a serial port, a pySerial URL, virtual, or virtual:BENCH",
            hint="--rig virtual to try it without hardware",
        )
    from pulsewright.link.open import open_rig
    from pulsewright.rig.file import load_rig

    _look_for_a_slip(name)
    rig_file = load_rig()
    rig = open_rig(name, chip_name, maker=maker)
    try:
        if rig.banner:
            desk.say(rig.banner)
        yield rig_file, rig
    finally:
        rig.close()


def _look_for_a_slip(name: str) -> None:
    """UsageMistake for a name that is nearly "virtual" and no path: no port is meant by it."""
    import difflib
    from pathlib import Path

    word, colon, bench = name.partition(":")
    near = difflib.get_close_matches(word.lower(), ["virtual"], n=1, cutoff=0.75)
    if near and word != "virtual" and "/" not in word and not Path(name).exists():
        raise UsageMistake(
            f"no rig is called {name}",
            wanted="a serial port, a pySerial URL, virtual, or virtual:BENCH",
            did="nothing: no port was opened",
            hint=f"--rig virtual{colon}{bench}",
        )
