"""What bytes that are no greeting look like: an echo, a text, a damaged greeting, another rate. Pure."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from pulsewright.wire.tables import HELLO_MAGIC, HELLO_REQUEST

_TEXT_SHARE = 90  # per cent of the bytes that are printable: random ones are in 38 of 100 cases
_TEXT_SHOWN = 40
_FEW_EDGES = 3  # within start bit, data and stop bit: random bytes have so few in 36 of 100 cases
_FEW_SHARE = 90  # per cent
_LEAST = 8  # bytes that such a share means something of
_WHITE = b"\t\n\r"


@dataclass(frozen=True)
class Look:
    """What bytes look like, and one thing to try."""

    what: str
    hint: str


def looks(data: bytes) -> Look:
    """The look of what came instead of a greeting; `data` is not empty."""
    if len(data.replace(HELLO_REQUEST, b"")) < len(HELLO_REQUEST) <= len(data):
        return Look("this program's own question", "the two data wires meet, or the device echoes: look at the wiring")
    if HELLO_MAGIC in data:
        return Look("a greeting among them, but damaged or cut", "try a shorter cable, and look at the ground wire")
    if not data.strip(b"\0"):
        return Look("all zero", "the line is held low, or a device talks far more slowly: look at wiring and supply")
    if _share(data, _printable) >= _TEXT_SHARE:
        text = data.decode("ascii", "replace").split("\0")[0].strip()[:_TEXT_SHOWN]
        return Look(f"a text ({text!r})", "that is another device, or the board runs another program: look which")
    if len(data) >= _LEAST and _share(data, _slow) >= _FEW_SHARE:
        return Look("as of a device at a lower rate", "check that this is the rig's port and its firmware")
    return Look("no text", "a device at another rate, or an open wire: check that this is the rig's port")


def _share(data: bytes, test: Callable[[int], bool]) -> int:
    return 100 * sum(map(test, data)) // len(data)


def _printable(byte: int) -> bool:
    return 0x20 <= byte < 0x7F or byte in _WHITE


def _slow(byte: int) -> bool:
    """Whether a byte has few edges: each bit of a slow sender fills several of a fast receiver's."""
    frame = byte << 1 | 0x200  # start bit 0, eight data bits from the low end, stop bit 1
    return ((frame ^ frame >> 1) & 0x1FF).bit_count() <= _FEW_EDGES
