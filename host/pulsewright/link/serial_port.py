"""The way to a rig behind a serial port, or any URL that pySerial opens. Time is the host's monotonic clock."""

from __future__ import annotations

import contextlib
import time
from typing import TYPE_CHECKING

from pulsewright.link.diagnosis import cannot_open, line_gone
from pulsewright.link.transport import Timing
from pulsewright.wire.tables import HELLO_BAUD

if TYPE_CHECKING:
    from serial import Serial

PATIENCE_US = 10_000_000
_SLICE_S = 0.02  # a read returns at least so often, so that deadlines hold
_WRITE_S = 5.0
_BREAK_S = 0.01  # longer than a byte at the rate of greetings
_DRIVER_US = 50_000  # what a USB adapter and the scheduler may add to an answer's time (common practice)


class SerialPort:
    """A serial port, opened for this program alone. `patience_us`: the net under a virtual rig served behind a port,
    whose own clock only goes on as the host talks."""

    def __init__(self, name: str, *, patience_us: int = PATIENCE_US) -> None:
        """Opens it at the rate of greetings; PortMissing, PortUnusable, PortNotPermitted or PortBusy where it cannot.

        A board may be reset by it: many are wired so that an opened port pulls their reset.
        """
        self.name = name
        self._patience_us = patience_us
        self._port = _open(name)

    def timing(self, board: str) -> Timing:
        """Seconds for a real rig; for one that calls itself virtual only a net."""
        if board.startswith("virtual"):
            return Timing.net(self._patience_us)
        wire = Timing()
        return Timing(first_answer_us=wire.first_answer_us + _DRIVER_US, late_us=wire.late_us + _DRIVER_US)

    def now_us(self) -> int:
        """Microseconds of the host's monotonic clock."""
        return time.monotonic_ns() // 1000

    def write(self, data: bytes) -> None:
        """Hands the bytes to the driver."""
        try:
            self._port.write(data)
        except OSError as error:  # SerialException is one
            raise line_gone(self.name, "sending", error) from error

    def read(self, until_us: int) -> bytes:
        """What has come, at least one byte, or b"" at the deadline."""
        try:
            while True:
                data = bytes(self._port.read(max(1, self._port.in_waiting)))
                if data or self.now_us() >= until_us:
                    return data
        except OSError as error:
            raise line_gone(self.name, "receiving", error) from error

    def set_baud(self, baud: int) -> None:
        """The rate from now on, once what was sent has left. LinkFault if this port cannot make it."""
        try:
            if baud != self._port.baudrate:
                self._port.flush()
                self._port.baudrate = baud
        except (OSError, ValueError) as error:
            raise line_gone(self.name, f"going to {baud} baud", error) from error

    def send_break(self) -> None:
        """A break, where the port can make one."""
        with contextlib.suppress(OSError, NotImplementedError):
            self._port.send_break(_BREAK_S)

    def close(self) -> None:
        """Gives the port back."""
        with contextlib.suppress(OSError):
            self._port.close()


def _open(name: str) -> Serial:
    import serial

    try:
        port: Serial = serial.serial_for_url(
            name, baudrate=HELLO_BAUD, timeout=_SLICE_S, write_timeout=_WRITE_S, exclusive=True
        )
    except (OSError, ValueError) as error:
        raise cannot_open(name, error) from error
    with contextlib.suppress(OSError):
        port.reset_input_buffer()
    return port
