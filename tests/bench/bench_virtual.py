"""What a call costs: chip models and judge under the edges of a burn and of a read, in nanoseconds of processor time.

A part with a shared OE/VPP raises it for each word, one with a VPP pin of its own once for all; one that is written on
the bus takes pages, each polled until its write cycle is over and read back.
Run from the top folder: `python -m tests.bench.bench_virtual`. It asserts nothing; the machine decides the numbers.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Sequence

from pulsewright.virtual.interface import ChipModel, Levels
from pulsewright.virtual.judge import Judge
from pulsewright.virtual.models import make_model
from tests.virtual.bus_wave import EeBus
from tests.virtual.uv_wave import UvBus
from tests.virtual.waveform import CE, OE, US, Bus

WORDS = 4_096
Call = tuple[Callable[..., object], tuple[object, ...]]


class Tape:
    """Records what watchers and chip are told, to be played back without the cost of making it."""

    def __init__(self) -> None:
        self.groups: list[tuple[int, list[int | None], list[int]]] = []
        self.calls: list[tuple[str, int, object]] = []

    def edges(self, t: int, levels: Levels, changed: Sequence[int], driven: Sequence[int] | None = None) -> None:
        self.groups.append((t, list(levels), list(changed)))
        self.calls.append(("edges", t, len(self.groups) - 1))

    def sampled(self, t: int) -> None:
        self.calls.append(("sampled", t, None))

    def rig_drives(self, t: int, driving: bool) -> None:
        self.calls.append(("rig_drives", t, driving))


def burn(bus: Bus) -> None:
    """One pulse and one verify a word, as a burn has them."""
    for at in range(WORDS):
        bus.program(at, at & 0xFF)
        bus.set({CE: 0, OE: 0})
        bus.wait(US)
        bus.sample()
        bus.standby()


def burn_under_vpp(bus: UvBus) -> None:
    """The same with VPP up all the while."""
    bus.enter()
    for at in range(WORDS):
        bus.word(at, at & 0xFF)
        bus.verify(at)
    bus.leave()


def burn_pages(bus: EeBus) -> None:
    """Pages of 64 bytes, polled and read back."""
    for first in range(0, WORDS, 64):
        bus.page(first, bytes(range(first & 0xFF, (first & 0xFF) + 64)))
        bus.wait(150 * US)
        bus.poll(first + 63, (first & 0xFF) + 63, 20_000 * US)
        for at in range(first, first + 64):
            bus.look(at)
        bus.standby()
        bus.wait(10 * US)


def read(bus: Bus) -> None:
    """The outputs on, one address after the other."""
    bus.set({CE: 0, OE: 0})
    for at in range(WORDS):
        bus.address(at)
        bus.wait(3)
        bus.sample()


def play_chip(tape: Tape, chip: ChipModel) -> int:
    """Nanoseconds in the chip model: every group, and `drive` for every sample."""
    calls: list[Call] = []
    for kind, t, extra in tape.calls:
        if kind == "edges" and isinstance(extra, int):
            calls.append((chip.pins_changed, (t, tape.groups[extra][1])))
        elif kind == "sampled":
            calls.append((chip.drive, (t,)))
    return _timed(calls)


def play_judge(tape: Tape, chip: ChipModel) -> int:
    """Nanoseconds in the judge; says so if it found something, for then the numbers are not those of a clean job."""
    judge = Judge(chip.limits)
    calls: list[Call] = []
    for kind, t, extra in tape.calls:
        if kind == "edges" and isinstance(extra, int):
            calls.append((judge.edges, tape.groups[extra]))
        elif kind == "sampled":
            calls.append((judge.sampled, (t,)))
        else:
            calls.append((judge.rig_drives, (t, extra)))
    spent = _timed(calls)
    if judge.count:
        sys.stdout.write(f"not clean: {judge.violations[0]}\n")
    return spent


def _timed(calls: list[Call]) -> int:
    begin = time.process_time_ns()
    for call, arguments in calls:
        call(*arguments)
    return time.process_time_ns() - begin


def main() -> None:
    """Prints a line for each job and each listener: the best of five runs."""
    shared, own, shared_read, own_read, paged = Bus(), UvBus(), Bus(), UvBus(), EeBus(chip=make_model("28c256"))
    jobs: list[tuple[str, str, Bus, Callable[[], None]]] = [
        ("27e512", "burn", shared, lambda: burn(shared)),
        ("27e512", "read", shared_read, lambda: read(shared_read)),
        ("27c256", "burn", own, lambda: burn_under_vpp(own)),
        ("27c256", "read", own_read, lambda: read(own_read)),
        ("28c256", "burn", paged, lambda: burn_pages(paged)),
    ]
    for name, job, bus, work in jobs:
        tape = Tape()
        bus.watchers = (tape,)
        bus.release()
        bus.up()
        work()
        for who, play in (("chip", play_chip), ("judge", play_judge)):
            best = min(play(tape, make_model(name)) for _ in range(5))
            groups, calls = len(tape.groups), len(tape.calls)
            each = f"{best // groups} ns a group, {best // WORDS} ns a word"
            whole = f"{best * 65_536 // WORDS / 1e9:.2f} s for 64K words"
            sys.stdout.write(f"{name} {job}, {who}: {groups} groups, {calls} calls, {each}, {whole}\n")


if __name__ == "__main__":
    main()
