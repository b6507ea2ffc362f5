"""define check: what a careful colleague would find in a definition."""

from __future__ import annotations

import argparse

from pulsewright.cli.desk import Desk, Parser, add, add_group


def add_commands(commands: argparse._SubParsersAction[Parser]) -> None:
    """The commands of this group."""
    inner = add_group(commands, "define", "work on a definition of your own", "pulsewright define check mypart.toml")
    check = add(
        inner,
        "check",
        _check,
        what="check a definition: every mistake with file, line, key, what stands there and what is wanted",
        example="pulsewright define check mypart.toml",
    )
    check.add_argument("file", metavar="FILE", help="the definition to check")


def _check(args: argparse.Namespace, desk: Desk) -> int:
    from pathlib import Path

    from pulsewright.chip.check import check_file
    from pulsewright.chip.load import load
    from pulsewright.errors import DefinitionMistake, FileMistake, Where

    if not Path(args.file).is_file():
        raise FileMistake(
            "there is no such definition file",
            where=Where(args.file),
            wanted="the path of a TOML file",
            hint="start with a copy of a shipped one: `chips --json` tells where each is",
        )
    problems = check_file(Path(args.file))
    errors = [problem for problem in problems if not problem.warning]
    warnings = [problem for problem in problems if problem.warning]
    if errors:
        raise DefinitionMistake(f"{args.file}: {len(errors)} to put right", problems)
    definition = load(args.file)
    lines = [f"{definition.name}: nothing to put right", f"hash {definition.digest}"]
    desk.say(*(str(problem) for problem in warnings))
    return desk.answer(
        lines, {"chip": definition.name, "hash": definition.digest, "warnings": [str(problem) for problem in warnings]}
    )
