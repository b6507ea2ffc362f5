"""The 27E512 definition says what the fact table of the part says; the numbers were typed from that table by hand.

Source: mode table of a sibling part number, first pages of two sibling sheets, and values recalled (`from memory`);
the definition's own head and its `from` marks say which is which.
"""

from __future__ import annotations

import pytest

from pulsewright.chip.load import is_shipped, load, memory_marked
from pulsewright.chip.model import Definition, EachStep, EveryWord, ModeStep, PulseStep, RepeatStep
from pulsewright.chip.packages import position_of

US = 1_000_000  # picoseconds
MS = 1_000 * US
NS = 1_000


@pytest.fixture(scope="module")
def part() -> Definition:
    """The shipped definition."""
    return load("27e512")


def test_size_and_package(part: Definition) -> None:
    """64K words of 8 bits in DIP-28, erased electrically to FF."""
    assert (part.words, part.width, part.package, part.blank) == (65536, 8, "DIP-28", 0xFF)
    assert part.erase_kind == "electrical"
    assert is_shipped(part)


def test_connection_diagram(part: Definition) -> None:
    """Each of the 28 pins has the role the sheet's drawing gives it."""
    left = ["A15", "A12", *(f"A{bit}" for bit in range(7, -1, -1)), "D0", "D1", "D2", "GND"]
    right = ["D3", "D4", "D5", "D6", "D7", "CE", "A10", "OE", "A11", "A9", "A8", "A13", "A14", "VCC"]
    assert [part.role_of(pin) for pin in range(1, 29)] == left + right
    assert position_of(22, "DIP-28") == 24  # OE/VPP meets the raised position 24 of the byte-wide site
    assert position_of(24, "DIP-28") == 26  # A9 meets 26


@pytest.mark.parametrize(
    ("name", "window_mv", "known"),
    [
        ("VCC.read", (4_750, 5_000, 5_250), False),
        ("VCC.program", (4_750, 5_000, 5_250), False),
        ("VCC.erase", (4_750, 5_000, 5_250), False),
        ("VCC.erase_verify", (3_563, 3_750, 3_937), False),  # ±5 % is 3.5625 to 3.9375 V: whole millivolts inside
        ("VPP.program", (11_750, 12_000, 12_250), True),
        ("VPP.erase", (13_750, 14_000, 14_250), True),
        ("VH.identify", (11_500, 12_000, 12_500), True),
        ("VH.erase", (13_750, 14_000, 14_250), True),
    ],
)
def test_supply_windows(part: Definition, name: str, window_mv: tuple[int, int, int], known: bool) -> None:
    """Each step has the published window, or typ ±5 % where none is published."""
    step = part.supplies[name]
    assert (step.min_mv, step.typ_mv, step.max_mv) == window_mv
    assert step.limits_known is known


def test_currents(part: Definition) -> None:
    """30 mA from VCC and from VPP; for the A9 levels the source gives none."""
    assert {part.supplies[name].current_ua for name in part.supplies if name[:3] != "VH."} == {30_000}
    assert {part.supplies[name].current_ua for name in ("VH.identify", "VH.erase")} == {None}


def test_absolute_maxima(part: Definition) -> None:
    """7 V for VCC and all others, 14.5 V for OE/VPP and A9."""
    found = {name: (one.mv, one.above_vcc) for name, one in part.maxima.items()}
    fixed = {"VCC": (7_000, False), "OE": (14_500, False), "A9": (14_500, False), "other": (7_000, False)}
    assert found == fixed


@pytest.mark.parametrize(
    ("mode", "ce", "oe", "vcc_mv", "data"),
    [
        ("read", "L", "L", 5_000, "out"),
        ("output_disable", "L", "H", 5_000, "Z"),
        ("standby", "H", "H", 5_000, "Z"),
        ("program", "H", 12_000, 5_000, "in"),
        ("verify", "L", "L", 5_000, "out"),
        ("erase", "H", 14_000, 5_000, 0xFF),
        ("erase_verify", "L", "L", 3_750, "out"),
        ("identify", "L", "L", 5_000, "out"),
    ],
)
def test_mode_table(part: Definition, mode: str, ce: str, oe: str | int, vcc_mv: int, data: str | int) -> None:
    """Each row of the mode table: CE (idle where it pulses), OE/VPP in words or millivolts, VCC, data."""
    row = part.modes[mode]
    level = row.levels["OE"]
    assert row.levels["CE"] == ce
    assert (part.supplies[level].typ_mv if level in part.supplies else level) == oe
    assert part.supplies[row.vcc].typ_mv == vcc_mv
    assert row.data == data


def test_levels_of_a9(part: Definition) -> None:
    """A9 is at 12 V to identify, at 14 V to erase with all other address pins low, and an address else."""
    at_a9 = {name: part.supplies[mode.levels["A9"]].typ_mv for name, mode in part.modes.items() if "A9" in mode.levels}
    assert at_a9 == {"identify": 12_000, "erase": 14_000}
    assert part.modes["erase"].levels["A"] == "L"


@pytest.mark.parametrize(
    ("name", "min_ps", "typ_ps", "max_ps"),
    [
        ("tPW", 95 * US, 100 * US, 105 * US),
        ("tEW", 95 * MS, 100 * MS, 105 * MS),
        ("tDV", None, None, 1 * US),
        ("tACC", None, None, 150 * NS),
        ("tDF", None, None, 130 * NS),
        *((name, 2 * US, None, None) for name in ("tAS", "tAH", "tDS", "tDH", "tVCS", "tVS", "tVH", "tVR")),
    ],
)
def test_times(part: Definition, name: str, min_ps: int | None, typ_ps: int | None, max_ps: int | None) -> None:
    """Each time of the AC table, in picoseconds."""
    window = part.timing[name]
    assert (window.min_ps, window.typ_ps, window.max_ps) == (min_ps, typ_ps, max_ps)


def test_identity(part: Definition) -> None:
    """DA at 0, 08 at 1, read in the A9 mode."""
    assert part.identify_mode == "identify"
    assert part.row is not None
    assert [[(cell.at, cell.is_) for cell in cells] for cells in part.row.ids] == [[(0, 0xDA), (1, 0x08)]]


def test_algorithms(part: Definition) -> None:
    """Program: up to 25 pulses of CE low a word; erase: up to 20, all words FF at 3.75 V after each."""
    assert part.program is not None
    assert part.erase is not None
    each = part.program.steps[0]
    assert isinstance(each, EachStep)
    tries = each.steps[0]
    assert isinstance(tries, RepeatStep)
    assert tries.max == 25
    assert [(one.pin, one.to, one.timing) for one in tries.steps if isinstance(one, PulseStep)] == [("CE", "L", "tPW")]
    erase = part.erase.steps[0]
    assert isinstance(erase, RepeatStep)
    assert (erase.max, part.erase.unit, part.erase.bits) == (20, "chip", "to blank")
    assert isinstance(erase.until, EveryWord)
    assert (erase.until.mode, erase.until.is_) == ("erase_verify", 0xFF)
    assert isinstance(erase.steps[0], ModeStep)


def test_what_was_recalled_is_listed(part: Definition) -> None:
    """Consent shows every step without published limits and every value from memory, and none that a sheet gives."""
    marked = memory_marked(part)
    assert "supplies.VCC.erase_verify: limits unknown" in marked
    assert "supplies.VPP.erase: from memory" in marked
    assert "maxima.A9: from memory" in marked
    assert "timing.tEW: from memory" in marked
    assert not any(text.startswith(("timing.tACC", "timing.tCE")) for text in marked)
    assert len(marked) == 4 + 4 + 4 + 13
