"""Parts of a sheet that are written on the bus, for sheet_chip: pages with a load gap, and bytes behind commands."""

from __future__ import annotations

from pulsewright.virtual.interface import BusLimit, Limits
from pulsewright.virtual.models.bus_written import BusWritten
from tests.sequence.sheet import Sheet
from tests.sequence.sheet_ticks import TicksOf, down, up, window

CUT = "VCC fell while the chip was writing"


def _bus_limits(sheet: Sheet) -> Limits:
    times = TicksOf(sheet)
    least, _, most = sheet.times["write"]
    gap = sheet.times.get("load gap", (0, 0, 0))
    commands = tuple(sheet.commands[name] for name in ("on", "off")) if sheet.protects else ()
    bus = BusLimit(
        ce=sheet.ce,
        oe=sheet.oe,
        we=sheet.other,
        width_ticks=(up(least), down(most)),
        setup_ticks={
            what: times.least(f"{name} setup") for what, name in (("address",) * 2, ("oe", "output"), ("data",) * 2)
        },
        hold_ticks={
            what: times.least(f"{name} hold") for what, name in (("address",) * 2, ("oe", "output"), ("data",) * 2)
        },
        high_ticks=times.least("write high"),
        load_ticks=(up(gap[0]), down(gap[2])),
        busy_ticks=times.longest("cycle") if sheet.page else 0,
        ready_ticks=times.least("after a cycle"),
        commands=commands,
        command_ticks=times.least("after a command") if commands else 0,
        power_up_ticks=times.least("power-up"),
        power_up_read_ticks=0,
    )  # fmt: skip
    read = window(sheet, "VCC read")
    return Limits(
        package=f"DIP-{sheet.package}",
        maxima_mv={0: sheet.most["other"], sheet.package: sheet.most["VCC"]},
        minimum_mv=-500,
        vcc_pin=sheet.package,
        gnd_pins=(sheet.package // 2,),
        address_pins=sheet.address,
        data_pins=sheet.data,
        enable_pins=(sheet.ce, sheet.oe),
        raised_pins=(),
        pulses=(),
        access_ticks=times.longest("access"),
        float_ticks=times.longest("float"),
        rise_ticks=0,
        recovery_ticks=0,
        vcc_read_mv=read,
        vcc_most_mv=read[1],
        bus=bus,
    )


class _OnTheBus(BusWritten):
    """What pages and bytes have in common: the sheet, its currents, a longest cycle that slow parts exceed."""

    def __init__(self, sheet: Sheet) -> None:
        super().__init__("invented", _bus_limits(sheet), sheet.words, sheet.ids or (0xFF, 0xFF), sense_mv=3_800)
        self._sheet = sheet
        self._will: dict[int, int] = {}
        self._row: list[tuple[int, int]] = []
        self._over = 0  # when by the sheet the cycle is over, whatever a chip that stalls does

    def is_busy(self, t: int) -> bool:
        return super().is_busy(t) and t < self._over

    def unheard(self, at: int, word: int) -> None:
        if not self._slow_percent:
            super().unheard(at, word)

    def draw_ua(self, t: int, pin: int) -> int:
        return self._sheet.currents["VCC"] if pin == self._sheet.package and self._vcc else 0

    def _works(self, began: int, t: int, ticks: int) -> None:
        """A cycle begins at `t`, which counts from `began`."""
        self._busy, self._over = True, began + ticks
        self._due = max(t + 1, began + (ticks * self._slow_pulses if self._slow_percent else ticks))

    def status(self, at: int) -> int | None:
        if not self._busy:
            return None
        last_at, last = self._row[-1] if self._row else (-1, 0)
        return last & 0x80 ^ (0x80 if at == last_at else 0) | self._toggle | ~last & 0x3F

    def cut(self) -> None:
        if self._busy:
            self._stress(CUT)
        self._will, self._row = {}, []

    def due(self, t: int) -> None:
        self._busy = False
        for at, word in self._will.items():
            self._store(at, word)
        self._will, self._row = {}, []


class Pages(_OnTheBus):
    """A page part: loads, the gap, a cycle; protection where the sheet has it."""

    protects = True

    def __init__(self, sheet: Sheet) -> None:
        super().__init__(sheet)
        self.protected = False

    def written(self, t: int, began: int, at: int, word: int) -> None:
        self._row.append((at, word))
        self._risen = t
        self._due = max(t, began + self._bus.load_ticks[1] + 1)

    def due(self, t: int) -> None:
        if self._busy:
            super().due(t)
            return
        loads, commands, size = tuple(self._row), self._sheet.commands, self._sheet.page
        if self._sheet.protects and loads[:6] == commands["off"]:
            self.protected, loads = False, loads[6:]
        elif self._sheet.protects and loads[:3] == commands["on"]:
            self.protected, loads = True, loads[3:]
        elif self.protected:
            loads = ()
        if any(at // size != loads[0][0] // size for at, _ in loads):
            self._stress("loads of two pages")
        self._will = dict(loads)
        self._works(self._risen, t, self._bus.busy_ticks)


class Bytes(_OnTheBus):
    """A flash: byte by byte behind a command, erased whole, its ID by command."""

    def __init__(self, sheet: Sheet) -> None:
        super().__init__(sheet)
        self._shows_id = False

    def word_at(self, at: int) -> int:
        if self._shows_id:
            return self._id[at] if at < 2 else 0xFF
        return super().word_at(at)

    def written(self, t: int, began: int, at: int, word: int) -> None:
        self._row.append((at, word))
        row, commands, sheet = tuple(self._row), self._sheet.commands, self._sheet
        self._word = -1
        if row in (commands["enter"], commands["leave"]):
            self._shows_id = row == commands["enter"]
            self._valid_at = t + up(sheet.times["ID"][2])
            self._row = []
        elif row == commands["erase"]:
            self._run(t, dict.fromkeys(range(sheet.words), 0xFF), up(sheet.times["erase"][2]))
        elif row[:-1] == commands["program"]:
            self._run(t, {at: self.cells[at] & word}, up(sheet.times["cycle"][2]))
        elif not any(row == one[: len(row)] for one in commands.values()):
            self._stress(f"no command begins {row}")
            self._row = []

    def _run(self, t: int, will: dict[int, int], ticks: int) -> None:
        self._will = will
        self._works(t, t, ticks)
