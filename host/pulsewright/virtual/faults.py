"""Faults a bench can be given: what each does, how it is written, and its parsed form.

Three kinds: how the chip sits in the socket (absent, reversed, shifted), what is wrong with the chip itself (wrong-id,
slow, stuck, dead, protected), and what is wrong with the rig around it (rail-sag).
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass, field

from pulsewright.errors import UsageMistake

# name -> (form of the arguments, what the fault does); `bench new --help` prints this table
FAULTS: dict[str, tuple[str, str]] = {
    "absent": ("", "no chip in the socket"),
    "reversed": ("", "the chip turned round: pin 1 where the last pin belongs"),
    "shifted": ("", "the chip one row of contacts too far from the bottom of the socket"),
    "wrong-id": ("HEX,HEX", "the chip answers these ID bytes: manufacturer, device"),
    "stuck": ("ADDR,MASK,BITS", "at that address the bits under MASK always read BITS and never change"),
    "slow": ("PERCENT,PULSES", "so many of the cells (or pages) need so many pulses (or write cycles' time)"),
    "dead": ("ADDR", "the word at that address never takes a new value"),
    "protected": ("", "software protection is on at the start"),
    "rail-sag": ("MA", "the raised rail gives no more than so many milliamperes and sags above"),
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
    chip: ChipFaults = field(default_factory=ChipFaults)
    raised_limit_ua: int | None = None


def parse_faults(texts: Iterable[str]) -> Faults:
    """The meaning of texts such as "reversed" or "slow=5,3"; UsageMistake for an unknown name or wrong arguments."""
    given = tuple(texts)
    seat = ""
    wrong_id: tuple[int, int] | None = None
    stuck: list[tuple[int, int, int]] = []
    slow = (0, 1)
    dead: list[int] = []
    protected = False
    limit_ua: int | None = None
    for text in given:
        name, numbers = _parse_one(text)
        if name in SEATS:
            if seat and seat != name:
                wanted = f"one of {', '.join(SEATS)}"
                raise UsageMistake("a chip sits in one way only", wanted=wanted, got=f"{seat}, {name}")
            seat = name
        elif name == "wrong-id":
            wrong_id = (numbers[0], numbers[1])
        elif name == "stuck":
            stuck.append((numbers[0], numbers[1], numbers[2]))
        elif name == "slow":
            slow = (numbers[0], numbers[1])
        elif name == "dead":
            dead.append(numbers[0])
        elif name == "protected":
            protected = True
        else:
            limit_ua = numbers[0] * 1000
    chip = ChipFaults(wrong_id, tuple(stuck), *slow, dead=tuple(dead), protected=protected)
    return Faults(given, seat, chip, limit_ua)


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
