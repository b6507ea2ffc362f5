"""Which fault of the bench is found where: every row of the guide's table comes from a run."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from tests.end_to_end.bench_kit import Bench, bench
from tests.end_to_end.fault_table import NOT_THERE, OTHERS, PARTS, ROWS, fault_text, found, parts, table

__all__ = ["bench"]

GUIDE = Path(__file__).parents[2] / "host" / "pulsewright" / "virtual" / "FAULTS.md"
# a chip that is busy longer than its sheet allows loses its supply in the end: the sheet names no longer wait
BUSY_TOO_LONG = ("a fifth of the cells slow", "cells too slow")


def cell(bench: Bench, row: str, part: str) -> str:
    """One cell, found by running jobs; no fault may harm the chip."""
    if row in OTHERS:
        where, seen = found(bench, part, None, model=OTHERS[row])
    else:
        text = fault_text(parts()[part], ROWS[row])
        if text is None:
            return NOT_THERE
        where, seen = found(bench, part, text)
    assert not seen["damaged"], (row, part, seen)
    assert not seen["stressed"] or (row in BUSY_TOO_LONG and part == "28c256"), (row, part, seen["stressed"])
    return where


def test_the_table_of_faults_is_the_guides(bench: Bench, capsys: pytest.CaptureFixture[str]) -> None:
    """Each fault on each part is found where FAULTS.md says, or is not seen where it says that."""
    cells = {row: {part: cell(bench, row, part) for part in PARTS} for row in (*ROWS, *OTHERS)}
    lines = table(cells)
    with capsys.disabled():
        print("\n" + "\n".join(lines))  # noqa: T201  # the table is what this test is run for
    told = [line for line in GUIDE.read_text(encoding="utf-8").splitlines() if re.match(r"\| (?!name)", line)]
    assert told == lines
