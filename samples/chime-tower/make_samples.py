"""Make the sample images of the chime tower: `chime.hex`, the new version, and `tower-dump.bin`, what the chip holds.

The controller, its memory map and its tunes are invented. Everything is worked out from fixed texts and numbers, so the
same files come out every time. Run it from anywhere: `python samples/chime-tower/make_samples.py`.
"""

from __future__ import annotations

import hashlib
import sys
from dataclasses import dataclass
from pathlib import Path

from pulsewright.files import write_whole
from pulsewright.image.checksum import crc
from pulsewright.image.intel_hex import write_intel_hex
from pulsewright.image.memory import Image, Segment

FOLDER = Path(__file__).resolve().parent
CHIP_BYTES = 0x1_0000  # a 27E512
BLANK = 0xFF

HEADER_AT = 0x0000
CODE_AT, CODE_END = 0x0100, 0x9B00
TEXT_AT = 0x9C00
TUNES_AT = 0xA000  # the strike schedule follows the tunes
HOLD_AT = 0xE000
MONITOR_AT, MONITOR_END = 0xF000, 0xFF00
TRAILER_AT = 0xFFF0
BELLS = 8
TUNES = 80
TUNE_BYTES = 128
NOTES_IN_TUNE = 56


@dataclass(frozen=True)
class Version:
    """What one version of the program differs in."""

    number: str
    date: str
    retuned: tuple[int, ...]  # tunes that this version rings in another order
    routines: tuple[int, ...]  # code routines that this version has rewritten
    quiet_hours: tuple[int, ...]


OLD = Version("2.1", "1989-04-11", (), (), ())
NEW = Version("2.3", "1991-10-02", (3, 4, 17, 42, 43, 79), (5, 88), (22, 23, 0, 1, 2, 3, 4, 5))


def noise(label: str, count: int) -> bytes:
    """`count` bytes without a pattern, always the same ones for the same label; they stand for program code."""
    return hashlib.shake_256(f"chime tower {label}".encode()).digest(count)


def header(version: Version) -> bytes:
    """Jump table and the title the display shows at power-up."""
    jumps = b"".join((CODE_AT + 0x40 * entry).to_bytes(2, "big") for entry in range(32))
    title = f"ST ORIEL TOWER   CHIME CONTROLLER   V{version.number}   {version.date}   {BELLS} BELLS"
    return jumps + title.ljust(128).encode("ascii") + bytes(64)


def code(label: str, size: int, rewritten: tuple[int, ...] = ()) -> bytes:
    """Routines of uneven length, each padded with 00 to an even 16 bytes."""
    out = bytearray()
    number = 0
    while len(out) < size:
        body = noise(f"{label} routine {number}{' again' if number in rewritten else ''}", 260)
        length = 40 + noise(f"{label} length {number}", 1)[0]
        out += body[:length]
        out += bytes(-len(out) % 16)
        number += 1
    return bytes(out[:size])


def texts() -> bytes:
    """Lines of 40 characters for the display."""
    lines = ["CHIMES ON", "CHIMES OFF", "SET CLOCK", "STRIKE BY HAND", "TUNE NUMBER", "HAMMER JAMMED", "QUIET HOURS"]
    lines += [f"BELL {bell}  LAST STRUCK AT" for bell in range(1, BELLS + 1)]
    return b"".join(line.ljust(40).encode("ascii") for line in lines)


def hunt(row: list[int], change: int) -> list[int]:
    """The next row of plain hunt: neighbours cross, from the first place or from the second in turn."""
    row = list(row)
    for place in range(change % 2, len(row) - 1, 2):
        row[place], row[place + 1] = row[place + 1], row[place]
    return row


def tune(number: int, version: Version) -> bytes:
    """Name, tempo, then pairs of bell and length: rows of plain hunt that begin with another bell for each tune."""
    row = [(bell + number) % BELLS + 1 for bell in range(BELLS)]
    if number in version.retuned:
        row.reverse()
    notes = bytearray()
    for change in range(NOTES_IN_TUNE // BELLS):
        for place, bell in enumerate(row):
            notes += bytes([bell, 24 if place == BELLS - 1 else 12 + number % 5])
        row = hunt(row, change)
    name = f"HUNT {number:02d} ON {BELLS}".ljust(14).encode("ascii")
    return name + bytes([60 + number, len(notes) // 2]) + notes


def schedule(version: Version) -> bytes:
    """Four bytes for each quarter of an hour of a week: day and hour, quarter, tune, strikes."""
    rows = bytearray()
    for day in range(7):
        for hour in range(24):
            for quarter in range(4):
                quiet = hour in version.quiet_hours
                strikes = 0 if quiet or quarter else (hour + 11) % 12 + 1
                chosen = 0 if quiet else (day * 11 + hour * 4 + quarter) % TUNES
                rows += bytes([day << 5 | hour, quarter, chosen, strikes])
    return bytes(rows)


def hold_times() -> bytes:
    """A table of 1024 words: how long a hammer is held for each step of bell weight; a plain quadratic."""
    return b"".join((1800 + step * 9 + step * step // 37).to_bytes(2, "little") for step in range(1024))


def parts(version: Version) -> list[Segment]:
    """The memory map, gaps between some of the parts; the trailer holds the CRC of all that is before it."""
    tunes = b"".join(tune(number, version) for number in range(TUNES))
    segments = [
        Segment(HEADER_AT, header(version) + code("main", CODE_END - CODE_AT, version.routines)),
        Segment(TEXT_AT, texts()),
        Segment(TUNES_AT, tunes + schedule(version)),
        Segment(HOLD_AT, hold_times()),
        Segment(MONITOR_AT, code("monitor", MONITOR_END - MONITOR_AT)),
    ]
    check = crc("CRC-16/IBM-3740", b"".join(segment.data for segment in segments))
    trailer = f"CHIME {version.number}".ljust(14).encode("ascii") + check.to_bytes(2, "big")
    return [*segments, Segment(TRAILER_AT, trailer)]


def make() -> dict[str, bytes]:
    """The sample files by name."""
    dump = bytearray([BLANK]) * CHIP_BYTES
    for segment in parts(OLD):
        dump[segment.start : segment.end] = segment.data
    return {
        "chime.hex": write_intel_hex(Image(tuple(parts(NEW)))).encode("ascii"),
        "tower-dump.bin": bytes(dump),
    }


def main() -> int:
    """Write the files beside this script."""
    for name, data in make().items():
        write_whole(FOLDER / name, data)
        print(f"{name}: {len(data)} bytes")
    return 0


if __name__ == "__main__":
    sys.exit(main())
