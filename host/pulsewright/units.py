"""Volts, amperes, times and addresses: parse and print, exactly.

Inside the program a voltage is an integer of millivolts (`_mv`), a current of microamperes (`_ua`), a time an integer
of picoseconds (`_ps`) where it comes from a data sheet and of 62.5 ns ticks (`_ticks`) where it goes on the wire.
"""

from __future__ import annotations

import re
from decimal import Decimal
from enum import Enum

PS_PER_TICK = 62_500
TICKS_PER_US = 16
TICKS_PER_MS = 16_000
TICKS_PER_S = 16_000_000

_VOLTS = {"V": 1_000, "mV": 1}
_AMPERES = {"A": 1_000_000, "mA": 1_000, "uA": 1, "µA": 1}
_TIMES = {"s": 10**12, "ms": 10**9, "us": 10**6, "µs": 10**6, "ns": 10**3, "ps": 1}
_OHMS = {"R": 1, "ohm": 1, "k": 1_000, "kohm": 1_000, "M": 1_000_000}
_NUMBER = re.compile(r"\s*([+-]?\d+(?:\.\d+)?)\s*([A-Za-zµ]+)\s*\Z")


class Rounding(Enum):
    """Which way a time may move to become whole ticks; there is no default, every caller says it."""

    AT_LEAST = "at least"
    AT_MOST = "at most"
    NEAREST = "nearest"
    EXACT = "exact"


class UnitMistake(ValueError):
    """A text that is not a value of the wanted unit; `str()` says what is wanted."""


def _scaled(text: str, units: dict[str, int], kind: str, example: str) -> int:
    match = _NUMBER.match(text)
    if match is None or match[2] not in units:
        raise UnitMistake(f'{kind} with its unit ({", ".join(units)}), such as "{example}"')
    value = Decimal(match[1]) * units[match[2]]
    if value != int(value):
        raise UnitMistake(f"{kind} of whole {list(units)[-1]}")
    return int(value)


def parse_mv(text: str) -> int:
    """Millivolts of a text such as "12.75 V" or "50 mV"; UnitMistake otherwise."""
    return _scaled(text, _VOLTS, "a voltage", "12.75 V")


def parse_ua(text: str) -> int:
    """Microamperes of a text such as "30 mA"; UnitMistake otherwise."""
    return _scaled(text, _AMPERES, "a current", "30 mA")


def parse_ps(text: str) -> int:
    """Picoseconds of a text such as "100 us"; UnitMistake otherwise."""
    return _scaled(text, _TIMES, "a time", "100 us")


def parse_mohm(text: str) -> int:
    """Milliohms of a text such as "47 ohm" or "10 k"; UnitMistake otherwise."""
    return _scaled(text, {unit: scale * 1000 for unit, scale in _OHMS.items()}, "a resistance", "47 ohm")


def ticks(ps: int, rounding: Rounding) -> int:
    """Whole ticks of 62.5 ns for `ps` picoseconds, moved only the way `rounding` says; ValueError if EXACT is not."""
    if ps < 0:
        raise ValueError(f"a time cannot be negative: {ps} ps")
    whole, rest = divmod(ps, PS_PER_TICK)
    if rest == 0 or rounding is Rounding.AT_MOST:
        return whole
    if rounding is Rounding.AT_LEAST:
        return whole + 1
    if rounding is Rounding.NEAREST:
        return whole + (2 * rest >= PS_PER_TICK)
    raise ValueError(f"{show_ps(ps)} is not a whole number of 62.5 ns ticks")


def _plain(value: Decimal) -> str:
    text = format(value.normalize(), "f")
    return text if "." not in text else text.rstrip("0").rstrip(".")


def show_mv(mv: int) -> str:
    """A voltage as text, such as "12.75 V" or "-0.3 V"."""
    text = _plain(Decimal(mv) / 1000)
    return f"{text}.0 V" if "." not in text else f"{text} V"


def show_ua(ua: int) -> str:
    """A current as text: "30 mA", "200 uA"."""
    return f"{_plain(Decimal(ua) / 1000)} mA" if abs(ua) >= 1000 else f"{ua} uA"


def show_ps(ps: int) -> str:
    """A time as text in its natural unit: "62.5 ns", "100 us", "50 ms"."""
    for unit, scale in (("s", 10**12), ("ms", 10**9), ("us", 10**6), ("ns", 10**3)):
        if ps >= scale:
            return f"{_plain(Decimal(ps) / scale)} {unit}"
    return f"{ps} ps" if ps else "0 ns"


def show_ticks(count: int) -> str:
    """A number of ticks as a time in its natural unit."""
    return show_ps(count * PS_PER_TICK)


def show_count(count: int, noun: str) -> str:
    """A count with its noun: "1 word", "3 words"."""
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"


def parse_address(text: str) -> int:
    """An address or size: decimal, 0x1F0, or with K or M (x 1024, x 1024 x 1024); UnitMistake otherwise."""
    # 0100 is refused: it may be meant as hex, and counts as 100 or, in some tools, as 64.
    match = re.fullmatch(r"\s*(0[xX][0-9A-Fa-f]+|0+|[1-9][0-9]*)\s*([KM]?)\s*", text)
    if match is None:
        raise UnitMistake('an address such as "0x1F0", "496" or "32K"')
    return int(match[1], 0) * {"": 1, "K": 1024, "M": 1024 * 1024}[match[2]]


def show_address(at: int, words: int) -> str:
    """An address in hex, as wide as the highest address of `words` words needs (at least four digits)."""
    return f"{at:0{max(4, (max(words - 1, 0).bit_length() + 3) // 4)}X}"
