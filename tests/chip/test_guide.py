"""The guide in chipdefs/README.md names what the language has."""

from __future__ import annotations

import re

import pytest

from pulsewright.chip.kinds import Either, Kind, Table
from pulsewright.chip.schema import DEFINITION, KINDS
from pulsewright.chip.schema_steps import STEP
from pulsewright.chip.shipped import shipped_folder
from pulsewright.chip.words import MEANT_TIMINGS, POLL_BITS, TECHNOLOGIES

GUIDE = (shipped_folder() / "README.md").read_text(encoding="utf-8")


def keys(kind: Kind) -> set[str]:
    """Every key a kind of table knows, down to the tables in it; parts of maker rows stand in the tables themselves."""
    found: set[str] = set()
    if isinstance(kind, Table):
        for name, inner in kind.keys.items():
            found |= {name} | keys(inner)
    if isinstance(kind, Either):
        found = {name for inner in kind.kinds for name in keys(inner)}
    return found


@pytest.mark.parametrize("table", [name for name in DEFINITION.keys if name not in ("format", "makers")])
def test_every_key_of_a_table_is_in_the_guide(table: str) -> None:
    """Each table has its name in a heading or a paragraph, and each of its keys is named somewhere."""
    assert f"`[{table}]`" in GUIDE
    missing = [key for key in keys(DEFINITION.keys[table]) if not re.search(rf"\b{key}\b", GUIDE)]
    assert missing == []


def test_every_step_is_in_the_guide() -> None:
    """The table of steps shows each kind, and each key it has."""
    for name, kind in STEP.by_key.items():
        assert f"{{ {name} = " in GUIDE
        assert [key for key in kind.keys if f"{key} = " not in GUIDE and f"`{key}`" not in GUIDE] == []


def test_words_with_a_meaning_are_in_the_guide() -> None:
    """Timing names, poll bits, technologies."""
    for word in (*MEANT_TIMINGS, *POLL_BITS, *TECHNOLOGIES):
        assert re.search(rf"\b{word}\b", GUIDE), word
    assert set(keys(KINDS["window"])) <= {"min", "typ", "max"}


def test_every_shipped_method_is_in_the_guide() -> None:
    """The list of methods has each file of the folder, and no other."""
    files = {path.stem for path in (shipped_folder() / "methods").glob("*.toml")}
    listed = GUIDE[GUIDE.index("| method | for |") :]
    assert set(re.findall(r"^\| `(\w+)` \|", listed, re.MULTILINE)) == files
