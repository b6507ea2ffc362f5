"""A data sheet as plain numbers, drawn at random: invented parts of every family that a definition can describe.

`sheet_definition` writes a definition from it and `sheet_chip` a chip and the judge's limits; the two share nothing but
the numbers here. Levels are millivolts, currents microamperes, times nanoseconds; a time is (least, usual, most), 0
where the sheet does not give it. Pins are numbers of the package.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from hypothesis import strategies as st

Level = tuple[int, int, int]  # least, usual, most
Times = tuple[int, int, int]
Command = tuple[tuple[int, int], ...]  # (address, word)

OWN_VPP = ("own VPP, CE low", "own VPP, PGM low", "own VPP, CE high", "own VPP, blind pass")
SHARED = ("shared OE/VPP", "shared OE/VPP, electrical erase")
BUS = ("pages", "bytes")
FAMILIES = (*SHARED, *OWN_VPP, *BUS)

# What every socket of this kind fixes (JEDEC byte-wide): position of pin 1 less one, GND, VCC, D0..D7, raised contacts.
_BELOW = {24: 4, 28: 2, 32: 0}
_DATA = (13, 14, 15, 17, 18, 19, 20, 21)
_RAISED, _POWER, _A9 = (1, 3, 25), (28, 30, 32), 26


@dataclass(frozen=True)
class Sheet:
    """One invented part."""

    family: str
    package: int
    address: tuple[int, ...]
    data: tuple[int, ...]
    ce: int
    oe: int
    other: int  # PGM or WE; 0: none
    vpp: int  # 0: none, or on OE
    unconnected: tuple[int, ...]
    levels: Mapping[str, Level]  # VCC read, program, erase verify; VPP program, erase; A9 identify, erase
    currents: Mapping[str, int]  # "VCC", "VCC program", "VPP"
    most: Mapping[str, int]  # absolute maxima: "VCC", "VPP", "A9", "other"
    times: Mapping[str, Times]
    tries: int = 1
    erase_tries: int = 0
    ids: tuple[int, int] | None = None
    page: int = 0
    protects: bool = False
    commands: Mapping[str, Command] = field(default_factory=dict)

    @property
    def words(self) -> int:
        """How many."""
        return 1 << len(self.address)


def _level(draw: st.DrawFn, usual: int, jitter: int, narrow: int, wide: int) -> Level:
    middle = usual + draw(st.integers(-jitter, jitter))
    half = draw(st.integers(narrow, wide))
    return middle - half, middle, middle + half


@st.composite
def sheets(draw: st.DrawFn, families: tuple[str, ...] = FAMILIES) -> Sheet:
    """Any part; most can be made on the reference rig, some ask for what it cannot do."""
    family = draw(st.sampled_from(families))
    if family in BUS:
        return draw(_bus(family))
    return draw(_pulsed(family))


def _pins(draw: st.DrawFn, package: int, bits: tuple[int, int], roles: list[str]) -> dict[str, tuple[int, ...]]:
    """A pin for each role, address bits on what is left, any order; A9 where an identify level can come."""
    below = _BELOW[package]
    data = tuple(position - below for position in _DATA)
    free = [pin for pin in range(1, package + 1) if pin not in {*data, package, package // 2}]
    pins: dict[str, tuple[int, ...]] = {}
    for role in roles:
        may = [pin for pin in free if pin + below not in _POWER]
        if role == "VPP":
            may = [pin for pin in free if pin + below in _RAISED]
        elif role == "OE/VPP":
            may = [pin for pin in free if pin + below in {*_RAISED, 24}]
        elif role != "A9":
            may = [pin for pin in may if pin + below not in {*_RAISED[:2], _A9}]
        pin = _A9 - below if role == "A9" else draw(st.sampled_from(may))
        pins[role] = (pin,)
        free.remove(pin)
    count = min(draw(st.integers(*bits)), len(free) + 1)
    rest = list(draw(st.permutations(free)))
    bus = rest[: count - 1] if "A9" in pins else rest[:count]
    if "A9" in pins:
        bus.insert(9, pins["A9"][0])
    return {**pins, "A": tuple(bus), "D": data, "NC": tuple(sorted(set(rest) - set(bus)))}


def _time(draw: st.DrawFn, least: int, most: int) -> int:
    """Any nanosecond, none at all now and then."""
    return draw(st.one_of(st.just(0), st.integers(least, most), st.integers(least, most)))


def _pulse(draw: st.DrawFn, usual: int) -> Times:
    """A pulse and its window: within it every width is allowed."""
    return usual * draw(st.integers(50, 96)) // 100, usual, usual * draw(st.integers(104, 150)) // 100


@st.composite
def _pulsed(draw: st.DrawFn, family: str) -> Sheet:
    shared, erases = family in SHARED, family.endswith("erase")
    package = 24 if family == "own VPP, CE high" and draw(st.booleans()) else draw(st.sampled_from((28, 28, 32)))
    names = erases or (package != 24 and draw(st.integers(0, 3)) > 0)  # an ID at A9
    roles = ["OE/VPP" if shared else "VPP", *(["A9"] if names else []), "CE", *([] if shared else ["OE"])]
    if family == "own VPP, PGM low":
        roles.append("PGM")
    pins = _pins(draw, package, (10, 12), roles)
    read = _level(draw, 5_000, 40, 240, 460)
    levels = {"VCC read": read, "VCC program": read}
    if draw(st.booleans()):
        levels["VCC program"] = _level(draw, draw(st.sampled_from((5_000, 6_000, 6_250, 6_500))), 30, 190, 400)
    base = draw(st.sampled_from((12_000, 12_500, 12_750, 13_000, 14_000, 21_000, 25_000)))
    levels["VPP program"] = _level(draw, base, 25, base // 60, base // 25)
    if erases:
        levels["VPP erase"] = levels["A9 erase"] = _level(draw, 14_000, 10, 230, 500)
        low = draw(st.sampled_from((3_750, 4_200, 5_000)))
        levels["VCC erase verify"] = _level(draw, low, 20, 150, 200)
    if names:
        levels["A9 identify"] = _level(draw, draw(st.sampled_from((12_000, 12_500))), 40, 300, 600)
    tops = {supply: max(one[2] for name, one in levels.items() if name.startswith(supply)) for supply in ("VCC", "VPP")}
    most = {name: top + draw(st.integers(0, 1_500)) for name, top in tops.items()}
    most["other"] = tops["VCC"] + draw(st.integers(0, 1_500))
    if names:
        most["A9"] = max(one[2] for name, one in levels.items() if name.startswith("A9")) + draw(st.integers(0, 1_500))
    usual = draw(st.sampled_from((20_000, 100_000, 100_000, 1_000_000, 50_000_000)))
    times = {
        name: (_time(draw, 1, 6_000), 0, 0)
        for name in (
            *("address setup", "address hold", "data setup", "data hold", "raised setup", "raised hold"),
            *("supply setup", "control setup", "control hold", "recovery", "release to outputs"),
        )
    }
    times |= {name: (0, 0, draw(st.integers(40, 3_000))) for name in ("access", "verify access", "float")}
    times["verify access"] = (0, 0, max(times["verify access"][2], times["access"][2]))
    times["outputs on"] = (0, 0, draw(st.integers(10, times["access"][2])))
    times["pulse"] = _pulse(draw, usual)
    if erases:
        times["erase pulse"] = _pulse(draw, draw(st.sampled_from((1_000_000, 20_000_000, 100_000_000))))
    return Sheet(
        family=family,
        package=package,
        address=pins["A"],
        data=pins["D"],
        ce=pins["CE"][0],
        oe=pins["OE/VPP" if shared else "OE"][0],
        other=pins.get("PGM", (0,))[0],
        vpp=0 if shared else pins["VPP"][0],
        unconnected=pins["NC"],
        levels=levels,
        currents={name: draw(st.integers(1_000, 50_000)) for name in ("VCC", "VCC program", "VPP")},
        most=most,
        times=times,
        tries=1 if family == "own VPP, CE high" else draw(st.sampled_from((1, 2, 3, 10, 25))),
        erase_tries=draw(st.integers(1, 4)) if erases else 0,
        ids=draw(_ids()) if names else None,
    )


@st.composite
def _ids(draw: st.DrawFn) -> tuple[int, int]:
    first = draw(st.integers(1, 0xFE))
    return first, draw(st.integers(1, 0xFE).filter(lambda other: other != first))


@st.composite
def _bus(draw: st.DrawFn, family: str) -> Sheet:
    package = draw(st.sampled_from((24, 28, 28, 32)))
    pins = _pins(draw, package, (10, 13), ["CE", "OE", "WE"])
    pages = family == "pages"
    read = _level(draw, 5_000, 30, 260, 450)
    times = {
        name: (_time(draw, 1, 900), 0, 0)
        for name in (
            *("address setup", "address hold", "data setup", "data hold", "output setup", "output hold"),
            *("enable setup", "enable hold", "write high", "between looks"),
        )
    }
    times |= {name: (0, 0, draw(st.integers(40, 900))) for name in ("access", "float")}
    times["outputs on"] = (0, 0, draw(st.integers(10, times["access"][2])))
    least = draw(st.integers(20, 900))
    times["write"] = (least, 0, draw(st.sampled_from((0, 0, least * 4 + 2_000, least + 600_000))))
    times["power-up"] = (draw(st.sampled_from((0, 100_000, 5_000_000, 12_000_000))), 0, 0)
    times["cycle"] = (0, 0, draw(st.sampled_from((15_000, 200_000, 1_000_000, 10_000_000))))
    times["after a cycle"] = (_time(draw, 100, 12_000), 0, 0)
    if pages:
        gap = draw(st.sampled_from((50_000, 100_000, 150_000)))
        times["load gap"] = (draw(st.sampled_from((0, 100, 1_000, 9_000))), 0, gap)
        times["after a command"] = (_time(draw, 100, 3_000), 0, 0)
    else:
        times["cycle"] = (0, 0, min(times["cycle"][2], 1_000_000))
        times["erase"] = (0, 0, draw(st.sampled_from((1_000_000, 25_000_000, 100_000_000))))
        times["ID"] = (0, 0, draw(st.integers(50, 2_000)))
    bits = len(pins["A"])
    first, second = draw(st.lists(st.integers(0, (1 << bits) - 1), min_size=2, max_size=2, unique=True))
    unlock = ((first, 0xAA), (second, 0x55))
    names = ("enter", "leave", "program", "erase")
    commands = {
        "on": (*unlock, (first, 0xA0)),
        "off": (*unlock, (first, 0x80), *unlock, (first, 0x20)),
    }
    if not pages:
        enter, program, set_up, leave = draw(st.permutations((0x90, 0xA0, 0x80, 0xF0)))
        last = draw(st.sampled_from((0x10, 0x11, 0x3F)))
        cycles = ((*unlock, (first, enter)), ((0, leave),), (*unlock, (first, program)),
                  (*unlock, (first, set_up), *unlock, (first, last)))  # fmt: skip
        commands = dict(zip(names, cycles, strict=True))
    return Sheet(
        family=family,
        package=package,
        address=pins["A"],
        data=pins["D"],
        ce=pins["CE"][0],
        oe=pins["OE"][0],
        other=pins["WE"][0],
        vpp=0,
        unconnected=pins["NC"],
        levels={"VCC read": read},
        currents={"VCC": draw(st.integers(1_000, 50_000))},
        most={"VCC": read[2] + draw(st.integers(0, 1_500)), "other": read[2] + draw(st.integers(0, 1_500))},
        times=times,
        ids=None if pages else draw(_ids()),
        page=draw(st.sampled_from((16, 32, 64, 128, 256))) if pages else 0,
        protects=pages and draw(st.booleans()),
        commands=commands,
    )
