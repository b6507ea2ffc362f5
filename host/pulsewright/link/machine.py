"""What this machine tells of its serial ports without opening any: which there are, whose they are, who holds them."""

from __future__ import annotations

import os
import stat
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

_PROCESSES = Path("/proc")
_CONSOLES = Path("/sys/class/tty/console/active")
_NO_TEXT = "n/a"  # what pySerial says where it knows no description


@dataclass(frozen=True)
class PortHere:
    """A serial port of this machine; `description` is what the device calls itself, "" where nothing is known."""

    name: str
    description: str = ""

    def __str__(self) -> str:
        return f"{self.name} ({self.description})" if self.description else self.name


@dataclass(frozen=True)
class Access:
    """Who may open a port, and who asks. `listed`: the user is entered in the group; `joined`: and since before this
    login, so that the group counts for this program."""

    owner: str
    group: str
    mode: int
    user: str
    listed: bool
    joined: bool

    @property
    def group_may(self) -> bool:
        """Whether members of the group may read and write."""
        return self.mode & 0o060 == 0o060

    def __str__(self) -> str:
        return f"it belongs to {self.owner}, group {self.group}, mode {stat.filemode(self.mode)[1:]}"


@dataclass(frozen=True)
class Holder:
    """A process that has a port open."""

    pid: int
    program: str

    def __str__(self) -> str:
        return f"process {self.pid} ({self.program})"


def is_url(name: str) -> bool:
    """Whether pySerial takes the name as a URL: then no device file of this machine is behind it."""
    return "://" in name


def ports_here() -> tuple[PortHere, ...]:
    """The serial ports that the system lists, those on USB first. Opens none."""
    from serial.tools import list_ports

    found = sorted(list_ports.comports(), key=lambda port: (port.vid is None, port))
    return tuple(PortHere(port.device, _description(port.description, port.name)) for port in found)


def _description(text: str | None, name: str | None) -> str:
    return "" if text is None or text in (_NO_TEXT, name) else text


def access_to(name: str) -> Access | None:
    """Who may open the port of this name; None where the system does not tell it in owner, group and mode."""
    try:
        import grp
        import pwd

        status = Path(name).stat()
    except (ImportError, OSError):
        return None
    owner, group, user = str(status.st_uid), str(status.st_gid), str(os.getuid())
    listed = False
    with suppress(KeyError):  # a number without a name
        owner = pwd.getpwuid(status.st_uid).pw_name
    with suppress(KeyError):
        entry = pwd.getpwuid(os.getuid())
        user, listed = entry.pw_name, entry.pw_gid == status.st_gid
    with suppress(KeyError):
        of_group = grp.getgrgid(status.st_gid)
        group, listed = of_group.gr_name, listed or user in of_group.gr_mem
    joined = status.st_gid in {os.getegid(), *os.getgroups()}
    return Access(owner, group, status.st_mode, user, listed=listed, joined=joined)


def holders_of(name: str, *, others: bool = False) -> tuple[Holder, ...]:
    """The processes that have the port open, as far as the system shows them to this user; `others`: without this one.

    Empty where the system shows none, which does not say that there is none.
    """
    if is_url(name):
        return ()
    device = os.path.realpath(name)
    try:
        processes = sorted(int(entry.name) for entry in _PROCESSES.iterdir() if entry.name.isdigit())
    except OSError:
        return ()
    found = (pid for pid in processes if not (others and pid == os.getpid()))
    return tuple(Holder(pid, _program(_PROCESSES / str(pid))) for pid in found if _holds(_PROCESSES / str(pid), device))


def is_console(name: str) -> bool:
    """Whether the system itself talks on this port: its own messages, and its prompt for a login."""
    try:
        return Path(os.path.realpath(name)).name in _CONSOLES.read_text("ascii").split()
    except OSError:
        return False


def _holds(process: Path, device: str) -> bool:
    with suppress(OSError):
        for handle in (process / "fd").iterdir():
            with suppress(OSError):
                if str(handle.readlink()) == device:
                    return True
    return False


def _program(process: Path) -> str:
    try:
        return (process / "comm").read_text("utf-8", "replace").strip()
    except OSError:
        return "?"
