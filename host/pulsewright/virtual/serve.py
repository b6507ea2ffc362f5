"""Serves a bench's virtual rig behind a serial port of its own: a pseudo-terminal that a host opens like any port."""

from __future__ import annotations

import os
import select
import signal
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from types import FrameType

from pulsewright.errors import FileMistake, UsageMistake, Where
from pulsewright.virtual.bench import Bench
from pulsewright.virtual.serve_clock import HeldClock, WallClock

_READ = 4_096
_LOOK_MS = 20  # how often a closed port is looked at, and the rig's clock set by the wall
SILENT, QUIT = b"s", b"q"  # on the control pipe: the host is silent, let the dead-man's time pass; stop


def serve(
    bench: Bench,
    *,
    link: Path | None = None,
    real_time: bool = False,
    on_ready: Callable[[str], None] = lambda _name: None,
    control: int | None = None,
) -> None:
    """Serves until SIGTERM, Ctrl-C, or QUIT (or the end) of the `control` pipe; the bench is saved then.

    `link` becomes a symbolic link to the port, as long as it is served. `on_ready` gets the port's name. The bench is
    also saved each time a host closes the port. FileMistake if `link` cannot be made; UsageMistake on a system without
    pseudo-terminals.
    """
    server = _Server(bench, real_time=real_time, control=control)
    try:
        with server.stopped_by_signals(), _linked(link, server.port):
            on_ready(str(link or server.port))
            server.run()
    finally:
        server.close()
        bench.save()


@contextmanager
def _linked(link: Path | None, port: str) -> Iterator[None]:
    if link is None:
        yield
        return
    try:
        if link.is_symlink():
            link.unlink()
        link.symlink_to(port)
    except OSError as error:
        what = f"cannot make the link {link}: {error.strerror}"
        raise FileMistake(what, where=Where(str(link)), hint="choose a name that is free") from error
    try:
        yield
    finally:
        with suppress(OSError):
            if str(link.readlink()) == port:
                link.unlink()


class _Server:
    """The master end of a pseudo-terminal, the rig behind it, and what can stop it."""

    def __init__(self, bench: Bench, *, real_time: bool, control: int | None) -> None:
        try:
            import tty
        except ImportError:
            raise UsageMistake("this system has no pseudo-terminals", hint="use --rig virtual:BENCH") from None
        self._bench = bench
        self._rig = bench.rig()
        self._clock = HeldClock(self._rig)
        self._wall = WallClock(self._rig, time.monotonic_ns()) if real_time else None
        self._master, slave = os.openpty()
        tty.setraw(slave)
        self.port = os.ttyname(slave)
        os.close(slave)  # held open by the host alone, so that its closing is seen
        os.set_blocking(self._master, False)
        self._control = control
        self._wake_read, self._wake_write = os.pipe()
        os.set_blocking(self._wake_write, False)
        self._open = False
        self._stop = False
        self._out = bytearray()

    @contextmanager
    def stopped_by_signals(self) -> Iterator[None]:
        """SIGTERM and Ctrl-C end `run`; only the main thread can have that."""
        if threading.current_thread() is not threading.main_thread():
            yield
            return

        def told(_number: int, _frame: FrameType | None) -> None:
            self._stop = True
            with suppress(BlockingIOError):
                os.write(self._wake_write, b"x")

        before = {number: signal.signal(number, told) for number in (signal.SIGTERM, signal.SIGINT)}
        try:
            yield
        finally:
            for number, handler in before.items():
                signal.signal(number, handler)

    def run(self) -> None:
        """Until told to stop; a run that is under way then ends as if the port had been closed."""
        while not self._stop:
            self._look()
            if self._wall is not None:
                self._out += self._wall.go(time.monotonic_ns())
            else:
                self._out += self._clock.go()
        self._out += self._clock.host_is_gone()

    def close(self) -> None:
        """Gives everything back."""
        for handle in (self._master, self._wake_read, self._wake_write):
            os.close(handle)

    def _look(self) -> None:
        """Moves what bytes there are, and waits for some where the rig can do nothing by itself."""
        poller = select.poll()
        poller.register(self._wake_read, select.POLLIN)
        if self._control is not None:
            poller.register(self._control, select.POLLIN)
        poller.register(self._master, select.POLLIN | (select.POLLOUT if self._out and self._open else 0))
        events = dict(poller.poll(self._patience_ms()))
        if self._control in events:
            self._told(os.read(self._control or 0, 1))
        master = events.get(self._master, 0)
        if master & select.POLLIN:
            self._read()
        elif master & select.POLLHUP:
            self._closed()
        if self._out and self._open and master & select.POLLOUT:
            with suppress(BlockingIOError, OSError):
                del self._out[: os.write(self._master, self._out)]

    def _patience_ms(self) -> int | None:
        if self._wall is not None:
            return 1 if self._rig.machine is not None else _LOOK_MS
        return None if self._clock.waits else 0

    def _told(self, word: bytes) -> None:
        if word == SILENT:
            self._out += self._clock.host_is_gone()
        else:
            self._stop = True

    def _read(self) -> None:
        try:
            data = os.read(self._master, _READ)
        except BlockingIOError:
            return
        except OSError:  # nobody has it open any more
            self._closed()
            return
        self._open = True
        (self._wall or self._clock).take(data)

    def _closed(self) -> None:
        """Nobody has the port open: a run ends by its dead-man, the bench is saved, and another host may come."""
        if self._open:
            self._open = False
            self._clock.host_is_gone()
            self._bench.save()
        self._out.clear()
        time.sleep(_LOOK_MS / 1000)  # a port that nobody has open is always "ready"
