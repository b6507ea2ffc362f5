"""rig show on ports: none is opened unasked, --ports tells what is on each, and each failure is one JSON object."""

from __future__ import annotations

import json
import os
import subprocess
from collections.abc import Callable
from contextlib import ExitStack
from pathlib import Path
from typing import Any, NoReturn

import pytest
import serial
from serial.tools import list_ports
from serial.tools.list_ports_common import ListPortInfo

from pulsewright.cli.main import main
from pulsewright.link import machine
from pulsewright.link.machine import Access
from pulsewright.link.serial_port import SerialPort
from pulsewright.link.transport import Timing
from pulsewright.wire.tables import FINGERPRINT, HELLO_BAUD, HELLO_REQUEST, Fault
from tests.link.fake_rig import FakeRig, fault
from tests.link.port_kit import board, pty, stop_the_clock, talker

TEXT = b"chime controller 3\r\nok\r\n"
Ask = Callable[..., dict[str, Any]]


@pytest.fixture
def ask(capsys: pytest.CaptureFixture[str]) -> Ask:
    """Runs a command with --json and gives its object; no traceback and no number of the system is shown."""

    def answer(*words: str) -> dict[str, Any]:
        code = main([*words, "--json"])
        shown = capsys.readouterr()
        facts: dict[str, Any] = json.loads(shown.out)
        assert facts["exit"] == code
        assert "Traceback" not in shown.err
        assert "Errno" not in shown.err + shown.out
        return facts

    return answer


@pytest.fixture
def patient(monkeypatch: pytest.MonkeyPatch) -> None:
    """The time-outs of a served rig: only a net."""
    monkeypatch.setattr(SerialPort, "timing", lambda _port, _board: Timing.net(10_000_000))


def machine_with(monkeypatch: pytest.MonkeyPatch, *names: str) -> None:
    """A machine whose serial ports are those: pySerial lists no pseudo-terminals by itself."""
    ports = [ListPortInfo(name) for name in names]
    ports[0].description = "bell board"
    monkeypatch.setattr(list_ports, "comports", lambda: ports)


def never(*_arguments: object, **_options: object) -> NoReturn:
    """In place of what must not be called."""
    raise AssertionError("a port was opened, or a break sent")


def test_without_an_option_ports_are_listed_and_none_is_opened(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], ask: Ask
) -> None:
    """Their names and descriptions stand behind the rig file."""
    machine_with(monkeypatch, "/dev/ttyACM0", "/dev/ttyACM1")
    monkeypatch.setattr(serial, "serial_for_url", never)
    facts = ask("rig", "show")
    assert facts["exit"] == 0
    assert facts["ports"] == [
        {"name": "/dev/ttyACM0", "description": "bell board"},
        {"name": "/dev/ttyACM1", "description": ""},
    ]
    assert main(["rig", "show"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert lines[-3:] == ["serial ports here, none of them opened:", "  /dev/ttyACM0 (bell board)", "  /dev/ttyACM1"]


def test_a_machine_without_ports_is_no_error(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """Both lists say so, exit 0."""
    monkeypatch.setattr(list_ports, "comports", list)
    assert main(["rig", "show"]) == 0
    assert capsys.readouterr().out.splitlines()[-1] == "serial ports here: none"
    assert main(["rig", "show", "--ports"]) == 0
    assert capsys.readouterr().out == "this machine has no serial port\n"


def test_ports_tells_what_is_on_each(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """A rig, one with a latched fault, one of another version, silence, a text, a locked port, one that another program
    has open without a lock, the console, a name without a device: a line each, in that order."""
    hurt = FakeRig(boot=9)
    hurt.latched = fault(Fault.DEAD_MAN)
    monkeypatch.setattr(SerialPort, "send_break", never)
    with ExitStack() as stack:
        enter = stack.enter_context
        names = [enter(board(rig)) for rig in (FakeRig(), hurt, FakeRig(fingerprint=0x12345678))]
        silent, text, locked, shared, console = (
            enter(pty()),
            enter(talker(TEXT)),
            enter(pty()),
            enter(pty()),
            enter(pty()),
        )
        holder = SerialPort(locked.name)
        cat = enter(subprocess.Popen(["cat"], stdin=subprocess.PIPE, pass_fds=[shared.slave]))
        (tmp_path / "active").write_text(Path(console.name).name)
        monkeypatch.setattr(machine, "_CONSOLES", tmp_path / "active")
        names += [silent.name, text, locked.name, shared.name, console.name, str(tmp_path / "none")]
        machine_with(monkeypatch, *names)
        stop_the_clock(monkeypatch, {silent.name: 0, text: len(TEXT)})
        assert main(["rig", "show", "--ports", "--json"]) == 0
        shown = capsys.readouterr()
        for quiet in (locked, shared, console):
            os.set_blocking(quiet.master, False)
            with pytest.raises(BlockingIOError):
                os.read(quiet.master, 1)
        holder.close()
    answer = json.loads(shown.out)
    assert answer["result"] == f"9 serial ports asked; a rig answers on {names[0]}, {names[1]}"
    assert [one["name"] for one in answer["ports"]] == names
    assert [one["stage"] for one in answer["ports"]] == [
        "rig", "rig", "other_fingerprint", "silent", "noise", "busy", "busy", "busy", "missing",
    ]  # fmt: skip
    says = [one["says"] for one in answer["ports"]]
    assert says[0] == f"Pulsewright board, wire table {FINGERPRINT:08X}, boot 7"
    assert says[1].endswith("boot 9, latched fault: dead man")
    assert "12345678" in says[2]
    assert says[3] == "silent"
    assert says[4].startswith("noise: 24 other bytes, a text")
    assert f"process {cat.pid} (cat)" in says[6]
    assert "console" in says[7]
    assert answer["ports"][1]["boot"] == 9
    assert shown.err.splitlines()[0] == f"asking {names[0]} (bell board)"


def test_ports_prints_a_line_for_each(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    """The rig in a table, and the names without a device together in the last line."""
    with board(FakeRig()) as name:
        machine_with(monkeypatch, name, "/dev/none1", "/dev/none2")
        stop_the_clock(monkeypatch, {})
        assert main(["rig", "show", "--ports"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert lines[0] == f"3 serial ports asked; a rig answers on {name}"
    assert [cell.strip() for cell in lines[3].split("  ") if cell.strip()] == [
        name,
        "bell board",
        f"Pulsewright board, wire table {FINGERPRINT:08X}, boot 7",
    ]
    assert lines[-1] == "no device behind /dev/none1, /dev/none2"


def test_ctrl_c_ends_the_asking(monkeypatch: pytest.MonkeyPatch, ask: Ask) -> None:
    """Exit 130, the port is given back, and nothing was raised."""
    with pty() as port:
        machine_with(monkeypatch, port.name)

        def interrupt(_port: SerialPort, _until_us: int) -> NoReturn:
            raise KeyboardInterrupt

        with monkeypatch.context() as within:
            within.setattr(SerialPort, "read", interrupt)
            assert ask("rig", "show", "--ports")["exit"] == 130
        SerialPort(port.name).close()


def test_one_port_or_all_but_not_both(capsys: pytest.CaptureFixture[str]) -> None:
    """--rig and --ports together are wrong usage."""
    assert main(["rig", "show", "--ports", "--rig", "virtual"]) == 2
    assert "not allowed with" in capsys.readouterr().err


def test_the_help_warns_that_opening_may_reset(capsys: pytest.CaptureFixture[str]) -> None:
    """And says that no port is opened unasked."""
    main(["rig", "show", "--help"])
    shown = " ".join(capsys.readouterr().out.split())
    assert "Opening a port may reset the board behind it" in shown
    assert "Without an option no port is opened" in shown


def test_each_stage_of_opening_is_a_key_of_its_own(monkeypatch: pytest.MonkeyPatch, ask: Ask, tmp_path: Path) -> None:
    """Missing, unusable, busy for real; not permitted, which root never meets, from the real exception."""
    with pty() as port:
        holder = SerialPort(port.name)
        found = [ask("rig", "show", "--rig", name) for name in (str(tmp_path / "none"), str(tmp_path), port.name)]
        holder.close()
    access = Access("root", "ports", 0o20660, "anna", listed=False, joined=False)
    monkeypatch.setattr(machine, "access_to", lambda _name: access)

    def refuse(*_arguments: object, **_options: object) -> NoReturn:
        raise serial.SerialException(13, "could not open port /dev/x: [Errno 13] Permission denied: '/dev/x'")

    monkeypatch.setattr(serial, "serial_for_url", refuse)
    found.append(ask("rig", "show", "--rig", "/dev/x"))
    assert [(one["exit"], one["error"], one["stage"]) for one in found] == [
        (5, "PortMissing", "missing"),
        (5, "PortUnusable", "unusable"),
        (5, "PortBusy", "busy"),
        (5, "PortNotPermitted", "not_permitted"),
    ]


def test_silence_and_noise_are_keys_of_their_own(monkeypatch: pytest.MonkeyPatch, ask: Ask) -> None:
    """Over pseudo-terminals."""
    with pty() as port, talker(TEXT) as name:
        stop_the_clock(monkeypatch, {port.name: 0, name: len(TEXT)})
        found = [ask("rig", "show", "--rig", one) for one in (port.name, name)]
        assert HELLO_REQUEST in os.read(port.master, 64)
    assert [(one["exit"], one["error"], one["stage"]) for one in found] == [
        (5, "RigSilent", "silent"),
        (5, "RigNoise", "noise"),
    ]


def _reset(rig: FakeRig) -> None:
    rig.boot += 1
    rig.power_up()


@pytest.mark.usefixtures("patient")
def test_another_version_and_a_restart_are_keys_of_their_own(ask: Ask) -> None:
    """A board with another fingerprint, and one that is reset behind its greeting; a good one gives its boot number."""
    other, restless, good = FakeRig(fingerprint=1), FakeRig(), FakeRig()
    restless.top_baud = good.top_baud = HELLO_BAUD
    with board(other) as first, board(restless, after=_reset) as second, board(good) as third:
        found = [ask("rig", "show", "--rig", name) for name in (first, second, third)]
    assert [(one["exit"], one.get("error"), one.get("stage")) for one in found] == [
        (5, "OtherFirmware", "other_fingerprint"),
        (5, "RigRestarted", "restarted"),
        (0, None, None),
    ]
    assert found[2]["board"]["boot"] == 7
