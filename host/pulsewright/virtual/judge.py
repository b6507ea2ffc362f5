"""The waveform judge: watches every pin of a chip and reports whatever its data sheet forbids.

It knows only `Limits`, typed by hand from the data sheet, and sees only levels and times; how the rig came to them is
none of its business. A ramp is two calls: its begin, in which the pin is named with the level it still has, and its
end. Times are ticks of 62.5 ns, levels millivolts.
"""

from __future__ import annotations

from collections.abc import Sequence

from pulsewright.units import TICKS_PER_US, show_mv, show_ticks
from pulsewright.virtual.interface import Levels, Limits, PinHistory, Violation
from pulsewright.virtual.judge_pulse import LONG_AGO, VIL_MV, PulseWatch

ABOVE_VCC_MV = 300  # H11: no other pin stands more than this above VCC
POWERED_MV = 500  # below, a chip drives nothing
# every rule by the name a violation gives it
RULES = (
    *("absolute maximum", "lowest level", "above VCC", "supply order", "rise time", "raised window", "recovery"),
    *("unknown pulse", "pulse width", "pulse vcc", "pulse data", "pulse address", "data not driven", "floating input"),
    *("address setup", "data setup", "raised setup", "vcc setup", "address hold", "data hold", "raised hold"),
    *("address in pulse", "data in pulse", "access time", "float time", "identify level", "bus fight"),
    *("raised vcc", "too many pulses"),
)
KEPT = 200  # violations kept in full; all are counted
_ADDRESS, _DATA, _CONTROL = 1, 2, 4
_NO_LEVEL = 1 << 30


class Judge:
    """Watches one chip. `violations` keeps the first of them, `count` counts all, `pins` what each pin has seen.

    With `misplaced`, for a chip that sits turned or shifted, only maxima and lowest levels are judged: the pins do not
    get what the rig means for them, and the seating check is there to find that.
    """

    def __init__(self, limits: Limits, *, misplaced: bool = False) -> None:
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
        for pin in (*limits.enable_pins, *limits.raised_pins, limits.vcc_pin, *(pulse.pin for pulse in limits.pulses)):
            self._kind_of[pin] = _CONTROL
        if misplaced:
            self._kind_of = [0] * size
        windows = (limits.vcc_read_mv, *limits.vcc_steps_mv, *(pulse.vcc_mv for pulse in limits.pulses))
        self._windows = tuple(dict.fromkeys(windows))
        self._raised_windows = {pin: _windows_of(limits, pin) for pin in limits.raised_pins}
        self._raised_vcc = tuple(dict.fromkeys((limits.vcc_read_mv, *(pulse.vcc_mv for pulse in limits.pulses))))
        self._watch = PulseWatch(limits, self._report)
        self._access = limits.access_ticks
        self._vcc_pin = 0 if misplaced else limits.vcc_pin
        self._vcc_mv = 0
        self._vcc_window: tuple[int, int] | None = None
        self._vcc_t = LONG_AGO  # since when VCC stands in its window
        self._vcc_marker: int | None = None
        self._level: dict[int, int | None] = dict.fromkeys(limits.raised_pins, 0)  # at rest every line is low
        self._marker: dict[int, int] = {}
        self._raised: dict[int, int] = {}  # what stands above VCC + 0.3 V now
        self._raised_t: dict[int, int] = dict.fromkeys(limits.raised_pins, LONG_AGO)
        self._gone_t = LONG_AGO  # when the last raised level of all went
        self._recover_t = LONG_AGO  # when the last raised level went from an enable pin
        self._enabled = False
        self._off_t = LONG_AGO  # when the outputs were last switched off
        self._active_t = LONG_AGO  # when the first enable pin last went low
        self._active = False
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
        if driven and not (self._enabled or self._misplaced) and t >= self._off_t + self.limits.float_ticks:
            self._fight(t, f"both drove {len(driven)} pins with the outputs off")

    def sampled(self, t: int) -> None:
        if self._misplaced:
            return
        if self._enabled:
            if t < self._valid_t:
                early = f"{show_ticks(self._valid_t - t)} early"
                self._report("access time", self.limits.data_pins[0], t, "valid data", early)
            pin, window = self.limits.identify_pin, self.limits.identify_mv
            if self._raised and pin is not None and window is not None:
                level = self._raised.get(pin)
                if level is not None and not window[0] <= level <= window[1]:
                    self._report("identify level", pin, t, _span(window), show_mv(level))
        elif t < self._off_t + self.limits.float_ticks:
            wanted = f"at least {show_ticks(self.limits.float_ticks)} after the outputs went off"
            self._report("float time", self.limits.data_pins[0], t, wanted, show_ticks(t - self._off_t))

    def rig_drives(self, t: int, driving: bool) -> None:
        watch = self._watch
        if driving == watch.driving or self._misplaced:
            return
        watch.driving = driving
        watch.data_t = t
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
        self._enables(t, levels)
        watch, raised = self._watch, self._raised
        if raised or watch.kind is not None or watch.unknown:
            watch.update(t, levels, raised if self._vcc_mv >= POWERED_MV else {}, self._raised_t, self._vcc_t)

    def _vcc_edge(self, t: int, levels: Levels, changed: Sequence[int]) -> None:
        vcc = levels[self.limits.vcc_pin] or 0
        if vcc == self._vcc_mv:
            self._vcc_marker = t
            return
        began = t if self._vcc_marker is None else self._vcc_marker
        self._vcc_marker = None
        self._vcc_mv = vcc
        window = next((window for window in self._windows if window[0] <= vcc <= window[1]), None)
        if window != self._vcc_window:
            if self._vcc_window is not None and (self._raised or self._gone_t > began):
                pin = next(iter(self._raised), self.limits.vcc_pin)
                got = f"VCC went to {show_mv(vcc)}"
                self._report("supply order", pin, t, "raised levels off before VCC moves", got)
            self._vcc_window, self._vcc_t = window, t
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
        if before is None or self._window_of(pin, before) != self._window_of(pin, level):
            self._raised_t[pin] = t
        if pin in self.limits.enable_pins:
            self._verifying = True
        self._stands(t, pin, level, began)

    def _window_of(self, pin: int, level: int) -> tuple[int, int] | None:
        return next((window for window in self._raised_windows[pin] if window[0] <= level <= window[1]), None)

    def _stands(self, t: int, pin: int, level: int, began: int) -> None:
        """A raised level stands: has VCC been in a step of its own since before, and is it a level with a name?"""
        if self._vcc_window is None or self._vcc_t > began:
            self._report("supply order", pin, t, "VCC in its window first", f"VCC at {show_mv(self._vcc_mv)}")
        if self._window_of(pin, level) is None:
            wanted = " or ".join(_span(window) for window in self._raised_windows[pin])
            self._report("raised window", pin, t, wanted or "never raised", show_mv(level))
        elif self._vcc_window and not any(low <= self._vcc_mv <= high for low, high in self._raised_vcc):
            wanted = " or ".join(_span(window) for window in self._raised_vcc)
            self._report("raised vcc", pin, t, f"VCC at {wanted}", show_mv(self._vcc_mv))

    def _enables(self, t: int, levels: Levels) -> None:
        limits = self.limits
        enabled = self._vcc_mv >= POWERED_MV
        for pin in limits.enable_pins:
            level = levels[pin]
            if level is None or level > VIL_MV:
                enabled = False
        first = levels[limits.enable_pins[0]]
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
        self._valid_t = max(self._valid_t, t + self._access)
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


def _windows_of(limits: Limits, pin: int) -> tuple[tuple[int, int], ...]:
    """Every window in which a pin may stand raised."""
    windows = [pulse.raised[pin] for pulse in limits.pulses if pin in pulse.raised]
    if pin == limits.identify_pin and limits.identify_mv is not None:
        windows.append(limits.identify_mv)
    return tuple(dict.fromkeys(windows))


def _span(window: tuple[int, int]) -> str:
    return f"{show_mv(window[0])} to {show_mv(window[1])}"
