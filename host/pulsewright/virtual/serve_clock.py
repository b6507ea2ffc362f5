"""The clock of a rig that is served behind a port: when it may go on, and when it waits for the host.

The computing of a host behind a port takes wall time that the rig knows nothing of. So the rig's clock runs on by
itself only to its next heartbeat or answer. It passes a heartbeat when a frame (or an abort) has arrived after it, and
that frame counts as arrived ten bits a byte later. It passes the dead-man's time when the port was closed, or when a
test says so. No I/O here: `serve` moves the bytes.
"""

from __future__ import annotations

from pulsewright.units import TICKS_PER_MS, TICKS_PER_S
from pulsewright.virtual.rig import VirtualRig
from pulsewright.virtual.serial_line import byte_ticks
from pulsewright.wire.frames import FrameReader, Message
from pulsewright.wire.tables import DEAD_MAN_MS, HELLO_REQUEST, Frame

SLICE_TICKS = 20 * TICKS_PER_MS  # what the rig works off between two looks at the port
_HELLO = HELLO_REQUEST.strip(b"\0")
_IDLE_BYTES = 10  # so many byte times after the host's last byte without one to the host: no more comes
_MOST_ENDING = 100  # dead-man times that making safe may take, waits for self-timed work included


class HeldClock:
    """Runs a rig up to where it has to wait for its host."""

    def __init__(self, rig: VirtualRig) -> None:
        self.rig = rig
        self._held = False  # stands at a heartbeat
        self._quiet = True  # no run, no bytes on their way
        self._arrived_by = rig.t  # when the last byte from the host has arrived
        self._from_host = FrameReader()
        self._to_host = FrameReader()

    @property
    def waits(self) -> bool:
        """Whether only the host can bring it on."""
        return self._held or self._quiet

    def take(self, data: bytes) -> None:
        """Bytes from the host, now. A greeting inside a run comes from another host: the port was closed meanwhile."""
        if not data:
            return
        rig = self.rig
        aborts = self._from_host.aborts
        for byte in data:
            whole = self._from_host.feed(byte)
            if whole is not None:  # a frame, or what a rig would take for a damaged one
                self._held = False
            if whole == _HELLO and rig.machine is not None:
                self.host_is_gone()
        if self._from_host.aborts != aborts:
            self._held = False
        self._quiet = False
        self._arrived_by = max(self._arrived_by, rig.t) + len(data) * byte_ticks(rig.baud)
        rig.receive(data, rig.t)

    def go(self) -> bytes:
        """Runs a slice; the bytes that left for the host. Returns at once while it waits."""
        rig = self.rig
        sent = bytearray()
        end = rig.t + SLICE_TICKS
        while not self.waits and rig.t < end:
            idle = max(rig.t, self._arrived_by) + _IDLE_BYTES * byte_ticks(rig.baud)
            rig.run(end if rig.machine is not None else idle)
            data = rig.take_output()
            sent += data
            self._look(data)
            if not data and rig.machine is None and rig.t >= idle:
                self._quiet = True
        return bytes(sent)

    def _look(self, data: bytes) -> None:
        for byte in data:
            message = self._to_host.feed(byte)
            if isinstance(message, Message) and message.kind is Frame.HEARTBEAT:
                self._held = self.rig.machine is not None

    def host_is_gone(self) -> bytes:
        """The host is silent: lets the dead-man's time pass until the rig is safe; gives what it sent meanwhile."""
        rig = self.rig
        sent = bytearray()
        end = rig.t + _MOST_ENDING * DEAD_MAN_MS * TICKS_PER_MS
        while rig.machine is not None and rig.t < end:
            rig.run(end)
            sent += rig.take_output()
        self._held = False
        self._quiet = False  # the closing answer may still be leaving
        return bytes(sent)


class WallClock:
    """Runs a rig by the wall: for trying by hand. `wall_ns` in `go` is any clock that goes evenly."""

    def __init__(self, rig: VirtualRig, wall_ns: int) -> None:
        self.rig = rig
        self._ahead_ticks = rig.t - wall_ns * TICKS_PER_S // 10**9

    def take(self, data: bytes) -> None:
        """Bytes from the host, now."""
        self.rig.receive(data, self.rig.t)

    def go(self, wall_ns: int) -> bytes:
        """Runs to the wall's time, at most a slice; the bytes that left for the host."""
        rig = self.rig
        until = min(wall_ns * TICKS_PER_S // 10**9 + self._ahead_ticks, rig.t + SLICE_TICKS)
        while rig.t < until:
            rig.run(until)
        return rig.take_output()
