"""Asks each serial port of this machine what is behind it: a greeting is asked for, and nothing else is sent."""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.errors import OtherFirmware, PortBusy, PulsewrightError, RigFault, RigSilent
from pulsewright.link import machine
from pulsewright.link.diagnosis import busy
from pulsewright.link.greeting import hello_of
from pulsewright.link.line import Line
from pulsewright.link.machine import PortHere
from pulsewright.link.serial_port import SerialPort
from pulsewright.wire.frames import Hello
from pulsewright.wire.tables import Fault

RIG = "rig"  # the stage of a port that a rig answers on; all others are those of the errors


@dataclass(frozen=True)
class PortAnswer:
    """What is behind a port: the `stage` that asking it came to, in words what answers, and the greeting of a rig."""

    port: PortHere
    stage: str
    says: str
    hello: Hello | None = None


def ask_port(port: PortHere) -> PortAnswer:
    """Opens the port, which may reset a board, waits some seconds for a greeting, and closes it. No RigFault leaves it.

    A port that is open elsewhere, locked or not, and the system's console are left alone: they are busy. No break is
    sent: nobody named this port, and there are machines that stop at one. So a rig that an ended program left at a
    higher rate may be silent here.
    """
    if machine.is_console(port.name):
        return PortAnswer(port, PortBusy.stage, "busy: it is the system's console")
    try:
        if machine.holders_of(port.name, others=True):
            raise busy(port.name)
        transport = SerialPort(port.name)
        try:
            hello = hello_of(Line(transport), breaks=False)
        finally:
            transport.close()
    except RigFault as fault:
        return PortAnswer(port, fault.stage, _short(fault))
    return PortAnswer(port, RIG, _rig(hello), hello)


def _short(fault: PulsewrightError) -> str:
    if isinstance(fault, RigSilent):
        return "silent"
    if isinstance(fault, OtherFirmware):
        return f"Pulsewright board with other firmware: {fault.got}; this program wants {fault.wanted}"
    kind = fault.stage.replace("_", " ")
    return f"{kind}: {fault.got}" if fault.got else kind


def _rig(hello: Hello) -> str:
    text = f"Pulsewright board, wire table {hello.fingerprint:08X}, boot {hello.boot}"
    if hello.fault:
        name = Fault(hello.fault).name.lower() if hello.fault in Fault._value2member_map_ else f"fault {hello.fault}"
        text += f", latched fault: {name.replace('_', ' ')}"
    return text
