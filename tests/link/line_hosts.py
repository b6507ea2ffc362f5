"""A host that dies in the middle of a job, and the one after it that finds the rig still at work."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from pulsewright.link.faulty import Way
from pulsewright.link.transport import Transport
from pulsewright.wire.tables import HELLO_BAUD
from tests.link.frame_line import FrameLine
from tests.link.line_map import Recorder, Stretch
from tests.link.whole_job import Table, Work, faults_of_second


class Killed(BaseException):
    """The process is gone: nothing after this is done, not even what makes safe."""


class Dying:
    """A line whose host dies behind a stretch."""

    def __init__(self, inner: Transport, part: int, way: Way, number: int) -> None:
        self._at = (part, way, number)
        self._line = FrameLine(inner, at_boundary=self._look)
        self._dead = False

    def __getattr__(self, name: str) -> Any:
        return getattr(self._line, name)

    def _look(self, *at: object) -> None:
        self._dead |= at == self._at

    def read(self, until_us: int) -> bytes:
        """The inner line's bytes."""
        if self._dead:
            raise Killed
        return self._line.read(until_us)

    def write(self, data: bytes) -> None:
        """On, as long as the host lives."""
        if self._dead:
            raise Killed
        self._line.write(data)


def table_for(work: Work, *, fast: bool) -> Table:
    """A rig on the table; not `fast`: one that only knows the rate of greetings, and hears each while it works."""
    table = Table(work)
    if not fast:
        table.rig.board = replace(table.rig.board, top_baud=HELLO_BAUD)
    return table


def stretches_at(work: Work, *, fast: bool) -> list[Stretch]:
    """What passes in a job that nobody disturbs, on such a rig."""
    lines: list[Recorder] = []

    def recording(line: Transport, rig: object) -> Transport:
        lines.append(Recorder(line))
        return lines[0]

    table_for(work, fast=fast).run(recording)
    return lines[0].stretches


def faults_after_death(work: Work, at: Stretch, *, fast: bool) -> tuple[bool, list[str]]:
    """A host that dies behind a stretch and another that begins at once: whether it did die, what is wrong then."""
    table = table_for(work, fast=fast)
    died = False
    try:
        table.run(lambda line, rig: Dying(line, at.part, at.way, at.number))
    except Killed:
        died = True
    return died, faults_of_second(table, table.words(), at_once=True)
