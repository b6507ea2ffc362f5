"""The virtual rig: bytes in, bytes out, in virtual time.

It holds the clock. The program of a run is a generator (`interpreter`); everything else is an event with a tick of its
own: a byte that has arrived or left, a heartbeat, the monitor, the dead-man, the end of a ramp, the fall-back of the
rate. Events are served in the order of their ticks, and never in the middle of an op: waits and pulses are cut into
pieces by them. So it makes no difference in how many calls of `run` a stretch of time is passed.
"""

from __future__ import annotations

from pulsewright.units import TICKS_PER_MS, TICKS_PER_US
from pulsewright.virtual.blocks import Blocks
from pulsewright.virtual.board import VCC_FULL_MV, Board, count_of
from pulsewright.virtual.commands import Commands
from pulsewright.virtual.contacts import NEVER
from pulsewright.virtual.interpreter import Ending, bind, run_program
from pulsewright.virtual.loader import Loaded
from pulsewright.virtual.machine import Machine, Trip, Waiting
from pulsewright.virtual.monitor import look
from pulsewright.virtual.serial_line import SerialLine
from pulsewright.virtual.socket import Socket
from pulsewright.wire.frames import FrameReader, Hello, Message
from pulsewright.wire.permit import Permit
from pulsewright.wire.tables import (
    DEAD_MAN_MS,
    FINGERPRINT,
    HEARTBEAT_MS,
    HELLO_BAUD,
    HELLO_REQUEST,
    LAYOUT,
    MONITOR_MS,
    RATE_FALL_BACK_MS,
    Fault,
    Outcome,
    Range,
    State,
)

_HELLO = HELLO_REQUEST.strip(b"\0")
_HEARTBEAT = HEARTBEAT_MS * TICKS_PER_MS
_DEAD_MAN = DEAD_MAN_MS * TICKS_PER_MS
_MONITOR = MONITOR_MS * TICKS_PER_MS
_FALL_BACK = RATE_FALL_BACK_MS * TICKS_PER_MS
_VCC_CUT_AFTER = 1_000 * TICKS_PER_US  # the hardware's own lag behind the raised switches at reset


class VirtualRig:
    """The reference firmware on the virtual board. All times are ticks of 62.5 ns on the rig's own clock.

    `boot` is the number of this start. `host_baud`, where set, is the rate the host really uses: another one than the
    rig's makes noise of every byte.
    """

    def __init__(self, socket: Socket, *, boot: int, board: Board | None = None) -> None:
        self.socket = socket
        self.boot = boot
        self.board = board or Board()
        self.socket.board = self.board
        self.commands = Commands(self)
        self.machine: Machine | None = None
        self.powered = True
        self._t = 0
        self._line = SerialLine()
        self._reader = FrameReader()
        self._hellos = 0  # stretches that the reader took for damage
        self._program: Waiting | None = None
        self._ending = Ending()
        self._wants: int | None = None
        self._poked = False
        self._thrown: Trip | None = None
        self._beat_at = NEVER
        self._fall_back_at = NEVER
        self._cut_at = NEVER

    # ---- what the outside does ------------------------------------------------------------------------------------

    @property
    def t(self) -> int:
        """Now."""
        return self._t if self.machine is None else self.machine.t

    @property
    def trace(self) -> list[tuple[int, str]] | None:
        """Groups of edges as (tick, text), one group an op, while a list is set."""
        return self.socket.trace

    @trace.setter
    def trace(self, trace: list[tuple[int, str]] | None) -> None:
        self.socket.trace = trace

    @property
    def state(self) -> State:
        """State as the heartbeat tells it."""
        return self.commands.state

    @property
    def baud(self) -> int:
        """The rate of the rig's end of the line."""
        return self._line.baud

    @property
    def host_baud(self) -> int | None:
        """The rate of the host's end, None: always the rig's."""
        return self._line.host_baud

    @host_baud.setter
    def host_baud(self, baud: int | None) -> None:
        self._line.host_baud = baud

    def receive(self, data: bytes, at: int) -> None:
        """Bytes from the host: the first start bit at tick `at`, one behind the other at the line's rate."""
        if self.powered:
            self._line.receive(data, max(at, self.t))

    def take_output(self) -> bytes:
        """The bytes that have left since the last call."""
        sent = bytes(self._line.sent)
        self._line.sent.clear()
        return sent

    def line_break(self, at: int) -> None:
        """A line break from the host, at tick `at` (now, if that has passed): the abort, and at rest the hello rate."""
        self.run_to(at)
        if self.powered:
            self._abort()
            if self.commands.running is None:
                self._line.set_baud(HELLO_BAUD)
                self._fall_back_at = NEVER

    def run_to(self, until: int) -> None:
        """As `run`, past every byte that leaves."""
        while self.t < until:
            self.run(until)

    def run(self, until: int) -> None:
        """Goes on to tick `until` (or the end of the op it falls into), or until a byte to the host has wholly left."""
        socket = self.socket
        while True:
            m = self.machine
            t = self._t if m is None else m.t
            other = self._earliest(m)
            event = min(other, socket.next_end)
            if event <= t:
                if self._serve(event):
                    return
                continue
            if self._thrown is not None and m is not None:
                self._resume()
                continue
            if t >= until:
                return
            limit = min(event, until)
            if m is None:
                self._t = limit
                continue
            m.next_event = limit
            m.next_other = min(other, until)
            wants = self._wants
            if self._poked or wants is None:
                self._resume()
            elif wants <= limit:
                m.t = max(m.t, wants)
                self._resume()
            else:
                m.t = limit
                self._poked = True

    def power_cut(self) -> None:
        """The supply goes: the program stops where it is, and only the hardware acts."""
        t = self.t
        if not self.powered:
            return
        self.powered = False
        self._leave_program()
        self._t = t
        self._line.reset()
        self._beat_at = self._fall_back_at = NEVER
        self.socket.reset_pulls(t)
        self._cut_at = t + _VCC_CUT_AFTER

    def restart(self) -> None:
        """Reset and start with the next boot number; the hardware's own way down comes first."""
        self.power_cut()
        self.run_to(max(self._t, self._cut_at if self._cut_at != NEVER else self._t) + self.board.vcc_off_ticks + 1)
        self.boot += 1
        self.powered = True
        self._reader = FrameReader()
        self._hellos = 0
        self.commands = Commands(self)
        self.socket.all_low(self._t)

    # ---- the clock ------------------------------------------------------------------------------------------------

    def _earliest(self, m: Machine | None) -> int:
        """When something happens next, the ends of ramps left out."""
        line = self._line
        if m is None:
            return min(line.arrives_at, line.leaves_at, self._fall_back_at, self._cut_at)
        if m.safe:
            return min(line.arrives_at, line.leaves_at, self._fall_back_at, self._beat_at)
        return min(line.arrives_at, line.leaves_at, self._fall_back_at, self._beat_at, m.monitor_at, m.dead_at)

    def _serve(self, at: int) -> bool:
        """The event of this tick; True when it was a byte that left."""
        self._poked = True
        line, m = self._line, self.machine
        if line.leaves_at == at:
            if line.byte_left():
                self._fall_back_at = at + _FALL_BACK if line.baud != HELLO_BAUD else NEVER
            return True
        if self.socket.next_end == at:
            self.socket.end_ramps(at)
        elif line.arrives_at == at:
            for byte in line.take():
                self._byte(byte)
        elif self._beat_at == at:
            self._beat_at = at + _HEARTBEAT
            self.commands.beat()
        elif self._fall_back_at == at:
            self._fall_back_at = NEVER
            line.set_baud(HELLO_BAUD)
        elif self._cut_at == at:
            self._cut_at = NEVER
            self.socket.set_range(at, Range.OFF, ())
            self.socket.set_rail(at, 0)
            self.socket.set_raised_rail(at, 0)
        elif m is not None and m.dead_at == at:
            m.dead_at = NEVER
            self.trip(Trip(Fault.DEAD_MAN))
        elif m is not None:
            if m.closed:
                self.socket.weigh(at)  # a chip's load may have changed by itself
            trip = look(m)
            m.monitor_at = at + _MONITOR if m.standing else NEVER
            if trip is not None:
                self.trip(trip)
        return False

    # ---- the program ----------------------------------------------------------------------------------------------

    def _resume(self) -> None:
        program = self._program
        assert program is not None
        self._poked = False
        thrown, self._thrown = self._thrown, None
        try:
            self._wants = program.send(None) if thrown is None else program.throw(thrown)
        except StopIteration:
            self._end_program()

    def _end_program(self) -> None:
        m = self.machine
        assert m is not None
        self._leave_program()
        self._beat_at = NEVER
        self.commands.close_run(m, self._ending)

    def _leave_program(self) -> None:
        self._t = self.t
        self._program = None
        self._thrown = None
        self.machine = None
        self._wants = None

    def start(self, loaded: Loaded, permit: Permit, blocks: Blocks) -> None:
        """Begins the run of a sealed program."""
        m = Machine(self.socket, self.board, permit, loaded.header.address, self.t)
        self.socket.set_address_lines(loaded.header.address)
        bind(m, loaded, blocks)
        self._ending = Ending()
        m.next_event = m.next_other = m.t  # up to the first op, where a trip can be thrown into it
        self._program = run_program(m, self._ending)
        self._wants = self._program.send(None)
        self.machine = m
        self._beat_at = m.t + _HEARTBEAT

    def trip(self, trip: Trip) -> None:
        """Ends the run for this reason, where the program waits; the first reason counts."""
        m = self.machine
        if m is not None and not m.safe and self._thrown is None:
            self._thrown = trip

    def _abort(self) -> None:
        m = self.machine
        if m is None:
            return
        if m.safe or self._thrown is not None:
            m.hurry = True
        else:
            self.trip(Trip(Fault.ABORTED, outcome=Outcome.ABORTED))

    def gate_open(self) -> bool:
        """Whether the gate is open."""
        return self.machine is not None and self.machine.gate

    def making_safe(self) -> bool:
        """Whether the run is on its way to its end, or will be at the next op."""
        return self._thrown is not None or (self.machine is not None and self.machine.safe)

    # ---- the line -------------------------------------------------------------------------------------------------

    def _byte(self, byte: int) -> None:
        reader = self._reader
        aborts = reader.aborts
        whole = reader.feed(byte)
        if reader.aborts != aborts:
            self._abort()
        if whole is None:
            return
        if isinstance(whole, Message):
            if self._line.baud != HELLO_BAUD:
                self._fall_back_at = NEVER
            self.commands.receive(whole)
        elif whole == _HELLO:
            self._hellos += 1
            self.commands.new_session()
            self.send(self.hello().encode())

    def send(self, frame: bytes) -> None:
        """Puts bytes on the line, now."""
        self._line.send(frame, self.t)
        if self.machine is not None:
            self.machine.next_is_no_later_than(self._line.leaves_at)

    def hello(self) -> Hello:
        """The greeting."""
        fault = self.commands.latched
        numbers = {} if fault is None else {
            "fault": fault["code"], "fault_op": fault["op"], "fault_pc": fault["pc"], "fault_tick": fault["tick"],
            "fault_got": fault["got"], "fault_low": fault["low"],
        }
        return Hello(LAYOUT, self.board.window_blocks, self.board.receive_bytes, FINGERPRINT, self.boot, **numbers)

    def fed(self) -> None:
        """A valid frame of this boot and permit: the dead-man begins anew."""
        m = self.machine
        if m is not None and m.dead_at != NEVER:
            m.dead_at = m.t + _DEAD_MAN

    def change_rate(self, baud: int) -> None:
        """The line's rate, once the answer has left."""
        self._line.change_after_answer(baud)

    def counters(self) -> tuple[int, int, int]:
        """Frames damaged, dropped and repeated since this boot."""
        return self._reader.damaged - self._hellos, self.commands.dropped, self.commands.repeated

    def vcc_count(self) -> int:
        """VCC at the socket as the converter has it."""
        return count_of(self.socket.socket_vcc_mv(self.t), VCC_FULL_MV)
