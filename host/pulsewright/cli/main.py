"""The command line: one parser, one form of error, the exit codes; it prints and never computes.

Start-up is quick: nothing here or in the command groups imports a job, a definition or a library at its top.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence

from pulsewright import __version__
from pulsewright.cli import bench, chips, define, jobs, records, rig, sequence
from pulsewright.cli.desk import HIGH_VOLTAGE, LICENSED, STATIC, UV, Desk, Parser
from pulsewright.errors import Interrupted, PulsewrightError

TRACEBACK_VARIABLE = "PULSEWRIGHT_TRACEBACK"
_PIPE_CLOSED = 0

_EXAMPLE = "example, without any hardware:\n  pulsewright burn 27e512 image.hex --rig virtual --erase"
_EXITS = (
    "exit codes: 0 done, 1 chip and image differ or a burn needs an erase, 2 wrong usage, file, image or definition,\n"
    "3 refused for safety, 4 the chip will not erase or program, 5 link or rig, 130 interrupted and made safe."
)


def make_parser() -> Parser:
    """The whole command line."""
    import argparse

    parser = Parser(
        prog="pulsewright",
        description="Burns EPROMs and EEPROMs with a programmer you build yourself, or on a virtual rig.",
        epilog=f"{_EXAMPLE}\n\n{_EXITS}\n\n{HIGH_VOLTAGE}\n\n{STATIC}\n\n{UV}\n\n{LICENSED}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"pulsewright {__version__}")
    commands = parser.add_subparsers(title="commands", metavar="COMMAND", required=True, parser_class=Parser)
    for group in (chips, jobs, define, sequence, rig, bench, records):
        group.add_commands(commands)
    return parser


def main(argv: Sequence[str] | None = None) -> int:
    """Runs a command and returns its exit code; never lets an exception out."""
    words = list(sys.argv[1:] if argv is None else argv)
    desk = Desk("--json" in words)
    try:
        args, unknown = make_parser().parse_known_args(words)
        if unknown and "image" in args and not any(word.startswith("-") for word in unknown):
            args.image += unknown  # argparse takes files in one place only; more of them may stand behind an option
        elif unknown:
            args.parser.not_known(unknown)
        desk.as_json = args.json
        return int(args.handler(args, desk))
    except SystemExit as left:  # argparse after --help and --version
        return left.code if isinstance(left.code, int) else 0
    except BrokenPipeError:
        _drop_stdout()
        return _PIPE_CLOSED
    except PulsewrightError as error:
        return _complain(desk, error)
    except KeyboardInterrupt:
        return _complain(desk, Interrupted("interrupted; no sequence was running", did="nothing was raised"))
    except Exception as error:  # noqa: BLE001 - the last line of defence: a person never meets a traceback unasked
        return _own_fault(desk, error)


def _complain(desk: Desk, error: PulsewrightError) -> int:
    try:
        return desk.complain(error)
    except BrokenPipeError:
        _drop_stdout()
        return error.exit_code


def _drop_stdout() -> None:
    """Whoever read the answer has gone: let the interpreter's last flush go nowhere, without a message."""
    nowhere = os.open(os.devnull, os.O_WRONLY)
    try:
        os.dup2(nowhere, sys.stdout.fileno())
    except (OSError, ValueError):
        return
    finally:
        os.close(nowhere)


def _own_fault(desk: Desk, error: Exception) -> int:
    if os.environ.get(TRACEBACK_VARIABLE):
        import traceback

        traceback.print_exc()
    fault = PulsewrightError(
        f"this is a bug of the program, not of your files or your rig: {type(error).__name__}: {error}",
        hint=f"{TRACEBACK_VARIABLE}=1 before the command shows where",
    )
    return _complain(desk, fault)
