"""Writes on the bus, as the judge watches them: width, set-up and hold, what stands meanwhile, when the next may come.

A write is CE and WE low while OE is high. Times are ticks of 62.5 ns, levels millivolts.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from operator import itemgetter

from pulsewright.units import show_mv, show_ticks
from pulsewright.virtual.interface import BusLimit, Levels, Limits
from pulsewright.virtual.judge_pulse import FOREVER, LONG_AGO, VIH_MV, VIL_MV, PulseWatch, Report
from pulsewright.virtual.pin_number import PinNumber

RULES = (
    *("power-up", "address setup", "control setup", "write high", "command gap", "load gap", "write while busy"),
    *("ready time", "address hold", "data hold", "control hold", "control in pulse", "pulse control", "write width"),
    *("data setup", "data valid", "data not driven", "floating input"),
)
POWERED_MV = 500  # below, there is no write


class BusWatch:
    """Follows CE, OE, WE and VCC; `watch` knows when address and D last moved, and who drives D.

    `busy(t)`: whether a write cycle runs in the chip at t, which no pin tells in time.
    """

    def __init__(
        self, limits: Limits, bus: BusLimit, watch: PulseWatch, report: Report, busy: Callable[[int], bool] | None
    ) -> None:
        self._limits = limits
        self._bus = bus
        self._watch = watch
        self._report = report
        self._busy = busy
        self._lines_of = itemgetter(bus.ce, bus.oe, bus.we, limits.vcc_pin)
        self._lines: tuple[int | None, ...] = ()
        self._address_pins, self._data_pins = frozenset(limits.address_pins), frozenset(limits.data_pins)
        self._address = PinNumber(limits.address_pins, VIH_MV, floating=True)
        self._data = PinNumber(limits.data_pins, VIH_MV, floating=False)
        self._addresses_of, self._words_of = itemgetter(*limits.address_pins), itemgetter(*limits.data_pins)
        self._clean: set[int | None] = set()  # levels that are low or high
        self._setup = {what: max(1, least) for what, least in bus.setup_ticks.items()}  # 0: still not with the edge
        self._longest = max((len(command) for command in bus.commands), default=0)
        self._vcc_t = FOREVER  # since when VCC stands in its window
        self._oe_high = False
        self._oe_t = LONG_AGO
        self._reading = False
        self._writing = False
        self._at = 0
        self._due = FOREVER  # the write that runs is too long from here
        self._address_hold = self._data_hold = self._oe_hold = LONG_AGO
        self._forget()

    def _forget(self) -> None:
        """No write has been, since VCC came."""
        self._began = self._ended = LONG_AGO
        self._looked = False  # D has been read since the last write
        self._done_t = LONG_AGO  # the first look since then at which the chip was not busy
        self._last: list[tuple[int, int]] = []
        self._after_command = False

    # ---- what the judge tells; a group of edges each ----

    def edges(self, t: int, levels: Levels, changed: Sequence[int]) -> None:
        """As `Watcher.edges`."""
        if t > self._due:
            self._overdue(t)
        if t < self._address_hold:
            self._held(t, changed, self._address_pins, "address", t - self._began)
        if t < self._data_hold:
            self._held(t, changed, self._data_pins, "data", t - self._ended)
        lines = self._lines_of(levels)
        if lines != self._lines:
            self._lines = lines
            self._control(t, levels, *lines)

    def sampled(self, t: int) -> None:
        """As `Watcher.sampled`."""
        if t > self._due:
            self._overdue(t)
        if not self._reading:
            return
        least = self._bus.power_up_read_ticks
        if least and self._vcc_t <= t < self._vcc_t + least:
            wanted = f"the first read at least {show_ticks(least)} after VCC stands"
            self._report("power-up", self._limits.vcc_pin, t, wanted, show_ticks(t - self._vcc_t))
        self._looked = True
        if self._is_busy(t):
            self._done_t = LONG_AGO
        elif self._done_t == LONG_AGO:
            self._done_t = t

    # ---- control lines ----

    def _control(self, t: int, levels: Levels, ce: int | None, oe: int | None, we: int | None, vcc: int | None) -> None:
        low, high = self._limits.vcc_read_mv
        if vcc is None or not low <= vcc <= high:
            self._vcc_t = FOREVER
        elif self._vcc_t == FOREVER:
            self._vcc_t = t
        powered = vcc is not None and vcc >= POWERED_MV
        if not powered:
            self._forget()
        oe_high = oe is not None and oe >= VIH_MV
        selected = powered and ce is not None and ce <= VIL_MV
        strobed = selected and we is not None and we <= VIL_MV
        self._reading = selected and not strobed and oe is not None and oe <= VIL_MV
        if oe_high is not self._oe_high:
            self._oe_moved(t, oe_high, powered)
        writing = strobed and oe_high
        if writing and not self._writing:
            self._begin(t, levels)
        elif self._writing and not writing:
            self._end(t, levels, whole=powered and oe_high)
        elif strobed and not writing and self._watch.driving and self._vcc_t <= t:
            self._report("pulse control", self._bus.oe, t, "OE high", _shown(oe))
        self._writing = writing

    def _oe_moved(self, t: int, high: bool, powered: bool) -> None:
        self._oe_high = high
        self._oe_t = t
        if high or not powered:
            return
        if self._writing:
            self._report("control in pulse", self._bus.oe, t, "OE high", f"low {show_ticks(t - self._began)} into it")
        elif t < self._oe_hold:
            wanted = f"OE high at least {show_ticks(self._bus.hold_ticks['oe'])} after the write"
            self._report("control hold", self._bus.oe, t, wanted, show_ticks(t - self._ended))

    def _held(self, t: int, changed: Sequence[int], pins: frozenset[int], what: str, got: int) -> None:
        for pin in changed:
            if pin in pins:
                wanted = f"at least {show_ticks(self._bus.hold_ticks[what])}"
                self._report(f"{what} hold", pin, t, wanted, show_ticks(got))
                return

    # ---- the fall: may a write begin now, and does its address stand ----

    def _begin(self, t: int, levels: Levels) -> None:
        bus, seen = self._bus, self._watch.seen
        if t < self._vcc_t + bus.power_up_ticks:
            wanted = f"VCC in its window for {show_ticks(bus.power_up_ticks)}"
            got = show_ticks(t - self._vcc_t) if self._vcc_t <= t else _shown(levels[self._limits.vcc_pin])
            self._report("power-up", self._limits.vcc_pin, t, wanted, got)
        for what, name, since in (
            ("address", "address setup", self._watch.address_t),
            ("oe", "control setup", self._oe_t),
        ):
            if since > LONG_AGO:
                seen.add(f"write {what} setup", t - since)
            if t - since < self._setup[what]:
                pin = bus.oe if what == "oe" else self._limits.address_pins[0]
                self._report(name, pin, t, f"at least {show_ticks(self._setup[what])}", show_ticks(t - since))
        if not self._clean.issuperset(self._addresses_of(levels)):
            self._look_at(t, levels, self._limits.address_pins)
        if self._ended > LONG_AGO:
            self._since_last(t)
        self._at = self._address.of(levels)
        self._began = t
        self._address_hold = t + bus.hold_ticks["address"]
        self._due = t + bus.width_ticks[1] if bus.width_ticks[1] else FOREVER
        self._looked = False
        self._done_t = LONG_AGO

    def _since_last(self, t: int) -> None:
        bus = self._bus
        high, cycle = t - self._ended, t - self._began
        self._watch.seen.add("write high", high)
        if high < bus.high_ticks:
            self._report("write high", bus.we, t, f"at least {show_ticks(bus.high_ticks)}", show_ticks(high))
        if self._after_command and high < bus.command_ticks:
            wanted = f"at least {show_ticks(bus.command_ticks)} after a command"
            self._report("command gap", bus.we, t, wanted, show_ticks(high))
        least, most = bus.load_ticks
        if self._looked:
            self._since_done(t)
        elif most and most < cycle and high < bus.busy_ticks:
            wanted = f"at most {show_ticks(most)} from load to load"
            self._report("load gap", bus.we, t, wanted, show_ticks(cycle))
            return
        elif cycle < least:
            wanted = f"at least {show_ticks(least)} from load to load"
            self._report("load gap", bus.we, t, wanted, show_ticks(cycle))
        if self._is_busy(t):
            self._report("write while busy", bus.we, t, "the chip's write cycle over", "it runs")

    def _since_done(self, t: int) -> None:
        if self._done_t > LONG_AGO and t - self._done_t < self._bus.ready_ticks:
            wanted = f"at least {show_ticks(self._bus.ready_ticks)} after the poll"
            self._report("ready time", self._bus.we, t, wanted, show_ticks(t - self._done_t))

    # ---- the rise: width, and does the data stand ----

    def _end(self, t: int, levels: Levels, *, whole: bool) -> None:
        """`whole`: it was ended by CE or WE, not cut by OE or by VCC."""
        bus, watch = self._bus, self._watch
        self._due = FOREVER  # a write that was too long has been reported
        if not whole:
            return
        width = t - self._began
        watch.seen.add("write pulse", width)
        if width < bus.width_ticks[0]:
            wanted = f"at least {show_ticks(bus.width_ticks[0])}"
            self._report("write width", bus.we, t, wanted, show_ticks(width))
        stood = t - watch.data_t
        if watch.data_t > LONG_AGO:
            watch.seen.add("write data setup", stood)
        if stood < self._setup["data"]:
            wanted = f"at least {show_ticks(self._setup['data'])}"
            self._report("data setup", self._limits.data_pins[0], t, wanted, show_ticks(stood))
        if bus.valid_ticks and watch.data_t - self._began > bus.valid_ticks:
            wanted = f"valid at most {show_ticks(bus.valid_ticks)} after the fall"
            self._report("data valid", self._limits.data_pins[0], t, wanted, show_ticks(watch.data_t - self._began))
        if not watch.driving:
            self._report("data not driven", self._limits.data_pins[0], t, "D driven by the rig", "D released")
        elif not self._clean.issuperset(self._words_of(levels)):
            self._look_at(t, levels, self._limits.data_pins)
        self._ended = t
        self._data_hold = t + bus.hold_ticks["data"]
        self._oe_hold = t + bus.hold_ticks["oe"]
        if self._longest:
            self._last = [*self._last[1 - self._longest :], (self._at, self._data.of(levels))]
            self._after_command = any(tuple(self._last[-len(command) :]) == command for command in bus.commands)

    def _look_at(self, t: int, levels: Levels, pins: Sequence[int]) -> None:
        """Some level was not seen before: is it neither low nor high?"""
        for pin in pins:
            level = levels[pin]
            if level is None or VIL_MV < level < VIH_MV:
                wanted = f"up to {show_mv(VIL_MV)}, or {show_mv(VIH_MV)} and more"
                self._report("floating input", pin, t, wanted, _shown(level))
            else:
                self._clean.add(level)

    def _overdue(self, t: int) -> None:
        """The write that runs has passed its longest width: reported now, for it may never end."""
        self._due = FOREVER
        got = f"still on after {show_ticks(t - self._began)}"
        self._report("write width", self._bus.we, t, f"at most {show_ticks(self._bus.width_ticks[1])}", got)

    def _is_busy(self, t: int) -> bool:
        return self._busy is not None and self._busy(t)


def _shown(level: int | None) -> str:
    return "nothing drives it" if level is None else show_mv(level)
