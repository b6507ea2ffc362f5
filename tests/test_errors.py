"""The tree of errors: what its docstring draws is what the classes are, with the exit code of each."""

from __future__ import annotations

import inspect
import re

import pytest

from pulsewright import errors
from pulsewright.errors import Problem, PulsewrightError, Where


def drawn_tree() -> dict[str, tuple[str, int]]:
    """Parent and exit code of each class, read off the drawing; a code holds for all below it."""
    rows = (errors.__doc__ or "").splitlines()
    found: dict[str, tuple[str, int]] = {}
    above: list[tuple[str, int]] = [("PulsewrightError", 0)]
    for row in rows[rows.index("PulsewrightError") + 1 :]:
        match = re.match(r"^((?:│   |    )*)(?:├── |└── )(\w+)(?:\s+exit (\d+))?", row)
        if match is None:
            continue
        depth = len(match[1]) // 4 + 1
        code = int(match[3]) if match[3] else above[depth - 1][1]
        found[match[2]] = (above[depth - 1][0], code)
        above[depth:] = [(match[2], code)]
    return found


def public_classes() -> dict[str, type[PulsewrightError]]:
    """Every public error class."""
    return {
        name: one
        for name, one in vars(errors).items()
        if inspect.isclass(one) and issubclass(one, PulsewrightError) and not name.startswith("_")
    }


def public_parent(one: type[PulsewrightError]) -> str:
    """The nearest public class an error derives from."""
    return next(base.__name__ for base in one.__mro__[1:] if not base.__name__.startswith("_"))


def test_the_drawing_has_every_class() -> None:
    """No error is missing from the drawing, and none is drawn that does not exist."""
    assert set(drawn_tree()) == set(public_classes()) - {"PulsewrightError"}


@pytest.mark.parametrize("name", sorted(set(public_classes()) - {"PulsewrightError"}))
def test_each_error_has_the_exit_code_and_parent_it_is_drawn_with(name: str) -> None:
    """The exit code a command ends with is the one the drawing gives."""
    one = public_classes()[name]
    assert (public_parent(one), one.exit_code) == drawn_tree()[name]


def test_the_exit_codes_are_those_of_the_commands() -> None:
    """Errors end a command with 1 to 5 or 130 and never with 0."""
    assert {one.exit_code for one in public_classes().values()} == {1, 2, 3, 4, 5, 130}


def test_a_message_tells_facts_before_guesses() -> None:
    """What happened, where, the numbers, what the rig did, further facts, and last one thing to try."""
    error = errors.Tripped(
        "VPP.program fell",
        where=Where("part.toml", 12, "program.steps[0]"),
        step="step 3 of 9",
        wanted="12.5 V",
        got="11.9 V",
        did="VCC off",
        hint="measure the rail",
        facts=["word 0x0012"],
    )
    assert error.lines() == [
        "VPP.program fell",
        "  where: part.toml:12 program.steps[0]",
        "  step: step 3 of 9",
        "  wanted: 12.5 V",
        "  got: 11.9 V",
        "  the rig: VCC off",
        "  word 0x0012",
        "  try: measure the rail",
    ]
    assert error.facts_json()["error"] == "Tripped"


def test_json_has_only_what_there_is() -> None:
    """Facts nobody gave are not in the JSON object."""
    assert errors.ChipFault("dead").facts_json() == {"error": "ChipFault", "what": "dead"}


def test_a_problem_is_one_line() -> None:
    """File, line and key, what is wrong, what stands there, what is wanted, the nearest right word."""
    problem = Problem(Where("part.toml", 3, "pins.OEE"), "unknown pin", "OEE", "one of CE, OE", "OE")
    assert str(problem) == "part.toml:3 pins.OEE: unknown pin; found OEE; wanted one of CE, OE; did you mean OE?"
    assert "warning: odd" in str(Problem(Where("part.toml"), "odd", warning=True))


def test_a_definition_mistake_lists_every_problem() -> None:
    """All problems are in the message and kept as objects."""
    problems = [Problem(Where("a.toml", line), "wrong") for line in (1, 2)]
    error = errors.DefinitionMistake("2 mistakes", problems)
    assert error.problems == tuple(problems)
    assert error.lines()[1:] == ["  a.toml:1: wrong", "  a.toml:2: wrong"]
