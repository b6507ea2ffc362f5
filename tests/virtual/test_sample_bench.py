"""The kept bench of the samples: the tower's chip as it was dumped, never used since, with no fault."""

from __future__ import annotations

from pathlib import Path

from pulsewright.virtual.bench import Bench

FOLDER = Path(__file__).resolve().parents[2] / "samples" / "chime-tower"


def test_the_sample_bench_holds_the_towers_dump() -> None:
    """Its chip holds the dump byte for byte, its pins have seen nothing, and it has no fault."""
    bench = Bench.load(FOLDER / "tower.bench")
    report = bench.report()

    assert bytes(bench.chip.cells) == (FOLDER / "tower-dump.bin").read_bytes()
    assert (report["chip"], report["pins"], report["violations"]) == ("27e512", {}, [])
    assert bench.faults.seat == ""
