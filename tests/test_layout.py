"""How the project's own files are kept: what lies at the top, how long a file is, that every test says its fact."""

from __future__ import annotations

import ast
import subprocess
from pathlib import Path

import pytest

REPOSITORY = Path(__file__).resolve().parents[1]
LONGEST_FILE_LINES = 400
AT_THE_TOP = {"README.md", "DEVELOPERS.md", "pyproject.toml", "host", "firmware", "chipdefs", "tests", "samples"}


def kept_files(*folders: str) -> list[Path]:
    """Every file under the folders that git keeps, or would keep, as paths from the top; without those just deleted."""
    command = ["git", "-C", str(REPOSITORY), "ls-files", "-z", "--cached", "--others", "--exclude-standard", *folders]
    listed = subprocess.run(command, capture_output=True, text=True, check=True).stdout
    return sorted({Path(name) for name in listed.split("\0") if name and (REPOSITORY / name).is_file()})


def out_of_place(files: list[Path]) -> set[str]:
    """The names at the top that the map of the project does not have; a leading dot marks the settings of a tool."""
    return {path.parts[0] for path in files if not path.parts[0].startswith(".")} - AT_THE_TOP


def is_source(path: Path) -> bool:
    """Whether people write and read this file as code."""
    return path.suffix in {".py", ".sh", ".c", ".h"} or path.name == "run"


def too_long(text: str) -> bool:
    """Whether a source file has grown past what one sitting can read."""
    return len(text.splitlines()) > LONGEST_FILE_LINES


def silent_tests(source: str) -> list[str]:
    """The test functions of `source` that have no docstring."""
    kinds = (ast.FunctionDef, ast.AsyncFunctionDef)
    return [
        node.name
        for node in ast.walk(ast.parse(source))
        if isinstance(node, kinds) and node.name.startswith("test") and not (ast.get_docstring(node) or "").strip()
    ]


def test_the_top_level_is_the_map() -> None:
    """Nothing lies at the top of the repository that the map in DEVELOPERS.md does not have, and nothing is missing."""
    files = kept_files()
    assert out_of_place(files) == set()
    assert {path.parts[0] for path in files} >= AT_THE_TOP


def test_a_stray_name_at_the_top_is_found() -> None:
    """A file that was left at the top is named; a tool's own settings are not."""
    assert out_of_place([Path("notes.txt"), Path(".ci/run"), Path("host/pulsewright/units.py")]) == {"notes.txt"}


def test_no_source_file_is_too_long() -> None:
    """Each source file of the program and its tests can be read in one sitting."""
    paths = [path for path in kept_files("host", "tests") if is_source(path)]
    assert Path("tests/run") in paths
    assert [str(path) for path in paths if too_long((REPOSITORY / path).read_text("utf-8"))] == []


@pytest.mark.parametrize(("lines", "verdict"), [(400, False), (401, True)])
def test_a_long_file_is_found(lines: int, verdict: bool) -> None:
    """The limit itself is allowed, a line more is not."""
    assert too_long("pass\n" * lines) is verdict


def test_every_test_says_its_fact() -> None:
    """Each test function of the project has a docstring."""
    paths = [path for path in kept_files("tests") if path.suffix == ".py"]
    assert Path("tests/test_layout.py") in paths
    assert [(str(path), name) for path in paths for name in silent_tests((REPOSITORY / path).read_text("utf-8"))] == []


def test_a_silent_test_is_found() -> None:
    """A test without a docstring is named, in a class as well; helpers and tests that speak are not."""
    source = (
        "def test_mute():\n    pass\nclass TestThings:\n    def test_too(self):\n        '''   '''\n"
        "def test_speaks():\n    '''A fact.'''\ndef helper():\n    pass\n"
    )
    assert silent_tests(source) == ["test_mute", "test_too"]
