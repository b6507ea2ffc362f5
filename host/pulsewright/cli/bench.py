"""bench new, bench show, bench serve: kept virtual sockets with a modelled chip and its faults."""

from __future__ import annotations

import argparse

from pulsewright.cli.desk import Desk, Parser, add


def add_commands(commands: argparse._SubParsersAction[Parser]) -> None:
    """The commands of this group."""
