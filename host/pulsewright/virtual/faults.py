"""Faults a bench can be given: what each does, how it is written, and its parsed form.

Three kinds: how the chip sits in the socket (absent, reversed, shifted, other, lifted, short), what is wrong with the
chip itself (wrong-id, slow, stuck, dead, weak, under-erased, protected), and what is wrong with the rig around it
(rail-sag, rail-offset, vcc-offset, slow-fall, vcc-slow-fall).
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

from pulsewright.errors import UsageMistake

# name -> (form of the arguments, what the fault does); `bench new --help` prints this table
FAULTS: dict[str, tuple[str, str]] = {
    "absent": ("", "no chip in the socket"),
    "reversed": ("", "the chip turned round: pin 1 where the last pin belongs"),
    "shifted": ("", "the chip one row of contacts too far from the bottom of the socket"),
    "other": ("PART", "a fresh chip of another part sits there; --contents fills that one, --maker is the named one's"),
    "lifted": ("PIN", "that pin of the chip has no contact"),
    "short": ("PIN,PIN", "those two pins of the chip touch"),
    "wrong-id": ("HEX,HEX", "the chip answers these ID bytes: manufacturer, device"),
    "stuck": ("ADDR,MASK,BITS", "at that address the bits under MASK always read BITS and never change"),
    "slow": ("PERCENT,PULSES", "so many of the cells (or pages) need so many pulses (or write cycles' time)"),
    "dead": ("ADDR", "the word at that address never takes a new value"),
    "weak": ("ADDR,MASK,MV", "fading: the bits under MASK read 1 at a VCC above so many millivolts"),
    "under-erased": ("ADDR,MASK,MV", "the bits under MASK read 0 at a VCC below so many millivolts"),
    "protected": ("", "software protection is on at the start"),
    "rail-sag": ("MA", "the raised rail gives no more than so many milliamperes and sags above"),
    "rail-offset": ("MV", "the raised rail stands so many millivolts off its step (-300: below)"),
    "vcc-offset": ("MV", "VCC stands so many millivolts off its step (-300: below)"),
    "slow-fall": ("US", "raised positions take so many microseconds more to fall"),
    "vcc-slow-fall": ("US", "VCC takes so many microseconds more to fall"),
}
SEATS = ("absent", "reversed", "shifted")


@dataclass(frozen=True)
class ChipFaults:
    """What is wrong with a chip itself; a model that can take it offers `take_faults(faults)`."""

    wrong_id: tuple[int, int] | None = None
    stuck: tuple[tuple[int, int, int], ...] = ()  # (word address, mask, bits)
    slow_percent: int = 0
    slow_pulses: int = 1
    # (word address, mask, crossover VCC in mV, slow one): a fading 0 reads 1 above that VCC; with "slow one" true an
    # under-erased 1 reads 0 below it
    weak: tuple[tuple[int, int, int, bool], ...] = ()
    dead: tuple[int, ...] = ()  # word addresses
    protected: bool = False

    def names(self) -> list[str]:
        """The faults that are set, by their names on the command line."""
        is_set = {
            "wrong-id": self.wrong_id is not None,
            "stuck": bool(self.stuck),
            "slow": self.slow_percent > 0,
            "weak": bool(self.weak),
            "dead": bool(self.dead),
            "protected": self.protected,
        }
        return [name for name, present in is_set.items() if present]


@dataclass(frozen=True)
class Faults:
    """All faults of a bench: the texts as given, and what they mean."""

    texts: tuple[str, ...] = ()
    seat: str = ""  # one of SEATS, or "" for a chip that sits as it should
    other: str = ""  # the part that sits there instead of the one that is named
    chip: ChipFaults = field(default_factory=ChipFaults)
    board: Mapping[str, Any] = field(default_factory=dict)  # what of the Board is other, by its fields
    lifted: tuple[int, ...] = ()  # chip pins
    touching: tuple[tuple[int, int], ...] = ()  # pairs of chip pins


# faults of the rig: field of the Board, and how many of its units one of the argument's is
_OF_BOARD = {
    "rail-sag": ("raised_limit_ua", 1_000),
    "rail-offset": ("raised_offset_mv", 1),
    "vcc-offset": ("vcc_offset_mv", 1),
    "slow-fall": ("fall_more_ticks", 16),
    "vcc-slow-fall": ("vcc_fall_more_ticks", 16),
}


def parse_faults(texts: Iterable[str]) -> Faults:
    """The meaning of texts such as "reversed" or "slow=5,3"; UsageMistake for an unknown name or wrong arguments."""
    given = tuple(texts)
    others = [text.partition("=")[2] for text in given if text.partition("=")[0] == "other"]
    if others and (len(others) > 1 or not others[0]):
        raise UsageMistake("one other part sits in the socket", wanted="other=PART, once", got=", ".join(given))
    parsed = [_parse_one(text) for text in given if text.partition("=")[0] != "other"]

    def of(name: str) -> list[tuple[int, ...]]:
        return [numbers for one, numbers in parsed if one == name]

    seats = list(dict.fromkeys(name for name, _ in parsed if name in SEATS))
    if len(seats) > 1:
        raise UsageMistake(
            "a chip sits in one way only",
            wanted=f"one of {', '.join(SEATS)}",
            got=", ".join(seats),
            hint="leave all but one out",
        )
    weak = [(at, mask, mv, False) for at, mask, mv in of("weak")]
    weak += [(at, mask, mv, True) for at, mask, mv in of("under-erased")]
    slow, wrong = of("slow"), of("wrong-id")
    chip = ChipFaults(
        wrong_id=(wrong[-1][0], wrong[-1][1]) if wrong else None,
        stuck=tuple((at, mask, bits) for at, mask, bits in of("stuck")),
        slow_percent=slow[-1][0] if slow else 0,
        slow_pulses=slow[-1][1] if slow else 1,
        weak=tuple(weak),
        dead=tuple(at for (at,) in of("dead")),
        protected=bool(of("protected")),
    )
    board = {field: numbers[0] * unit for name, (field, unit) in _OF_BOARD.items() for numbers in of(name)}
    touching = tuple((a, b) for a, b in of("short"))
    lifted = tuple(pin for (pin,) in of("lifted"))
    return Faults(given, seats[0] if seats else "", "".join(others), chip, board, lifted, touching)


def _parse_one(text: str) -> tuple[str, tuple[int, ...]]:
    name, _, rest = text.partition("=")
    if name not in FAULTS:
        near = difflib.get_close_matches(name, FAULTS, n=1, cutoff=0.5)
        raise UsageMistake(
            f"no fault is called {name!r}",
            wanted=", ".join(FAULTS),
            got=name or "nothing",
            hint=f"did you mean {near[0]}?" if near else "`bench new --help` lists the faults and what they do",
        )
    form, _about = FAULTS[name]
    wanted = form.split(",") if form else []
    parts = rest.split(",") if rest else []
    wish = f"{name}={form}" if form else f"{name}, with nothing after it"
    if len(parts) != len(wanted) or ("=" in text and not wanted):
        raise UsageMistake(f"the fault {name} has other arguments", wanted=wish, got=text)
    numbers = tuple(_number(part, kind, wish, text) for part, kind in zip(parts, wanted, strict=True))
    if name == "short" and numbers[0] == numbers[1]:
        raise UsageMistake("a pin always touches itself", wanted="two pins", got=text, hint="short=1,2")
    if name == "stuck" and numbers[2] & ~numbers[1]:
        raise UsageMistake("stuck bits outside their mask", wanted="BITS within MASK", got=text)
    return name, numbers


# what each argument may be: base of its digits, least, most
_ARGUMENTS = {
    "HEX": (16, 0, 0xFFFF),
    "ADDR": (0, 0, (1 << 24) - 1),
    "MASK": (0, 1, 0xFFFF),
    "BITS": (0, 0, 0xFFFF),
    "PERCENT": (10, 1, 100),
    "PULSES": (10, 1, 10_000),
    "MA": (10, 0, 1_000),
    "MV": (10, -20_000, 20_000),
    "US": (10, 0, 1_000_000),
    "PIN": (10, 1, 40),
}


def _number(part: str, kind: str, wish: str, text: str) -> int:
    base, least, most = _ARGUMENTS[kind]
    try:
        value = int(part, base)
    except ValueError:
        hint = "addresses and masks in decimal or as 0x1F" if base == 0 else ""
        raise UsageMistake(f"{kind} of a fault is not a number", wanted=wish, got=text, hint=hint) from None
    if not least <= value <= most:
        raise UsageMistake(f"{kind} of a fault is out of its range", wanted=f"{least}..{most}", got=text)
    return value
