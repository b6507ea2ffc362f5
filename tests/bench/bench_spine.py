"""Measures the spine: start-up, compile and prove, and a whole 64 KB burn with the judge on. Prints, asserts nothing.

Run `python tests/bench/bench_spine.py` (`--json` for one object) in the project's environment. Machines are noisy: read
the ratios, and the virtual times, which are exact.
"""

from __future__ import annotations

import json
import os
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from pulsewright.chip.load import load
from pulsewright.rig.file import load_rig
from pulsewright.sequence.compile import compile_burn, compile_erase
from pulsewright.sequence.proof import prove

SAMPLE = Path(__file__).resolve().parents[2] / "samples" / "chime-tower" / "chime.hex"
RUN = [sys.executable, "-m", "pulsewright"]
_TURNS = 20


def best_ms(work: object, turns: int = _TURNS) -> float:
    """The quickest of some turns, in milliseconds."""
    times = []
    for _ in range(turns):
        begun = time.perf_counter()
        work()  # type: ignore[operator]  # any callable
        times.append(time.perf_counter() - begun)
    return min(times) * 1000


def child(arguments: list[str], home: Path) -> tuple[float, int]:
    """Wall milliseconds and peak kilobytes of one run of the program; its output is dropped."""
    environment = {**os.environ, "PULSEWRIGHT_HOME": str(home)}
    begun = time.perf_counter()
    subprocess.run(RUN + arguments, env=environment, check=True, capture_output=True)
    return (time.perf_counter() - begun) * 1000, resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss


def measure() -> dict[str, object]:
    """Every figure by name."""
    definition, rig = load("27e512"), load_rig()

    def burn(last: int) -> None:
        sequence = compile_burn(definition, rig, 0, last, "")
        prove(sequence.code, sequence.permit, definition, rig)

    def erase() -> None:
        sequence = compile_erase(definition, rig)
        prove(sequence.code, sequence.permit, definition, rig)

    with tempfile.TemporaryDirectory() as folder:
        home = Path(folder)
        help_ms = min(child(["--help"], home)[0] for _ in range(5))
        help_kb = child(["--help"], home)[1]
        burn_ms, burn_kb = child(["burn", "27e512", str(SAMPLE), "--rig", "virtual", "--erase"], home)
    small, large = best_ms(lambda: burn(0x7FF)), best_ms(lambda: burn(0xFFFF))
    return {
        "help_ms": round(help_ms, 1),
        "help_kb": help_kb,
        "compile_and_prove_2k_ms": round(small, 2),
        "compile_and_prove_64k_ms": round(large, 2),
        "ratio_64k_to_2k": round(large / small, 3),
        "compile_and_prove_erase_ms": round(best_ms(erase), 2),
        "whole_burn_64k_s": round(burn_ms / 1000, 2),
        "whole_burn_64k_kb": burn_kb,
    }


if __name__ == "__main__":
    figures = measure()
    if "--json" in sys.argv:
        print(json.dumps(figures))
    else:
        for name, value in figures.items():
            print(f"{name:28} {value}")
