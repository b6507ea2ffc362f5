"""Rigs by their names."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.chip.load import load
from pulsewright.errors import FileMistake, LinkFault, UsageMistake
from pulsewright.link.open import open_rig
from pulsewright.link.session import Session
from pulsewright.rig.file import load_rig
from pulsewright.sequence.compile import compile_identify, compile_read
from pulsewright.virtual.bench import Bench

PART = "27e512"


def test_virtual_is_a_used_chip_that_nobody_keeps() -> None:
    """A fresh bench each time, with the same noise in it, and a first line that says that no hardware is touched."""
    contents = []
    for _ in range(2):
        rig = open_rig("virtual", PART)
        assert rig.in_process
        assert "no hardware is touched" in rig.banner
        session = Session(rig.transport)
        session.connect()
        contents.append(session.run(compile_read(load(PART), load_rig(), 0, 255)).data)
        rig.close()
    assert contents[0] == contents[1]
    assert len(set(contents[0])) > 64


def test_a_kept_bench_is_saved_whatever_happened(tmp_path: Path) -> None:
    """What the pins saw is in the file after closing, also where the job ended in an error."""
    path = tmp_path / "a.bench"
    Bench.new(path, PART, contents=b"kept")
    rig = open_rig(f"virtual:{path}", PART)
    session = Session(rig.transport)
    session.connect()
    session.run(compile_identify(load(PART), load_rig()))
    rig.close()
    report = Bench.load(path).report()
    assert report["pins"]["24"]["max_mv"] >= 11_500
    assert Bench.load(path).chip.cells[:4] == b"kept"


def test_each_opening_of_a_bench_is_another_boot(tmp_path: Path) -> None:
    """Boot numbers count up over the bench's life, as a board's would."""
    path = tmp_path / "a.bench"
    Bench.new(path, PART)
    boots = []
    for _ in range(3):
        rig = open_rig(f"virtual:{path}")
        boots.append(Session(rig.transport).connect().boot)
        rig.close()
    assert boots == [boots[0], boots[0] + 1, boots[0] + 2]


@pytest.mark.parametrize("name", [None, ""])
def test_no_name_is_an_error_that_says_how(name: str | None) -> None:
    """What may stand there, and a way without hardware."""
    with pytest.raises(UsageMistake) as caught:
        open_rig(name, PART)
    assert "serial port" in caught.value.wanted
    assert "virtual" in caught.value.hint


def test_a_bench_without_a_name_is_told() -> None:
    """A colon and nothing behind it."""
    with pytest.raises(UsageMistake, match="without a bench"):
        open_rig("virtual:", PART)


def test_a_bench_or_port_that_is_not_there_is_told(tmp_path: Path) -> None:
    """Each as what it is."""
    with pytest.raises(FileMistake):
        open_rig(f"virtual:{tmp_path / 'none'}", PART)
    with pytest.raises(LinkFault, match="does not exist"):
        open_rig(str(tmp_path / "none"), PART)


def test_the_rig_alone_needs_no_chip() -> None:
    """A look at the virtual rig's tables works without naming a part."""
    rig = open_rig("virtual")
    assert Session(rig.transport).connect().board.startswith("virtual")
    rig.close()
