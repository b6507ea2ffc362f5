"""A port that cannot be opened: each stage is an error of its own, in words that repeat no number of the system."""

from __future__ import annotations

import errno
import os
import re
import socket
import subprocess
import termios
from collections.abc import Callable
from pathlib import Path

import pytest
import serial
from serial.tools import list_ports
from serial.tools.list_ports_common import ListPortInfo

from pulsewright.errors import LinkFault, PortBusy, PortMissing, PortNotPermitted, PortUnusable
from pulsewright.link import diagnosis, machine
from pulsewright.link.diagnosis import cannot_open, not_permitted
from pulsewright.link.machine import Access, PortHere, access_to, holders_of, is_console, ports_here
from pulsewright.link.serial_port import SerialPort
from tests.link.port_kit import pty

MODE = 0o20660  # a character device, read and write for owner and group


def listed(*names: str, usb: tuple[str, ...] = ()) -> Callable[[], list[ListPortInfo]]:
    """What pySerial would list: each name, those of `usb` with a maker's number and a description."""
    ports = []
    for name in names:
        port = ListPortInfo(name)
        if name in usb:
            port.vid, port.description = 0x1234, "bell board"
        ports.append(port)
    return lambda: ports


def refused(name: str) -> LinkFault:
    """The error of opening a port."""
    with pytest.raises(LinkFault) as caught:
        SerialPort(name)
    text = "\n".join(caught.value.lines())
    assert "Errno" not in text
    assert "could not" not in text
    assert (caught.value.exit_code, caught.value.did) == (5, "nothing: the port was not opened")
    assert caught.value.hint
    return caught.value


def reported(number: int, text: str = "could not open port /dev/x: [Errno {0}] {1}") -> serial.SerialException:
    """An error as pySerial's open() makes it of one of the system's (serialposix.py)."""
    return serial.SerialException(number, text.format(number, os.strerror(number)))


def kept_inside(inner: Exception, text: str) -> serial.SerialException:
    """An error that pySerial raised while it handled another, whose number it did not hand on."""
    try:
        try:
            raise inner
        except (OSError, termios.error) as error:
            raise serial.SerialException(f"{text}: {error}")  # noqa: B904 - pySerial leaves out the `from` too
    except serial.SerialException as outer:
        return outer


def test_a_missing_port_lists_those_that_are_there(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """A name without a device: the ports of the machine, USB first."""
    monkeypatch.setattr(list_ports, "comports", listed("/dev/ttyS0", "/dev/ttyUSB7", usb=("/dev/ttyUSB7",)))
    fault = refused(str(tmp_path / "none"))
    assert (type(fault), fault.stage) == (PortMissing, "missing")
    assert fault.what.endswith("none does not exist")
    assert fault.facts == ("serial ports here: /dev/ttyUSB7 (bell board), /dev/ttyS0",)


def test_a_machine_without_ports_says_so(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """The list is empty, and the thing to try is the cable."""
    monkeypatch.setattr(list_ports, "comports", listed())
    fault = refused(str(tmp_path / "none"))
    assert fault.facts == ("serial ports here: none",)
    assert "cable" in fault.hint


def test_a_long_list_of_ports_is_cut(monkeypatch: pytest.MonkeyPatch) -> None:
    """Eight names and the number of the rest."""
    monkeypatch.setattr(list_ports, "comports", listed(*(f"/dev/ttyS{number}" for number in range(32))))
    assert diagnosis.missing("/dev/none", "does not exist").facts[0].endswith("/dev/ttyS7 and 24 more")


def test_a_link_to_a_port_that_went_is_told(tmp_path: Path) -> None:
    """A served bench that has ended leaves perhaps a link to nothing."""
    link = tmp_path / "rig"
    link.symlink_to(tmp_path / "gone")
    fault = refused(str(link))
    assert fault.stage == "missing"
    assert fault.facts[0] == f"it is a link to {tmp_path / 'gone'}, and nothing is there"


def test_a_pseudo_terminal_whose_device_went_is_missing() -> None:
    """The far end is closed: the name goes with it."""
    with pty() as port:
        name = port.name
    assert refused(name).stage == "missing"


def test_a_listed_name_without_hardware_is_missing(monkeypatch: pytest.MonkeyPatch) -> None:
    """A machine lists sockets that it does not have. pySerial keeps the number only inside; no machine of the tests
    has such a port, so the real classes are put together as serialposix.py does."""
    monkeypatch.setattr(list_ports, "comports", listed("/dev/ttyS9"))
    inner = termios.error(errno.EIO, os.strerror(errno.EIO))
    fault = cannot_open("/dev/ttyS9", kept_inside(inner, "Could not configure port"))
    assert (fault.stage, fault.what) == ("missing", "/dev/ttyS9 has no device behind it")


def test_a_url_that_nobody_listens_at_is_missing() -> None:
    """A port number that was free a moment ago; this machine's own ports are no help there, and not listed."""
    with socket.create_server(("127.0.0.1", 0)) as server:
        name = f"socket://127.0.0.1:{server.getsockname()[1]}"
    fault = refused(name)
    assert (fault.stage, fault.what, fault.facts) == ("missing", f"{name} is not listened at", ())


def test_a_url_with_a_host_that_is_not_known_is_missing() -> None:
    """The error is put together as protocol_socket.py does: a test asks no name server."""
    inner = socket.gaierror(socket.EAI_NONAME, "Name or service not known")
    fault = cannot_open("socket://loft:7", kept_inside(inner, "Could not open port socket://loft:7"))
    assert (fault.stage, fault.what) == ("missing", "socket://loft:7 names a host that is not known")


def test_a_url_that_does_not_answer_in_time_is_missing() -> None:
    """A connection that is never accepted ends by pySerial's own time: put together here, not waited for."""
    fault = cannot_open("socket://10.0.0.9:7", kept_inside(TimeoutError("timed out"), "Could not open port"))
    assert (fault.stage, fault.what) == ("missing", "socket://10.0.0.9:7 cannot be reached over the network")


def test_what_is_no_port_is_unusable(tmp_path: Path) -> None:
    """A file, a folder, a URL of no known kind, and one without a port number."""
    (tmp_path / "file").write_bytes(b"kept")
    names = (str(tmp_path / "file"), str(tmp_path), "carrier-pigeon://loft", "socket://loft")
    faults = [refused(name) for name in names]
    assert {type(fault) for fault in faults} == {PortUnusable}
    assert {fault.stage for fault in faults} == {"unusable"}
    assert (tmp_path / "file").read_bytes() == b"kept"


def test_any_other_number_is_told_in_the_systems_words() -> None:
    """No descriptor is left, for example."""
    fault = cannot_open("/dev/x", reported(errno.EMFILE))
    assert (fault.stage, fault.got) == ("unusable", "too many open files")


def test_a_second_opening_is_busy_and_tells_who_holds_it() -> None:
    """Two real openings of one pseudo-terminal: the second finds the lock and who has it; closed, it is free again."""
    with pty() as port:
        first = SerialPort(port.name)
        fault = refused(port.name)
        assert (type(fault), fault.stage) == (PortBusy, "busy")
        assert re.search(rf"process {os.getpid()} \(.+\)", fault.got)
        first.close()
        SerialPort(port.name).close()


def test_a_busy_port_on_other_systems_is_busy_too() -> None:
    """Systems that open a port for one program alone say EBUSY, Windows that access is denied: as pySerial hands it on
    (serialposix.py, serialwin32.py); neither can be had on the machine of the tests."""
    windows = serial.SerialException("could not open port 'COM3': PermissionError(13, 'Access is denied.', None, 5)")
    for error in (reported(errno.EBUSY), windows):
        fault = cannot_open("COM3", error)
        assert (type(fault), fault.got) == (PortBusy, "the system does not tell who holds it")


def test_a_missing_port_on_windows_is_missing() -> None:
    """As serialwin32.py hands it on."""
    text = "could not open port 'COM9': FileNotFoundError(2, 'The system cannot find the file specified.', None, 2)"
    assert cannot_open("COM9", serial.SerialException(text)).stage == "missing"


@pytest.mark.parametrize("number", [errno.EACCES, errno.EPERM])
def test_a_refusal_of_the_system_is_not_permitted(number: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Tests may run as root, whom no system refuses a port: the real exception with the real number instead."""
    access = Access("root", "ports", MODE, "anna", listed=False, joined=False)
    monkeypatch.setattr(machine, "access_to", lambda _name: access)
    fault = cannot_open("/dev/ttyACM0", reported(number))
    assert (type(fault), fault.stage) == (PortNotPermitted, "not_permitted")
    assert fault.what == "/dev/ttyACM0 may not be opened by you"
    assert fault.got == "it belongs to root, group ports, mode rw-rw----; you are anna, not in that group"
    assert "Errno" not in "\n".join(fault.lines())


@pytest.mark.parametrize(
    ("group", "mode", "listed", "joined", "hint"),
    [
        (
            "ports",
            MODE,
            False,
            False,
            "have the administrator add you (usermod -aG ports anna), then log out",
        ),
        ("ports", MODE, True, False, "log out and in again: a group counts"),
        ("ports", MODE, True, True, "look for what else guards it"),
        ("ports", 0o20640, False, False, "have the administrator give it to a group of yours"),
        ("root", MODE, False, False, "have the administrator give it to a group of yours"),
    ],
)
def test_the_way_in_fits_the_owner(group: str, mode: int, listed: bool, joined: bool, hint: str) -> None:
    """Join the group; log in anew; look further; never join a group that may not write, nor root's."""
    assert not_permitted("/dev/x", Access("root", group, mode, "anna", listed, joined)).hint.startswith(hint)


def test_a_system_without_owners_still_gets_words() -> None:
    """Nothing is known of whose the port is."""
    fault = not_permitted("COM3", None)
    assert fault.got == ""
    assert fault.hint


def test_who_may_open_is_read_from_the_system(tmp_path: Path) -> None:
    """A file of one's own: owner, group and mode as they are, and one is in the group."""
    path = tmp_path / "mine"
    path.touch(mode=0o600)
    os.chown(path, -1, os.getegid())
    access = access_to(str(path))
    assert access is not None
    assert (access.owner, access.joined, access.group_may) == (access.user, True, False)
    assert access_to(str(tmp_path / "none")) is None


def test_the_holders_of_a_port_are_the_processes_that_have_it_open() -> None:
    """Another process beside this one, by its number; without this one where that is wanted; none for a URL."""
    with pty() as port, subprocess.Popen(["cat"], stdin=subprocess.PIPE, pass_fds=[port.slave]) as other:
        assert {holder.pid for holder in holders_of(port.name)} == {os.getpid(), other.pid}
        assert [holder.pid for holder in holders_of(port.name, others=True)] == [other.pid]
        assert holders_of("loop://") == ()


def test_the_console_of_the_system_is_known(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """By the system's own list, here a written one; and no port is it where there is no list."""
    monkeypatch.setattr(machine, "_CONSOLES", tmp_path / "active")
    assert not is_console("/dev/ttyS0")
    (tmp_path / "active").write_text("tty0 ttyS0\n")
    assert is_console("/dev/ttyS0")
    assert not is_console("/dev/ttyS1")


def test_a_port_that_describes_itself_only_by_its_name_has_no_description(monkeypatch: pytest.MonkeyPatch) -> None:
    """What pySerial says where it knows nothing is no description."""
    port = ListPortInfo("/dev/ttyS0")
    port.description = "ttyS0"
    monkeypatch.setattr(list_ports, "comports", lambda: [port, ListPortInfo("/dev/ttyS1")])
    assert ports_here() == (PortHere("/dev/ttyS0"), PortHere("/dev/ttyS1"))
