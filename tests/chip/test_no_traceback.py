"""Whatever a user writes, the checker answers with problems and never with a traceback."""

from __future__ import annotations

import copy
import tomllib
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pulsewright.chip.check import check_file
from pulsewright.chip.load import find, load
from pulsewright.errors import DefinitionMistake
from tests.chip.mutants import save

FILES = [*sorted((Path(__file__).parent / "good").glob("*.toml")), find("27e512"), find("28c256")]
TREES: list[dict[str, Any]] = [tomllib.loads(path.read_text(encoding="utf-8")) for path in FILES]
WORDS = [
    "",
    "L",
    "VCC",
    "VPP.program",
    "VCC.read",
    "image",
    "5 V",
    "2 us",
    "read",
    "tPW",
    "pulse_verify_shared",
    "page_write_command",
    "protect_on",
    "AA@5555",
    "page",
    "DQ7",
    "A9",
    "out",
]
NAMES = ["mode", "steps", "typ", "min", "max", "value", "from", "D", "VCC", "A", "id", "method", "kind", "repeat", "x"]
NAMES += [
    "write",
    "load",
    "poll",
    "each",
    "else",
    "command",
    "leave",
    "parameters",
    "protected",
    "finally",
    "page",
    "gap",
]
SCALARS = st.sampled_from(WORDS) | st.integers(-2, 70_000) | st.booleans() | st.floats(0, 9)
VALUES = st.recursive(
    SCALARS, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.sampled_from(NAMES), inner, max_size=3)
)


def nodes(tree: Any) -> list[tuple[Any, Any]]:
    """Every (container, key) of a tree."""
    items = list(tree.items() if isinstance(tree, dict) else enumerate(tree))
    inner = [pair for _, one in items if isinstance(one, (dict, list)) for pair in nodes(one)]
    return [(tree, key) for key, _ in items] + inner


@settings(max_examples=300)
@given(st.data())
def test_any_value_in_any_place_is_answered(tmp_path_factory: pytest.TempPathFactory, data: st.DataObject) -> None:
    """With one to three places of a sound file replaced or added by anything, it loads or is refused with problems."""
    tree = copy.deepcopy(data.draw(st.sampled_from(TREES)))
    for _ in range(data.draw(st.integers(1, 3))):
        places = nodes(tree)
        container, key = places[data.draw(st.integers(0, len(places) - 1))]
        if isinstance(container, dict) and data.draw(st.booleans()):
            key = data.draw(st.sampled_from(NAMES))
        container[key] = data.draw(VALUES)
    path = save(tree, tmp_path_factory.mktemp("drawn"))
    wrong = [problem for problem in check_file(path) if not problem.warning]
    assert all(problem.where.file for problem in wrong)
    if wrong:
        with pytest.raises(DefinitionMistake) as caught:
            load(str(path))
        assert list(caught.value.problems) == wrong
    else:
        load(str(path))


@pytest.mark.parametrize(
    "text", ["", "makers = 3", "makers = [1]", "[[makers]]", "pins = []", "supplies.VCC = 1", "chip.from = 1"]
)
def test_hardly_anything_is_answered(tmp_path: Path, text: str) -> None:
    """A file with next to nothing in it is told everything that is missing."""
    path = tmp_path / "bare.toml"
    path.write_text(text, encoding="utf-8")
    whats = [problem.what for problem in check_file(path)]
    assert "a table is missing" in whats
