"""A 39SF020A flash for tests of definitions with commands: `bench new ... --model` this file.

256K x 8, programmed byte by byte behind an unlock command, erased by sectors of 4 KB or whole, ID by command only.
Every value is typed by hand from the published facts. Marks: S17, S50, S70 = the sheets of this part; S22, S25 = those
of siblings; "from memory" = recalled, not read; "invented" = no sheet says it.

Invented: a write that no command has ends the command begun; a program over 0s only takes bits and never fails; while
busy a read at another address shows bit 7 as if done; VCC that falls in an operation leaves something else.
"""

from __future__ import annotations

from pulsewright.virtual.interface import BusLimit, Limits
from pulsewright.virtual.models.bus_written import BusWritten

A = (12, 11, 10, 9, 8, 7, 6, 5, 27, 26, 23, 25, 4, 28, 29, 3, 2, 30)  # [S25, S70]
D = (13, 14, 15, 17, 18, 19, 20, 21)  # [S25]
CE, OE, WE, GND, VCC = 22, 24, 31, 16, 32  # [S25, S70]
SIZE, SECTOR = 262_144, 4_096  # [S50, S17]
US, MS = 16, 16_000  # ticks
ID = (0xBF, 0xB6)  # [S17]
BYTE, SECTOR_ERASE, CHIP_ERASE = 20 * US, 25 * MS, 100 * MS  # longest [S50b, S70]
ID_SETTLE = 3  # 150 ns, entry and exit [S17, S70]
UNLOCK = ((0x5555, 0xAA), (0x2AAA, 0x55))  # A14..A0 decoded [S17]

LIMITS = Limits(
    package="DIP-32",
    # VDD + 0.5 V on plain pins, A9 13.2 V [S70]: no mode uses that, so this chip is judged and damaged as a plain pin;
    # 6.0 V is VDD + 0.5 V at the highest VDD
    maxima_mv={0: 6_000, VCC: 6_000},  # VDD not read: as the plain pins
    minimum_mv=-500,  # [S70]
    vcc_pin=VCC,
    gnd_pins=(GND,),
    address_pins=A,
    data_pins=D,
    enable_pins=(CE, OE),
    raised_pins=(),
    pulses=(),
    access_ticks=2,  # 70 ns, slowest [S50, S70]
    float_ticks=1,  # 25 ns [S70]
    rise_ticks=0,
    recovery_ticks=0,
    vcc_read_mv=(4_500, 5_500),  # [S50]
    vcc_most_mv=5_500,
    bus=BusLimit(
        ce=CE,
        oe=OE,
        we=WE,
        width_ticks=(1, 0),  # tWP, tCP 40 ns [S70]
        setup_ticks={"address": 0, "oe": 0, "data": 1},  # tAS 0, tOES 0, tDS 40 ns [S70]
        hold_ticks={"address": 1, "data": 0, "oe": 1},  # tAH 30 ns, tDH 0, tOEH 10 ns [S70]
        high_ticks=1,  # tWPH, tCPH 30 ns [S70]
        power_up_ticks=100 * US,  # [S70]
        power_up_read_ticks=100 * US,  # [S70]
        source="S70",
    ),
    source="S70, S50, S17, value by value in this file",
)


class Flash(BusWritten):
    """The model: a command is a row of writes; an operation runs by itself and shows bits 7 and 6."""

    def __init__(self) -> None:
        super().__init__("39sf020", LIMITS, SIZE, ID, sense_mv=2_000)  # of a sister [S22]
        self.program_pulses = self.erases = 0
        self._row: list[tuple[int, int]] = []  # writes of the command so far, unlocks in their decoded form
        self._shows_id = False
        self._will: dict[int, int] = {}
        self._last = (0, 0)  # address and word that bit 7 tells of

    def state(self) -> dict[str, object]:
        return {**super().state(), "erases": self.erases}  # the ID mode is lost at power-off [S17]

    def draw_ua(self, t: int, pin: int) -> int:
        if pin != VCC or not self._vcc:
            return 0
        return 25_000 if self._ce_low or self.is_busy(t) else 100  # from memory

    # ---- reads ----

    def word_at(self, at: int) -> int:
        if self._shows_id:
            return self._id[at & 1] if at & 0x7FFF < 2 else 0xFF  # other addresses: invented
        return super().word_at(at)

    def status(self, at: int) -> int | None:
        if not self._busy:
            return None
        last_at, last = self._last
        bit_7 = last & 0x80 ^ (0x80 if at == last_at else 0)
        return bit_7 | self._toggle | ~last & 0x3F

    # ---- commands ----

    def written(self, t: int, began: int, at: int, word: int) -> None:
        row = self._row
        row.append((at, word))
        self._word = -1
        done = [(where & 0x7FFF, what) for where, what in row]
        if len(row) == 1 and word == 0xF0:
            self._leave_id(t)
        elif len(row) <= 2:
            if done != list(UNLOCK[: len(row)]):
                row.clear()
        elif len(row) == 3:
            self._third(t, *done[2])
        elif row[2][1] == 0xA0:
            self._program(t, at, word)
        elif len(row) == 6:
            self._sixth(t, at, word)
        elif done[3:] != list(UNLOCK[: len(row) - 3]):
            row.clear()

    def _third(self, t: int, at: int, word: int) -> None:
        if at == 0x5555 and word in {0xA0, 0x80} and not self._shows_id:
            return  # more to come
        if at == 0x5555 and word == 0x90:
            self._shows_id = True
            self._valid_at = t + ID_SETTLE
        elif word == 0xF0:
            self._leave_id(t)
        self._row.clear()

    def _leave_id(self, t: int) -> None:
        self._shows_id = False
        self._valid_at = t + ID_SETTLE
        self._row.clear()

    def _program(self, t: int, at: int, word: int) -> None:
        self.program_pulses += 1
        slow = self._slow_pulses if self._is_slow(at) else 1
        self._run(t, BYTE * slow, {at: self.cells[at] & word}, (at, word))

    def _sixth(self, t: int, at: int, word: int) -> None:
        if word == 0x30:
            first = at // SECTOR * SECTOR
            self._erase(t, SECTOR_ERASE, range(first, first + SECTOR), at)
        elif word == 0x10 and at & 0x7FFF == 0x5555:
            self._erase(t, CHIP_ERASE, range(SIZE), at)
        else:
            self._row.clear()

    def _erase(self, t: int, ticks: int, cells: range, at: int) -> None:
        self.erases += 1
        slow = self._slow_pulses if any(self._is_slow(first) for first in cells[::SECTOR]) else 1
        self._run(t, ticks * slow, dict.fromkeys(cells, 0xFF), (at, 0xFF))  # bit 7 is 0 in an erase [S50]

    def _run(self, t: int, ticks: int, will: dict[int, int], last: tuple[int, int]) -> None:
        self._row.clear()
        self._busy, self._will, self._last = True, will, last
        self._due = t + ticks

    def due(self, t: int) -> None:
        self._busy = False
        self._store_all(self._will)

    def cut(self) -> None:
        self._row.clear()
        self._shows_id = False
        if self._busy:
            self._stress("VCC fell in a program or an erase")
            self._store_all({at: word ^ 0x5A for at, word in self._will.items()})

    def _store_all(self, words: dict[int, int]) -> None:
        if len(words) < SIZE or self._dead:
            for at, word in words.items():
                self._store(at, word)
        else:
            self.cells[:] = bytes(words.values())
            self._keep_stuck()
        self._will = {}


def make_chip() -> Flash:
    """A fresh, erased chip."""
    return Flash()
