"""Which fault of the bench is found where: every row of the guide's table comes from a run."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from tests.end_to_end.bench_kit import Bench, bench
from tests.end_to_end.fault_table import NOT_THERE, OTHERS, PARTS, ROWS, fault_texts, found, parts, table

__all__ = ["bench"]

GUIDE = Path(__file__).parents[2] / "host" / "pulsewright" / "virtual" / "FAULTS.md"
# where the chip is hurt, or a pin stands above its absolute maximum; the table says so, and the guide why
HARM = {
    *(("short: CE to A10", part) for part in ("27e512", "27c256")),
    *(("short: A10 to OE", part) for part in PARTS),
    *(("short: OE to A11", part) for part in ("27e512", "27c256")),
    ("a fifth of the cells slow", "28c256"),
    ("cells too slow", "28c256"),
}


def cell(bench: Bench, row: str, part: str) -> str:
    """One cell, found by running jobs; no other fault than those of `HARM` may harm the chip."""
    if row in OTHERS:
        runs = [found(bench, part, None, model=OTHERS[row])]
    else:
        runs = [found(bench, part, text) for text in fault_texts(parts()[part], ROWS[row])]
    harm = {
        text
        for _, jobs in runs
        for seen in jobs
        for text in (
            *(["damaged"] if seen["damaged"] else []),
            *seen["stressed"],
            *(f"{one['rule']} of pin {one['pin']}" for one in seen["violations"] if one["rule"] == "absolute maximum"),
        )
    }
    assert bool(harm) == ((row, part) in HARM), (row, part, harm)
    return " or ".join(dict.fromkeys(where for where, _ in runs)) or NOT_THERE


def test_the_table_of_faults_is_the_guides(bench: Bench, capsys: pytest.CaptureFixture[str]) -> None:
    """Each fault on each part is found where FAULTS.md says, or is not seen where it says that."""
    cells = {row: {part: cell(bench, row, part) for part in PARTS} for row in (*ROWS, *OTHERS)}
    lines = table(cells)
    with capsys.disabled():
        print("\n" + "\n".join(lines))  # noqa: T201  # the table is what this test is run for
    told = [line for line in GUIDE.read_text(encoding="utf-8").splitlines() if re.match(r"\| (?!name)", line)]
    assert told == lines
