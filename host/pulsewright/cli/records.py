"""record list, record show: what jobs have left behind."""

from __future__ import annotations

import argparse
from typing import Any

from pulsewright.cli.desk import Desk, Parser, add, add_group


def add_commands(commands: argparse._SubParsersAction[Parser]) -> None:
    """The commands of this group."""
    inner = add_group(commands, "record", "what jobs have left behind", "pulsewright record list")
    add(inner, "list", _list, what="list the records of all jobs, oldest first", example="pulsewright record list")
    show = add(inner, "show", _show, what="show one record", example="pulsewright record show last")
    show.add_argument("record", metavar="RECORD", help='a name of `record list`, its beginning, "last", or a path')


def _list(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.jobs.record import read_record, record_paths
    from pulsewright.report.modes import table

    rows: list[dict[str, Any]] = []
    for path in record_paths():
        content: dict[str, Any] = read_record(path)
        rows.append(
            {
                "record": path.name,
                "time": content["time"],
                "job": content["job"],
                "chip": content["definition"]["name"],
                "exit": content["exit"],
                "result": content["result"],
            }
        )
    head = f"{len(rows)} records"
    if desk.as_json or not rows:
        return desk.answer([head], {"records": rows})
    columns = ("record", "job", "chip", "exit", "result")
    return desk.answer(table(columns, [[str(row[column]) for column in columns] for row in rows]))


def _show(args: argparse.Namespace, desk: Desk) -> int:
    import json

    from pulsewright.jobs.record import find_record, read_record

    path = find_record(args.record)
    content = read_record(path)
    if desk.as_json:
        return desk.answer([str(content.get("result", ""))], {"record": content, "file": str(path)})
    return desk.answer([str(path), *json.dumps(content, indent=1, ensure_ascii=False).splitlines()])
