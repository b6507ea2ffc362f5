"""The number that stands on a group of pins, quickly: chips and judge ask for it at every pulse."""

from __future__ import annotations

from collections.abc import Sequence
from operator import itemgetter

from pulsewright.virtual.interface import Levels

_PART = 8  # pins whose levels are looked up together
_MEMO_LIMIT = 4_096


class PinNumber:
    """Reads pins as a number, bit 0 first: 1 from `high_mv` up; a pin that nothing drives counts as `floating`."""

    def __init__(self, pins: Sequence[int], high_mv: int, *, floating: bool) -> None:
        self._high_mv = high_mv
        self._floating = floating
        self._parts = [
            (itemgetter(*pins[at : at + _PART]), tuple(pins[at : at + _PART]), at, dict[object, int]())
            for at in range(0, len(pins), _PART)
        ]

    def of(self, levels: Levels) -> int:
        number = 0
        for get, pins, shift, memo in self._parts:
            key = get(levels)
            value = memo.get(key)
            if value is None:
                value = self._bits(pins, levels) << shift
                if len(memo) >= _MEMO_LIMIT:
                    memo.clear()
                memo[key] = value
            number |= value
        return number

    def _bits(self, pins: tuple[int, ...], levels: Levels) -> int:
        bits = 0
        for bit, pin in enumerate(pins):
            level = levels[pin]
            if self._floating if level is None else level >= self._high_mv:
                bits |= 1 << bit
        return bits
