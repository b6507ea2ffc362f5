"""What every job works with, and the way each of its sequences goes: compiled, proven, run, understood."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from typing import Protocol

from pulsewright.chip.model import Definition
from pulsewright.errors import FileMistake, Interrupted, ProofRefused, PulsewrightError, UsageMistake
from pulsewright.jobs.board import check_board
from pulsewright.jobs.consent import check_consent, check_vouch
from pulsewright.jobs.record import Record
from pulsewright.jobs.story import MADE_SAFE, readings_of
from pulsewright.jobs.translate import translate
from pulsewright.link.results import Block, LinkProgress, RigFacts, RunResult
from pulsewright.rig.model import Rig
from pulsewright.sequence.proof import prove
from pulsewright.sequence.types import Proof, Sequence
from pulsewright.units import show_address, show_count

_NO_RECORD = "no record could be kept: see whether the state folder may be written (PULSEWRIGHT_HOME names another)"


class OpenedRig(Protocol):
    """What a job asks of the rig that was opened for it."""

    @property
    def in_process(self) -> bool:
        """Whether it is the virtual rig in this process, which has no chip to harm (H10)."""


class RunsSequences(Protocol):
    """What a job asks of a session."""

    @property
    def facts(self) -> RigFacts:
        """What the rig told when the session began."""

    def run(self, sequence: Sequence, blocks: Iterable[Block] = ()) -> RunResult:
        """Runs a sequence to its end."""


class Progress(Protocol):
    """What shows how far a job is; a job tells, it never prints."""

    def begin(self, title: str, words: int) -> None:
        """A stage of so many words begins (0: not counted in words)."""

    def link(self, progress: LinkProgress) -> None:
        """The session got further."""

    def fact(self, text: str) -> None:
        """Something is known now."""

    def end(self) -> None:
        """The stage is over."""


class Silent:
    """A progress that shows nothing."""

    def begin(self, title: str, words: int) -> None:
        """See Progress."""

    def link(self, progress: LinkProgress) -> None:
        """See Progress."""

    def fact(self, text: str) -> None:
        """See Progress."""

    def end(self) -> None:
        """See Progress."""


@dataclass(frozen=True)
class Options:
    """What the operator asked for; `last` None means the chip's last word."""

    first: int = 0
    last: int | None = None
    passes: int = 1
    margins: bool = False
    erase: bool = False
    save: bool = True
    vouch: str = ""
    protect: str = "keep"  # what becomes of software protection: "keep", "on", "off"
    accept_shortfall: bool = False
    accepted: str = ""  # the digest of --accept-voltages


@dataclass(frozen=True)
class JobResult:
    """What a job found and did: lines for a person, the same as JSON values, and what was read, if it read."""

    lines: tuple[str, ...]
    facts: dict[str, object]
    data: bytes = b""


@dataclass
class JobContext:
    """A definition, a rig file, a rig that is open, a session on it, and what the operator wants."""

    definition: Definition
    rig: Rig
    open_rig: OpenedRig
    session: RunsSequences
    options: Options = Options()
    progress: Progress = field(default_factory=Silent)
    interrupted: Callable[[], int] = lambda: 0
    ask: Callable[[list[str]], bool] | None = None
    record: Record | None = None

    @property
    def first(self) -> int:
        """The first word of the range."""
        return self.options.first

    @property
    def last(self) -> int:
        """The last word of the range; UsageMistake if the range does not lie in the chip."""
        top = self.definition.words - 1
        last = top if self.options.last is None else self.options.last
        if not 0 <= self.options.first <= last <= top:
            words = self.definition.words
            raise UsageMistake(
                f"the range does not lie in {self.definition.name}",
                wanted=f"FIRST..LAST within {show_address(0, words)}..{show_address(top, words)}, FIRST not above LAST",
                got=f"{show_address(self.options.first, words)}..{show_address(last, words)}",
                hint="without --range the whole chip is meant",
            )
        return last

    @property
    def words(self) -> int:
        """How many words the range has."""
        return self.last - self.first + 1

    def span(self) -> str:
        """The range as text: "0000..FFFF"."""
        words = self.definition.words
        return f"{show_address(self.first, words)}..{show_address(self.last, words)}"

    def hex(self, word: int) -> str:
        """A word as hex digits of the chip's width."""
        return f"{word:0{self.definition.width // 4}X}"

    def ready(self, record: Record) -> None:
        """What must be agreed before the first sequence: range, H10, H9's usage; begins the record."""
        self.record = record
        record.content["range"] = self.span()
        if self.options.vouch:
            record.content["vouch"] = self.options.vouch
        check_vouch(self.definition, False, self.options.vouch)
        record.content["consent"] = check_consent(
            self.definition, in_process=self.open_rig.in_process, accepted=self.options.accepted, ask=self.ask
        )
        rig = self.session.facts
        check_board(self.rig, rig)
        record.content["rig"] = {
            "file": self.rig.path,
            "name": self.rig.name,
            "board": rig.board,
            "fingerprint": f"{rig.hello.fingerprint:08X}",
            "boot": rig.boot,
            "baud": rig.baud,
        }

    def vouched(self, sequence: Sequence) -> Sequence:
        """The sequence, if it raises no level without an ID or the operator gave his word (H9); else VouchNeeded."""
        check_vouch(self.definition, bool(sequence.permit.raised), self.options.vouch)
        return sequence

    def prove(self, sequence: Sequence) -> Proof:
        """The proof of a sequence; VouchNeeded, or ProofRefused with every finding, and nothing is sent."""
        sequence = self.vouched(sequence)
        proof = prove(sequence.code, sequence.permit, self.definition, self.rig)
        if not proof.accepted:
            raise ProofRefused(
                f"the proof does not accept {sequence.title}: {show_count(len(proof.findings), 'finding')}",
                did="nothing was sent",
                facts=[finding_text(sequence, finding.offset, str(finding)) for finding in proof.findings],
                hint=f"pulsewright sequence {self.definition.name} {sequence.kind} shows every op with its line",
            )
        return proof

    def run(self, sequence: Sequence, blocks: Iterable[Block] = (), want: bytes | None = None) -> RunResult:
        """Proves and runs a sequence; every outcome but done is raised as what it means at the bench."""
        self.look_at_interrupt()
        sequence = self.vouched(sequence)
        proof = self.prove(sequence)
        result = self.session.run(sequence, blocks)
        self._keep(sequence, proof, result)
        error = translate(result, sequence, self.definition, self.rig, want)
        if error is not None:
            error.facts = (*error.facts, *self._link_trouble(result))
            raise RunFailed(error, result)
        return result

    def look_at_interrupt(self) -> None:
        """Interrupted if the operator asked for it; between sequences the chip has no power."""
        if self.interrupted():
            raise Interrupted("interrupted between two sequences", did=MADE_SAFE, hint="the same command again")

    def _link_trouble(self, result: RunResult) -> tuple[str, ...]:
        """Both ends' counters, where any of them is not zero."""
        counters = result.counters
        rig = counters.rig
        ours = counters.sent_again or counters.damaged or counters.dropped
        theirs = rig is None or rig.damaged or rig.dropped or rig.repeated
        return counters.facts() if ours or theirs else ()

    def _keep(self, sequence: Sequence, proof: Proof, result: RunResult) -> None:
        if self.record is None:
            return
        for note in sequence.notes:
            self.record.note(note)
        rig = result.counters.rig
        entry: dict[str, object] = {
            "title": sequence.title,
            "crc32": f"{sequence.permit.crc32:08X}",
            "outcome": result.outcome.name.lower(),
            "id": result.id_bytes.hex(" ").upper(),
            "readings": readings_of(result, sequence, self.rig),
            "proof": {"ops": proof.ops, "states": proof.states},
            "rig_us": result.counters.elapsed_us,
            "frames": {
                "sent_again": result.counters.sent_again,
                "damaged": result.counters.damaged,
                "dropped": result.counters.dropped,
                "rig": None
                if rig is None
                else {"damaged": rig.damaged, "dropped": rig.dropped, "repeated": rig.repeated},
            },
        }
        if result.trouble is not None and result.trouble.code:
            entry["fault"] = {"name": result.trouble.name, "numbers": result.trouble.numbers()}
        self.record.add("sequences", entry)


class RunFailed(Exception):
    """A sequence that did not end well: the error for the operator, and what the run brought until then.

    Internal to jobs: `job` unwraps it.
    """

    def __init__(self, error: PulsewrightError, result: RunResult) -> None:
        super().__init__(error.what)
        self.error = error
        self.result = result


def finding_text(sequence: Sequence, offset: int, text: str) -> str:
    """A finding with the op's origin: part, words, and the definition's line."""
    origin = sequence.origin_at(offset)
    if origin is None:
        return text
    place = f" ({origin.where})" if str(origin.where) else ""
    return f"{text}; in {origin.part}: {origin.text}{place}"


def job(ctx: JobContext, name: str, work: Callable[[JobContext], JobResult]) -> JobResult:
    """Runs one job and leaves its record, whatever becomes of it; errors go on to the caller with the record's path."""
    record = Record(name, ctx.definition)
    try:
        ctx.ready(record)
        result = work(ctx)
        ctx.progress.end()
    except RunFailed as failed:
        raise _told(ctx, record, failed.error) from None
    except PulsewrightError as error:
        raise _told(ctx, record, error)  # noqa: B904 - it is the same error, raised on
    record.content.update(result.facts)
    record.content["lines"] = list(result.lines)
    kept = _kept(record, result.lines[0], 0)
    lines = result.lines if kept else (*result.lines, _NO_RECORD)
    return JobResult(lines, {**result.facts, "record": kept}, result.data)


def _told(ctx: JobContext, record: Record, error: PulsewrightError) -> PulsewrightError:
    """The error, once its record is kept and named in it; where the chip may have changed, its dump as well."""
    ctx.progress.end()
    if "saved" in record.content:
        error.facts = (*error.facts, f"what the chip held before is saved in {record.content['saved']}")
    kept = _kept(record, error.what, error.exit_code, error)
    error.facts = (*error.facts, f"record: {kept}" if kept else _NO_RECORD)
    return error


def _kept(record: Record, result: str, exit_code: int, error: PulsewrightError | None = None) -> str:
    """The record's path; "" where it cannot be written, which must not hide what the job did."""
    try:
        return str(record.write(result, exit_code, error))
    except FileMistake:
        return ""
