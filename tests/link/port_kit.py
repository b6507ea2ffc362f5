"""Real ports for tests: pseudo-terminals with something scripted behind them, and a clock that waits for bytes."""

from __future__ import annotations

import os
import select
import threading
import tty
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from fractions import Fraction

import pytest

from pulsewright.link.serial_port import SerialPort
from pulsewright.wire.tables import HELLO_REQUEST
from tests.link.fake_rig import MS, FakeRig


@dataclass
class Pty:
    """Both ends of a pseudo-terminal; `name` is what a program opens, `master` is the device's end."""

    name: str
    master: int
    slave: int


@contextmanager
def pty() -> Iterator[Pty]:
    """A port with nothing behind it yet. Its near end is held open (without a lock), so that it lives on by itself."""
    master, slave = os.openpty()
    tty.setraw(slave)
    try:
        yield Pty(os.ttyname(slave), master, slave)
    finally:
        os.close(master)
        os.close(slave)


@contextmanager
def talker(reply: bytes) -> Iterator[str]:
    """A port on which something says `reply` once, after the first question; gives the port's name."""
    with pty() as port:
        thread = threading.Thread(target=_say_once, args=(port.master, reply))
        thread.start()
        try:
            yield port.name
        finally:
            os.write(port.slave, HELLO_REQUEST)  # ends a thread that nobody asked
            thread.join(30)


def _say_once(master: int, reply: bytes) -> None:
    heard = b""
    while HELLO_REQUEST not in heard:
        heard += os.read(master, 64)
    os.write(master, reply)


@contextmanager
def board(rig: FakeRig, after: Callable[[FakeRig], None] = lambda _rig: None) -> Iterator[str]:
    """A rig with the wire's manners behind a port; `after` is called once, when its first greeting has been sent."""
    stop, stopping = os.pipe()
    with pty() as port:
        thread = threading.Thread(target=_bridge, args=(port.master, stop, rig, after))
        thread.start()
        try:
            yield port.name
        finally:
            os.close(stopping)
            thread.join(30)
            os.close(stop)


def _bridge(master: int, stop: int, rig: FakeRig, after: Callable[[FakeRig], None]) -> None:
    """Bytes to the rig, the rig's clock on until it is quiet, its bytes back."""
    greeted = False
    while True:
        ready, _, _ = select.select([master, stop], [], [])
        if stop in ready:
            return
        rig.receive(os.read(master, 4096), rig.t)
        out = b""
        while True:
            rig.run(rig.t + 20 * MS)
            more = rig.take_output()
            if not more:
                break
            out += more
        os.write(master, out)
        if out and not greeted:
            greeted = True
            after(rig)


def stop_the_clock(monkeypatch: pytest.MonkeyPatch, bytes_wanted: Mapping[str, int]) -> None:
    """The clock of each port stands until that many bytes have come from it, then goes on by a quarter of a second at
    every look: what arrives is never late, and a wait for more is over at once. A port that is not named never ends.
    """
    came = dict.fromkeys(bytes_wanted, 0)
    now_us = dict.fromkeys(bytes_wanted, 0)
    read = SerialPort.read

    def counted(port: SerialPort, until_us: int) -> bytes:
        data = read(port, until_us)
        came[port.name] = came.get(port.name, 0) + len(data)
        return data

    def now(port: SerialPort) -> int:
        if came.get(port.name, 0) >= bytes_wanted.get(port.name, 1 << 30):
            now_us[port.name] += 250_000
        return now_us.get(port.name, 0)

    monkeypatch.setattr(SerialPort, "read", counted)
    monkeypatch.setattr(SerialPort, "now_us", now)


def resampled(data: bytes, sent_baud: int, read_baud: int, pause_bits: int = 0) -> bytes:
    """What a receiver at `read_baud` makes of bytes sent at `sent_baud`.

    The receiver looks sixteen times a bit for the fall of a start bit and takes each bit in its middle, as asynchronous
    receivers do (ATmega2560 data sheet 2549, asynchronous data reception); it does not throw away a byte whose stop bit
    is low, as a system's driver does not either.
    """
    idle = [1] * 12
    bits = list(idle)
    for byte in data:
        bits += [0, *(byte >> at & 1 for at in range(8)), 1, *([1] * pause_bits)]
    bits += idle
    end = Fraction(len(bits) - len(idle), sent_baud)
    step, bit = Fraction(1, 16 * read_baud), Fraction(1, read_baud)
    at, before, out = Fraction(0), 1, bytearray()
    while at < end:
        now = bits[int(at * sent_baud)]
        if before and not now:
            times = [at + (2 * number + 1) * bit / 2 for number in range(1, 10)]
            levels = [bits[min(int(time * sent_baud), len(bits) - 1)] for time in times]
            out.append(sum(level << number for number, level in enumerate(levels[:8])))
            before, at = levels[8], times[8]
            continue
        before, at = now, at + step
    return bytes(out)
