"""The JSON Schema for editors: fresh, and judged by a validator that knows nothing of our checker (jsonschema)."""

from __future__ import annotations

import copy
import json
import tomllib
from pathlib import Path

import jsonschema
import pytest

from pulsewright.chip.check import check_file
from pulsewright.chip.schema import json_schema, schema_text
from pulsewright.chip.shipped import shipped_folder

HERE = Path(__file__).parent
SOUND = [*sorted(shipped_folder().glob("*.toml")), *sorted((HERE / "good").glob("*.toml"))]
# Fixtures whose mistakes are of shape, type or word, so that an editor can see them; the rest need sense.
OF_SHAPE = [
    "bus_steps",
    "bus_tables",
    "missing_keys",
    "missing_tables",
    "row_mistakes",
    "sizes",
    "units_and_types",
    "unknown_names",
]


def validator() -> jsonschema.Draft202012Validator:
    """The committed schema, as an editor loads it."""
    text = (shipped_folder() / "definition.schema.json").read_text(encoding="utf-8")
    return jsonschema.Draft202012Validator(json.loads(text))


def test_the_committed_schema_is_fresh() -> None:
    """The file equals what the model makes now; if not: python -m pulsewright.chip.schema."""
    assert (shipped_folder() / "definition.schema.json").read_text(encoding="utf-8") == schema_text()


def test_it_is_a_schema() -> None:
    """The schema itself is valid draft 2020-12."""
    jsonschema.Draft202012Validator.check_schema(json_schema())


@pytest.mark.parametrize("path", SOUND, ids=lambda path: path.stem)
def test_a_sound_file_is_valid(path: Path) -> None:
    """What the checker accepts, an editor does not underline."""
    errors = [error.message for error in validator().iter_errors(tomllib.loads(path.read_text(encoding="utf-8")))]
    assert errors == []


@pytest.mark.parametrize("name", OF_SHAPE)
def test_a_file_of_wrong_shape_is_not_valid(name: str) -> None:
    """Mistakes of shape are underlined by an editor too."""
    tree = tomllib.loads((HERE / "bad" / f"{name}.toml").read_text(encoding="utf-8"))
    assert not validator().is_valid(tree)


def test_a_maker_row_may_hold_any_leaf_of_the_file() -> None:
    """Overrides need not be whole tables; a wrong unit in one is seen."""
    tree = tomllib.loads((HERE / "good" / "chime24.toml").read_text(encoding="utf-8"))
    row = {"maker": "Belfry", "id": [{"at": 0, "is": 1}], "timing": {"tPW": {"max": "105 us"}}}
    tree["makers"].append({**row, "supplies": {"VPP": {"program": {"typ": {"value": "12.5 V", "from": "page 2"}}}}})
    assert validator().is_valid(tree)
    wrong = copy.deepcopy(tree)
    wrong["makers"][1]["timing"]["tPW"]["max"] = "105 V"
    assert not validator().is_valid(wrong)


def test_checker_and_schema_agree_on_what_has_a_source() -> None:
    """Every single value may be a table with `value` and `from`, in both."""
    tree = tomllib.loads((HERE / "good" / "chime24.toml").read_text(encoding="utf-8"))
    tree["chip"]["words"] = {"value": 2048, "from": "page 1"}
    tree["pins"]["CE"] = {"value": 18, "from": "page 2"}
    tree["modes"]["read"]["CE"] = {"value": "L", "from": "page 3"}
    assert validator().is_valid(tree)
    assert check_file(HERE / "good" / "chime24.toml") == []
