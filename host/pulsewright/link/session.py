"""A session with a rig: connect, run sequences, and end each with the rig known to be safe, or say it is not."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from contextlib import suppress
from dataclasses import dataclass, replace

from pulsewright.errors import Interrupted, LinkFault, RigFault, RigRestarted
from pulsewright.link import endings, greeting
from pulsewright.link.blocks import Window, requests
from pulsewright.link.exactly_once import Commands, Exchange, Silent
from pulsewright.link.line import Line, RigCounters
from pulsewright.link.results import Block, Counters, LinkProgress, RigFacts, RunResult, Trouble
from pulsewright.link.transport import Transport
from pulsewright.sequence.types import Sequence
from pulsewright.wire.fields import unpack_from
from pulsewright.wire.frames import Message
from pulsewright.wire.ops import Header, decode_program
from pulsewright.wire.tables import ABORT_RUN, BLOBS, HELLO_BAUD, LOAD_BYTES, Fault, Flow, Frame, Outcome, State

_REPEAT_ABORT_US = 100_000  # a heartbeat this long after the abort that still says "running": the abort was lost
_BOOT_STRIDE = 25_717  # no divisor in common with 65535: a number comes again at the same clock 65535 boots later
_OTHER_NUMBER = 4_099  # so far on from a permit's number that this boot has had, to one that it has not
_NUMBERS_TRIED = 8
_PERHAPS_RESTARTED = (Fault.WRONG_BOOT, Fault.WRONG_STATE, Fault.WRONG_PERMIT)


@dataclass
class _Run:
    """A sequence under way: its command, its blocks, and how far the operator's wish to stop has got."""

    exchange: Exchange
    window: Window
    permit: int
    aborts: int = 0
    first_abort_us: int = 0
    last_abort_us: int = 0


class Session:
    """The only thing that talks to a rig. `interrupted` counts the operator's Ctrl-C so far and is looked at several
    times a second; `on_progress` is called as blocks are answered. Times come from the transport's clock.

    Errors: LinkFault, OtherFirmware, RigRestarted, RigFault for what a rig refuses, Interrupted when the operator
    stopped it. A sequence that failed or tripped is a result, not an error: its caller knows what its ops were for.
    """

    def __init__(
        self,
        transport: Transport,
        *,
        interrupted: Callable[[], int] = lambda: 0,
        on_progress: Callable[[LinkProgress], None] | None = None,
    ) -> None:
        self._transport = transport
        self._interrupted = interrupted
        self._on_progress = on_progress
        self._line = Line(transport)
        self._commands = Commands(self._line)
        self._facts: RigFacts | None = None
        self._permit_number = transport.now_us() // 1009 % 0xFFFF  # not the number of an earlier session
        self._rig_counters: RigCounters | None = None
        self._begun_us = transport.now_us()

    @property
    def facts(self) -> RigFacts:
        """What the rig told in `connect`."""
        if self._facts is None:
            raise RuntimeError("connect() comes first")
        return self._facts

    # ---- beginning and end of a session ---------------------------------------------------------------------------

    def connect(self) -> RigFacts:
        """Greets the rig, reads its tables, clears an old fault and raises the line's rate as far as it holds."""
        hello = greeting.hello_of(self._line, self._stop_between)
        # A host's clock may begin anew with the rig: what is still under way from an earlier boot has other numbers.
        self._permit_number = (self._permit_number + hello.boot * _BOOT_STRIDE) % 0xFFFF
        self._commands.number_on(hello.boot * _BOOT_STRIDE)
        try:
            facts = greeting.facts_of(self._commands, hello, HELLO_BAUD)
            self._line.timing = self._transport.timing(facts.board)
            earlier = self._clear_latched() if hello.fault else None
            baud = greeting.step_up(self._line, self._commands, facts.top_baud)
            if greeting.same_boot(self._commands, hello) is not None:
                earlier = self._clear_latched()
        except Silent:
            raise self._lost("reading the rig's tables", hello.boot, running=False) from None
        self._facts = replace(facts, baud=baud, earlier=earlier)
        self._stop_between()
        return self._facts

    def close(self) -> None:
        """Takes the line back to the rate of greetings, so that the next session is heard. Never raises."""
        if self._facts is None or self._line.baud == HELLO_BAUD:
            return
        try:
            self._commands.ask(Frame.RATE, baud=HELLO_BAUD)
            self._line.set_baud(HELLO_BAUD)
        except (Silent, LinkFault):
            return

    # ---- one sequence ---------------------------------------------------------------------------------------------

    def run(self, sequence: Sequence, blocks: Iterable[Block] | None = None) -> RunResult:
        """Permits, loads, seals and runs a sequence, and feeds it its blocks; the rig is safe when this returns.

        A reading sequence without `blocks` gets requests for its whole range. For the errors see the class.
        """
        boot = self.facts.boot
        header = decode_program(sequence.code).header
        self._stop_between()
        self._begun_us = self._transport.now_us()
        stage, running = "sending the sequence", False
        try:
            self._load(sequence, boot)
            self._stop_between()
            stage, running = "running the sequence", True
            window = self._window(sequence, header, blocks)
            exchange = self._commands.begin(Frame.RUN, self._permit_number)
            run = _Run(exchange, window, self._permit_number)
            self._work_or_abort(run)
            stage, running = "asking for the rig's state", False
            return self._finish(run, sequence.kind)
        except Silent:
            kind = sequence.kind if running else ""
            raise self._lost(f"{stage} ({sequence.title})", boot, running=running, kind=kind) from None
        except LinkFault as fault:
            fault.facts = (*fault.facts, *self._counters().facts())
            fault.did = fault.did or endings.UNKNOWN
            raise

    def _window(self, sequence: Sequence, header: Header, blocks: Iterable[Block] | None) -> Window:
        if header.flow is Flow.READ and blocks is None:
            blocks = requests(sequence.first, sequence.last, header.block_words)
        return Window(blocks or (), header, self._permit_number, self.facts.hello.window_blocks)

    def _load(self, sequence: Sequence, boot: int) -> None:
        self._permit(sequence, boot)
        for at in range(0, len(sequence.code), LOAD_BYTES):
            code = sequence.code[at : at + LOAD_BYTES]
            self._accepted("the sequence", self._commands.ask(Frame.LOAD, offset=at, code=code))
            self._tell("load", None)
        self._accepted("the seal", self._commands.ask(Frame.SEAL))

    def _permit(self, sequence: Sequence, boot: int) -> None:
        """Gives the permit under a number that this boot has not had: an earlier session may have used the next one."""
        for tried in range(1, _NUMBERS_TRIED + 1):
            self._permit_number = self._permit_number % 0xFFFF + 1
            permit = sequence.permit.sealed_for(self._permit_number, boot).encode()
            answer = self._commands.ask(Frame.PERMIT, permit=permit)
            trouble = greeting.trouble_of(answer.fields["data"])[0]
            if trouble is None or trouble.code != Fault.WRONG_PERMIT or tried == _NUMBERS_TRIED:
                self._accepted("the permit", answer)
                return
            self._permit_number += _OTHER_NUMBER

    def _work_or_abort(self, run: _Run) -> None:
        """`_work`; where anything but the link itself fails on this end, the rig is stopped before that goes on."""
        try:
            self._work(run)
        except (Silent, LinkFault):
            raise
        except BaseException:
            with suppress(Exception):  # the first error is the one to tell; a rig that cannot be told has its dead-man
                self._abort(run)
                run.aborts = 2
                self._on_progress = None
                self._interrupted = lambda: 2
                self._work(run)
            raise

    def _work(self, run: _Run) -> None:
        """Until the closing answer: blocks out, replies in, heartbeats answered, an interrupt passed on."""
        exchange, window = run.exchange, run.window
        while exchange.answer is None:
            self._pass_on_interrupt(run)
            if exchange.accepted and not run.aborts:
                self._send(window.due())
            message = self._line.receive(exchange.deadline_us())
            if message is None:
                exchange.tick()
            elif exchange.take(message):
                if message.kind is Frame.HEARTBEAT:
                    self._beat(run, message)
            elif message.permit != run.permit or not self._block_reply(run, message):
                self._line.dropped += 1

    def _block_reply(self, run: _Run, message: Message) -> bool:
        """Whether a frame was the reply to a block, or its refusal, and counted."""
        if message.kind is Frame.BLOCK_REFUSED:
            run.exchange.heard()
            self._send([] if run.aborts else run.window.refused(message), again=True)
            return True
        if message.kind not in (Frame.BLOCK_DATA, Frame.BLOCK_DONE):
            return False
        run.exchange.heard()
        counted, again = run.window.replied(message)
        self._send([] if run.aborts else again, again=True)
        if counted:
            self._tell("run", run.window)
        return counted

    def _beat(self, run: _Run, message: Message) -> None:
        now_us = self._transport.now_us()
        if not run.aborts:
            self._send(run.window.beat(), again=True)
        elif message.fields["state"] == State.RUNNING and now_us - run.last_abort_us >= _REPEAT_ABORT_US:
            if now_us - run.first_abort_us >= self._line.timing.give_up_us:
                raise Silent  # it will not stop: keep it alive no longer, and its dead-man ends it
            self._abort(run)
        self._tell("run", run.window)

    def _send(self, frames: Iterable[Message], *, again: bool = False) -> None:
        for frame in frames:
            self._line.send(frame, again=again)

    def _tell(self, stage: str, window: Window | None) -> None:
        if self._on_progress:
            done, words = (len(window.results), window.words) if window else (0, 0)
            self._on_progress(LinkProgress(stage, done, words, self._transport.now_us() - self._begun_us))

    # ---- interrupt ------------------------------------------------------------------------------------------------

    def _stop_between(self) -> None:
        """Between commands nothing is powered: the session may simply end."""
        if self._interrupted():
            raise Interrupted("stopped by the operator", did=endings.NOTHING_RAISED)

    def _pass_on_interrupt(self, run: _Run) -> None:
        """Sends the abort for the first interrupt, and once more for the second; only once the rig runs."""
        wish = min(self._interrupted(), 2)
        if run.exchange.accepted and run.aborts < wish:
            run.aborts += 1
            self._abort(run)

    def _abort(self, run: _Run) -> None:
        self._line.abort(run.permit, run.exchange.message.index)
        run.last_abort_us = self._transport.now_us()
        run.first_abort_us = run.first_abort_us or run.last_abort_us

    # ---- endings --------------------------------------------------------------------------------------------------

    def _finish(self, run: _Run, kind: str) -> RunResult:
        answer = run.exchange.answer
        assert answer is not None  # _work returns no earlier
        self._accepted("the start", answer)
        trouble, rest = greeting.trouble_of(answer.fields["data"])
        self._rig_counters = None
        try:
            if trouble is not None:
                self._clear_latched()
            else:
                self._ask_state()
        except Silent:
            pass  # how the run ended is known; that the link is gone now, the next command finds out
        result = endings.result_of(Outcome(answer.fields["outcome"]), trouble, rest, run.window, self._counters())
        if self._interrupted():
            raise endings.interrupted(result, kind)
        return result

    def _counters(self) -> Counters:
        line, elapsed_us = self._line, self._transport.now_us() - self._begun_us
        return Counters(line.sent_again, line.damaged, line.dropped, self._rig_counters, elapsed_us)

    def _ask_state(self) -> tuple[int, Trouble | None]:
        """The rig's boot number and latched fault; keeps its counters."""
        answer = self._commands.ask(Frame.STATUS)
        self._accepted("a question for its state", answer)
        status, end = unpack_from(BLOBS["status"], answer.fields["data"])
        self._rig_counters = RigCounters(status["damaged"], status["dropped"], status["repeated"])
        return int(status["boot"]), greeting.trouble_of(answer.fields["data"][end:])[0]

    def _clear_latched(self) -> Trouble | None:
        _, latched = self._ask_state()
        self._accepted("forgetting a fault", self._commands.ask(Frame.CLEAR))
        return latched

    def _accepted(self, what: str, answer: Message) -> None:
        """RigFault, or RigRestarted, when a command was refused."""
        if answer.fields["outcome"] != Outcome.REFUSED:
            return
        trouble, _ = greeting.trouble_of(answer.fields["data"])
        if trouble is not None and trouble.code in _PERHAPS_RESTARTED and self._facts is not None:
            boot, _ = self._ask_state()
            if boot != self._facts.boot:
                raise endings.restarted(self._facts.boot, boot, self._counters())
        raise RigFault(
            f"the rig refuses {what}: {trouble.name.replace('_', ' ') if trouble else 'no reason given'}",
            got=trouble.numbers() if trouble else "",
            did="nothing: a refused command has no effect",
            hint="run it again; if it comes back, firmware and program do not fit together",
            facts=self._counters().facts(),
        )

    def _lost(self, stage: str, boot: int, *, running: bool, kind: str = "") -> LinkFault | RigRestarted:
        """The rig was not heard for too long: stop it by every means there is, then see whether it still greets.

        Where it does, it tells what it was doing when the link went. `kind`: of the sequence that ran.
        """
        hello = latched = None
        self._rig_counters = None
        try:
            self._line.write(bytes(ABORT_RUN))
            self._transport.send_break()
            self._line.set_baud(HELLO_BAUD)
            hello = greeting.greet(self._line, self._line.timing.hello_us, greeting.Heard())
        except LinkFault:
            pass  # the line itself is gone, which is what is about to be said
        if hello is not None and hello.boot != boot:
            return endings.restarted(boot, hello.boot, self._counters(), running=running)
        if hello is not None:
            with suppress(Silent, RigFault):  # what it does not tell now, the next session reads
                _, latched = self._ask_state()
        waited_us = self._line.timing.give_up_us
        return endings.lost(stage, running, hello, latched, kind, self._counters(), waited_us)
