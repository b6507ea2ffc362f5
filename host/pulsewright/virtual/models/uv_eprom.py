"""An EPROM with a VPP pin of its own, programmed word by word and erased by light: what such parts have in common.

All numbers are those of a part's `Limits`, typed by hand from its data sheet. "Invented" marks what no sheet says and a
model must still do somehow.
"""

from __future__ import annotations

from dataclasses import dataclass
from operator import itemgetter

from pulsewright.units import show_ticks
from pulsewright.virtual.interface import Levels, Limits
from pulsewright.virtual.models.cells import CellChip
from pulsewright.virtual.pin_number import PinNumber

VIL, VIH = 800, 2_000  # TTL levels: common practice
HIGH = 5_000  # any level above VIH will do
POWERED = 3_000  # the part does nothing below: invented


@dataclass(frozen=True)
class UvPart:
    """A part by its pins and currents (microamperes); levels and times are in `limits`, its program pulse the first."""

    name: str
    limits: Limits
    size: int
    ce: int
    oe: int
    vpp: int
    id: tuple[int, int] | None  # None: no identify mode
    icc_program: int
    icc_read: int
    icc_standby: int
    ipp_pulse: int
    ipp_standing: int  # raised, no pulse
    ipp_rest: int  # VPP = VCC
    ia9: int = 0


class UvEprom(CellChip):
    """The model. Cells lose bits as the pulses at its pins have the time, the levels and the data to take them."""

    def __init__(self, part: UvPart) -> None:
        limits = part.limits
        pulse = self._pulse = limits.pulses[0]
        super().__init__(part.name, limits, part.size, part.id or (0xFF, 0xFF), pulse.min_ticks)
        self._part = part
        self._most = limits.maxima_mv[0]
        self._raisable = [(pin, limits.maxima_mv[pin]) for pin in limits.raised_pins]
        self._address = PinNumber(
            limits.address_pins, VIH, floating=True
        )  # what nothing drives reads as high: invented
        self._data = PinNumber(limits.data_pins, VIH, floating=False)  # and as low on D, so that it shows in the cell
        self._vpp_pulse, self._verify = pulse.raised[part.vpp], limits.standing[0]
        self._verify_pins = self._verify.output_pins or limits.enable_pins
        self._rest = limits.rest_mv[part.vpp]
        gates = (*((pin, True) for pin in pulse.only_low), *((pin, False) for pin in pulse.only_high))
        self._gates = ((pulse.pin, pulse.active_low), *gates)  # pins and whether they are low in a pulse
        controls = dict.fromkeys((part.ce, part.oe, part.vpp, limits.vcc_pin, *(pin for pin, _ in self._gates)))
        if part.id is not None and limits.identify_pin is not None:
            controls[limits.identify_pin] = None
        self._control_of = itemgetter(*controls)
        self._control: tuple[int | None, ...] = ()
        self._levels: list[int | None] = [None] * (self.pins + 1)  # raised levels as HIGH
        self._vcc = 0
        self._vpp = 0
        self._raised = False  # VPP
        self._a9_raised = False
        self._identifies = False
        self._right = False  # supplies are as a read wants them
        self._enabled = False
        self._ce_low = False
        self._access = limits.access_ticks
        self._valid_at = 0
        self._float_until = 0
        self._word = -1
        self._given = False  # pins and levels give a pulse
        self._spoilt = False  # ... in which a pin is not at its level
        self._pulse_from = 0
        self._pulse_at = 0

    def uv_erase(self) -> None:
        """Under the lamp, long enough: every cell erased."""
        self._blank()

    # ---- the pins; these run a million times a burn, so they look first at what usually did not change ----

    def pins_changed(self, t: int, levels: Levels) -> None:
        v = self._levels = list(levels)
        for pin, most in self._raisable:
            level = v[pin]
            if level is not None and level > self._most:
                if level > most:
                    self._destroy(pin, level)
                v[pin] = HIGH
        if not self._harmless.issuperset(v):
            self._look_at_levels(v)
        self._word = -1
        control = self._control_of(levels)
        if control == self._control:
            self._valid_at = max(self._valid_at, t + self._access)
            if self._given:
                self._moved_in_pulse(t)
            return
        self._control = control
        self._supplies(levels)
        self._outputs(t, levels)
        self._pulses(t, levels)

    def drive(self, t: int) -> tuple[int, int]:
        if self._enabled:
            word = self._word
            if word < 0:
                word = self._word = self._read()
            return 0xFF, word if self._right and t >= self._valid_at else word ^ 0xFF
        if t < self._float_until:
            return 0xFF, 0x5A  # going off: whatever; invented
        return 0, 0

    def draw_ua(self, t: int, pin: int) -> int:
        part = self._part
        if not self._vcc:
            return 0
        pulsed = self._raised and self._is_given(self._levels)  # a level that sagged is still drawn from
        if pin == self.limits.vcc_pin:
            if pulsed:
                return part.icc_program
            return part.icc_read if self._ce_low else part.icc_standby
        if pin == part.vpp:
            if self._raised:
                return part.ipp_pulse if pulsed else part.ipp_standing
            return part.ipp_rest if self._vpp else 0
        return part.ia9 if self._a9_raised and pin == self.limits.identify_pin else 0

    # ---- modes ----

    def _supplies(self, levels: Levels) -> None:
        """What VCC, VPP and A9 allow."""
        limits, part = self.limits, self._part
        vcc, vpp = levels[limits.vcc_pin] or 0, levels[part.vpp] or 0
        below, above = self._rest
        self._vcc, self._vpp, self._raised = vcc, vpp, vpp > vcc + above
        at_rest = -below <= vpp - vcc <= above
        verify = self._verify
        low, high = verify.raised[part.vpp]
        verifies = low <= vpp <= high and verify.vcc_mv[0] <= vcc <= verify.vcc_mv[1]
        self._a9_raised = self._identifies = False
        if part.id is not None and limits.identify_pin is not None and limits.identify_mv is not None:
            a9 = levels[limits.identify_pin] or 0
            self._a9_raised = a9 > self._most
            self._identifies = limits.identify_mv[0] <= a9 <= limits.identify_mv[1]
        self._right = at_rest or (verifies and not self._a9_raised)

    def _outputs(self, t: int, levels: Levels) -> None:
        ce = levels[self._part.ce]
        powered = self._vcc >= POWERED
        self._ce_low = powered and ce is not None and ce <= VIL
        enabled = powered
        for pin in self._verify_pins if self._raised else self.limits.enable_pins:
            level = levels[pin]
            if level is None or level > VIL:
                enabled = False
        self._access = (self._verify.access_ticks if self._raised else 0) or self.limits.access_ticks
        self._valid_at = max(self._valid_at, t + self._access)
        if self._enabled and not enabled:
            self._float_until = t + self.limits.float_ticks
        self._enabled = enabled

    def _is_given(self, levels: Levels) -> bool:
        for pin, low in self._gates:
            level = levels[pin]
            if level is None or (level > VIL if low else level < VIH):
                return False
        return True

    def _read(self) -> int:
        at = self._address.of(self._levels)
        if self._identifies:
            return self._id[at & 1]  # A0 alone selects: from memory
        return self._seen(at, self.cells[at], self._vcc)

    # ---- pulses ----

    def _pulses(self, t: int, levels: Levels) -> None:
        vcc, vpp, pulse = self._vcc, self._vpp, self._pulse
        stands = self._vpp_pulse[0] <= vpp <= self._vpp_pulse[1] and pulse.vcc_mv[0] <= vcc <= pulse.vcc_mv[1]
        given = stands and not self._a9_raised and self._is_given(levels)
        if given and self._given:
            self._moved_in_pulse(t)
        elif given:
            self._begin_pulse(t)
        elif self._given:
            self._end_pulse(t)
        self._given = given

    def _begin_pulse(self, t: int) -> None:
        self._pulse_from = t
        self._pulse_at = self._address.of(self._levels)
        self._spoilt = self._is_spoilt()

    def _is_spoilt(self) -> bool:
        return any((self._levels[pin] or 0) < VIH for pin in self._pulse.high_pins)

    def _moved_in_pulse(self, t: int) -> None:
        """Something moved inside a pulse: another address is another, shorter pulse on other cells."""
        self._spoilt = self._spoilt or self._is_spoilt()
        if self._address.of(self._levels) != self._pulse_at:
            self._stress("the address moved inside a program pulse")
            self._end_pulse(t)
            self._begin_pulse(t)

    def _end_pulse(self, t: int) -> None:
        width = t - self._pulse_from
        if width > self._pulse.max_ticks:
            self._stress(f"a program pulse longer than {show_ticks(self._pulse.max_ticks)}")
        if self._spoilt:
            self._stress("a program pulse with a control pin at the wrong level")
        else:
            self._pulsed(self._pulse_at, self._data.of(self._levels), width)
