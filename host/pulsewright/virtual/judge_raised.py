"""What the judge knows of raised levels: the windows a pin may stand in, at which VCC, and when D may be read then.

Levels are millivolts.
"""

from __future__ import annotations

from collections.abc import Mapping

from pulsewright.units import show_mv
from pulsewright.virtual.interface import Limits, PulseLimit, RaisedLimit

Window = tuple[int, int]
_MEMO_LIMIT = 4_096


class RaisedTable:
    """The raised levels of one part: of its pulses, of what may stand without one, and of the identify mode."""

    def __init__(self, limits: Limits) -> None:
        self._limits = limits
        rows: dict[int, dict[Window, list[Window]]] = {pin: {} for pin in limits.raised_pins}  # -> windows of VCC
        levels: list[PulseLimit | RaisedLimit] = [*limits.pulses, *limits.standing]
        for limit in levels:
            for pin, window in limit.raised.items():
                rows[pin].setdefault(window, []).append(limit.vcc_mv)
        if limits.identify_pin is not None and limits.identify_mv is not None:
            rows[limits.identify_pin].setdefault(limits.identify_mv, []).append(limits.vcc_read_mv)
        self._rows = rows
        self._vcc_for: dict[tuple[int, int], tuple[Window, ...]] = {}

    def window_of(self, pin: int, level: int) -> Window | None:
        """The first window of the pin in which the level lies."""
        return next((window for window in self._rows[pin] if within(level, window)), None)

    def wanted(self, pin: int) -> str:
        """Every window of a pin, as text."""
        return spans(tuple(self._rows[pin])) or "never raised"

    def vcc_for(self, pin: int, level: int) -> tuple[Window, ...]:
        """The windows of VCC at which the pin may stand at this level; none for a level without a name."""
        found = self._vcc_for.get((pin, level))
        if found is None:
            if len(self._vcc_for) >= _MEMO_LIMIT:
                self._vcc_for.clear()
            rows = self._rows[pin].items()
            every = [vcc for window, all_vcc in rows if within(level, window) for vcc in all_vcc]
            found = self._vcc_for[pin, level] = tuple(dict.fromkeys(every))
        return found

    def standing(self, raised: Mapping[int, int], vcc_mv: int) -> tuple[RaisedLimit | None, tuple[int, ...]]:
        """The row under which D may be read with exactly these raised levels, and which pins switch the outputs then.

        The pins change their meaning as soon as the row's pins are raised, whether or not its levels are met.
        """
        outputs = self._limits.enable_pins
        for limit in self._limits.standing:
            if raised and raised.keys() == limit.raised.keys():
                outputs = limit.output_pins or self._limits.enable_pins
                if within(vcc_mv, limit.vcc_mv) and all(within(raised[pin], row) for pin, row in limit.raised.items()):
                    return limit, outputs
        return None, outputs


def within(level: int, window: Window) -> bool:
    """Whether a level lies in a window, its ends included."""
    return window[0] <= level <= window[1]


def spans(windows: tuple[Window, ...]) -> str:
    """Windows as text: "4.75 V to 5.25 V or 6 V to 6.5 V"."""
    return " or ".join(f"{show_mv(low)} to {show_mv(high)}" for low, high in windows)
