"""The cases of a bad line that a whole job is put through: what is harmed, and which errors it may end in."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field
from random import Random
from typing import Any

from pulsewright.errors import LinkFault, RigFault, RigRestarted, Tripped
from pulsewright.link.faulty import Faulty, Harm, Kind, Way
from pulsewright.link.transport import Transport
from pulsewright.virtual.rig import VirtualRig
from tests.link.frame_line import Blackout, FrameLine, Resetting, Trick, Wrong
from tests.link.line_map import WAYS, Stretch, length_of, parts_of, stretches_of
from tests.link.whole_job import DEAD_MAN_US, Table, Work, faults_of

Errors = tuple[type[RigFault], ...] | None
GONE: Errors = (LinkFault, Tripped)
RESET: Errors = (RigRestarted,)


@dataclass(frozen=True)
class How:
    """A way to harm a byte."""

    name: str
    kind: Kind
    mask: int = 0
    for_us: int = 0

    def at(self, part: int, way: Way, at: int) -> Harm:
        """This harm at a byte."""
        return Harm(way, at, self.kind, self.mask, self.for_us, part)


MENDED = (
    How("lost", "drop"),
    How("one bit turned", "flip", 0x10),
    How("made zero", "zero"),
    How("doubled", "double"),
    How("all bits turned", "flip", 0xFF),
    How("60 ms late", "stall", for_us=60_000),
)
ENDING = (How("cut", "cut"), How("700 ms late", "stall", for_us=DEAD_MAN_US + 200_000))


@dataclass(frozen=True)
class Case:
    """One job over one bad line. `wanted`: errors it may end with instead of done (None: none).

    `reset_us`: the rig is reset at that time of its clock; `reset_behind`: behind that stretch of the rig's.
    `away_us`: when the line goes away, and for how long. `early_us`: the rig's clock runs so long before the job.
    """

    title: str
    harms: tuple[Harm, ...] = ()
    wrongs: tuple[Wrong, ...] = ()
    reset_us: int | None = None
    reset_behind: tuple[int, int] | None = None
    away_us: tuple[int, int] | None = None
    early_us: int = 0
    boot: int = 1
    wanted: Errors = None

    def run(self, work: Work) -> tuple[str, list[str]]:
        """How the job ended, and what is wrong with that: nothing, if all is well."""
        lines: list[Any] = []
        table = Table(work, self.boot)
        table.pass_time(self.early_us)

        def bad(line: Transport, rig: VirtualRig) -> Transport:
            lines.append(self._line(line, table))
            made: Transport = lines[0]
            return made

        try:
            ending, found = faults_of(work, bad, self.wanted, table)
        except Exception as broken:  # noqa: BLE001  # a user would see a traceback; a Hang too
            return "broken", [repr(broken)]
        struck = getattr(lines[0], "struck", [])
        missed = [harm for harm in (*self.harms, *self.wrongs) if harm not in struck]
        if missed and self.wanted is None:
            found.append(f"never struck: {missed}")
        return ending, found

    def _line(self, line: Transport, table: Table) -> Transport:
        if self.reset_us is not None:
            return Resetting(line, table.reset, self.reset_us)
        if self.reset_behind is not None:
            behind = (self.reset_behind[0], "from rig", self.reset_behind[1])
            return FrameLine(line, at_boundary=lambda *at: table.reset() if at == behind else None)
        if self.away_us is not None:
            return Blackout(line, *self.away_us)
        return FrameLine(line, self.wrongs) if self.wrongs else Faulty(line, self.harms)


# ---- bytes ----------------------------------------------------------------------------------------------------------


def _of_part(work: Work, part: int) -> list[tuple[Way, int]]:
    return [(way, at) for way in WAYS for at in range(length_of(work, part, way))]


def one_harm_a_part(work: Work) -> Iterator[Case]:
    """Each byte of the job in one of the ways that repeats mend; one byte in each part of a job, so in few jobs.

    A part is loaded or run to its end before the next begins: what mends the one harm cannot mend the other.
    """
    parts = {part: _of_part(work, part) for part in parts_of(work)}
    for number in range(max(map(len, parts.values()))):
        harms = []
        for part, places in parts.items():
            turn, place = divmod(number, len(places))
            way, at = places[place]
            harms.append(MENDED[(at + part + turn) % len(MENDED)].at(part, way, at))
        yield Case(f"one harm a part, the {number}th", harms=tuple(harms))


def each_harm_of_each_byte(work: Work) -> Iterator[Case]:
    """Each byte of the job in every way, one in a job."""
    for part in parts_of(work):
        for way, at in _of_part(work, part):
            for how in (*MENDED, *ENDING):
                wanted = GONE if how in ENDING else None
                title = f"byte {at} of part {part} {way} {how.name}"
                yield Case(title, harms=(how.at(part, way, at),), wanted=wanted)


def cut_in_frames(work: Work) -> Iterator[Case]:
    """The line cut, or still for longer than the dead-man waits, in every other stretch of a kind, at a byte that
    wanders. The first stretches of a kind are all taken, so that a rare one meets both.
    """
    seen: Counter[tuple[Way, str]] = Counter()
    for number, one in enumerate(stretches_of(work)):
        turn = seen[one.way, one.kind]
        seen[one.way, one.kind] += 1
        if turn >= 2 * len(ENDING) and turn % 2:
            continue
        how = ENDING[(turn if turn < 2 * len(ENDING) else turn // 2) % len(ENDING)]
        at = one.at + number * 5 % len(one.data)
        title = f"byte {at} of part {one.part} {one.way} ({one.kind}) {how.name}"
        yield Case(title, harms=(how.at(one.part, one.way, at),), wanted=GONE)


def many_harms(work: Work, seeds: range, one_in: int) -> Iterator[Case]:
    """A line that harms one byte of so many, each in a way of its own, from the beginning to the end."""
    for seed in seeds:
        draw = Random(seed)
        harms = [
            draw.choice((*MENDED, *MENDED, *MENDED, ENDING[1])).at(part, way, at)
            for part in parts_of(work)
            for way, at in _of_part(work, part)
            if draw.random() * one_in < 1
        ]
        yield Case(f"one byte of {one_in}, seed {seed}", harms=tuple(harms), wanted=(RigFault,))


AWAY_US = (100_000, 400_000, 900_000, 4_000_000)


def away(work: Work, lengths: tuple[int, ...] = AWAY_US) -> Iterator[Case]:
    """The line away both ways, from the end of each stretch on: shorter and longer than dead-man and session wait."""
    for one in stretches_of(work):
        for for_us in lengths:
            wanted = None if for_us < 200_000 else GONE
            title = f"away for {for_us} us behind stretch {one.number} of part {one.part} {one.way} ({one.kind})"
            yield Case(title, away_us=(one.us, for_us), wanted=wanted)


# ---- frames ---------------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Treat:
    """A way to treat a frame."""

    trick: Trick
    later: int = 0


TREATS = (Treat("swap"), Treat("again"), Treat("again later", 1), Treat("again later", 3), Treat("again later", 40))


def bad_order(work: Work, treats: tuple[Treat, ...] = TREATS) -> Iterator[Case]:
    """Each stretch behind its next one, twice, or once more later: soon, or in another sequence altogether."""
    for one in stretches_of(work):
        for treat in treats:
            wrong = Wrong(one.part, one.way, one.number, treat.trick, treat.later)
            title = f"stretch {one.number} of part {one.part} {one.way} ({one.kind}) {treat.trick} {treat.later or ''}"
            yield Case(title, wrongs=(wrong,))


def bursts(work: Work) -> Iterator[Case]:
    """Stretches lost in a row, so many that no reply of a whole window comes: from each on, two to six of one way.

    Where that are all the host's for 500 ms, the dead-man ends the sequence.
    """
    for number, one in enumerate(stretches_of(work)):
        more = 1 + number % 5
        title = f"{more + 1} stretches lost from {one.number} of part {one.part} {one.way} ({one.kind}) on"
        wanted: Errors = (Tripped,) if one.way == "to rig" else None
        yield Case(title, wrongs=(Wrong(one.part, one.way, one.number, "lose", more),), wanted=wanted)


def stale(work: Work, earlier: Work, every: int = 1, early_us: int = 3_000_000, then_us: int = 0) -> Iterator[Case]:
    """Before each stretch one of another burn's, of an earlier boot: each kind before each kind, over all cases.

    Indexes and permits are numbered by the host's clock: `early_us` is its time now, `then_us` was it then.
    """
    for way in WAYS:
        old = [one for one in stretches_of(earlier, then_us) if one.way == way and len(one.data) > 1]
        for number, one in enumerate(one for one in stretches_of(work) if one.way == way):
            for step in range(0, len(old), every):
                strange = old[(number * 17 + step) % len(old)]
                wrong = Wrong(one.part, way, one.number, "before", data=strange.data)
                title = f"{strange.kind} of an earlier boot before {one.kind} {one.number} of part {one.part} {way}"
                yield Case(title, wrongs=(wrong,), early_us=early_us, boot=2, wanted=(RigFault,))


# ---- resets ---------------------------------------------------------------------------------------------------------


def reset_at_each_frame(work: Work) -> Iterator[Case]:
    """The rig reset behind each stretch it sends, and as each that it is sent has arrived."""
    for one in stretches_of(work):
        title = f"reset behind stretch {one.number} of part {one.part} {one.way} ({one.kind})"
        if one.way == "from rig":
            yield Case(title, reset_behind=(one.part, one.number), wanted=RESET)
        else:
            yield Case(title, reset_us=one.us + len(one.data) * _byte_us(one) + 2, wanted=RESET)


def _byte_us(one: Stretch) -> int:
    return 261 if one.part == 0 else 5  # at the rate of greetings, and at 2 Mbaud


def reset_inside_pulses(work: Work, every: int, offsets: int) -> Iterator[Case]:
    """The rig reset at moments spread over every so manyth pulse."""
    from tests.link.whole_job import pulses_us

    for begin, end in pulses_us(work)[::every]:
        for step in range(offsets):
            at_us = begin + (end - begin) * (2 * step + 1) // (2 * offsets)
            yield Case(f"reset {at_us - begin} us into a pulse", reset_us=at_us, wanted=RESET)


@dataclass
class Tally:
    """What a sweep came to: jobs by how they ended, and everything that was wrong."""

    endings: dict[str, int] = field(default_factory=dict)
    wrong: list[str] = field(default_factory=list)

    @property
    def jobs(self) -> int:
        """How many jobs were put through."""
        return sum(self.endings.values())

    def put(self, case: Case, ending: str, found: list[str]) -> None:
        """One more."""
        self.endings[ending] = self.endings.get(ending, 0) + 1
        self.wrong += [f"{case.title}: {ending}: {text}" for text in found]


    def add(self, other: Tally) -> None:
        """Another sweep's as well."""
        for ending, count in other.endings.items():
            self.endings[ending] = self.endings.get(ending, 0) + count
        self.wrong += other.wrong


def sweep(work: Work, cases: Iterator[Case]) -> Tally:
    """Runs all the cases."""
    tally = Tally()
    for case in cases:
        tally.put(case, *case.run(work))
    return tally
