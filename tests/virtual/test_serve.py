"""A bench served behind a port: where its clock stops, what lets it pass, and what is kept when the port closes."""

from __future__ import annotations

import os
import select
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from pulsewright.chip.load import load
from pulsewright.errors import FileMistake, LinkFault
from pulsewright.link.results import Block
from pulsewright.link.session import Session
from pulsewright.link.transport import Timing
from pulsewright.rig.file import load_rig
from pulsewright.sequence.compile import compile_identify, compile_read
from pulsewright.virtual.bench import Bench
from pulsewright.virtual.serve import QUIT, SILENT, serve
from pulsewright.virtual.serve_clock import HeldClock, WallClock
from pulsewright.wire.frames import FrameReader, Message
from pulsewright.wire.tables import HELLO_MAGIC, HELLO_REQUEST, Fault, Frame, Outcome

MS = 16_000
PART = "27e512"
NET = Timing.net(10_000_000)


class Held:
    """A transport around a held clock in this process; `lost(n)` says whether the n-th write never arrives."""

    name = "held"

    def __init__(self, clock: HeldClock, lost: Callable[[int], bool] = lambda _count: False) -> None:
        self.clock = clock
        self.lost = lost
        self.writes = 0
        self._us = 0

    def timing(self, board: str) -> Timing:
        return NET

    def now_us(self) -> int:
        return self._us

    def write(self, data: bytes) -> None:
        self.writes += 1
        if not self.lost(self.writes):
            self.clock.take(data)

    def read(self, until_us: int) -> bytes:
        while not self.clock.waits:
            if data := self.clock.go():
                return data
        self._us = until_us  # the host may wait as long as it likes: nothing comes by itself
        return b""

    def set_baud(self, baud: int) -> None:
        """A pseudo-terminal has no rate."""

    def send_break(self) -> None:
        """Nor a break."""

    def close(self) -> None:
        """Nothing to give back."""


class Port(Held):
    """The same at the other end of a real pseudo-terminal."""

    def __init__(self, name: str) -> None:
        self.name = name
        self._handle = os.open(name, os.O_RDWR | os.O_NOCTTY)

    def now_us(self) -> int:
        return time.monotonic_ns() // 1000

    def write(self, data: bytes) -> None:
        while data:
            data = data[os.write(self._handle, data) :]

    def read(self, until_us: int) -> bytes:
        left_ms = max(0, (until_us - self.now_us()) // 1000)
        return os.read(self._handle, 4096) if select.select([self._handle], [], [], left_ms / 1000)[0] else b""

    def close(self) -> None:
        os.close(self._handle)


def until_silent(session: Session, transport: Held, after: int) -> None:
    """Runs a read of which the host's writes never arrive from the `after`-th on, and gives up as a host would."""
    transport.lost = lambda count: count > after
    with pytest.raises(LinkFault):
        session.run(compile_read(load(PART), load_rig(), 0, 4095))


# ---- the clock ----


def test_a_session_runs_over_a_held_clock() -> None:
    """Whatever time the host takes, a whole read arrives, and the judge finds nothing."""
    bench = Bench.fresh(PART)
    session = Session(Held(HeldClock(bench.rig())))
    session.connect()
    result = session.run(compile_read(load(PART), load_rig(), 0, 4095))
    assert result.outcome is Outcome.DONE
    assert result.data == bytes(bench.chip.cells[:4096])
    assert bench.report()["violations"] == []


def test_the_clock_stops_at_a_heartbeat_until_a_frame_comes() -> None:
    """A run without a word from its host stands still within 250 ms, VCC up; the dead-man's time passes when told."""
    bench = Bench.fresh(PART)
    rig = bench.rig()
    clock = HeldClock(rig)
    transport = Held(clock)
    session = Session(transport)
    session.connect()
    until_silent(session, transport, transport.writes + 12)
    assert rig.machine is not None
    stands_at = rig.t
    for _ in range(5):
        assert clock.go() == b""
    assert (rig.t, clock.waits) == (stands_at, True)
    clock.host_is_gone()
    assert rig.machine is None
    assert rig.socket.socket_vcc_mv(rig.t) < 500
    assert 250 * MS <= rig.t - stands_at <= 600 * MS
    assert rig.commands.latched is not None
    assert rig.commands.latched["code"] == Fault.DEAD_MAN
    assert bench.report()["violations"] == []


def test_an_abort_passes_a_heartbeat() -> None:
    """Four zero bytes are heard by a rig that stands at a heartbeat, and end the run."""
    bench = Bench.fresh(PART)
    rig = bench.rig()
    clock = HeldClock(rig)
    transport = Held(clock)
    session = Session(transport)
    session.connect()
    until_silent(session, transport, transport.writes + 12)
    assert rig.machine is not None
    clock.take(bytes(4))
    reader = FrameReader()
    heard = []
    while not clock.waits:
        heard += [message for byte in clock.go() if isinstance(message := reader.feed(byte), Message)]
    assert rig.machine is None
    assert heard[-1].kind is Frame.ANSWER
    assert heard[-1].fields["outcome"] == Outcome.ABORTED


def test_a_greeting_in_a_run_is_another_host() -> None:
    """A host that opens the port anew before its closing was seen finds a rig that is safe, and is greeted."""
    bench = Bench.fresh(PART)
    rig = bench.rig()
    clock = HeldClock(rig)
    transport = Held(clock)
    session = Session(transport)
    session.connect()
    until_silent(session, transport, transport.writes + 12)
    assert rig.machine is not None
    facts = Session(Held(clock)).connect()
    assert facts.earlier is not None
    assert facts.earlier.name == "dead_man"


def test_the_wall_clock_follows_the_wall_a_slice_at_a_time() -> None:
    """With real time the rig is where the wall is, and never more than 20 ms further after one call."""
    rig = Bench.fresh(PART).rig()
    clock = WallClock(rig, 5_000_000_000)
    clock.go(5_010_000_000)
    assert rig.t == 10 * MS
    clock.go(6_000_000_000)
    assert rig.t == 30 * MS
    clock.take(HELLO_REQUEST)
    sent = b"".join(clock.go(6_000_000_000) for _ in range(3))
    assert sent.startswith(HELLO_MAGIC)


# ---- the port ----


@contextmanager
def served(bench: Bench, *, link: Path | None = None, real_time: bool = False) -> Iterator[tuple[str, int]]:
    """The bench served by a thread: the port's name, and where to write what the control pipe says."""
    control, told = os.pipe()
    names: list[str] = []
    ready = threading.Event()

    def on_ready(name: str) -> None:
        names.append(name)
        ready.set()

    def work() -> None:
        serve(bench, link=link, real_time=real_time, on_ready=on_ready, control=control)

    server = threading.Thread(target=work, daemon=True)
    server.start()
    assert ready.wait(30)
    try:
        yield names[0], told
    finally:
        os.write(told, QUIT)
        server.join(30)
        os.close(told)
        os.close(control)
        assert not server.is_alive()


@pytest.mark.parametrize("real_time", [False, True])
def test_a_host_reads_a_chip_through_the_port(tmp_path: Path, real_time: bool) -> None:
    """Through a real pseudo-terminal a session connects, identifies and reads; twice, with the port closed between."""
    bench = Bench.new(tmp_path / "a.bench", PART, contents="noise")
    with served(bench, real_time=real_time) as (name, _told):
        for _ in range(2):
            port = Port(name)
            session = Session(port)
            session.connect()
            assert session.run(compile_identify(load(PART), load_rig())).outcome is Outcome.DONE
            result = session.run(compile_read(load(PART), load_rig(), 0, 511), [Block(0, 256), Block(256, 256)])
            assert result.data == bytes(bench.chip.cells[:512])
            session.close()
            port.close()
    assert Bench.load(tmp_path / "a.bench").report()["pins"]["28"] == {"max_mv": 5_000}


def test_a_port_closed_in_a_run_makes_the_chip_safe(tmp_path: Path) -> None:
    """The dead-man ends the run, and the next host finds the rig ready, with the fault that was latched."""
    bench = Bench.new(tmp_path / "a.bench", PART, contents="noise")
    with served(bench) as (name, _told):
        port = Port(name)
        session = Session(port, interrupted=lambda: 0)
        session.connect()
        sequence = compile_read(load(PART), load_rig(), 0, 4095)
        with pytest.raises(RuntimeError, match="the host dies"):
            session.run(sequence, dying(2, port))
        port = Port(name)
        session = Session(port)
        facts = session.connect()
        assert facts.earlier is not None
        assert facts.earlier.name == "dead_man"
        assert session.run(sequence).data == bytes(bench.chip.cells[:4096])
        port.close()


def dying(blocks: int, port: Port) -> Iterator[Block]:
    """Read requests of a host that dies after some, its port with it."""
    for number in range(blocks):
        yield Block(256 * number, 256)
    port.close()
    raise RuntimeError("the host dies")


def test_the_control_pipe_can_make_a_host_silent(tmp_path: Path) -> None:
    """On SILENT the dead-man's time passes with the port still open; a rig at rest does not mind."""
    bench = Bench.new(tmp_path / "a.bench", PART)
    with served(bench) as (name, told):
        port = Port(name)
        os.write(told, SILENT)
        session = Session(port)
        assert session.connect().earlier is None
        port.close()


def test_a_link_stands_as_long_as_the_port(tmp_path: Path) -> None:
    """The name given leads to the port and is gone afterwards; an old link is replaced, a file is not."""
    link = tmp_path / "port"
    link.symlink_to("/nowhere")
    with served(Bench.fresh(PART), link=link) as (name, _told):
        assert name == str(link)
        assert str(link.readlink()).startswith("/dev/")
    assert not link.is_symlink()
    link.write_text("mine", "utf-8")
    with pytest.raises(FileMistake, match="cannot make the link"):
        serve(Bench.fresh(PART), link=link)
    assert link.read_text("utf-8") == "mine"


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_a_signal_ends_it_and_the_bench_is_saved(tmp_path: Path, number: signal.Signals) -> None:
    """SIGTERM or Ctrl-C: a quiet end, the boot of this start counted in the file."""
    path = tmp_path / "a.bench"
    Bench.new(path, PART)
    program = (
        "import sys; from pulsewright.virtual.bench import Bench; from pulsewright.virtual.serve import serve; "
        "serve(Bench.load(sys.argv[1]), on_ready=lambda name: print(name, flush=True))"
    )
    command = [sys.executable, "-c", program, str(path)]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as server:
        assert server.stdout is not None
        assert server.stdout.readline().startswith("/dev/")
        server.send_signal(number)
        assert server.communicate(timeout=30) == ("", "")
    assert server.returncode == 0
    assert Bench.load(path).boots == 1
