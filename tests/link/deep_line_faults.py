"""The deep sweep of a bad line: each byte of a whole job in every way, one a job, and all other cases without a stride.

    python -m tests.link.deep_line_faults [--jobs 2] [--only bytes]

Prints how many jobs each sweep ran and how they ended, and everything that is wrong; exit 1 if anything is.
"""

from __future__ import annotations

import argparse
import functools
import os
import sys
import tempfile
from collections.abc import Callable, Iterator
from concurrent.futures import ProcessPoolExecutor
from itertools import islice

from tests.link import line_cases
from tests.link.line_cases import Case, Tally, sweep
from tests.link.line_hosts import faults_after_death, stretches_at
from tests.link.small_blocks import small_blocks
from tests.link.whole_job import OTHER, QUICK, SLOW, TWICE, TWICE_ONE, Work

SWEEPS: dict[str, tuple[Work, Callable[[], Iterator[Case]]]] = {
    "bytes": (QUICK, lambda: line_cases.each_harm_of_each_byte(QUICK)),
    "bytes, slow pulses": (SLOW, lambda: line_cases.each_harm_of_each_byte(SLOW)),
    "order": (QUICK, lambda: line_cases.bad_order(QUICK)),
    "order, slow pulses": (SLOW, lambda: line_cases.bad_order(SLOW)),
    "bursts": (QUICK, lambda: line_cases.bursts(QUICK)),
    "bursts, slow pulses": (SLOW, lambda: line_cases.bursts(SLOW)),
    "away": (QUICK, lambda: line_cases.away(QUICK)),
    "away, slow pulses": (SLOW, lambda: line_cases.away(SLOW)),
    "stale": (QUICK, lambda: line_cases.stale(QUICK, OTHER, 7)),
    "stale, clock anew": (QUICK, lambda: line_cases.stale(QUICK, OTHER, 7, 0)),
    "stale, clock back": (QUICK, lambda: line_cases.stale(QUICK, OTHER, 31, 3_000_000, 40_000_000)),
    "resets": (QUICK, lambda: line_cases.reset_at_each_frame(QUICK)),
    "resets, slow pulses": (SLOW, lambda: line_cases.reset_at_each_frame(SLOW)),
    "resets in pulses": (QUICK, lambda: line_cases.reset_inside_pulses(QUICK, 1, 25)),
    "resets in slow pulses": (SLOW, lambda: line_cases.reset_inside_pulses(SLOW, 1, 25)),
    "many harms": (QUICK, lambda: line_cases.many_harms(QUICK, range(1_000), 80)),
    "many harms, slow pulses": (SLOW, lambda: line_cases.many_harms(SLOW, range(500), 80)),
}
for _title, _work in (("two passes", TWICE), ("two passes of a block", TWICE_ONE)):
    SWEEPS |= {
        f"bytes, {_title}": (_work, functools.partial(line_cases.each_harm_of_each_byte, _work)),
        f"order, {_title}": (_work, functools.partial(line_cases.bad_order, _work)),
        f"bursts, {_title}": (_work, functools.partial(line_cases.bursts, _work)),
        f"away, {_title}": (_work, functools.partial(line_cases.away, _work)),
        f"resets, {_title}": (_work, functools.partial(line_cases.reset_at_each_frame, _work)),
        f"many harms, {_title}": (_work, functools.partial(line_cases.many_harms, _work, range(500), 80)),
    }
_HOSTS = "hosts that die"


def _part(name: str, begin: int, step: int) -> Tally:
    """Every so manyth case of a sweep, in a process of its own."""
    os.environ["PULSEWRIGHT_HOME"] = tempfile.mkdtemp()
    with small_blocks():
        if name == _HOSTS:
            return _hosts(begin, step)
        work, cases = SWEEPS[name]
        return sweep(work, islice(cases(), begin, None, step))


def _hosts(begin: int, step: int) -> Tally:
    tally = Tally()
    for work in (QUICK, SLOW):
        for fast in (True, False):
            for one in stretches_at(work, fast=fast)[begin::step]:
                died, found = faults_after_death(work, one, fast=fast)
                tally.put(Case(f"a host dead behind {one}"), "died" if died else "lived", found)
    return tally


def main() -> int:
    """Runs the sweeps."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--jobs", type=int, default=2)
    parser.add_argument("--only", choices=[*SWEEPS, _HOSTS])
    chosen = parser.parse_args()
    wrong = 0
    with ProcessPoolExecutor(chosen.jobs) as pool:
        for name in [chosen.only] if chosen.only else [*SWEEPS, _HOSTS]:
            steps = chosen.jobs * 4
            whole = Tally()
            for part in pool.map(_part, [name] * steps, range(steps), [steps] * steps):
                whole.add(part)
            sys.stdout.write(f"{name}: {whole.jobs} jobs, {whole.endings}, {len(whole.wrong)} wrong\n")
            sys.stdout.writelines(f"  {text}\n" for text in whole.wrong[:20])
            sys.stdout.flush()
            wrong += len(whole.wrong)
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
