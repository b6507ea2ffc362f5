"""Pulses, as the judge watches them: kind by the raised levels, width, set-up and hold, what stands meanwhile.

Times are ticks of 62.5 ns, levels millivolts.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from operator import itemgetter

from pulsewright.units import show_mv, show_ticks
from pulsewright.virtual.interface import Levels, Limits, PulseLimit
from pulsewright.virtual.pin_number import PinNumber

VIL_MV, VIH_MV = 800, 2000  # TTL input levels: common practice
LONG_AGO = -(1 << 62)
FOREVER = 1 << 62
_MEMO_LIMIT = 4_096

Report = Callable[[str, int, int, str, str], None]  # rule, pin, t, wanted, got


class Seen:
    """Least, most and number of what was measured under each name, in ticks."""

    def __init__(self) -> None:
        self._table: dict[str, list[int]] = {}

    def add(self, name: str, ticks: int) -> None:
        row = self._table.get(name)
        if row is None:
            self._table[name] = [ticks, ticks, 1]
            return
        if ticks < row[0]:
            row[0] = ticks
        elif ticks > row[1]:
            row[1] = ticks
        row[2] += 1

    def table(self) -> dict[str, tuple[int, int, int]]:
        """(least, most, count) by name."""
        return {name: (row[0], row[1], row[2]) for name, row in self._table.items()}


class PulseWatch:
    """Follows the pulse pin and the raised levels; the judge tells it when address, data and supplies last moved.

    While a pulse runs, and for its hold time after, `address_hold`, `data_hold` and `control_hold` lie in the future:
    whoever moves one of them then calls `address_moved`, `data_moved` or `control_moved`. `controls` are the pins that
    a pulse wants at a level. Past `due` a running pulse is too long: whoever sees the time calls `overdue`.
    """

    def __init__(self, limits: Limits, report: Report) -> None:
        self._limits = limits
        self._report = report
        rows = [(pulse, _gates(pulse)) for pulse in limits.pulses]
        self._kinds = rows
        lines = dict.fromkeys(pin for _pulse, gates in rows for pin, _low in gates)
        self._lines_of = itemgetter(*lines) if lines else tuple
        self._given_by: dict[object, tuple[PulseLimit, ...]] = {}  # levels of those lines -> kinds of pulse they give
        self.controls = frozenset(
            pin for pulse in limits.pulses for pin in (*pulse.high_pins, *pulse.only_low, *pulse.only_high)
        )
        self._address = PinNumber(limits.address_pins, VIH_MV, floating=True)
        pulsed = {pulse.pin for pulse in limits.pulses}
        inputs = dict.fromkeys((*limits.address_pins, *limits.enable_pins, *sorted(pulsed), *limits.data_pins))
        self._inputs = tuple(inputs)
        self._inputs_of = itemgetter(*inputs)
        self._clean: set[int] = set()  # levels that are low or high
        self.seen = Seen()
        self._names = {
            pulse.name: [(what, f"{pulse.name} {what} setup", least) for what, least in pulse.setup_ticks.items()]
            for pulse in limits.pulses
        }
        self.kind: PulseLimit | None = None  # of the pulse that runs
        self.unknown = False  # a pulse of no kind runs
        self.began = LONG_AGO
        self.ended = LONG_AGO
        self._last: PulseLimit | None = None
        self._counts: dict[str, dict[int, int]] = {}  # kind -> address -> pulses since power-up
        self._whole_chip = False  # the last pulse was one for the whole chip
        self.due = FOREVER
        self._late = False  # this pulse has been reported as too long
        self.control_t = LONG_AGO
        self.address_t = LONG_AGO
        self.data_t = LONG_AGO
        self.driving = True  # at rest the rig holds every line low, D too
        self.address_hold = LONG_AGO
        self.data_hold = LONG_AGO
        self.control_hold = LONG_AGO

    def update(
        self,
        t: int,
        levels: Levels,
        raised: dict[int, int],
        raised_t: dict[int, int],
        vcc_since: Mapping[tuple[int, int], int],
    ) -> None:
        """The pulse pin or a raised level moved. `raised`: pin -> level of what stands above VCC + 0.3 V now.

        `vcc_since`: since when VCC stands in each of the windows that it stands in.
        """
        given = self._given(levels) if raised else ()
        kind = self._kind_of(given, raised) if given else None
        unknown = bool(given) and kind is None and not self._is_identify(raised)
        if kind is not self.kind:
            if self.kind is not None:
                self._end(t, self.kind)
            self.kind = kind
            if kind is not None:
                self._begin(t, kind, levels, raised_t, vcc_since)
        if unknown and not self.unknown:
            shown = ", ".join(f"pin {pin} at {show_mv(mv)}" for pin, mv in sorted(raised.items()))
            wanted = " or ".join(pulse.name for pulse in self._limits.pulses)
            self._report("unknown pulse", given[0].pin, t, wanted, shown)
        self.unknown = unknown

    def _given(self, levels: Levels) -> tuple[PulseLimit, ...]:
        """The kinds of pulse that the control lines give now, whatever stands raised."""
        key = self._lines_of(levels)
        given = self._given_by.get(key)
        if given is None:
            if len(self._given_by) >= _MEMO_LIMIT:
                self._given_by.clear()
            given = self._given_by[key] = tuple(
                pulse for pulse, gates in self._kinds if all(_is_at(levels[pin], low=low) for pin, low in gates)
            )
        return given

    def _kind_of(self, given: tuple[PulseLimit, ...], raised: dict[int, int]) -> PulseLimit | None:
        for pulse in given:
            if raised.keys() == pulse.raised.keys():
                if all(low <= raised[pin] <= high for pin, (low, high) in pulse.raised.items()):
                    return pulse
        return None

    def _is_identify(self, raised: dict[int, int]) -> bool:
        pin, window = self._limits.identify_pin, self._limits.identify_mv
        if pin is None or window is None or raised.keys() != {pin}:
            return False
        return window[0] <= raised[pin] <= window[1]

    # ---- begin: set-up times, and what has to stand ----

    def _begin(
        self,
        t: int,
        kind: PulseLimit,
        levels: Levels,
        raised_t: dict[int, int],
        vcc_since: Mapping[tuple[int, int], int],
    ) -> None:
        self.began = t
        self.address_hold = self.data_hold = self.control_hold = FOREVER
        self.due = t + kind.max_ticks
        self._late = False
        since = {
            "address": self.address_t,
            "data": self.data_t,
            "control": self.control_t,
            "raised": max(raised_t[pin] for pin in kind.raised),
            "vcc": vcc_since.get(kind.vcc_mv, t),
        }
        for what, name, least in self._names[kind.name]:
            if what == "vcc" and kind.vcc_mv not in vcc_since:
                continue  # that VCC is elsewhere is reported below
            ticks = t - since[what]
            self.seen.add(name, ticks)
            if ticks < least:
                self._report(f"{what} setup", kind.pin, t, f"at least {show_ticks(least)}", show_ticks(ticks))
        vcc = levels[self._limits.vcc_pin]
        if vcc is None or not kind.vcc_mv[0] <= vcc <= kind.vcc_mv[1]:
            low, high = kind.vcc_mv
            self._report("pulse vcc", self._limits.vcc_pin, t, f"{show_mv(low)} to {show_mv(high)}", _shown(vcc))
        if kind.most:
            self._count(t, kind, levels)
        self._look_at_pins(t, kind, levels)

    def powered_down(self) -> None:
        """VCC is gone: pulses are counted anew."""
        self._counts.clear()

    def _count(self, t: int, kind: PulseLimit, levels: Levels) -> None:
        """Counts by address, whatever came between; pulses for words and for the whole chip end each other's count."""
        whole_chip = bool(kind.low_pins)
        if whole_chip is not self._whole_chip:
            self._counts.clear()
            self._whole_chip = whole_chip
        at = 0 if whole_chip else self._address.of(levels)
        counts = self._counts.setdefault(kind.name, {})
        number = counts[at] = counts.get(at, 0) + 1
        if number > kind.most:
            self._report("too many pulses", kind.pin, t, f"at most {kind.most} at one address", str(number))

    def _look_at_pins(self, t: int, kind: PulseLimit, levels: Levels) -> None:
        if not self._clean.issuperset(self._inputs_of(levels)):
            self._look_at_inputs(t, levels)
        for pin in kind.low_pins:
            level = levels[pin]
            if level is not None and level > VIL_MV:
                self._report("pulse address", pin, t, "low", show_mv(level))
        for pin in kind.high_pins:
            if not _is_at(levels[pin], low=False):
                self._report("pulse control", pin, t, "high", _shown(levels[pin]))
        if not self.driving:
            self._report("data not driven", self._limits.data_pins[0], t, "D driven by the rig", "D released")
        self._check_data(t, kind, levels)

    def _look_at_inputs(self, t: int, levels: Levels) -> None:
        """Some input has a level that was not seen before: is it neither low nor high?"""
        for pin in self._inputs:
            level = levels[pin]
            if level is None or VIL_MV < level < VIH_MV:
                wanted = f"up to {show_mv(VIL_MV)}, or {show_mv(VIH_MV)} and more"
                self._report("floating input", pin, t, wanted, _shown(level))
            else:
                self._clean.add(level)

    def _check_data(self, t: int, kind: PulseLimit, levels: Levels) -> None:
        if kind.data is None:
            return
        for bit, pin in enumerate(self._limits.data_pins):
            level = levels[pin]
            high = bool(kind.data >> bit & 1)
            if level is not None and (level >= VIH_MV) is not high:
                self._report("pulse data", pin, t, "high" if high else "low", show_mv(level))

    # ---- end: width, and hold times from here ----

    def _end(self, t: int, kind: PulseLimit) -> None:
        width = t - self.began
        self.due = FOREVER
        self.seen.add(f"{kind.name} pulse", width)
        if not (self._late or kind.min_ticks <= width <= kind.max_ticks):
            wanted = f"{show_ticks(kind.min_ticks)} to {show_ticks(kind.max_ticks)}"
            self._report("pulse width", kind.pin, t, wanted, show_ticks(width))
        self.ended = t
        self._last = kind
        self.address_hold = t + kind.hold_ticks.get("address", 0)
        self.data_hold = t + kind.hold_ticks.get("data", 0)
        self.control_hold = t + kind.hold_ticks.get("control", 0)

    def overdue(self, t: int) -> None:
        """The pulse that runs has passed `due`: reported now, for it may never end."""
        self.due = FOREVER
        self._late = True
        if self.kind is not None:
            got = f"still on after {show_ticks(t - self.began)}"
            self._report("pulse width", self.kind.pin, t, f"at most {show_ticks(self.kind.max_ticks)}", got)

    def control_moved(self, t: int, pin: int) -> None:
        """One of `controls` moved before `control_hold`."""
        self._moved(t, pin, "control")

    def address_moved(self, t: int, pin: int) -> None:
        """An address pin moved before `address_hold`."""
        self._moved(t, pin, "address")

    def data_moved(self, t: int, pin: int) -> None:
        """D moved, or was released, before `data_hold`."""
        self._moved(t, pin, "data")

    def _moved(self, t: int, pin: int, what: str) -> None:
        if self.kind is not None:
            self._report(f"{what} in pulse", pin, t, f"{what} stable", f"moved {show_ticks(t - self.began)} into it")
        elif self._last is not None:
            least = self._last.hold_ticks.get(what, 0)
            self._report(f"{what} hold", pin, t, f"at least {show_ticks(least)}", show_ticks(t - self.ended))

    def raised_fell(self, t: int, pin: int, began: int) -> None:
        """A raised level is gone at t, its fall having begun at `began`: inside a pulse, or too soon after it?"""
        if self.kind is not None:
            if pin in self.kind.raised:
                self._report("raised hold", pin, t, "the pulse's end first", "fell inside the pulse")
        elif self._last is not None and pin in self._last.raised:
            least = self._last.hold_ticks.get("raised", 0)
            if began < self.ended + least:
                got = show_ticks(max(0, began - self.ended))
                self._report("raised hold", pin, t, f"at least {show_ticks(least)}", got)


def _gates(pulse: PulseLimit) -> tuple[tuple[int, bool], ...]:
    """(pin, whether low) that make it a pulse at all; the pulse pin first."""
    others = (*((pin, True) for pin in pulse.only_low), *((pin, False) for pin in pulse.only_high))
    return ((pulse.pin, pulse.active_low), *others)


def _is_at(level: int | None, *, low: bool) -> bool:
    return level is not None and (level <= VIL_MV if low else level >= VIH_MV)


def _shown(level: int | None) -> str:
    return "nothing drives it" if level is None else show_mv(level)
