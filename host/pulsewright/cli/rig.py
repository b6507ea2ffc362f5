"""rig show: what the rig is and can make; with --rig what the board tells, with --ports what answers on each port."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from pulsewright.cli.desk import HIGH_VOLTAGE, RIG_HELP, Desk, Parser, Stop, add, add_group

if TYPE_CHECKING:
    from pulsewright.link.results import RigFacts

_PORTS = """\
Without an option no port is opened. Opening a port may reset the board behind it, and --ports opens each port of
this machine and sends a question of six bytes to whatever is there: unplug first what must not be disturbed. A port
that another program has open, and the console of the system, are left alone."""


def add_commands(commands: argparse._SubParsersAction[Parser]) -> None:
    """The commands of this group."""
    inner = add_group(commands, "rig", "the rig: what it is and can make", "pulsewright rig show --rig virtual")
    show = add(
        inner,
        "show",
        _show,
        what="show the rig file and the serial ports; with --rig what the board tells",
        example="pulsewright rig show --rig virtual",
        more=_PORTS,
        cautions=[HIGH_VOLTAGE],
    )
    where = show.add_mutually_exclusive_group()
    where.add_argument("--rig", metavar="RIG", help=RIG_HELP)
    where.add_argument(
        "--ports", action="store_true", help="instead of the rig file: open each serial port, and tell what answers"
    )


def _show(args: argparse.Namespace, desk: Desk) -> int:
    if args.ports:
        return _ports(desk)
    from pulsewright.link.machine import ports_here
    from pulsewright.report.rig import port_facts, port_lines, rig_facts, rig_lines
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
    else:
        ports = ports_here()
        lines += ["", *port_lines(ports)]
        facts["ports"] = port_facts(ports)
    return desk.answer(lines, facts)


def _ports(desk: Desk) -> int:
    """Asks every port in turn; Ctrl-C ends it between two reads, and nothing has to be made safe."""
    from pulsewright.link.machine import ports_here
    from pulsewright.link.ports import ask_port
    from pulsewright.report.rig import answer_facts, answer_lines

    answers = []
    for port in ports_here():
        desk.say(f"asking {port}")
        answers.append(ask_port(port))
    return desk.answer(answer_lines(answers), {"ports": answer_facts(answers)})


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
