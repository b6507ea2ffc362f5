"""Checks of [chip], [pins] and the maker rows: packages, pin numbers, sizes, ID bytes."""

from __future__ import annotations

from pulsewright.chip.findings import Findings
from pulsewright.chip.lines import KeyPath
from pulsewright.chip.model import IdCell, MakerRow
from pulsewright.chip.packages import POWER_PINS, pin_count
from pulsewright.chip.source import MEMORY
from pulsewright.chip.words import UNDRIVEN_ROLES


def check(found: Findings) -> None:
    """All checks of pins, sizes and IDs."""
    _numbers(found)
    _power(found)
    _sizes(found)
    _identities(found)


def _numbers(found: Findings) -> None:
    """Every pin number is one of the package's, and is used once."""
    pins = found.tree.plain.get("pins", {})
    count = pin_count(found.defn.package)
    taken: dict[int, str] = {}
    for role, value in pins.items():
        for index, pin in enumerate(value if isinstance(value, list) else [value]):
            if not isinstance(pin, int):
                continue
            path: KeyPath = ("pins", role, index) if isinstance(value, list) else ("pins", role)
            name = f"{role}{index}" if role in ("A", "D") else role
            if count and pin > count:
                found.at(path, "no such pin in the package", found=f"{name} at {pin}", wanted=f"1 to {count}")
            elif pin in taken:
                found.at(path, "a pin used twice", found=f"{name} at {pin}", wanted=f"{pin} is {taken[pin]} already")
            taken.setdefault(pin, name)
    free = [str(pin) for pin in range(1, count + 1) if pin not in taken]
    if free and pins:
        what = "pins of the package without a role"
        found.at(("pins",), what, found=", ".join(free), wanted="a role, NC or DC for each", warning=True)


def _power(found: Findings) -> None:
    """VCC and GND are where the package has them (JEDEC pin-outs, common practice)."""
    for role, wanted in POWER_PINS.get(found.defn.package, {}).items():
        if role not in found.tree.names("pins"):
            found.at(("pins", role), "a pin is missing", wanted=f"{role} = {', '.join(map(str, wanted))}")
            continue
        pins = found.defn.pins.get(role, ())
        if pins and sorted(pins) != sorted(wanted):
            what = f"{role} is not where {found.defn.package} has it"
            found.at(("pins", role), what, found=", ".join(map(str, pins)), wanted=", ".join(map(str, wanted)))
    for role in found.defn.pins:
        listed = found.tree.plain["pins"][role]
        if role not in ("A", "D", *UNDRIVEN_ROLES) and isinstance(listed, list) and len(listed) > 1:
            found.at(
                ("pins", role), "more than one pin in a control role", found=str(len(listed)), wanted="CE1, CE2 ..."
            )


def _sizes(found: Findings) -> None:
    defn = found.defn
    address, data = defn.pins.get("A", ()), defn.pins.get("D", ())
    if address and defn.words and defn.words != 1 << len(address):
        wanted = f"{1 << len(address)} for {len(address)} address pins"
        found.at(("chip", "words"), "words do not match the address pins", found=str(defn.words), wanted=wanted)
    if "width" in found.tree.plain.get("chip", {}):
        if defn.width not in (8, 16):
            found.at(("chip", "width"), "not a word width", found=str(defn.width), wanted="8 or 16")
        elif data and defn.width != len(data):
            wanted = f"{len(data)} for {len(data)} data pins"
            found.at(("chip", "width"), "width does not match the data pins", found=str(defn.width), wanted=wanted)
    if defn.blank >= 1 << defn.width:
        found.at(("chip", "blank"), "wider than a word", found=f"0x{defn.blank:X}", wanted=f"{defn.width} bits")
    if defn.erase_kind == "uv" and "erase" in found.tree.names():
        found.at(("erase",), "an electrical erase of a UV part", wanted='no [erase], or chip.erase = "electrical"')
    if defn.erase_kind == "none" and "erase" in found.tree.names():
        found.at(("erase",), "an erase of a part that has none", wanted='no [erase], or chip.erase = "electrical"')


def _identities(found: Findings) -> None:
    seen: dict[frozenset[tuple[int, int]], str] = {}
    by_id = found.defn.identify != "none"
    for index, row in enumerate(found.defn.makers):
        if found.tree.row is not None and index != found.tree.row:
            _remember(row, seen)  # rows are told apart in the turn of each; the later one gets the message
            if index > found.tree.row:
                continue
        else:
            _row(found, row, ("makers", index), by_id, seen)
    if by_id and found.tree.row is None and found.tree.names("identify"):
        found.at(("makers",), "identification needs ID bytes", wanted="a [[makers]] row with id, or identify.kind")


def _row(
    found: Findings, row: MakerRow, path: KeyPath, by_id: bool, seen: dict[frozenset[tuple[int, int]], str]
) -> None:
    if by_id and not row.ids and "id" not in found.tree.names(*path):
        found.at(
            (*path, "id"), "a maker row without ID bytes", wanted='id = [...], or identify.kind = "none" in the row'
        )
    if not by_id and row.ids:
        found.at((*path, "id"), "ID bytes of a part that has no identification", wanted="identify.mode, or no id")
    for cells in row.ids:
        for cell in cells:
            _cell(found, cell)
        key = frozenset((cell.at, cell.is_) for cell in cells)
        for other, maker in seen.items():
            if key and key == other:
                found.at(cells[0].where, "two rows with equal IDs", found=row.maker, wanted=f"other bytes than {maker}")
            elif key and (key < other or other < key):
                what = "an ID that also fits another row"
                found.at(cells[0].where, what, found=row.maker, wanted=f"cells that tell it from {maker}")
        seen.setdefault(key, row.maker)


def _remember(row: MakerRow, seen: dict[frozenset[tuple[int, int]], str]) -> None:
    for cells in row.ids:
        seen.setdefault(frozenset((cell.at, cell.is_) for cell in cells), row.maker)


def _cell(found: Findings, cell: IdCell) -> None:
    words, width = found.defn.words, found.defn.width
    if words and cell.at >= words:
        found.at(cell.where, "an ID cell outside the chip", found=f"0x{cell.at:X}", wanted=f"below 0x{words:X}")
    if cell.is_ >= 1 << width:
        found.at(cell.where, "an ID byte wider than a word", found=f"0x{cell.is_:X}", wanted=f"{width} bits")
    elif cell.what == "manufacturer" and (cell.is_ & 0xFF).bit_count() % 2 == 0:
        # JEP106: bit 7 of a manufacturer's code makes its parity odd; some makers answer otherwise all the same, and a
        # cell that names the sheet it was read in is one of those.
        if not cell.source or MEMORY in cell.source:
            what = "a manufacturer's code of even parity"
            wanted = "odd parity (JEP106), or `from`, the sheet that has it so"
            found.at(cell.where, what, found=f"0x{cell.is_:X}", wanted=wanted, warning=True)
