"""The waveform judge: watches every pin of a chip and reports whatever its data sheet forbids.

It knows only `Limits`, typed by hand from the data sheet, and sees only levels and times; how the rig came to them is
none of its business. A ramp is two calls: its begin, in which the pin is named with the level it still has, and its
end. Times are ticks of 62.5 ns, levels millivolts.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from pulsewright.units import TICKS_PER_US, show_mv, show_ticks
from pulsewright.virtual.interface import Levels, Limits, PinHistory, RaisedLimit, Violation
from pulsewright.virtual.judge_bus import BusWatch
from pulsewright.virtual.judge_pulse import LONG_AGO, VIL_MV, PulseWatch
from pulsewright.virtual.judge_raised import RaisedTable, spans, within

ABOVE_VCC_MV = 300  # H11: no other pin stands more than this above VCC
POWERED_MV = 500  # below, a chip drives nothing
# every rule by the name a violation gives it; those of writes on the bus are in judge_bus
RULES = (
    *("absolute maximum", "lowest level", "above VCC", "supply order", "rise time", "raised window", "recovery"),
    *("unknown pulse", "pulse width", "pulse vcc", "pulse data", "pulse address", "data not driven", "floating input"),
    *("address setup", "data setup", "raised setup", "vcc setup", "address hold", "data hold", "raised hold"),
    *("address in pulse", "data in pulse", "access time", "float time", "identify level", "bus fight"),
    *("raised vcc", "too many pulses", "pulse control", "control setup", "control hold", "control in pulse"),
    *("vcc window", "supply at rest", "raised read", "data release"),
)
KEPT = 200  # violations kept in full; all are counted
_ADDRESS, _DATA, _CONTROL = 1, 2, 4
_NO_LEVEL = 1 << 30


class Judge:
    """Watches one chip. `violations` keeps the first of them, `count` counts all, `pins` what each pin has seen.

    With `misplaced`, for a chip that sits turned or shifted, only maxima and lowest levels are judged: the pins do not
    get what the rig means for them, and the seating check is there to find that. `busy(t)` tells of a part that is
    written on the bus whether a write cycle runs in it, which no pin tells in time.
    """

    def __init__(self, limits: Limits, *, misplaced: bool = False, busy: Callable[[int], bool] | None = None) -> None:
        self.limits = limits
        self.violations: list[Violation] = []
        self.count = 0
        self._misplaced = misplaced
        size = 1 + int(limits.package.rpartition("-")[2])
        self._most = [limits.maxima_mv.get(pin, limits.maxima_mv[0]) for pin in range(size)]
        self._seen_max, self._seen_min = [0] * size, [0] * size
        self._ceiling = [_NO_LEVEL] * size  # VCC + 0.3 V for those that may not be above (H11)
        self._free = {0, limits.vcc_pin, *limits.raised_pins}
        self._hi, self._lo = [0] * size, [0] * size  # inside this band there is nothing to note
        self._kind_of = [0] * size
        for pin in limits.address_pins:
            self._kind_of[pin] = _ADDRESS
        for pin in limits.data_pins:
            self._kind_of[pin] = _DATA
        self._watch = PulseWatch(limits, self._report)
        self._bus = (
            None if misplaced or limits.bus is None else BusWatch(limits, limits.bus, self._watch, self._report, busy)
        )
        pulsed = (pulse.pin for pulse in limits.pulses)
        self._controls = self._watch.controls
        for pin in (*limits.enable_pins, *limits.raised_pins, limits.vcc_pin, *pulsed, *self._controls):
            self._kind_of[pin] = _CONTROL
        if misplaced:
            self._kind_of = [0] * size
        raising = (*(pulse.vcc_mv for pulse in limits.pulses), *(row.vcc_mv for row in limits.standing))
        self._windows = tuple(dict.fromkeys((limits.vcc_read_mv, *limits.vcc_steps_mv, *raising)))
        self._table = RaisedTable(limits)
        self._standing: RaisedLimit | None = None  # the row under which D may be read, with what is raised now
        self._outputs = limits.enable_pins  # all low: outputs on, with what is raised now
        self._rest = tuple(limits.rest_mv.items())
        self._released_t = LONG_AGO  # when the rig last let go of D
        self._access = limits.access_ticks
        self._vcc_pin = 0 if misplaced else limits.vcc_pin
        self._vcc_mv = 0
        self._vcc_since: dict[tuple[int, int], int] = {}  # windows in which VCC stands, and since when
        self._vcc_marker: int | None = None
        self._level: dict[int, int | None] = dict.fromkeys(limits.raised_pins, 0)  # at rest every line is low
        self._marker: dict[int, int] = {}
        self._raised: dict[int, int] = {}  # what stands above VCC + 0.3 V now
        self._raised_t: dict[int, int] = dict.fromkeys(limits.raised_pins, LONG_AGO)
        self._gone_t = LONG_AGO  # when the last raised level of all went
        self._recover_t = LONG_AGO  # when the last raised level went from an enable pin
        self._enabled = self._active = False  # all enable pins low, and the first
        self._off_t = LONG_AGO  # when the outputs were last switched off
        self._active_t = LONG_AGO  # when the first enable pin last went low
        self._valid_t = LONG_AGO  # when D is valid
        self._verifying = False
        if not misplaced:
            self._set_ceilings()

    @property
    def pins(self) -> dict[int, PinHistory]:
        """Highest and lowest level of each pin that ever left 0 V."""
        return {
            pin: PinHistory(self._seen_max[pin], self._seen_min[pin])
            for pin in range(1, len(self._most))
            if self._seen_max[pin] or self._seen_min[pin]
        }

    def seen(self) -> dict[str, tuple[int, int, int]]:
        """What was measured, to hold against the data sheet: (least, most, count) in ticks.

        Names: "program pulse", "program address setup" and so on for each kind of pulse; "rise" of raised pins;
        "recovery" from a raised level gone from an enable pin to the next enable.
        """
        return self._watch.seen.table()

    # ---- what the socket tells; each of these runs a million times a burn ----

    def edges(self, t: int, levels: Levels, changed: Sequence[int], driven: Sequence[int] | None = None) -> None:
        if self._vcc_pin in changed:
            self._vcc_edge(t, levels, changed)
        lo, hi, kind_of = self._lo, self._hi, self._kind_of
        kinds = 0
        for pin in changed:
            level = levels[pin]
            if level is not None and not lo[pin] <= level <= hi[pin]:
                self._beyond(t, pin, level)
            kinds |= kind_of[pin]
        watch = self._watch
        if kinds & _ADDRESS:
            watch.address_t = t
            self._valid_t = max(self._valid_t, t + self._access)
            if t < watch.address_hold:
                watch.address_moved(t, next(pin for pin in changed if kind_of[pin] == _ADDRESS))
        if kinds & _DATA:
            watch.data_t = t
            if t < watch.data_hold:
                watch.data_moved(t, next(pin for pin in changed if kind_of[pin] == _DATA))
        if kinds & _CONTROL:
            self._control(t, levels, changed)
        if t > watch.due:
            watch.overdue(t)
        if self._bus is not None:
            self._bus.edges(t, levels, changed)
        if driven and not (self._enabled or self._misplaced) and t >= self._off_t + self.limits.float_ticks:
            self._fight(t, f"both drove {len(driven)} pins with the outputs off")

    def sampled(self, t: int) -> None:
        if self._misplaced:
            return
        if self._enabled:
            if t < self._valid_t:
                early = f"{show_ticks(self._valid_t - t)} early"
                self._report("access time", self.limits.data_pins[0], t, "valid data", early)
            if self._raised:
                self._raised_read(t)
            if self._rest and self._standing is None and self._vcc_since:
                self._supplies_at_rest(t)
        elif t < self._off_t + self.limits.float_ticks:
            wanted = f"at least {show_ticks(self.limits.float_ticks)} after the outputs went off"
            self._report("float time", self.limits.data_pins[0], t, wanted, show_ticks(t - self._off_t))
        if t > self._watch.due:
            self._watch.overdue(t)
        if self._bus is not None:
            self._bus.sampled(t)

    def _raised_read(self, t: int) -> None:
        """D is read with something raised: as the identify mode has it, or as some row has it?"""
        pin, window = self.limits.identify_pin, self.limits.identify_mv
        level = None if pin is None else self._raised.get(pin)
        if pin is not None and level is not None and window is not None and not within(level, window):
            self._report("identify level", pin, t, spans((window,)), show_mv(level))
        elif self._standing is None and self._raised.keys() != {pin}:
            wanted = " or ".join(limit.name for limit in self.limits.standing) or "nothing raised"
            shown = ", ".join(f"pin {pin} at {show_mv(mv)}" for pin, mv in sorted(self._raised.items()))
            got = f"{shown}, VCC at {show_mv(self._vcc_mv)}"
            self._report("raised read", next(iter(self._raised)), t, wanted, got)

    def _supplies_at_rest(self, t: int) -> None:
        """D is read: do the pins that want about VCC then have it?"""
        for pin, (below, above) in self._rest:
            level = self._level[pin]
            if pin not in self._raised and not (level is not None and -below <= level - self._vcc_mv <= above):
                wanted = spans(((self._vcc_mv - below, self._vcc_mv + above),))
                self._report("supply at rest", pin, t, wanted, "nothing" if level is None else show_mv(level))

    def rig_drives(self, t: int, driving: bool) -> None:
        watch = self._watch
        if driving == watch.driving or self._misplaced:
            return
        watch.driving = driving
        watch.data_t = t
        if not driving:
            self._released_t = t
        if t < watch.data_hold:
            watch.data_moved(t, self.limits.data_pins[0])
        if driving:
            if self._enabled:
                self._fight(t, "the rig began to drive D while the chip's outputs were on")
            elif t < self._off_t + self.limits.float_ticks:
                self._fight(t, f"the rig began to drive D {show_ticks(t - self._off_t)} after the outputs went off")

    # ---- levels ----

    def _beyond(self, t: int, pin: int, level: int) -> None:
        """A level outside the band of what is known to be harmless: note it, and report what is wrong with it."""
        self._seen_max[pin] = max(self._seen_max[pin], level)
        self._seen_min[pin] = min(self._seen_min[pin], level)
        self._set_band(pin)
        if level > self._most[pin]:
            self._report("absolute maximum", pin, t, f"at most {show_mv(self._most[pin])}", show_mv(level))
        elif level > self._ceiling[pin]:
            self._report("above VCC", pin, t, f"at most VCC + 0.3 V, {show_mv(self._ceiling[pin])}", show_mv(level))
        if level < self.limits.minimum_mv:
            self._report("lowest level", pin, t, f"at least {show_mv(self.limits.minimum_mv)}", show_mv(level))

    def _set_band(self, pin: int) -> None:
        self._hi[pin] = min(self._seen_max[pin], self._most[pin], self._ceiling[pin])
        self._lo[pin] = max(self._seen_min[pin], self.limits.minimum_mv)

    def _set_ceilings(self) -> None:
        for pin in range(1, len(self._ceiling)):
            if pin not in self._free:
                self._ceiling[pin] = self._vcc_mv + ABOVE_VCC_MV
                self._set_band(pin)

    # ---- supplies, raised levels, enables ----

    def _control(self, t: int, levels: Levels, changed: Sequence[int]) -> None:
        for pin in changed:
            if pin in self._level:
                self._raised_edge(t, pin, levels[pin])
            elif pin in self._controls:
                self._watch.control_t = t
                if t < self._watch.control_hold:
                    self._watch.control_moved(t, pin)
        if self.limits.standing:
            self._standing, self._outputs = self._table.standing(self._raised, self._vcc_mv)
        self._enables(t, levels)
        watch, raised = self._watch, self._raised
        if raised or watch.kind is not None or watch.unknown:
            watch.update(t, levels, raised if self._vcc_mv >= POWERED_MV else {}, self._raised_t, self._vcc_since)

    def _vcc_edge(self, t: int, levels: Levels, changed: Sequence[int]) -> None:
        vcc = levels[self.limits.vcc_pin] or 0
        if vcc == self._vcc_mv:
            self._vcc_marker = t
            return
        began = t if self._vcc_marker is None else self._vcc_marker
        self._vcc_marker = None
        self._vcc_mv = vcc
        since = self._vcc_since
        self._vcc_since = {window: since.get(window, t) for window in self._windows if within(vcc, window)}
        if since and not since.keys() & self._vcc_since.keys() and (self._raised or self._gone_t > began):
            pin = next(iter(self._raised), self.limits.vcc_pin)
            got = f"VCC went to {show_mv(vcc)}"
            self._report("supply order", pin, t, "raised levels off before VCC moves", got)
        if 0 < self.limits.vcc_most_mv < vcc:
            wanted = f"at most {show_mv(self.limits.vcc_most_mv)}"
            self._report("vcc window", self.limits.vcc_pin, t, wanted, show_mv(vcc))
        if vcc < POWERED_MV:
            self._verifying = False
            self._watch.powered_down()
        self._set_ceilings()
        for pin in range(1, len(levels)):
            level = levels[pin]
            if level is not None and not self._lo[pin] <= level <= self._hi[pin]:
                self._beyond(t, pin, level)
        for pin, level in self._level.items():
            if pin in changed and levels[pin] != level:
                continue  # moves with VCC: an edge of its own
            if level is None or level <= vcc + ABOVE_VCC_MV:
                self._raised.pop(pin, None)
            elif pin not in self._raised:
                self._raised[pin] = level
                self._raised_t[pin] = t
                self._stands(t, pin, level, t)

    def _raised_edge(self, t: int, pin: int, level: int | None) -> None:
        """An edge at a pin that may be raised; what stands above VCC + 0.3 V counts as raised."""
        old, was = self._level[pin], pin in self._raised
        began = t
        if level == old:
            self._marker[pin] = t  # a ramp begins
        else:
            began = self._marker.pop(pin, t)
            self._level[pin] = level
        above = level is not None and level > self._vcc_mv + ABOVE_VCC_MV
        if level is not None and above:
            if level != old:
                self._rose(t, pin, level, began)
        elif was:
            del self._raised[pin]
            self._gone_t = t
            if pin in self.limits.enable_pins:
                self._recover_t = t
            self._watch.raised_fell(t, pin, began)
        if pin in self.limits.address_pins and not (was and above):
            self._watch.address_t = t
            self._valid_t = max(self._valid_t, t + self._access)
            if began < self._watch.address_hold:
                self._watch.address_moved(t, pin)

    def _rose(self, t: int, pin: int, level: int, began: int) -> None:
        before = self._raised.get(pin)
        self._raised[pin] = level
        if before is None:
            self._watch.seen.add("rise", t - began)
            if t - began < self.limits.rise_ticks:
                wanted = f"at least {show_ticks(self.limits.rise_ticks)}"
                self._report("rise time", pin, t, wanted, show_ticks(t - began))
        if before is None or self._table.window_of(pin, before) != self._table.window_of(pin, level):
            self._raised_t[pin] = t
        if pin in self.limits.enable_pins:
            self._verifying = True
        self._stands(t, pin, level, began)

    def _stands(self, t: int, pin: int, level: int, began: int) -> None:
        """A raised level stands: has VCC been in a step of its own since before, and is it a level with a name?"""
        allowed, standing = self._table.vcc_for(pin, level), self._vcc_since
        fitting = [standing[window] for window in allowed if window in standing]
        since = fitting or list(standing.values())
        if not since or min(since) > began:
            self._report("supply order", pin, t, "VCC in its window first", f"VCC at {show_mv(self._vcc_mv)}")
        if not allowed:
            self._report("raised window", pin, t, self._table.wanted(pin), show_mv(level))
        elif since and not fitting:
            self._report("raised vcc", pin, t, f"VCC at {spans(allowed)}", show_mv(self._vcc_mv))

    def _enables(self, t: int, levels: Levels) -> None:
        limits = self.limits
        enabled = self._vcc_mv >= POWERED_MV
        for pin in self._outputs:
            level = levels[pin]
            if level is None or level > VIL_MV:
                enabled = False
        first = levels[self._outputs[0]]
        active = first is not None and first <= VIL_MV
        if active and not self._active:
            self._active_t = t
        self._active = active
        if enabled == self._enabled:
            return
        self._enabled = enabled
        if not enabled:
            self._off_t = t
            return
        standing = self._standing
        self._valid_t = max(self._valid_t, t + ((standing.access_ticks if standing else 0) or self._access))
        if standing and t - self._released_t < standing.release_ticks:
            wanted = f"outputs on at least {show_ticks(standing.release_ticks)} after D was let go"
            self._report("data release", self._outputs[0], t, wanted, show_ticks(t - self._released_t))
        if self._verifying or self._vcc_mv < limits.vcc_read_mv[0]:
            self._valid_t = max(self._valid_t, self._active_t + limits.verify_access_ticks)
        if self._watch.driving:
            self._fight(t, "the chip's outputs went on while the rig drove D")
        if self._recover_t > LONG_AGO:
            self._recovered(t, t - self._recover_t)

    def _recovered(self, t: int, ticks: int) -> None:
        self._recover_t = LONG_AGO
        self._watch.seen.add("recovery", ticks)
        if ticks < self.limits.recovery_ticks:
            wanted = f"at least {show_ticks(self.limits.recovery_ticks)} after the raised level"
            self._report("recovery", self.limits.enable_pins[0], t, wanted, show_ticks(ticks))

    def _report(self, rule: str, pin: int, t: int, wanted: str, got: str) -> None:
        self.count += 1
        if len(self.violations) < KEPT:
            self.violations.append(Violation(rule, pin, t // TICKS_PER_US, wanted, got))

    def _fight(self, t: int, what: str) -> None:
        self._report("bus fight", self.limits.data_pins[0], t, "one of rig and chip drives D", what)
