"""Pulses, as the judge watches them: kind by the raised levels, width, set-up and hold, what stands meanwhile.

Times are ticks of 62.5 ns, levels millivolts.
"""

from __future__ import annotations

from collections.abc import Callable
from operator import itemgetter

from pulsewright.units import show_mv, show_ticks
from pulsewright.virtual.interface import Levels, Limits, PulseLimit

VIL_MV, VIH_MV = 800, 2000  # TTL input levels: common practice
LONG_AGO = -(1 << 62)
FOREVER = 1 << 62

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

    While a pulse runs, and for its hold time after, `address_hold` and `data_hold` lie in the future: whoever moves
    address or data then calls `address_moved` or `data_moved`.
    """

    def __init__(self, limits: Limits, report: Report) -> None:
        self._limits = limits
        self._report = report
        self._active = {pulse.pin: pulse.active_low for pulse in limits.pulses}
        self._address_of = itemgetter(*limits.address_pins)
        self._inputs_of = itemgetter(*limits.address_pins, *limits.enable_pins, *limits.data_pins)
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
        self._at: tuple[object, ...] | None = None  # kind and address of the last pulse since power-up
        self._pulses = 0  # so many, one after the other
        self.address_t = LONG_AGO
        self.data_t = LONG_AGO
        self.driving = True  # at rest the rig holds every line low, D too
        self.address_hold = LONG_AGO
        self.data_hold = LONG_AGO

    def update(self, t: int, levels: Levels, raised: dict[int, int], raised_t: dict[int, int], vcc_t: int) -> None:
        """The pulse pin or a raised level moved. `raised`: pin -> level of what stands above VCC + 0.3 V now."""
        active = bool(raised) and self._is_active(levels)
        kind = self._kind_of(raised) if active else None
        unknown = active and kind is None and not self._is_identify(raised)
        if kind is not self.kind:
            if self.kind is not None:
                self._end(t, self.kind)
            self.kind = kind
            if kind is not None:
                self._begin(t, kind, levels, raised_t, vcc_t)
        if unknown and not self.unknown:
            shown = ", ".join(f"pin {pin} at {show_mv(mv)}" for pin, mv in sorted(raised.items()))
            pin = next(iter(self._active), 0)
            self._report("unknown pulse", pin, t, " or ".join(pulse.name for pulse in self._limits.pulses), shown)
        self.unknown = unknown

    def _is_active(self, levels: Levels) -> bool:
        for pin, active_low in self._active.items():
            level = levels[pin]
            if level is not None and (level <= VIL_MV if active_low else level >= VIH_MV):
                return True
        return False

    def _kind_of(self, raised: dict[int, int]) -> PulseLimit | None:
        for pulse in self._limits.pulses:
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

    def _begin(self, t: int, kind: PulseLimit, levels: Levels, raised_t: dict[int, int], vcc_t: int) -> None:
        self.began = t
        self.address_hold = self.data_hold = FOREVER
        since = {
            "address": self.address_t,
            "data": self.data_t,
            "raised": max(raised_t[pin] for pin in kind.raised),
            "vcc": vcc_t,
        }
        for what, name, least in self._names[kind.name]:
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
        self._inputs(t, kind, levels)

    def powered_down(self) -> None:
        """VCC is gone: pulses are counted anew."""
        self._at = None

    def _count(self, t: int, kind: PulseLimit, levels: Levels) -> None:
        at = (kind.name,) if kind.low_pins else self._address_of(levels)
        self._pulses = self._pulses + 1 if at == self._at else 1
        self._at = at
        if self._pulses > kind.most:
            self._report("too many pulses", kind.pin, t, f"at most {kind.most} at one address", str(self._pulses))

    def _inputs(self, t: int, kind: PulseLimit, levels: Levels) -> None:
        if not self._clean.issuperset(self._inputs_of(levels)):
            self._look_at_inputs(t, levels)
        for pin in kind.low_pins:
            level = levels[pin]
            if level is not None and level > VIL_MV:
                self._report("pulse address", pin, t, "low", show_mv(level))
        if not self.driving:
            self._report("data not driven", self._limits.data_pins[0], t, "D driven by the rig", "D released")
        self._check_data(t, kind, levels)

    def _look_at_inputs(self, t: int, levels: Levels) -> None:
        """Some input has a level that was not seen before: is it neither low nor high?"""
        limits = self._limits
        for pin in (*limits.address_pins, *limits.enable_pins, *limits.data_pins):
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
        self.seen.add(f"{kind.name} pulse", width)
        if not kind.min_ticks <= width <= kind.max_ticks:
            wanted = f"{show_ticks(kind.min_ticks)} to {show_ticks(kind.max_ticks)}"
            self._report("pulse width", kind.pin, t, wanted, show_ticks(width))
        self.ended = t
        self._last = kind
        self.address_hold = t + kind.hold_ticks.get("address", 0)
        self.data_hold = t + kind.hold_ticks.get("data", 0)

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


def _shown(level: int | None) -> str:
    return "nothing drives it" if level is None else show_mv(level)
