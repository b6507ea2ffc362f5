"""Why a rig is not reached, told as the stage that it failed in: each has an error of its own, a sentence, a way on.

What the system and pySerial report becomes words here, so that no message repeats a bare error number.
"""

from __future__ import annotations

import errno
import os
import re
from collections.abc import Sequence
from pathlib import Path

from pulsewright.errors import (
    LinkFault,
    PortBusy,
    PortMissing,
    PortNotPermitted,
    PortUnusable,
    RigNoise,
    RigRestarted,
    RigSilent,
)
from pulsewright.link import machine
from pulsewright.link.looks import looks
from pulsewright.link.machine import Access
from pulsewright.wire.tables import HELLO_BAUD, HELLO_LENGTH

_NOT_OPENED = "nothing: the port was not opened"
_NO_COMMAND = "nothing that is known: no command was sent"
_NAME = "name a serial port, or a pySerial URL such as socket://HOST:PORT"
_MOST_PORTS = 8  # of a list of ports in one message
_UNPLUGGED = "look at the cable and the hub, then plug it in again"
_ABSENT = {
    errno.ENOENT: "does not exist",
    errno.ENXIO: "has no device behind it",
    errno.ENODEV: "has no device behind it",
    errno.EIO: "has no device behind it",
    errno.ECONNREFUSED: "is not listened at",
    errno.EHOSTUNREACH: "cannot be reached over the network",
    errno.ENETUNREACH: "cannot be reached over the network",
    errno.ETIMEDOUT: "cannot be reached over the network",
}
_NO_PORT = {errno.ENOTTY: "is no serial port", errno.EISDIR: "is a folder, not a serial port"}
# pySerial on Windows keeps no number but the system's own exception, as text (serialwin32.py, open). A port that
# another program has open is told there as "access is denied", because it is opened without sharing.
_WINDOWS = re.compile(r"(PermissionError|FileNotFoundError)\(\d+, ")
_NUMBERS = ((re.compile(r"\[Errno -?\d+\] "), ""), (re.compile(r"\(\d+, (['\"])(.*?)\1\)"), r"\2"))
_LEAD = re.compile(r"^(?:could not \w+(?: lock)? port|read failed|write failed)(?: \S+)?: ", re.IGNORECASE)


def cannot_open(name: str, error: OSError | ValueError) -> LinkFault:
    """The error for a port that pySerial did not open: missing, unusable, not permitted, or busy."""
    number = _number_of(error)
    windows = _WINDOWS.search(str(error))
    if windows is not None:
        number = errno.EBUSY if windows[1] == "PermissionError" else errno.ENOENT
    if number in (errno.EBUSY, errno.EAGAIN):
        return busy(name)
    if number in (errno.EACCES, errno.EPERM):
        return not_permitted(name, machine.access_to(name))
    if number in _NO_PORT:
        return PortUnusable(f"{name} {_NO_PORT[number]}", did=_NOT_OPENED, hint=_NAME)
    if number in _ABSENT:
        return missing(name, _ABSENT[number])
    if number is not None and number < 0:  # of the search for a host, whose numbers lie below those of the system
        return missing(name, "names a host that is not known")
    if number is not None:
        return PortUnusable(f"{name} cannot be opened", got=os.strerror(number).lower(), did=_NOT_OPENED, hint=_NAME)
    inner = error.__context__
    words = "" if inner is not None and not isinstance(inner, ValueError) else plain(error)
    return PortUnusable(f"{name} cannot be opened", got=words, did=_NOT_OPENED, hint=_NAME)


def _number_of(error: BaseException) -> int | None:
    """The system's number in an error or in those it came of; pySerial does not hand each of them on."""
    found: BaseException | None = error
    while found is not None:
        if isinstance(found, TimeoutError):
            return errno.ETIMEDOUT
        number = found.errno if isinstance(found, OSError) else next(iter(found.args), None)
        if isinstance(number, int):
            return number
        found = found.__cause__ or found.__context__
    return None


def plain(error: BaseException) -> str:
    """The words of an error without its numbers, and without what stands in front of them."""
    text = str(error)
    for pattern, kept in _NUMBERS:
        text = pattern.sub(kept, text)
    before = ""
    while text != before:
        before, text = text, _LEAD.sub("", text)
    return text


def missing(name: str, why: str) -> PortMissing:
    """No such port, or nothing behind it. Lists those that are there, unless it is a URL."""
    if machine.is_url(name):
        return PortMissing(
            f"{name} {why}", did=_NOT_OPENED, hint="start what serves it, or check the host and the number of the port"
        )
    ports = machine.ports_here()
    facts = [f"serial ports here: {', '.join(str(port) for port in ports[:_MOST_PORTS]) or 'none'}"]
    if len(ports) > _MOST_PORTS:
        facts[0] += f" and {len(ports) - _MOST_PORTS} more"
    path = Path(name)
    if path.is_symlink():
        facts.insert(0, f"it is a link to {path.readlink()}, and nothing is there")
    elif name in {port.name for port in ports}:
        return PortMissing(f"{name} {why}", did=_NOT_OPENED, facts=facts, hint=_UNPLUGGED)
    hint = "check the name against these" if ports else "plug the board in, with a cable that carries data"
    return PortMissing(f"{name} {why}", did=_NOT_OPENED, facts=facts, hint=hint)


def busy(name: str) -> PortBusy:
    """The port is held; by whom, as far as the system shows it."""
    holders = machine.holders_of(name)
    return PortBusy(
        f"{name} is in use by another program, or by a second Pulsewright",
        wanted="the port for this program alone",
        got=f"it is held by {', '.join(map(str, holders))}" if holders else "the system does not tell who holds it",
        did=_NOT_OPENED,
        hint="close the program that has it open; wait for a job that runs, never end it while the lamp is lit",
    )


def not_permitted(name: str, access: Access | None) -> PortNotPermitted:
    """The system refuses the port to this user; `access` tells whose it is, None where the system does not say."""
    return PortNotPermitted(
        f"{name} may not be opened by you",
        wanted="the right to read and to write it",
        got="" if access is None else f"{access}; you are {access.user}, {_place_in_group(access)}",
        did=_NOT_OPENED,
        hint=_way_in(access),
    )


def _place_in_group(access: Access) -> str:
    if access.joined:
        return "and in that group"
    return "entered in that group, but not since this login" if access.listed else "not in that group"


def _way_in(access: Access | None) -> str:
    """What opens the port to this user."""
    if access is None:
        return "ask whoever keeps this machine for the right to read and write it"
    if not access.group_may or access.group in ("root", "0"):  # nobody should join root's group for a port
        return "have the administrator give it to a group of yours, and let that group read and write"
    if access.joined:
        return "look for what else guards it: an access list, or a container that the port was not given to"
    if access.listed:
        return "log out and in again: a group counts from the next login on"
    return f"have the administrator add you (usermod -aG {access.group} {access.user}), then log out and in again"


def no_hello(name: str, *, waited_us: int, seen: int, first: bytes) -> LinkFault:
    """The port was opened and no greeting came: RigSilent, or RigNoise with what the `seen` bytes look like.

    `first`: the first of them, as many as were kept.
    """
    others = machine.holders_of(name, others=True)
    facts = [f"it is open in {', '.join(map(str, others))} too, which may take what the rig sends"] if others else []
    if not seen:
        return RigSilent(
            f"no answer on {name}",
            wanted=f"a greeting within {waited_us / 1_000_000:g} s at {HELLO_BAUD} baud",
            got="silence",
            did=_NO_COMMAND,
            facts=facts,
            hint="check the cable, the rig's supply, and that this is the rig's port",
        )
    look = looks(first)
    return RigNoise(
        f"something talks on {name}, but it is no rig",
        wanted=f"a greeting of {HELLO_LENGTH} bytes at {HELLO_BAUD} baud",
        got=f"{seen} other bytes, {look.what}; first {first[:16].hex(' ')}",
        did=_NO_COMMAND,
        facts=facts,
        hint=look.hint,
    )


def restarted_early(boot: int, now: int, facts: Sequence[str] = ()) -> RigRestarted:
    """The boot number changed while no sequence was running: between greeting and tables, or before a start."""
    return RigRestarted(
        "the rig was reset while no sequence was running",
        wanted=f"boot number {boot}",
        got=f"boot number {now}",
        did="nothing is raised: no sequence was running",
        facts=facts,
        hint="run it again; if it comes back, the board's supply falls or something pulls its reset",
    )


def line_gone(name: str, doing: str, error: Exception) -> LinkFault:
    """A port that was open failed while it was used."""
    number = _number_of(error)
    words = plain(error)
    if "Timeout" in type(error).__name__:
        words = "it takes no more bytes"
    elif not machine.is_url(name) and not Path(name).exists():
        words = "the port is gone from this machine"
    elif number is not None and number > 0:
        words = os.strerror(number).lower()
    elif "returned no data" in words:  # pySerial's words for an end of file
        words = "its far end has closed, or another program reads the same port"
    return LinkFault(
        f"{name} failed while {doing}",
        got=words,
        hint="look at the cable and the rig's supply, then run it again",
    )
