"""The numbers of a sheet in the judge's units: ticks of 62.5 ns, minima rounded up and maxima down."""

from __future__ import annotations

from tests.sequence.sheet import Sheet

_TICK_PS = 62_500


def up(ns: int) -> int:
    """Ticks that last so long or longer."""
    return -(-ns * 1_000 // _TICK_PS)


def down(ns: int) -> int:
    """Ticks that last so long or shorter."""
    return ns * 1_000 // _TICK_PS


def window(sheet: Sheet, name: str) -> tuple[int, int]:
    """Least and most of a level, mV."""
    least, _, most = sheet.levels[name]
    return least, most


class TicksOf:
    """The sheet's times in ticks."""

    def __init__(self, sheet: Sheet) -> None:
        self._times = sheet.times

    def least(self, name: str) -> int:
        """A minimum; 0: not given."""
        return up(self._times.get(name, (0, 0, 0))[0])

    def longest(self, name: str) -> int:
        """A maximum that the chip may take: valid data by then."""
        return up(self._times.get(name, (0, 0, 0))[2])

    def bound(self, name: str) -> tuple[int, int]:
        """A pulse's least and most."""
        least, _, most = self._times[name]
        return up(least), down(most)
