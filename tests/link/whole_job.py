"""A whole burn - look twice, burn, verify - over a line that does harm, and what must be true of however it ends.

A job either ends as it does undisturbed, with each word pulsed as often, or with exit 5, a rig that is safe and a chip
that a second run completes without touching the words that are right. Pulses are counted in the chip, never from a
reply.
"""

from __future__ import annotations

import functools
from collections import Counter
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from pulsewright.chip.load import load
from pulsewright.errors import PulsewrightError, RigFault
from pulsewright.image.memory import fit, image_of
from pulsewright.jobs import plan, read, writing
from pulsewright.jobs.burn import burn
from pulsewright.jobs.context import JobContext, Options
from pulsewright.link.inprocess import InProcess
from pulsewright.link.results import Block, RunResult
from pulsewright.link.session import Session
from pulsewright.link.transport import Transport
from pulsewright.rig.file import load_rig
from pulsewright.sequence.types import Sequence
from pulsewright.units import TICKS_PER_US
from pulsewright.virtual.bench import Bench
from pulsewright.virtual.board import RAISED_POSITIONS
from pulsewright.virtual.rig import VirtualRig

DEAD_MAN_US = 500_000
_LONGEST_US = 40_000_000  # no job here, harmed or not, takes so much of the rig's time
_MOST_READS = 50_000
_MODELS = Path(__file__).parents[1] / "models"
_PARTS = Path(__file__).parents[1] / "parts"

Harming = Callable[[Transport, VirtualRig], Transport]


@dataclass(frozen=True)
class Work:
    """A burn: the part, its words, what the chip holds before, the bench's faults.

    `block_words`: in a block, while `small_blocks`: then a few words are more blocks than the window has.
    """

    part: str
    first: int
    image: bytes
    before: bytes
    faults: tuple[str, ...] = ()
    maker: str = ""
    vouch: str = ""
    block_words: int = 2
    reset_tail_us: int = 0  # an enable that is high by its pull: a reset may leave a pulse so short on another word

    @property
    def last(self) -> int:
        """The last word."""
        return self.first + len(self.image) - 1

    @property
    def shipped(self) -> bool:
        """Whether the part's definition and model are in the program; else they are the tests' own."""
        return (_PARTS / f"{self.part}.toml").exists() is False

    def bench(self) -> Bench:
        """A bench with the chip as it is before the job."""
        model = None if self.shipped else _MODELS / f"m{self.part}.py"
        bench = Bench(self.part, faults=self.faults, model=model, maker=self.maker)
        bench.jumper = bool(self.vouch)
        bench.chip.cells[self.first : self.last + 1] = self.before
        bench._take_faults()
        return bench


# Twelve words: one is right already, one is blank in the image, and of the rest some want three pulses.
QUICK = Work(
    "27e512",
    0x2A5C,
    bytes.fromhex("00 5A FF 13 77 E0 00 42 81 3C 00 0F"),
    bytes.fromhex("FF FF FF FF 77 FF FF FF FF FF FF FF"),
    ("slow=40,3",),
)
# The same words of the same part from another image, as an earlier burn had them.
OTHER = Work(QUICK.part, QUICK.first, bytes(word ^ 0x2D for word in QUICK.image), b"\xff" * len(QUICK.image))
# Fourteen words of one pulse of 50 ms each: all blocks are sent at once, and done long after the dead-man's patience.
SLOW = Work(
    "2716", 0x1F8, bytes(range(0x30, 0x3E)), b"\xff" * 14, vouch="M2716-1F1 chime 3", block_words=8, reset_tail_us=100
)
# Ten words in two passes over the data, the first of them blind: an end of data between blocks.
TWICE = Work(
    "27c256", 0x05E0, bytes.fromhex("00 13 FE 7F 55 A0 0B 3C 99 01"), b"\xff" * 10, ("slow=40,3",), maker="atmel"
)
# The same with one block a pass, as a job of up to 256 words has it.
TWICE_ONE = replace(TWICE, block_words=16)


class Hang(AssertionError):
    """A job that does not end in any time that a person would wait."""


class Driven(InProcess):
    """The way to the rig as a port's driver has it: bytes that follow one another come together, up to a zero."""

    def read(self, until_us: int) -> bytes:
        """One stretch, or what there is of it."""
        data = more = super().read(until_us)
        gap_us = 2 * 10_000_000 // self._baud + 1
        while more and more[-1]:
            more = super().read(min(until_us, self.now_us() + gap_us))
            data += more
        return data


class Guarded:
    """A line on which a job that hangs is a failure, in the rig's time and in calls."""

    def __init__(self, inner: Transport) -> None:
        self._inner = inner
        self._from_us = inner.now_us()
        self._reads = 0

    def __getattr__(self, name: str) -> Any:
        return getattr(self._inner, name)

    def read(self, until_us: int) -> bytes:
        """The inner line's bytes."""
        self._reads += 1
        if self._reads % 64 == 0 and (
            self._inner.now_us() - self._from_us > _LONGEST_US or self._reads > _MOST_READS
        ):
            raise Hang(f"no end after {self._inner.now_us() - self._from_us} us and {self._reads} reads")
        return self._inner.read(until_us)


class Parted(Session):
    """A session that tells the line where its parts begin: connecting, each sequence's loading and run, closing."""

    def __init__(self, line: Transport, begin_part: Callable[[], None]) -> None:
        super().__init__(line)
        self._begin_part = begin_part

    def run(self, sequence: Sequence, blocks: Iterable[Block] | None = None) -> RunResult:
        """As a session."""
        self._begin_part()
        return super().run(sequence, blocks)

    def _load(self, sequence: Sequence, boot: int) -> None:
        super()._load(sequence, boot)
        self._begin_part()

    def close(self) -> None:
        """As a session."""
        self._begin_part()
        super().close()


@dataclass
class Ended:
    """How one run of the job ended, and what the chip went through."""

    error: PulsewrightError | None
    facts: dict[str, object]
    pulses: Counter[int]
    cells: bytes
    took_us: int
    rigs_boot: int


class _OpenRig:
    in_process = True


@dataclass
class Table:
    """A bench with its rig on the table; jobs are run on it one after the other."""

    work: Work
    boot: int = 1
    bench: Bench = field(init=False)
    rig: VirtualRig = field(init=False)
    pulses: Counter[int] = field(init=False)
    pulse_ticks: list[tuple[int, int]] = field(default_factory=list)  # begin and end in ticks
    reset_in_pulse: bool = False

    def __post_init__(self) -> None:
        self.bench = self.work.bench()
        self.rig = self.bench.rig(self.boot)
        self.pulses = Counter()
        chip: Any = self.bench.chip
        pulsed = chip._pulsed

        def counted(at: int, data: int, width: int) -> None:
            tail = self.reset_in_pulse and width <= self.work.reset_tail_us * TICKS_PER_US
            self.pulses[at] += not tail
            self.pulse_ticks.append((self.rig.t - width, self.rig.t))
            pulsed(at, data, width)

        chip._pulsed = counted

    def run(self, harming: Harming | None = None) -> Ended:
        """The job over a line; the next one finds the rig and the chip as this one leaves them."""
        _set_block_words(self.work.block_words)
        plain = Driven(self.rig)
        line = Guarded(harming(plain, self.rig) if harming else plain)
        begin_part = getattr(line, "begin_part", lambda: None)
        session = Parted(line, begin_part)
        before, begun_us = self.pulses.copy(), line.now_us()
        error, facts = None, {}
        boot = self.rig.boot
        try:
            session.connect()
            facts = burn(self._context(session), _fitted(self.work)).facts
        except PulsewrightError as caught:
            error = caught
        session.close()
        facts = {name: value for name, value in facts.items() if name != "record"}
        took_us = line.now_us() - begun_us
        return Ended(error, facts, self.pulses - before, self.words(), took_us, boot)

    def reset(self) -> None:
        """Resets the rig, and notes whether that fell into a pulse, or - where the line's pull makes one - near it."""
        machine = self.rig.machine
        pulled = bool(self.work.reset_tail_us) and any("position" in text for text in self.standing())
        self.reset_in_pulse = machine is not None and (machine.pulsing is not None or pulled)
        self.rig.restart()

    def _context(self, session: Session) -> JobContext:
        work = self.work
        options = Options(work.first, work.last, save=False, vouch=work.vouch)
        return JobContext(_definition(work), _rig_file(), _OpenRig(), session, options)

    def words(self) -> bytes:
        """What the chip holds in the job's range."""
        return bytes(self.bench.chip.cells[self.work.first : self.work.last + 1])

    def touched_outside(self) -> list[str]:
        """Words outside the job's range that are not blank any more."""
        cells, work = self.bench.chip.cells, self.work
        outside = cells[: work.first] + cells[work.last + 1 :]
        count = len(outside) - outside.count(0xFF)
        return [f"{count} words outside the range have changed"] if count else []

    def standing(self) -> list[str]:
        """What stands that a safe rig has off."""
        rig = self.rig
        vcc_mv = rig.socket.socket_vcc_mv(rig.t)
        found = [f"VCC stands at {vcc_mv} mV"] if vcc_mv >= 500 else []
        for position in RAISED_POSITIONS:
            mv = rig.socket.mv(rig.t, position)
            if mv > vcc_mv + 300:
                found.append(f"position {position} stands at {mv} mV")
        if rig.machine is not None:
            found.append("a sequence is under way")
        return found

    def seen(self) -> list[str]:
        """What the judge saw, and the harm the chip came to."""
        report = self.bench.report()
        told = [f"{one['rule']} of pin {one['pin']}: {one['wanted']}, got {one['got']}" for one in report["violations"]]
        told += [f"stressed: {text}" for text in report["stressed"]] + (["damaged"] if report["damaged"] else [])
        return told

    def pass_time(self, us: int) -> None:
        """Lets the rig's clock go on."""
        self.rig.run_to(self.rig.t + us * TICKS_PER_US)


def _set_block_words(words: int) -> None:
    vars(read)["BLOCK_WORDS"] = words
    vars(writing)["write_blocks"] = functools.partial(plan.write_blocks, size=words)


@functools.cache
def _definition(work: Work) -> Any:
    return load(work.part if work.shipped else str(_PARTS / f"{work.part}.toml"))


@functools.cache
def _rig_file() -> Any:
    return load_rig()


@functools.cache
def _fitted(work: Work) -> Any:
    definition = _definition(work)
    return fit(image_of(work.image, start=work.first), definition.words, name=work.part)


@functools.cache
def undisturbed(work: Work) -> Ended:
    """The job as it ends on a line that does no harm."""
    ended = Table(work).run()
    assert ended.error is None, ended.error.lines()
    return ended


@functools.cache
def pulses_us(work: Work) -> list[tuple[int, int]]:
    """Begin and end of each pulse of the undisturbed job, microseconds of the rig's clock."""
    table = Table(work)
    table.run()
    return [(begin // TICKS_PER_US, end // TICKS_PER_US) for begin, end in table.pulse_ticks]


# ---- the verdict ----------------------------------------------------------------------------------------------------


def faults_of(
    work: Work, harming: Harming, wanted: tuple[type[RigFault], ...] | None, table: Table | None = None
) -> tuple[str, list[str]]:
    """Runs the job over a harmed line: how it ended ("done", or the error's class), and what is wrong with that.

    `wanted`: the errors that it may end with; None: it must be done.
    """
    table = table or Table(work)
    clean = undisturbed(work)
    ended = table.run(harming)
    if ended.error is None:
        return "done", _faults_of_done(table, ended, clean)
    name = type(ended.error).__name__
    found = []
    if wanted is None or not isinstance(ended.error, wanted) or ended.error.exit_code != 5:
        found.append(f"ended with {' | '.join(ended.error.lines())}")
    return name, found + _faults_of_error(table, ended, clean)


def _faults_of_done(table: Table, ended: Ended, clean: Ended) -> list[str]:
    found = table.standing() + table.seen() + table.touched_outside()
    if ended.cells != clean.cells:
        found.append(f"done with {ended.cells.hex(' ')} in the chip")
    if ended.pulses != clean.pulses:
        found.append(f"pulses {dict(ended.pulses)}, undisturbed {dict(clean.pulses)}")
    if ended.facts != clean.facts:
        found.append(f"result {ended.facts}, undisturbed {clean.facts}")
    if ended.took_us > clean.took_us + 20_000_000:
        found.append(f"took {ended.took_us} us")
    return found


def _faults_of_error(table: Table, ended: Ended, clean: Ended) -> list[str]:
    assert ended.error is not None
    found = []
    if not ended.error.did:
        found.append("does not say what the rig did")
    latched = table.rig.commands.latched
    if ended.error.did.startswith("answers") and latched and latched["pulsing"]:
        word = f"word {latched['address']:04X} is undefined: its pulse was cut"
        found += [] if word in ended.error.facts else [f"does not say: {word}"]
    if ended.error.did.startswith("not known"):
        table.pass_time(DEAD_MAN_US + 50_000)
    found += table.standing() + table.touched_outside() + _faults_seen(table)
    for at, count in ended.pulses.items():
        if count > clean.pulses[at]:
            found.append(f"word {at:04X} got {count} pulses, undisturbed {clean.pulses[at]}")
    return found + faults_of_second(table, ended.cells)


def _faults_seen(table: Table) -> list[str]:
    """What the judge may not have seen. A pulse that the rig cuts itself may be too short, and no more. At a reset the
    hardware lets all lines go at once (H5: the word in hand is undefined), where that falls into a pulse.
    """
    seen = table.seen()
    allowed: tuple[str, ...] = ("pulse width",)
    if table.reset_in_pulse:
        allowed += ("data in pulse", "address in pulse", "raised hold")
        if table.work.reset_tail_us:
            allowed += ("stressed: the address moved", "address setup", "data setup", "data not driven")
    cut = [text for text in seen if text.startswith("pulse width")]
    found = [text for text in seen if not text.startswith(allowed)]
    if len(cut) > 1 or any("at most" in text for text in cut):
        found.append(f"pulses that are no cut one: {cut}")
    return found


def faults_of_second(table: Table, cells: bytes, *, at_once: bool = False) -> list[str]:
    """The same job again, on a good line; `at_once`: while the rig may still be in the middle of the first."""
    work, before = table.work, table.bench.report()["violation_count"]
    right = [at for at, (new, old) in enumerate(zip(work.image, cells, strict=True)) if new == old]
    again = table.run()
    if again.error is not None:
        return ["the second run: " + " | ".join(again.error.lines())]
    found = [*table.standing(), *table.touched_outside()]
    if again.cells != work.image:
        found.append(f"done with {again.cells.hex(' ')} in the chip")
    found += [f"pulses word {at:04X}" for at in right if again.pulses[work.first + at]]
    if at_once:
        found += _faults_seen(table)
    elif table.bench.report()["violation_count"] > before:
        found.append(f"the judge saw {table.seen()}")
    return [f"the second run: {text}" for text in found]
