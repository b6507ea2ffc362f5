"""What the tests of the virtual rig share: a plain chip, a watcher, a host that speaks frames, programs by hand."""

from __future__ import annotations

import zlib
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from pulsewright.virtual.board import RAISED_FULL_MV, VCC_FULL_MV, Board, count_of
from pulsewright.virtual.interface import Levels, Limits
from pulsewright.virtual.rig import VirtualRig
from pulsewright.virtual.socket import Socket
from pulsewright.wire.fields import unpack_from
from pulsewright.wire.frames import Message, decode_frame, encode_frame
from pulsewright.wire.ops import Header, Instruction, Label, assemble, ins, line_byte
from pulsewright.wire.permit import Permit, VccStep
from pulsewright.wire.tables import BLOBS, Channel, Flow, Frame, Identity, Level, Op, Outcome, Rail, Range
from tests.virtual.pin_log import Log

US, MS = 16, 16_000
PINS_A = (10, 9, 8, 7, 6, 5, 4, 3, 25, 24, 21, 23, 2, 26, 27, 1)
PINS_D = (11, 12, 13, 15, 16, 17, 18, 19)
PIN_CE, PIN_OE, PIN_VCC, PIN_GND, PIN_A9 = 20, 22, 28, 14, 24
CE, OE, A9 = PIN_CE + 2, PIN_OE + 2, PIN_A9 + 2  # positions
ADDRESS = tuple(pin + 2 for pin in PINS_A)
WIRING = {pin + 2: pin for pin in range(1, 29)}
REVERSED = {2 + (pin + 13) % 28 + 1: pin for pin in range(1, 29)}  # turned by half a turn
SHIFTED = {pin + 2 + (-1 if pin <= 14 else 1): pin for pin in range(1, 29)}  # one row up
ID = (0xDA, 0x08)
L, H, Z = Level.LOW, Level.HIGH, Level.RELEASED
BOTH_LOW = bytes([line_byte(CE, L), line_byte(OE, L)])
BOTH_HIGH = bytes([line_byte(CE, H), line_byte(OE, H)])


def limits() -> Limits:
    """Only what the socket asks for."""
    return Limits(
        package="DIP-28", maxima_mv={0: 7_000}, minimum_mv=-600, vcc_pin=PIN_VCC, gnd_pins=(PIN_GND,),
        address_pins=PINS_A, data_pins=PINS_D, enable_pins=(PIN_CE, PIN_OE), raised_pins=(PIN_OE, PIN_A9), pulses=(),
        access_ticks=3, float_ticks=3, rise_ticks=1, recovery_ticks=32, vcc_read_mv=(4_750, 5_250),
    )


class PlainChip:
    """64K x 8: reads at once, gives an ID with A9 raised, takes D at the end of a CE pulse with OE raised."""

    def __init__(self, contents: bytes = b"") -> None:
        self.name = "plain"
        self.pins = 28
        self.outputs: tuple[int, ...] = PINS_D
        self.limits = limits()
        self.cells = bytearray(contents.ljust(65_536, b"\xff"))
        self.erased_word = 0xFF
        self.id: tuple[int, int] | None = ID
        self.deaf = 0  # so many pulses are not taken
        self.draw = {PIN_VCC: 1_000, PIN_OE: 100, PIN_A9: 0}
        self.pulse_ua = 20_000
        self.toggles = 0  # looks in which bit 6 alternates and bit 7 is wrong
        self.pulses: list[tuple[int, int]] = []
        self._levels: list[int | None] = [None] * 29
        self._begun: int | None = None

    def _mv(self, pin: int) -> int:
        return self._levels[pin] or 0

    def pins_changed(self, t: int, levels: Levels) -> None:
        was_on = self._enabled()
        self._levels = list(levels)
        if self.toggles and self._enabled() and not was_on:
            self.toggles -= 1
        pulsing = self._mv(PIN_OE) > 9_000 and self._mv(PIN_CE) < 800 and self._mv(PIN_VCC) > 4_000
        if pulsing and self._begun is None:
            self._begun = t
        elif not pulsing and self._begun is not None:
            self.pulses.append((self._begun, t - self._begun))
            self._begun = None
            if self.deaf:
                self.deaf -= 1
            else:
                self.cells[self._address()] &= sum((self._mv(pin) >= 2_000) << bit for bit, pin in enumerate(PINS_D))

    def _address(self) -> int:
        return sum((self._mv(pin) >= 2_000) << bit for bit, pin in enumerate(PINS_A))

    def _enabled(self) -> bool:
        return self._mv(PIN_VCC) >= 3_000 and self._mv(PIN_CE) <= 800 and self._mv(PIN_OE) <= 800

    def drive(self, t: int) -> tuple[int, int]:
        if not self._enabled():
            return 0, 0
        if self._mv(PIN_A9) > 9_000 and self.id is not None:
            return 0xFF, self.id[self._address() & 1]
        word = self.cells[self._address()]
        if self.toggles:
            word ^= 0x80 | (0x40 if self.toggles & 1 else 0)
        return 0xFF, word

    def draw_ua(self, t: int, pin: int) -> int:
        return self.pulse_ua if pin == PIN_OE and self._begun is not None else self.draw.get(pin, 0)

    def state(self) -> dict[str, object]:
        return {}

    def restore(self, state: Mapping[str, object]) -> None:
        """Nothing is kept."""


# ---- programs -----------------------------------------------------------------------------------------------------

Item = Instruction | Label
VCC_5V, VCC_LOW, VCC_6V = 3, 1, 6  # steps of the VCC rail: 5.0, 3.75, 6.25 V
VH_12V, VPP_14V = 1, 5  # steps of the raised rail


def vcc(mv: int) -> int:
    """Count of a VCC level."""
    return count_of(mv, VCC_FULL_MV)


def vpp(mv: int) -> int:
    """Count of a raised level."""
    return count_of(mv, RAISED_FULL_MV)


def measure_vcc(mv: int = 5_000, limit: int = 10 * MS) -> Instruction:
    """VCC at the socket within 5 %."""
    low, high = vcc(mv * 95 // 100), vcc(mv * 105 // 100)
    return ins(Op.MEASURE, channel=Channel.SOCKET_VCC, low=low, high=high, limit=limit)


def measure_rail(mv: int) -> Instruction:
    """The raised rail within a quarter of a volt."""
    return ins(Op.MEASURE, channel=Channel.RAISED_RAIL, low=vpp(mv - 250), high=vpp(mv + 250), limit=5 * MS)


def lines(*pairs: tuple[int, Level]) -> Instruction:
    """Lines to levels."""
    return ins(Op.LINES, lines=bytes(line_byte(line, level) for line, level in pairs))


def power_up() -> list[Item]:
    """From rest to VCC 5 V at the socket, measured, with H driven, CE and OE high and D released."""
    return [
        ins(Op.HIGH, how=0),
        ins(Op.RELEASE),
        ins(Op.RAIL, rail=Rail.VCC, step=VCC_5V),
        ins(Op.RANGE, which=Range.FULL),
        ins(Op.WAIT, ticks=6 * MS),
        measure_vcc(),
        ins(Op.HIGH, how=1),
        ins(Op.LINES, lines=BOTH_HIGH),
    ]


def to_gate(wait: int = 32) -> list[Item]:
    """After `power_up`: seated, looked, the identify level on, and everything set for `gate`."""
    return [
        ins(Op.SEATED),
        ins(Op.LINES, lines=BOTH_LOW),
        ins(Op.GATE_LOOK, wait=wait),
        ins(Op.LINES, lines=BOTH_HIGH),
        ins(Op.RAIL, rail=Rail.RAISED, step=VH_12V),
        ins(Op.WAIT, ticks=25 * MS),
        measure_rail(12_000),
        ins(Op.ADDRESS, at=1 << 9),
        ins(Op.SWITCHES, on=1 << 4),
        ins(Op.WAIT, ticks=10 * US),
        ins(Op.LINES, lines=BOTH_LOW),
    ]


def past_gate() -> list[Item]:
    """From rest to an open gate, the level gone, CE and OE high."""
    return [
        *power_up(),
        *to_gate(),
        ins(Op.GATE, wait=32),
        ins(Op.SWITCHES, on=0),
        ins(Op.WAIT, ticks=20 * US),
        ins(Op.LINES, lines=BOTH_HIGH),
    ]


def raise_oe(step: int = VPP_14V, mv: int = 14_000) -> list[Item]:
    """Past the gate: the rail at a step, settled and measured, OE raised."""
    return [
        ins(Op.RAIL, rail=Rail.RAISED, step=step),
        ins(Op.WAIT, ticks=25 * MS),
        measure_rail(mv),
        ins(Op.SWITCHES, on=1 << 2),
        ins(Op.WAIT, ticks=10 * US),
    ]


def pulse(width: int = 100 * US, *, longest: int | None = None) -> Instruction:
    """CE low for a time."""
    return ins(Op.PULSE, line=line_byte(CE, L), width=width, max=width if longest is None else longest)


def permit_for(code: bytes, **changes: Any) -> Permit:
    """A permit of a shared OE/VPP part with its ID at A9, changed as wanted."""
    permit = Permit(
        identity=Identity.WANTED,
        alternatives=(((0, ID[0]), (1, ID[1])),),
        identify_switch=4,
        identify_step=VH_12V,
        identify_ceiling=vpp(12_500),
        raised=((2, vpp(14_250)), (4, vpp(14_250))),
        vcc=(
            VccStep(VCC_LOW, vcc(3_563), vcc(3_937), 6 * MS),
            VccStep(VCC_5V, vcc(4_750), vcc(5_250), 6 * MS),
            VccStep(VCC_6V, vcc(6_000), vcc(6_500), 6 * MS),
        ),
        vcc_to=0b10,
        drives=(BOTH_LOW,),
        safe=BOTH_HIGH,
        self_timed=0,
        crc32=zlib.crc32(code),
        number=1,
        boot=7,
    )
    return replace(permit, **changes)


def build(items: Iterable[Item], flow: Flow = Flow.NONE, words: int = 65_536, block_words: int = 256) -> bytes:
    """An encoded program with the chip's address bus."""
    return assemble(Header(8, flow, ADDRESS, words, block_words), items)[0]


# ---- the host -----------------------------------------------------------------------------------------------------


@dataclass
class End:
    """A closing answer of `run`, taken apart."""

    outcome: Outcome
    fault: dict[str, Any]
    done: dict[str, Any]
    id: bytes
    readings: dict[int, int]


class Host:
    """Speaks frames to a rig; `heard` keeps all that came back."""

    def __init__(
        self,
        chip: Any = None,
        *,
        wiring: Mapping[int, int] | None = None,
        board: Board | None = None,
        trace: bool = True,
    ) -> None:
        self.chip = chip if chip is not None else PlainChip()
        self.log = Log()
        self.socket = Socket(self.chip, WIRING if wiring is None else wiring, (self.log,))
        self.rig = VirtualRig(self.socket, boot=7, board=board)
        if trace:
            self.rig.trace = []
        self.slice = 0  # > 0: time is passed in pieces of so many ticks
        self.keep_alive = True
        self.heard: list[Message] = []
        self.heard_at: list[int] = []
        self.number = 1
        self.index = 0
        self._stretch = bytearray()

    @property
    def trace(self) -> list[tuple[int, str]]:
        assert self.rig.trace is not None
        return self.rig.trace

    def texts(self) -> list[str]:
        """The trace without its times."""
        return [text for _, text in self.trace]

    def pass_time(self, ticks: int) -> list[Message]:
        """Runs the rig on; the frames that came meanwhile. Heartbeats of a run are answered."""
        before = len(self.heard)
        end = self.rig.t + ticks
        while self.rig.t < end:
            self.rig.run(min(end, self.rig.t + self.slice) if self.slice else end)
            self._take()
        return self.heard[before:]

    def _take(self) -> None:
        for byte in self.rig.take_output():
            if byte:
                self._stretch.append(byte)
                continue
            message = decode_frame(bytes(self._stretch))
            self._stretch.clear()
            self.heard.append(message)
            self.heard_at.append(self.rig.t)
            if message.kind is Frame.HEARTBEAT and self.keep_alive and message.permit:
                self.send(Message(Frame.KEEP_ALIVE, message.permit, message.index))

    def send(self, message: Message) -> None:
        """Puts a frame on the line, now."""
        self.rig.receive(encode_frame(message), self.rig.t)

    def ask(self, kind: Frame, under: int = 0, **fields: Any) -> Message:
        """A command to its closing answer."""
        self.index += 1
        self.send(Message(kind, under, self.index, fields))
        return self.answer(self.index)

    def answer(self, index: int, longest: int = 40_000 * MS) -> Message:
        """The closing answer of a command."""
        end = self.rig.t + longest
        seen = 0
        while self.rig.t < end:
            for message in self.heard[seen:]:
                if message.kind is Frame.ANSWER and message.index == index:
                    return message
            seen = len(self.heard)
            self.pass_time(MS)
        raise AssertionError("no closing answer")

    def seal(self, code: bytes, permit: Permit | None = None) -> Message:
        """Permit, program and seal; the answer of the first that was not done, or of the seal."""
        permit = permit or permit_for(code)
        self.number = permit.number
        answer = self.ask(Frame.PERMIT, permit=permit.encode())
        for at in range(0, len(code), 200):
            if answer.fields["outcome"] == Outcome.DONE:
                answer = self.ask(Frame.LOAD, offset=at, code=code[at : at + 200])
        return self.ask(Frame.SEAL) if answer.fields["outcome"] == Outcome.DONE else answer

    def start(self, code: bytes, permit: Permit | None = None) -> None:
        """Up to the first heartbeat of the run; the trace begins anew with it."""
        assert self.seal(code, permit).fields["outcome"] == Outcome.DONE
        if self.rig.trace is not None:
            self.rig.trace = []
        self.index += 1
        self.send(Message(Frame.RUN, self.number, self.index))

    def end(self) -> End:
        """The closing answer of the run."""
        return end_of(self.answer(self.index))

    def run(self, code: bytes, permit: Permit | None = None, blocks: Sequence[tuple[int, int, bytes]] = ()) -> End:
        """A whole run; blocks (first word, words, data) are sent with their indexes, the end of data behind them."""
        self.start(code, permit)
        for index, (first, words, data) in enumerate(blocks):
            self.block(index, first, words, data)
            self.pass_time(200 * MS if index == 0 else 60 * MS)
        if blocks:
            self.block(len(blocks), 0, 0, b"")
        return self.end()

    def block(self, index: int, first: int, words: int, data: bytes) -> None:
        """Puts a block on the line."""
        self.send(Message(Frame.BLOCK, self.number, index, {"first": first, "words": words, "data": data}))

    def replies(self, kind: Frame) -> list[Message]:
        """All replies of a kind heard so far."""
        return [message for message in self.heard if message.kind is kind]


def end_of(answer: Message) -> End:
    """A closing answer of `run`, taken apart."""
    data = answer.fields["data"]
    fault, at = unpack_from(BLOBS["fault"], data)
    if at == len(data):
        return End(Outcome(answer.fields["outcome"]), fault, {}, b"", {})
    done, at = unpack_from(BLOBS["run_done"], data, at)
    tail, _ = unpack_from(BLOBS["run_tail"], data, at)
    raw = tail["readings"]
    readings = {
        int.from_bytes(raw[i : i + 2], "little"): int.from_bytes(raw[i + 2 : i + 4], "little")
        for i in range(0, len(raw), 4)
    }
    return End(Outcome(answer.fields["outcome"]), fault, done, tail["id"], readings)


def code_of(answer: Message) -> int:
    """The fault's code of any answer; 0 if it has no fault."""
    data = answer.fields["data"]
    return int(data[0]) if data else 0


def write_block(words: bytes, *, leave: Iterable[int] = ()) -> bytes:
    """Mask and data of a write block."""
    mask = sum(1 << at for at in range(len(words)) if at not in set(leave))
    return mask.to_bytes((len(words) + 7) // 8, "little") + words
