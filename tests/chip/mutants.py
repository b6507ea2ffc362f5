"""Trees written back as TOML, for tests that change one."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any


def written(value: Any) -> str:
    """A value as TOML, tables inline."""
    if isinstance(value, dict):
        return "{" + ", ".join(f"{key} = {written(one)}" for key, one in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(map(written, value)) + "]"
    return json.dumps(value, ensure_ascii=False)


def save(tree: dict[str, Any], folder: Path) -> Path:
    """The tree as a file, each table on one line, so that lines do not move."""
    path = folder / "mutant.toml"
    path.write_text("".join(f"{key} = {written(one)}\n" for key, one in tree.items()), encoding="utf-8")
    return path
