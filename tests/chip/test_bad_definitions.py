"""Every mistake the checker knows, in a file of its own: the message stands as a comment on the offending line.

`#! text`: a problem on this very line whose message holds the text; several may follow one another. `#!file text`: a
problem of the whole file.
"""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator
from pathlib import Path

import pytest

from pulsewright.chip.check import check_file
from pulsewright.errors import Problem

HERE = Path(__file__).parent
BAD = sorted((HERE / "bad").glob("*.toml"))
SOURCES = sorted((HERE.parents[1] / "host" / "pulsewright" / "chip").glob("*.py"))


def expected(path: Path) -> list[tuple[str, int, str]]:
    """The messages a file's comments ask for: file, line (0: whole file), text."""
    found = []
    for number, line in enumerate(path.read_text(encoding="utf-8").splitlines(), 1):
        for word, text in re.findall(r"#!(file)? ?(.*?)\s*(?=#!|$)", line):
            found.append((str(path), 0 if word else number, text))
    return found


def all_expected(path: Path) -> list[tuple[str, int, str]]:
    """As `expected`, with the methods the file uses."""
    names = re.findall(r'^method = "(\w+)"', path.read_text(encoding="utf-8"), re.MULTILINE)
    methods = [path.parent / "methods" / f"{name}.toml" for name in names]
    return expected(path) + [one for method in methods if method.is_file() for one in expected(method)]


def matches(problem: Problem, wanted: tuple[str, int, str]) -> bool:
    """Whether a problem is the one asked for, at the very line."""
    file, line, text = wanted
    return problem.where.file == file and problem.where.line == line and text in str(problem)


@pytest.mark.parametrize("path", BAD, ids=lambda path: path.stem)
def test_every_mistake_is_found_at_its_line_and_no_other(path: Path) -> None:
    """One run over a file finds each problem its comments name, on that line, and nothing else."""
    wanted = all_expected(path)
    assert wanted, "a fixture that expects nothing tests nothing"
    problems = check_file(path)
    missing = [one for one in wanted if not any(matches(problem, one) for problem in problems)]
    surplus = [str(problem) for problem in problems if not any(matches(problem, one) for one in wanted)]
    assert (missing, surplus) == ([], [])


def test_the_files_the_mistakes_were_put_into_are_sound() -> None:
    """The sound file beside them has no problem, so what a fixture shows comes of its own mistakes."""
    for path in sorted((HERE / "good").glob("*.toml")):
        assert check_file(path) == []


def message_patterns() -> Iterator[tuple[str, str]]:
    """Each kind of problem the sources of the checker can tell, as a pattern, with the place that tells it."""
    for path in SOURCES:
        tree = ast.parse(path.read_text(encoding="utf-8"))
        for function in [node for node in ast.walk(tree) if isinstance(node, ast.FunctionDef)]:
            named = {
                target.id: node.value
                for node in ast.walk(function)
                if isinstance(node, ast.Assign)
                for target in node.targets
                if isinstance(target, ast.Name) and target.id == "what"
            }
            for call in [node for node in ast.walk(function) if isinstance(node, ast.Call)]:
                name = getattr(call.func, "attr", getattr(call.func, "id", ""))
                if name not in ("at", "report", "unknown", "Problem") or len(call.args) < 2:
                    continue
                what = call.args[1]
                what = named.get(what.id, what) if isinstance(what, ast.Name) else what
                pattern = as_pattern(what)
                if pattern:
                    yield ("unknown " if name == "unknown" else "") + pattern, f"{path.name}:{call.lineno}"


def as_pattern(node: ast.expr) -> str:
    """A message as a pattern: what is filled in may be anything; "" for one handed on by a caller."""
    if isinstance(node, ast.Constant):
        return re.escape(str(node.value))
    if isinstance(node, ast.JoinedStr):
        return "".join(as_pattern(part) if isinstance(part, ast.Constant) else ".*" for part in node.values)
    return ""


def told_elsewhere(pattern: str) -> bool:
    """Two messages come of how a file was found, not of what stands in it: test_load.py has those."""
    return pattern in (re.escape("no such part"), re.escape("not a text file"))


def test_each_kind_of_mistake_has_a_fixture() -> None:
    """No message of the checker is without a file that brings it forth."""
    told = {problem.what for path in BAD for problem in check_file(path)}
    patterns = list(message_patterns())
    assert len(patterns) > 60
    untold = [
        (pattern, place)
        for pattern, place in patterns
        if not told_elsewhere(pattern) and not any(re.fullmatch(pattern, what) for what in told)
    ]
    assert untold == []
