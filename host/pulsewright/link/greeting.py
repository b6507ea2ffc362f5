"""The beginning of a session: hello, the board's tables, the line's rate."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from pulsewright.errors import LinkFault, OtherFirmware, RigFault
from pulsewright.link import diagnosis
from pulsewright.link.exactly_once import Commands, Silent
from pulsewright.link.line import Line
from pulsewright.link.results import RigFacts, Trouble
from pulsewright.wire.fields import WireMistake, unpack, unpack_from
from pulsewright.wire.frames import Hello, Message, decode_hello
from pulsewright.wire.tables import (
    BLOBS,
    FINGERPRINT,
    HELLO_BAUD,
    HELLO_LENGTH,
    HELLO_MAGIC,
    HELLO_REQUEST,
    LAYOUT,
    RATE_FALL_BACK_MS,
    Frame,
    Outcome,
)

_TRY_US = 400_000  # one greeting; a board that was reset by opening the port is still asleep for some of them
_RATE_TRY_US = 450_000
_KEPT = 1_024
_SETTLE_US = 2_000  # between the answer to a change of rate and the first byte at the new one
_RATE_STEPS = (1_000_000, 500_000, 250_000)  # exact at 16 MHz (ATmega2560 data sheet 2549, table of baud rates)
_PATTERN = bytes([0x00, 0xFF, 0x55, 0xAA, 0x01, 0x80, 0x7F, 0xFE]) + bytes(range(0, 256, 5))  # long and short edges


@dataclass
class Heard:
    """What came instead of a greeting."""

    bytes_seen: int = 0
    first: bytes = b""

    def note(self, data: bytes) -> None:
        """Counts bytes; keeps the first of them, enough to tell what they look like."""
        self.bytes_seen += len(data)
        self.first = (self.first + data)[:_KEPT]


def find_hello(stream: bytearray) -> Hello | None:
    """A whole greeting anywhere in the stream; what cannot begin one is dropped from it."""
    while (at := stream.find(HELLO_MAGIC)) >= 0:
        if len(stream) - at < HELLO_LENGTH:
            return None
        try:
            return decode_hello(bytes(stream[at : at + HELLO_LENGTH]))
        except WireMistake:
            del stream[: at + 1]
    del stream[: max(0, len(stream) - len(HELLO_MAGIC) + 1)]
    return None


def greet(
    line: Line, for_us: int, heard: Heard, look: Callable[[], None] = lambda: None, *, breaks: bool = True
) -> Hello | None:
    """Asks for a greeting at the line's rate until one comes or the time is over.

    A break goes before each question but the first: a rig that an earlier session left at a higher rate hears it at
    any rate, ends what it was doing, and is back at the rate of greetings. Without `breaks` none is sent: a port that
    nobody named may lead to a machine that stops at one.
    """
    end_us = line.transport.now_us() + for_us
    stream = bytearray()
    first = True
    while line.transport.now_us() < end_us:
        if breaks and not first:
            line.transport.send_break()
        first = False
        line.write(HELLO_REQUEST)
        try_us = min(end_us, line.sent_by_us + max(_TRY_US, line.timing.first_answer_us))
        while (now := line.transport.now_us()) < try_us:
            data = line.transport.read(min(try_us, now + line.timing.slice_us))
            heard.note(data)
            stream += data
            if (hello := find_hello(stream)) is not None:
                return hello
            look()
    return None


def hello_of(line: Line, look: Callable[[], None] = lambda: None, *, breaks: bool = True) -> Hello:
    """The rig's greeting, checked against this program's wire table; RigSilent, RigNoise or OtherFirmware otherwise."""
    heard = Heard()
    line.set_baud(HELLO_BAUD)
    hello = greet(line, line.timing.hello_us, heard, look, breaks=breaks)
    name = line.transport.name
    if hello is None:
        waited_us = line.timing.hello_us
        raise diagnosis.no_hello(name, waited_us=waited_us, seen=heard.bytes_seen, first=heard.first)
    if hello.layout != LAYOUT or hello.fingerprint != FINGERPRINT:
        raise OtherFirmware(
            f"the rig on {name} speaks another wire table than this program",
            wanted=f"layout {LAYOUT}, fingerprint {FINGERPRINT:08X}",
            got=f"layout {hello.layout}, fingerprint {hello.fingerprint:08X}",
            did="nothing: only its greeting was read",
            hint="flash the firmware that belongs to this version, or use the version that belongs to the firmware",
        )
    return hello


def same_boot(commands: Commands, hello: Hello) -> Trouble | None:
    """RigRestarted when the rig is no longer in the boot that it greeted with; Silent if it does not answer.

    A rig that was reset meanwhile answers questions for its tables all the same: only its boot number tells. Gives the
    fault that is latched now: a sequence of an earlier session may have been under way at the greeting.
    """
    answer = commands.ask(Frame.STATUS)
    if answer.fields["outcome"] != Outcome.DONE:
        raise RigFault("the rig does not tell its state", did="nothing", hint="flash the rig's firmware anew")
    status, end = unpack_from(BLOBS["status"], answer.fields["data"])
    if status["boot"] != hello.boot:
        raise diagnosis.restarted_early(hello.boot, int(status["boot"]))
    return trouble_of(answer.fields["data"][end:])[0]


def trouble_of(data: bytes) -> tuple[Trouble | None, bytes]:
    """The fault blob at the start of `data` (None when its code is 0 or there is none) and what stands behind it."""
    from pulsewright.wire.tables import Fault

    try:
        values, end = unpack_from(BLOBS["fault"], data)
    except WireMistake:
        return None, b""
    code = values.pop("code")
    name = Fault(code).name.lower() if code in Fault._value2member_map_ else f"fault {code}"
    values["pulsing"] = bool(values["pulsing"])
    return (Trouble(code, name, **values) if code else None), data[end:]


def _page(commands: Commands, number: int) -> bytes:
    answer = commands.ask(Frame.DESCRIBE, page=number)
    if answer.fields["outcome"] != Outcome.DONE:
        trouble, _ = trouble_of(answer.fields["data"])
        raise RigFault(
            f"the rig does not give page {number} of its tables",
            got=f"{trouble.name} ({trouble.numbers()})" if trouble else "no reason",
            did="nothing",
            hint="flash the rig's firmware anew",
        )
    return bytes(answer.fields["data"])


def _words(data: bytes) -> tuple[int, ...]:
    return tuple(int.from_bytes(data[i : i + 2], "little") for i in range(0, len(data) - 1, 2))


def facts_of(commands: Commands, hello: Hello, baud: int) -> RigFacts:
    """The board's tables, all four pages; Silent or RigFault."""
    try:
        page = unpack(BLOBS["describe"], _page(commands, 0))
    except WireMistake as mistake:
        raise RigFault("the rig's own table cannot be read", got=str(mistake), did="nothing",
                       hint="flash the rig's firmware anew") from None
    levels = _words(_page(commands, 1))
    each = max(1, len(levels) // max(1, page["rails"]))
    costs = _page(commands, 3)
    return RigFacts(
        hello=hello,
        board=page["board"].decode("ascii", "replace"),
        window_blocks=page["window_blocks"],
        block_bytes=page["block_bytes"],
        program_bytes=page["program_bytes"],
        driven_from=page["driven_from"],
        off_below=page["off_below"],
        clear_above_vcc=page["clear_above_vcc"],
        fall_limit_ticks=page["fall_limit"],
        off_limit_ticks=page["off_limit"],
        lines=page["lines"],
        data_lines=tuple(page["data_lines"]),
        switches=tuple(page["switches"]),
        vcc_switches=tuple(page["vcc_switches"]),
        top_baud=page["top_baud"],
        nominal=tuple(levels[i : i + each] for i in range(0, len(levels), each)),
        ceilings=_words(_page(commands, 2)),
        cost_ticks=dict(zip(costs[::2], costs[1::2], strict=False)),
        baud=baud,
    )


def echoes(line: Line, commands: Commands, for_us: int) -> bool:
    """Whether the test pattern comes back unharmed within the time."""
    exchange = commands.begin(Frame.ECHO, data=_PATTERN)
    end_us = line.sent_by_us + max(for_us, line.timing.first_answer_us)
    while exchange.answer is None and line.transport.now_us() < end_us:
        message = line.receive(min(end_us, exchange.deadline_us()))
        if message is None:
            exchange.tick()
        elif not exchange.take(message):
            line.dropped += 1
    return exchange.answer is not None and bytes(exchange.answer.fields["data"]) == _PATTERN


def step_up(line: Line, commands: Commands, top_baud: int) -> int:
    """The highest rate at which the test pattern comes back, from the rig's top rate down; else the hello rate.

    LinkFault when the rig does not come back to the hello rate either.
    """
    for baud in sorted({top_baud, *(step for step in _RATE_STEPS if step < top_baud)}, reverse=True):
        if baud > HELLO_BAUD and _works_at(line, commands, baud):
            return baud
    return HELLO_BAUD


def _works_at(line: Line, commands: Commands, baud: int) -> bool:
    answer: Message = commands.ask(Frame.RATE, baud=baud)
    if answer.fields["outcome"] != Outcome.DONE:
        return False
    try:
        line.set_baud(baud)
        _pause(line, _SETTLE_US)
        line.write(b"\0")  # whatever the rig's receiver made of the change ends here
        if echoes(line, commands, _RATE_TRY_US):
            return True
    except LinkFault:  # this machine's port cannot make the rate, or the line is gone: the next lines find out
        pass
    # The rig may have heard us at the new rate without our hearing it; then only a break brings it back.
    line.transport.send_break()
    line.set_baud(HELLO_BAUD)
    _pause(line, RATE_FALL_BACK_MS * 1000 + _TRY_US)
    line.write(b"\0")
    if not echoes(line, commands, line.timing.give_up_us):
        raise Silent
    return False


def _pause(line: Line, for_us: int) -> None:
    """Lets time pass; what comes meanwhile has nothing to say."""
    until_us = line.transport.now_us() + for_us
    while line.transport.now_us() < until_us:
        if line.receive(until_us) is not None:
            line.dropped += 1
