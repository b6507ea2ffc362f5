"""rig show: what the rig is and can make, and with --rig what the board itself tells."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from pulsewright.cli.desk import HIGH_VOLTAGE, RIG_HELP, Desk, Parser, Stop, add, add_group

if TYPE_CHECKING:
    from pulsewright.link.results import RigFacts


def add_commands(commands: argparse._SubParsersAction[Parser]) -> None:
    """The commands of this group."""
    inner = add_group(commands, "rig", "the rig: what it is and can make", "pulsewright rig show --rig virtual")
    show = add(
        inner,
        "show",
        _show,
        what="show the rig file: site, rails, steps, switches; with --rig also what the board tells",
        example="pulsewright rig show --rig virtual",
        cautions=[HIGH_VOLTAGE],
    )
    show.add_argument("--rig", metavar="RIG", help=RIG_HELP)


def _show(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.report.rig import rig_facts, rig_lines
    from pulsewright.rig.file import load_rig

    rig = load_rig()
    lines, facts = rig_lines(rig), rig_facts(rig)
    if args.rig is not None:
        board = _board(args.rig, desk)
        lines += ["", *_board_lines(board)]
        facts["board"] = {
            "name": board.board,
            "fingerprint": f"{board.hello.fingerprint:08X}",
            "boot": board.boot,
            "baud": board.baud,
            "window_blocks": board.window_blocks,
            "program_bytes": board.program_bytes,
            "earlier_fault": board.earlier.name if board.earlier is not None else None,
        }
    return desk.answer(lines, facts)


def _board(name: str, desk: Desk) -> RigFacts:
    from pulsewright.cli.opening import opened
    from pulsewright.link.session import Session

    with opened(name, None, desk) as (_, rig), Stop(desk) as stop:
        session = Session(rig.transport, interrupted=stop)
        try:
            return session.connect()
        finally:
            session.close()


def _board_lines(board: RigFacts) -> list[str]:
    lines = [
        f"board {board.board}, wire table {board.hello.fingerprint:08X}, boot {board.boot}",
        f"line at {board.baud} of {board.top_baud} baud; {board.window_blocks} blocks of {board.block_bytes} bytes",
    ]
    if board.earlier is not None:
        lines.append(f"it had a latched fault: {board.earlier.name} ({board.earlier.numbers()})")
    return lines
