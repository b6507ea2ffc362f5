"""A port that opens, and what comes of it: silence, noise, another firmware, a rig that was reset, a port that goes."""

from __future__ import annotations

import os
import subprocess

import pytest

from pulsewright.errors import LinkFault, OtherFirmware, RigNoise, RigRestarted, RigSilent
from pulsewright.link.machine import PortHere
from pulsewright.link.ports import ask_port
from pulsewright.link.serial_port import SerialPort
from pulsewright.link.session import Session
from pulsewright.link.transport import Timing
from pulsewright.wire.tables import FINGERPRINT, HELLO_BAUD, HELLO_REQUEST, LAYOUT, Flow
from tests.link.fake_rig import FakeRig
from tests.link.kit import Desk, sequence
from tests.link.port_kit import board, pty, stop_the_clock, talker

TEXT = b"chime controller 3\r\nok\r\n"


@pytest.fixture
def patient(monkeypatch: pytest.MonkeyPatch) -> None:
    """The time-outs of a served rig: only a net."""
    monkeypatch.setattr(SerialPort, "timing", lambda _port, _board: Timing.net(10_000_000))


def slow_board(rig: FakeRig | None = None) -> FakeRig:
    """A rig that stays at the rate of greetings."""
    rig = rig or FakeRig()
    rig.top_baud = HELLO_BAUD
    return rig


def test_an_open_port_on_which_nothing_comes_is_silent(monkeypatch: pytest.MonkeyPatch) -> None:
    """A pseudo-terminal with nothing behind it; the question was sent, more than once."""
    with pty() as port:
        stop_the_clock(monkeypatch, {port.name: 0})
        transport = SerialPort(port.name)
        with pytest.raises(RigSilent, match="no answer") as caught:
            Session(transport).connect()
        transport.close()
        assert os.read(port.master, 4096).count(HELLO_REQUEST) > 1
    assert (caught.value.stage, caught.value.got, caught.value.facts) == ("silent", "silence", ())
    assert caught.value.wanted == "a greeting within 4 s at 38400 baud"


def test_a_silent_port_that_is_open_elsewhere_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    """A program that takes no lock may take the rig's answers: it is named."""
    with pty() as port, subprocess.Popen(["cat"], stdin=subprocess.PIPE, pass_fds=[port.slave]) as other:
        stop_the_clock(monkeypatch, {port.name: 0})
        transport = SerialPort(port.name)
        with pytest.raises(RigSilent) as caught:
            Session(transport).connect()
        transport.close()
    assert caught.value.facts == (f"it is open in process {other.pid} (cat) too, which may take what the rig sends",)


def test_the_text_of_another_device_is_noise(monkeypatch: pytest.MonkeyPatch) -> None:
    """How many bytes came, what they say, and the first of them."""
    with talker(TEXT) as name:
        stop_the_clock(monkeypatch, {name: len(TEXT)})
        transport = SerialPort(name)
        with pytest.raises(RigNoise, match="it is no rig") as caught:
            Session(transport).connect()
        transport.close()
    assert caught.value.stage == "noise"
    assert caught.value.got == (
        r"24 other bytes, a text ('chime controller 3\r\nok'); first 63 68 69 6d 65 20 63 6f 6e 74 72 6f 6c 6c 65 72"
    )
    assert "another device" in caught.value.hint


def test_joined_wires_are_told_from_a_device(monkeypatch: pytest.MonkeyPatch) -> None:
    """On loop:// the program hears itself."""
    transport = SerialPort("loop://")
    monkeypatch.setattr(transport, "timing", lambda _board: Timing(hello_us=100_000))
    with pytest.raises(RigNoise) as caught:
        Session(transport).connect()
    assert "own question" in caught.value.got
    transport.close()


@pytest.mark.usefixtures("patient")
def test_a_board_of_another_version_tells_both_fingerprints() -> None:
    """Fingerprint and layout of both sides, and no command follows the greeting."""
    rig = slow_board(FakeRig(fingerprint=0x12345678))
    with board(rig) as name:
        transport = SerialPort(name)
        with pytest.raises(OtherFirmware) as caught:
            Session(transport).connect()
        transport.close()
    assert caught.value.stage == "other_fingerprint"
    assert caught.value.wanted == f"layout {LAYOUT}, fingerprint {FINGERPRINT:08X}"
    assert caught.value.got == f"layout {LAYOUT}, fingerprint 12345678"


def reset(rig: FakeRig) -> None:
    """Another boot, at once."""
    rig.boot += 1
    rig.power_up()


@pytest.mark.usefixtures("patient")
def test_a_reset_between_greeting_and_tables_is_told() -> None:
    """The tables come all the same; the boot number is another, and no sequence is ever sent to it."""
    rig = slow_board()
    with board(rig, after=reset) as name:
        transport = SerialPort(name)
        with pytest.raises(RigRestarted, match="while no sequence was running") as caught:
            Session(transport).connect()
        transport.close()
    assert (caught.value.stage, caught.value.exit_code) == ("restarted", 5)
    assert (caught.value.wanted, caught.value.got) == ("boot number 7", "boot number 8")
    assert "nothing is raised" in caught.value.did


@pytest.mark.usefixtures("patient")
def test_a_reset_before_the_start_is_told() -> None:
    """A rig that was reset after connecting takes no permit of the boot before."""
    rig = slow_board()
    with board(rig) as name:
        transport = SerialPort(name)
        session = Session(transport)
        session.connect()
        reset(rig)
        with pytest.raises(RigRestarted) as caught:
            session.run(sequence(Flow.READ))
        transport.close()
    assert caught.value.stage == "restarted"
    assert rig.runs == 0


def connected_boot(rig: FakeRig) -> int | None:
    """The boot number that a session believes in after connecting, in virtual time; None where it told of a restart."""
    try:
        return Desk(rig).session.connect().boot
    except RigRestarted:
        return None


def test_a_session_never_believes_in_a_boot_that_is_over() -> None:
    """A reset at any of fifty moments of connecting: told, or before the greeting, or after the last question."""
    whole = FakeRig()
    assert connected_boot(whole) == 7
    told = 0
    for at in range(0, whole.t, whole.t // 50):
        rig = FakeRig()
        rig.reset_at = at
        boot = connected_boot(rig)
        assert boot in {None, rig.boot}
        told += boot is None
    assert told > 30


def test_a_reset_of_an_idle_rig_at_a_high_rate_is_told_as_such() -> None:
    """The rig has fallen back to the rate of greetings and is not heard; it greets again, and nothing was running."""
    desk = Desk()
    desk.session.connect()
    reset(desk.rig)
    with pytest.raises(RigRestarted, match="while no sequence was running") as caught:
        desk.session.run(sequence(Flow.READ))
    assert caught.value.got == "boot number 8"


def test_a_port_is_given_back_whatever_was_on_it(monkeypatch: pytest.MonkeyPatch) -> None:
    """Asking ends with the port closed, after silence and after a greeting."""
    closed = []
    close = SerialPort.close

    def counted(port: SerialPort) -> None:
        closed.append(port.name)
        close(port)

    monkeypatch.setattr(SerialPort, "close", counted)
    with pty() as port, board(FakeRig()) as name:
        stop_the_clock(monkeypatch, {port.name: 0})
        stages = [ask_port(PortHere(one)).stage for one in (port.name, name)]
        assert (stages, closed) == (["silent", "rig"], [port.name, name])


def test_a_port_that_goes_while_it_is_used_is_lost() -> None:
    """The words of the failure hold no number of the system and nothing of pySerial's."""
    with pty() as port:
        transport = SerialPort(port.name)
    for act in (lambda: transport.read(transport.now_us()), lambda: transport.write(b"\0")):
        with pytest.raises(LinkFault, match="failed while") as caught:
            act()
        assert (caught.value.stage, caught.value.got) == ("lost", "the port is gone from this machine")
    transport.close()
