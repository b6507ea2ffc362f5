"""The committed tables are those of wire.toml, and the fingerprint is that of its meaning."""

from __future__ import annotations

import copy
import tomllib
from collections.abc import Callable
from pathlib import Path

import pytest

from pulsewright.wire.generate import Table, fingerprint, main, outputs
from pulsewright.wire.tables import FINGERPRINT, FRAME_FIELDS, OP_ARGS, OP_COST

REPOSITORY = Path(__file__).resolve().parents[2]


@pytest.fixture
def table() -> Table:
    """wire.toml as it stands."""
    return tomllib.loads((REPOSITORY / "firmware/wire.toml").read_text())


def test_the_generated_files_are_fresh() -> None:
    """Tables, header and page on the disk are what wire.toml makes now; --check says the same."""
    for path, text in outputs(REPOSITORY).items():
        assert path.read_text() == text, f"{path} is stale: run python -m pulsewright.wire.generate"
    assert main(["--check"]) == 0


def test_a_stale_file_would_be_seen(tmp_path: Path, table: Table) -> None:
    """Another table makes other files: all three."""
    (tmp_path / "firmware").mkdir()
    text = (REPOSITORY / "firmware/wire.toml").read_text()
    (tmp_path / "firmware/wire.toml").write_text(text.replace("layout = 1", "layout = 2", 1))
    fresh = {path.name: text for path, text in outputs(REPOSITORY).items()}
    assert all(text != fresh[path.name] for path, text in outputs(tmp_path).items())


def test_the_fingerprint_is_that_of_the_table(table: Table) -> None:
    """The number in the code belongs to the file."""
    assert fingerprint(table) == FINGERPRINT


CHANGES: dict[str, Callable[[Table], object]] = {
    "code": lambda t: t["ops"]["wait"].update(code=0x7F),
    "arguments": lambda t: t["ops"]["wait"]["args"].append(["more", "u8"]),
    "type of an argument": lambda t: t["ops"]["wait"].update(args=[["ticks", "u16"]]),
    "semantics": lambda t: t["ops"]["wait"].update(semantics=2),
    "cost": lambda t: t["ops"]["wait"].update(cost=5),
    "a new op": lambda t: t["ops"].update(rest={"code": 0x7F, "args": [], "cost": 4, "semantics": 1}),
    "a frame": lambda t: t["frames"]["block"].update(kind=0x11),
    "a limit": lambda t: t["limits"].update(program_bytes=2048),
    "the permit": lambda t: t["permit"]["layout"].pop(),
    "a fault": lambda t: t["faults"].update(dead_man=99),
}


@pytest.mark.parametrize("name", CHANGES)
def test_a_change_of_meaning_changes_the_fingerprint(name: str, table: Table) -> None:
    """Host and board made from different tables say so."""
    changed = copy.deepcopy(table)
    CHANGES[name](changed)
    assert fingerprint(changed) != fingerprint(table)


def test_a_change_of_wording_does_not(table: Table) -> None:
    """An `about` may be bettered without flashing a board."""
    changed = copy.deepcopy(table)
    changed["ops"]["wait"]["about"] = "said in other words"
    changed["frames"]["block"]["about"] = "said in other words"
    assert fingerprint(changed) == fingerprint(table)


def test_codes_are_all_different(table: Table) -> None:
    """No two ops share a code, no two frames a kind, and every op has arguments and a cost."""
    codes = [op["code"] for op in table["ops"].values()]
    kinds = [frame["kind"] for frame in table["frames"].values()]
    assert len(codes) == len(set(codes)) == len(OP_ARGS) == len(OP_COST)
    assert len(kinds) == len(set(kinds)) == len(FRAME_FIELDS)
