"""A real serial port through pySerial: a pseudo-terminal with the virtual rig behind it, and ports that cannot be."""

from __future__ import annotations

import errno
import os
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest
import serial

from pulsewright.chip.load import load
from pulsewright.errors import Interrupted, LinkFault
from pulsewright.link import serial_port
from pulsewright.link.open import open_rig
from pulsewright.link.serial_port import SerialPort
from pulsewright.link.session import Session
from pulsewright.link.transport import Timing
from pulsewright.rig.file import load_rig
from pulsewright.sequence.compile import compile_burn, compile_identify, compile_read
from pulsewright.virtual.bench import Bench
from pulsewright.virtual.serve import QUIT, serve
from pulsewright.wire.tables import Outcome
from tests.link.kit import image_blocks

PART = "27e512"


@contextmanager
def served(bench: Bench) -> Iterator[str]:
    """The bench behind a port, served by a thread."""
    control, told = os.pipe()
    names: list[str] = []
    ready = threading.Event()

    def on_ready(name: str) -> None:
        names.append(name)
        ready.set()

    server = threading.Thread(target=serve, args=(bench,), kwargs={"on_ready": on_ready, "control": control})
    server.start()
    assert ready.wait(30)
    try:
        yield names[0]
    finally:
        os.write(told, QUIT)
        server.join(30)
        os.close(told)
        os.close(control)


def test_a_chip_is_identified_burned_and_read_through_a_port() -> None:
    """All over pySerial, and the session knows that the clock behind the port is not its own."""
    bench = Bench.fresh(PART, "blank")
    definition, rig_file = load(PART), load_rig()
    image = bytes(range(256))
    with served(bench) as name:
        rig = open_rig(name, PART)
        session = Session(rig.transport)
        assert session.connect().board.startswith("virtual")
        assert session.run(compile_identify(definition, rig_file)).id_bytes == b"\xda\x08"
        burn = compile_burn(definition, rig_file, 0, 255, "0" * 64)
        result = session.run(burn, image_blocks(image, words=64))
        assert result.outcome is Outcome.DONE
        assert result.counters.sent_again == 0
        assert session.run(compile_read(definition, rig_file, 0, 255)).data == image
        rig.close()
    assert not rig.in_process
    assert rig.banner == ""
    assert bench.report()["violations"] == []


def test_an_interrupt_through_a_port_ends_safe() -> None:
    """Ctrl-C while a long read runs: the rig says that it is safe, and the session says Interrupted."""
    bench = Bench.fresh(PART)
    with served(bench) as name:
        port = SerialPort(name)
        blocks_done = 0

        def count(progress: object) -> None:
            nonlocal blocks_done
            blocks_done = getattr(progress, "blocks", 0)

        session = Session(port, interrupted=lambda: int(blocks_done >= 3), on_progress=count)
        session.connect()
        with pytest.raises(Interrupted, match="stopped by the operator"):
            session.run(compile_read(load(PART), load_rig(), 0, 65_535))
        port.close()
    assert bench.report()["violations"] == []


def test_a_port_is_opened_for_one_program_alone() -> None:
    """A second opening is refused in words."""
    with served(Bench.fresh(PART)) as name:
        port = SerialPort(name)
        with pytest.raises(LinkFault, match="in use by another program"):
            SerialPort(name)
        port.close()
        SerialPort(name).close()


def test_a_port_that_is_not_there_is_told(tmp_path: Path) -> None:
    """Missing, a folder, a file: each in words, never a traceback."""
    (tmp_path / "file").write_bytes(b"")
    for name, words in ((tmp_path / "none", "does not exist"), (tmp_path, "is a folder"), (tmp_path / "file", "is no")):
        with pytest.raises(LinkFault, match=words) as caught:
            SerialPort(str(name))
        assert caught.value.hint
        assert caught.value.exit_code == 5


def test_an_unknown_kind_of_url_is_told() -> None:
    """A URL that pySerial does not know."""
    with pytest.raises(LinkFault, match="cannot be opened"):
        SerialPort("carrier-pigeon://loft")


@pytest.mark.parametrize(
    ("number", "words"),
    [(errno.EACCES, "may not be opened by you"), (errno.EBUSY, "in use"), (errno.ENODEV, "no device")],
)
def test_the_systems_reasons_become_words(number: int, words: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """What only root or a real port would meet, as pySerial reports it."""

    def refuse(*_arguments: object, **_options: object) -> None:
        raise serial.SerialException(number, "could not open port")

    monkeypatch.setattr(serial, "serial_for_url", refuse)
    with pytest.raises(LinkFault, match=words):
        SerialPort("/dev/port")


def test_a_port_whose_far_end_goes_is_a_link_fault() -> None:
    """A port that is closed from the other side, or fails in any way, is told as lost."""
    master, slave = os.openpty()
    port = SerialPort(os.ttyname(slave))
    os.close(slave)
    os.close(master)
    with pytest.raises(LinkFault, match="failed while receiving"):
        port.read(port.now_us() + 100_000)
    with pytest.raises(LinkFault, match="failed while sending"):
        port.write(b"\0")
    port.close()


def test_what_pyserial_sends_back_is_no_rig(monkeypatch: pytest.MonkeyPatch) -> None:
    """A plug that joins both wires (loop://) echoes every greeting: told as noise, with what came."""
    port = SerialPort("loop://")
    monkeypatch.setattr(port, "timing", lambda _board: Timing(hello_us=500_000))
    with pytest.raises(LinkFault, match="it is no rig") as caught:
        Session(port).connect()
    assert "00 50 57 3f 0d 00" in caught.value.got
    port.close()


def test_a_real_rig_is_waited_for_in_seconds_and_a_virtual_one_by_a_net() -> None:
    """Only a rig that calls itself virtual gets the net of ten seconds."""
    port = SerialPort("loop://")
    assert port.timing("").give_up_us == port.timing("reference rig").give_up_us == 3_000_000
    assert port.timing("virtual reference rig").first_answer_us == serial_port.PATIENCE_US == 10_000_000
    port.close()
