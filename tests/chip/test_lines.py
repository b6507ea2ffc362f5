"""The locator: every key of a TOML text has the line it stands on."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.chip.lines import KeyPath, Places, SourceText, dotted, scan, syntax_line

CHIPDEFS = Path(__file__).parents[2] / "chipdefs"

TEXT = '''# comment with = and [brackets]
format = 1
a.b.c = "x # not a comment"

[chip]
name = 'lit # eral' # comment
"odd key" = """
two
lines"""
raw = \'\'\'
[not.a.table]
\'\'\'

[[makers]]
maker = "one"
supplies.VPP = { typ = "1 V", "max" = "2 V" }

[[makers]]
id = [
    { at = 1, is = 2 },

    # a comment between
    [ { at = 3 } ],
]
[makers.sub]
deep = [[1, 2],
        [3, 4]]
'''


def paths_of(tree: Any, before: KeyPath = ()) -> list[KeyPath]:
    """Every path of a tree."""
    found: list[KeyPath] = [before] if before else []
    if isinstance(tree, dict):
        return found + [path for key, one in tree.items() for path in paths_of(one, (*before, key))]
    if isinstance(tree, list):
        return found + [path for index, one in enumerate(tree) for path in paths_of(one, (*before, index))]
    return found


def test_lines_counted_by_hand() -> None:
    """Dotted and quoted keys, long texts, arrays over lines and arrays of tables are found where they stand."""
    lines = scan(TEXT)
    wanted: dict[KeyPath, int] = {
        ("format",): 2,
        ("a",): 3,
        ("a", "b", "c"): 3,
        ("chip",): 5,
        ("chip", "name"): 6,
        ("chip", "odd key"): 7,
        ("chip", "raw"): 10,
        ("makers",): 14,
        ("makers", 0): 14,
        ("makers", 0, "supplies", "VPP", "max"): 16,
        ("makers", 1): 18,
        ("makers", 1, "id", 0, "at"): 20,
        ("makers", 1, "id", 1, 0, "at"): 23,
        ("makers", 1, "sub"): 25,
        ("makers", 1, "sub", "deep", 1, 0): 27,
    }
    assert {path: lines.get(path) for path in wanted} == wanted


def test_it_finds_exactly_the_paths_tomllib_finds() -> None:
    """Scanner and tomllib, which share nothing, agree on every path of this text and of every file shipped."""
    for text in (TEXT, *(path.read_text(encoding="utf-8") for path in sorted(CHIPDEFS.rglob("*.toml")))):
        assert sorted(map(dotted, scan(text))) == sorted(map(dotted, paths_of(tomllib.loads(text))))


def test_each_line_of_a_shipped_file_holds_its_key() -> None:
    """The last name of a path stands in the text of the line the scanner gives."""
    text = (CHIPDEFS / "27e512.toml").read_text(encoding="utf-8")
    rows = text.splitlines()
    for path, line in scan(text).items():
        name = next(part for part in reversed(path) if isinstance(part, str))
        if isinstance(path[-1], str):
            assert name in rows[line - 1]


@given(st.text(alphabet="ab=[]{}\"'#.,\n 1\\", max_size=60))
def test_no_text_breaks_it(text: str) -> None:
    """Whatever the text, the scanner ends; where tomllib can read it, both find the same paths."""
    lines = scan(text)
    try:
        tree = tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return
    assert sorted(map(dotted, lines)) == sorted(map(dotted, paths_of(tree)))


KEYS = st.text(alphabet="abcXYZ09_-", min_size=1, max_size=4)
LEAVES = st.sampled_from(
    ['"text"', "'lit'", "12", "0x1F", "true", '"a # b"', '"""x\ny"""', "[1, 2]", "[\n 1,\n\n 2, # c\n]"]
)


@given(
    st.dictionaries(KEYS, LEAVES, min_size=1, max_size=5), st.dictionaries(KEYS, LEAVES, max_size=4), st.integers(0, 3)
)
def test_lines_of_drawn_files(top: dict[str, str], inner: dict[str, str], gap: int) -> None:
    """In a drawn file each key is on the line it was written on, whatever stands before it."""
    rows: list[str] = []
    wanted: dict[KeyPath, int] = {}

    def write(path: KeyPath, key: str, value: str) -> None:
        wanted[*path, key] = "".join(rows).count("\n") + 1
        rows.append(f"{key} = {value}\n" + "\n" * gap)

    for key, value in top.items():
        write((), key, value)
    for index in range(2):
        rows.append("[[zz.rows]] # rows\n")
        for key, value in inner.items():
            write(("zz", "rows", index), key, value)
    text = "".join(rows)
    tomllib.loads(text)
    lines = scan(text)
    assert {path: lines.get(path) for path in wanted} == wanted
    assert {path: scan(text.replace("\n", "\r\n")).get(path) for path in wanted} == wanted


def test_a_path_is_printed_as_toml_writes_it() -> None:
    """Indices stand in brackets, names that are not plain in quotes."""
    assert dotted(("program", "steps", 0, "steps", 1, "mode")) == "program.steps[0].steps[1].mode"
    assert dotted(("a", "odd key")) == 'a."odd key"'


def test_a_missing_key_gets_the_line_of_its_table() -> None:
    """The place of a key that is not there is the nearest table around it, or the whole file."""
    places = Places(SourceText("f.toml", scan(TEXT)))
    assert str(places.where(("chip", "words"))) == "f.toml:5 chip.words"
    assert str(places.where(("pins", "CE"))) == "f.toml pins.CE"


def test_where_tomllib_gives_up_is_the_line() -> None:
    """A syntax error has tomllib's line; at the end of the text, the last line that says something."""
    for text, wanted in (("a = 1\nb = = 2\n", 2), ("a = 1\na = 2\n", 2), ("a = 1\nb = [1,\n\n\n", 2)):
        with pytest.raises(tomllib.TOMLDecodeError) as caught:
            tomllib.loads(text)
        assert syntax_line(caught.value, text)[0] == wanted
