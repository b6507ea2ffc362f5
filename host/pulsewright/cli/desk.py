"""What every command shares: where its answers go, its common options, how it is stopped."""

from __future__ import annotations

import argparse
import json
import os
import re
import signal
import sys
from collections.abc import Callable, Iterable, Mapping
from types import FrameType
from typing import Any, NoReturn

from pulsewright.errors import PulsewrightError, UsageMistake
from pulsewright.units import UnitMistake, parse_address

Handler = Callable[[argparse.Namespace, "Desk"], int]

HIGH_VOLTAGE = """\
High voltage and hot parts: a rig raises pins to 12-14 V, for some parts to 25 V. While its lamp says "do not
touch", leave chip, socket and wires alone. A chip that sat turned round can burn a finger."""
STATIC = "Static: touch earth before a chip; seat and lift it only with the lamp off."
UV = """\
UV-C: windowed parts are erased by a lamp that harms eyes and skin within minutes. Run it only in a closed box with
a switch in its lid, and never look at it."""
LICENSED = """\
Where a failure can hurt someone - lifts, burners, brakes, medical devices - changing code is for licensed practice.
A proven burn says that the bytes are right, not that the machine is safe with them."""


class Parser(argparse.ArgumentParser):
    """A parser whose complaints take the one form of all errors; `late` adds to its help what is costly to know."""

    late: Callable[[], str] | None = None

    def __init__(self, **settings: Any) -> None:
        super().__init__(**settings, add_help=False)
        self.add_argument("--help", action="help", help="show this text")

    def format_help(self) -> str:
        """The help, with the late part at its end."""
        return super().format_help() + (f"\n{self.late()}\n" if self.late is not None else "")

    def error(self, message: str) -> NoReturn:
        """UsageMistake instead of an exit of its own, with the nearest right word where a word was not known."""
        unknown = re.search(r"argument (\w+): invalid choice: '(.*?)' \(choose from (.*)\)", message)
        if unknown:
            words = re.findall(r"[\w-]+", unknown[3])
            wanted = f"one of {', '.join(words)}"
            raise UsageMistake(
                f"no {unknown[1]} is called {unknown[2]}", wanted=wanted, hint=self._nearest(unknown[2], words)
            )
        missing = message.removeprefix("the following arguments are required: ")
        if missing != message:
            raise UsageMistake(f"{missing} is missing", wanted=self._usage(), hint=f"{self.prog} --help")
        raise UsageMistake(message.removeprefix("argument "), hint=f"{self.prog} --help")

    def not_known(self, words: list[str]) -> NoReturn:
        """UsageMistake for words that are left over, with the option they may be meant as."""
        options = [option for option in self._option_string_actions if len(option) > 2]
        hint = self._nearest(words[0].partition("=")[0], options)
        raise UsageMistake(f"{self.prog} does not know {' '.join(words)}", wanted=self._usage(), hint=hint)

    def _usage(self) -> str:
        return " ".join(self.format_usage().split()).removeprefix("usage: ")

    def _nearest(self, word: str, words: list[str]) -> str:
        import difflib

        close = difflib.get_close_matches(word, words, n=1)
        return f"{close[0]}, or {self.prog} --help" if close else f"{self.prog} --help"


class Desk:
    """Where a command's answer goes: text, or one JSON object on standard output; all else on standard error."""

    def __init__(self, as_json: bool = False) -> None:
        self.as_json = as_json

    def say(self, *lines: str) -> None:
        """Lines beside the answer."""
        for line in lines:
            print(line, file=sys.stderr, flush=True)

    def answer(self, lines: Iterable[str], facts: Mapping[str, object] | None = None, exit_code: int = 0) -> int:
        """The answer; gives the exit code back."""
        text = list(lines)
        if self.as_json:
            result = {"result": text[0] if text else "", "exit": exit_code, **(facts or {})}
            print(json.dumps(result, indent=1, ensure_ascii=False), flush=True)
        else:
            for line in text:
                print(line)
            sys.stdout.flush()
        return exit_code

    def complain(self, error: PulsewrightError) -> int:
        """An error in its one form; its exit code."""
        self.say(*error.lines())
        if self.as_json:
            facts = {key: value for key, value in error.facts_json().items() if key != "what"}
            self.answer([error.what], facts, error.exit_code)
        return error.exit_code


def add(
    commands: argparse._SubParsersAction[Parser],
    name: str,
    handler: Handler,
    *,
    what: str,
    example: str,
    more: str = "",
    cautions: Iterable[str] = (),
) -> Parser:
    """One command: its help works alone, with an example, and it can answer in JSON."""
    paragraphs = [f"{what[0].upper()}{what[1:]}.", *([more] if more else [])]
    ending = "\n\n".join([f"example:\n  {example}", *cautions])
    parser = commands.add_parser(
        name,
        help=what,
        description="\n\n".join(paragraphs),
        epilog=ending,
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    parser.add_argument(
        "--json", action="store_true", help="one JSON object on standard output, all else on standard error"
    )
    parser.set_defaults(handler=handler, parser=parser)
    return parser


def add_group(commands: argparse._SubParsersAction[Parser], name: str, what: str, example: str) -> Any:
    """A word that holds commands of its own; gives what `add` takes."""
    group = commands.add_parser(
        name,
        help=what,
        description=f"{what[0].upper()}{what[1:]}.",
        epilog=f"example:\n  {example}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    return group.add_subparsers(title="commands", metavar="COMMAND", required=True, parser_class=Parser)


def address(text: str) -> int:
    """An address option."""
    try:
        return parse_address(text)
    except UnitMistake as mistake:
        raise argparse.ArgumentTypeError(f"{text!r} is not {mistake}") from None


def byte(text: str) -> int:
    """A byte option."""
    try:
        value = parse_address(text)
    except UnitMistake:
        value = -1
    if not 0 <= value <= 0xFF:
        raise argparse.ArgumentTypeError(f"{text!r} is not a byte such as 0xFF or 255")
    return value


def address_range(text: str) -> tuple[int, int]:
    """FIRST..LAST."""
    first, dots, last = text.partition("..")
    if not dots:
        raise argparse.ArgumentTypeError(f"{text!r} is not FIRST..LAST, such as 0x0000..0x7FFF")
    return address(first), address(last)


def count(text: str) -> int:
    """A number from 1 up."""
    if not (text.isascii() and text.isdigit()) or len(text) > 4 or not 1 <= int(text) <= 1_000:
        raise argparse.ArgumentTypeError(f"{text!r} is not a number from 1 to 1000")
    return int(text)


RIG_HELP = (
    "where to work: a serial port (/dev/ttyACM0), a pySerial URL, `virtual` (a fresh virtual rig with the named chip, "
    "kept nowhere) or `virtual:BENCH` (a kept one, see `bench new`)"
)


class Stop:
    """Counts Ctrl-C while a job runs: the session looks at the count, makes the rig safe and then reports."""

    def __init__(self, desk: Desk) -> None:
        self._desk = desk
        self._count = 0
        self._old: object = None

    def __call__(self) -> int:
        return self._count

    def _again(self, number: int, frame: FrameType | None) -> None:
        self._count += 1
        # os.write and not print: a handler may come in the middle of a print
        text = "\ninterrupted: making the chip safe\n" if self._count == 1 else "\n"
        os.write(2, text.encode())

    def __enter__(self) -> Stop:
        self._old = signal.signal(signal.SIGINT, self._again)
        return self

    def __exit__(self, *exc: object) -> None:
        signal.signal(signal.SIGINT, self._old)  # type: ignore[arg-type]  # what signal() itself returned


def prompt(desk: Desk) -> Callable[[list[str]], bool] | None:
    """The question of H10 at a terminal; None where there is none to ask at."""
    if desk.as_json or not (sys.stdin.isatty() and sys.stderr.isatty()):
        return None

    def ask(lines: list[str]) -> bool:
        desk.say(*lines)
        print('Compare each line with a data sheet. Agree? Type "yes": ', end="", file=sys.stderr, flush=True)
        during = signal.signal(signal.SIGINT, signal.default_int_handler)  # nothing runs yet: Ctrl-C leaves at once
        try:
            return sys.stdin.readline().strip().lower() == "yes"
        finally:
            signal.signal(signal.SIGINT, during)

    return ask
