"""No leaf of a file is idle: each one altered or taken away is a mistake, or makes another definition."""

from __future__ import annotations

import copy
import re
import tomllib
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from pulsewright.chip.check import check_file
from pulsewright.chip.lines import KeyPath, dotted
from pulsewright.chip.load import find, load
from pulsewright.chip.model import Definition
from pulsewright.errors import Where
from tests.chip.mutants import save

TREE: dict[str, Any] = tomllib.loads(find("27e512").read_text(encoding="utf-8"))
FLASH = Path(__file__).parent / "good" / "peal32.toml"
# Two keys say what holds without them too; taking them away changes the digest, not the content.
SAID_TWICE = {find("27e512"): ["chip.blank", "chip.erase"], FLASH: ["chip.erase"]}
_QUANTITY = re.compile(r"(\d+)(\.\d+)? (\w+)$")


def leaves(tree: Any, before: KeyPath = ()) -> Iterator[tuple[KeyPath, Any]]:
    """Every leaf with its path."""
    if isinstance(tree, (dict, list)):
        for key, one in tree.items() if isinstance(tree, dict) else enumerate(tree):
            yield from leaves(one, (*before, key))
    else:
        yield before, tree


def altered(value: Any) -> Any:
    """Another value of the same kind: a number one higher, a quantity one unit higher, a text with a letter more."""
    if isinstance(value, int):
        return value + 1
    match = _QUANTITY.fullmatch(value)
    return f"{int(match[1]) + 1}{match[2] or ''} {match[3]}" if match else value + "x"


def with_leaf(tree: dict[str, Any], path: KeyPath, change: str) -> dict[str, Any]:
    """The tree with one leaf altered, or taken away."""
    tree = copy.deepcopy(tree)
    node: Any = tree
    for part in path[:-1]:
        node = node[part]
    if change == "altered":
        node[path[-1]] = altered(node[path[-1]])
    else:
        del node[path[-1]]
    return tree


def content(part: Definition) -> Definition:
    """A definition without what names the tree it came of."""
    return replace(part, digest="", raw={})


@pytest.mark.parametrize("change", ["altered", "taken away"])
@pytest.mark.parametrize("file", SAID_TWICE, ids=lambda path: path.stem)
def test_each_leaf_counts(
    tmp_path: Path, file: Path, change: str, record_property: Callable[[str, object], None]
) -> None:
    """Every mutant is refused with a problem, or loads with another digest and another content."""
    tree = tomllib.loads(file.read_text(encoding="utf-8"))
    base = load(str(save(tree, tmp_path)))
    assert base.digest == load(str(file)).digest
    refused: list[str] = []
    changed: list[str] = []
    idle: list[str] = []
    for path, _ in leaves(tree):
        mutant = save(with_leaf(tree, path, change), tmp_path)
        if any(not problem.warning for problem in check_file(mutant)):
            refused.append(dotted(path))
            continue
        part = load(str(mutant))
        assert part.digest != base.digest, dotted(path)
        same = content(part) == content(base)
        (idle if same else changed).append(dotted(path))
    record_property("refused", len(refused))
    record_property("changed", len(changed))
    assert idle == ([] if change == "altered" else SAID_TWICE[file])
    assert len(refused) + len(changed) + len(idle) == len(list(leaves(tree)))


@pytest.mark.parametrize(
    "path",
    [
        ("supplies", "VPP", "erase", "max"),
        ("maxima", "A9", "max"),
        ("pins", "VCC"),
        ("pins", "A", 15),
        ("modes", "verify", "OE"),
        ("timing", "tPW", "max"),
        ("makers", 0, "id", 1, "at"),
        ("program", "steps", 0, "steps", 0, "max"),
    ],
)
def test_a_mistake_is_told_at_its_key(tmp_path: Path, path: KeyPath) -> None:
    """A leaf of the wrong kind is told with its own key, wherever it stands."""
    tree = copy.deepcopy(TREE)
    node: Any = tree
    for part in path[:-1]:
        node = node[part]
    node[path[-1]] = 3.5
    places: list[Where] = [problem.where for problem in check_file(save(tree, tmp_path))]
    assert dotted(path) in [where.key for where in places]
