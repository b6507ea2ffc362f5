"""A sheet of plain numbers as a chip and what the judge watches at it; the other writer is sheet_definition.

Nothing here knows of definitions. Times of the sheet are nanoseconds, here ticks of 62.5 ns: what must last at least so
long is rounded up, what at most, down. The chips are of the plainest kind; what no sheet says is invented.
"""

from __future__ import annotations

from pulsewright.virtual.interface import Levels, Limits, PulseLimit, RaisedLimit
from pulsewright.virtual.models.cells import CellChip
from pulsewright.virtual.models.uv_eprom import UvEprom, UvPart
from pulsewright.virtual.pin_number import PinNumber
from tests.sequence.sheet import Sheet
from tests.sequence.sheet_bus import Bytes, Pages
from tests.sequence.sheet_ticks import TicksOf, window

VIL, VIH, HIGH, POWERED = 800, 2_000, 5_000, 3_000


def chip_of(sheet: Sheet) -> UvEprom | Shared | Pages | Bytes:
    """A fresh, erased chip."""
    if sheet.page:
        return Pages(sheet)
    if sheet.family == "bytes":
        return Bytes(sheet)
    return _separate(sheet) if sheet.vpp else Shared(sheet)


# ---- what all have --------------------------------------------------------------------------------------------------


def _maxima(sheet: Sheet, a9: int) -> dict[int, int]:
    maxima = {0: sheet.most["other"], sheet.package: sheet.most["VCC"]}
    if "VPP" in sheet.most:
        maxima[sheet.vpp or sheet.oe] = sheet.most["VPP"]
    if "A9" in sheet.most:
        maxima[a9] = sheet.most["A9"]
    return maxima


def _pulsed_limits(sheet: Sheet) -> Limits:
    times, a9, raised = TicksOf(sheet), sheet.address[9], sheet.vpp or sheet.oe
    own, low = bool(sheet.vpp), sheet.family != "own VPP, CE high"
    pulsed = sheet.other or sheet.ce
    setups = {"address": "address setup", "data": "data setup", "raised": "raised setup", "vcc": "supply setup"}
    holds = {"address": "address hold", "data": "data hold", "raised": "raised hold"}
    if own:
        setups["control"], holds["control"] = "control setup", "control hold"
    vcc = window(sheet, "VCC program")
    least, most = times.bound("pulse")
    pulses = [
        PulseLimit(
            name="program",
            pin=pulsed,
            active_low=low,
            raised={raised: window(sheet, "VPP program")},
            min_ticks=least,
            max_ticks=most,
            setup_ticks={what: times.least(name) for what, name in setups.items()},
            hold_ticks={what: times.least(name) for what, name in holds.items()},
            vcc_mv=vcc,
            most=sheet.tries + (sheet.family == "own VPP, blind pass"),
            high_pins=(sheet.oe,) if own else (),
            only_low=(sheet.ce,) if sheet.other else (),
        )
    ]
    if sheet.erase_tries:
        least, most = times.bound("erase pulse")
        pulses.append(
            PulseLimit(
                name="erase",
                pin=sheet.ce,
                active_low=True,
                raised={sheet.oe: window(sheet, "VPP erase"), a9: window(sheet, "A9 erase")},
                min_ticks=least,
                max_ticks=most,
                setup_ticks={what: times.least(name) for what, name in setups.items()},
                hold_ticks={what: times.least(name) for what, name in holds.items()},
                vcc_mv=vcc,
                data=0xFF,
                low_pins=tuple(pin for pin in sheet.address if pin != a9),
                most=sheet.erase_tries,
            )
        )
    verify = RaisedLimit(
        name="verify",
        raised={raised: window(sheet, "VPP program")},
        vcc_mv=vcc,
        output_pins=(sheet.ce, sheet.oe) if sheet.other or not low else (sheet.oe,),
        access_ticks=times.longest("verify access"),
        release_ticks=times.least("release to outputs"),
    )
    read = window(sheet, "VCC read")
    steps = [window(sheet, name) for name in sheet.levels if name.startswith("VCC")]
    return Limits(
        package=f"DIP-{sheet.package}",
        maxima_mv=_maxima(sheet, a9),
        minimum_mv=-500,
        vcc_pin=sheet.package,
        gnd_pins=(sheet.package // 2,),
        address_pins=sheet.address,
        data_pins=sheet.data,
        enable_pins=(sheet.ce, sheet.oe),
        raised_pins=(raised, *((a9,) if sheet.ids else ())),
        pulses=tuple(pulses),
        standing=(verify,) if own else (),
        rest_mv={sheet.vpp: (600, 300)} if own else {},
        access_ticks=times.longest("access"),
        verify_access_ticks=0 if own else times.longest("verify access"),
        float_ticks=times.longest("float"),
        rise_ticks=0,
        recovery_ticks=0 if own else times.least("recovery"),
        vcc_read_mv=read,
        vcc_steps_mv=tuple(steps),
        vcc_most_mv=max(most for _, most in steps),
        identify_mv=window(sheet, "A9 identify") if sheet.ids else None,
        identify_pin=a9 if sheet.ids else None,
    )


def _separate(sheet: Sheet) -> UvEprom:
    return UvEprom(
        UvPart(
            name="invented",
            limits=_pulsed_limits(sheet),
            size=sheet.words,
            ce=sheet.ce,
            oe=sheet.oe,
            vpp=sheet.vpp,
            id=sheet.ids,
            icc_program=sheet.currents["VCC program"],
            icc_read=sheet.currents["VCC"],
            icc_standby=min(1_000, sheet.currents["VCC"]),
            ipp_pulse=sheet.currents["VPP"],
            ipp_standing=sheet.currents["VPP"] // 10,
            ipp_rest=100,
            ia9=200,
        )
    )


class Shared(CellChip):
    """OE/VPP on one pin: program pulses, and where the sheet has one an erase of every cell at once."""

    def __init__(self, sheet: Sheet) -> None:
        limits = _pulsed_limits(sheet)
        super().__init__("invented", limits, sheet.words, sheet.ids or (0xFF, 0xFF), limits.pulses[0].min_ticks)
        self._sheet = sheet
        self._a9 = sheet.address[9]
        self._at = PinNumber(limits.address_pins, VIH, floating=True)
        self._on = PinNumber(limits.data_pins, VIH, floating=False)
        self._levels: list[int | None] = [None] * (self.pins + 1)
        self._enabled = False
        self._valid_at = self._float_until = self._pulse_from = 0
        self._kind = ""
        self._verifies = False  # something was raised since VCC came
        self.erase_pulses = 0

    def pins_changed(self, t: int, levels: Levels) -> None:
        before, self._levels = self._levels, list(levels)
        limits, sheet = self.limits, self._sheet
        for pin in range(1, self.pins + 1):
            level = levels[pin]
            if level is not None and level > limits.maxima_mv.get(pin, limits.maxima_mv[0]):
                self._destroy(pin, level)
        vcc = levels[sheet.package] or 0
        low = vcc >= POWERED and (levels[sheet.ce] or 0) <= VIL and levels[sheet.ce] is not None
        enabled = low and levels[sheet.oe] is not None and (levels[sheet.oe] or 0) <= VIL
        if enabled != self._enabled or any(levels[pin] != before[pin] for pin in (*sheet.address, sheet.ce, sheet.oe)):
            self._valid_at = max(self._valid_at, t + limits.access_ticks)
        self._verifies = vcc >= POWERED and (self._verifies or (levels[sheet.oe] or 0) > vcc + 300)
        if enabled and not self._enabled and (self._verifies or vcc < limits.vcc_read_mv[0]):
            self._valid_at = max(self._valid_at, t + limits.verify_access_ticks)
        if self._enabled and not enabled:
            self._float_until = t + limits.float_ticks
        self._enabled = enabled
        kind = self._given(vcc) if low else ""
        if kind != self._kind:
            if self._kind:
                self._end(t)
            self._kind, self._pulse_from = kind, t

    def _given(self, vcc: int) -> str:
        raised = {pin for pin in self.limits.raised_pins if (self._levels[pin] or 0) > vcc + 300}
        for pulse in self.limits.pulses:
            stands = pulse.vcc_mv[0] <= vcc <= pulse.vcc_mv[1] and raised == set(pulse.raised)
            if stands and all(lo <= (self._levels[pin] or 0) <= hi for pin, (lo, hi) in pulse.raised.items()):
                return pulse.name
        return ""

    def _end(self, t: int) -> None:
        levels = [HIGH if (level or 0) > HIGH else level for level in self._levels]
        width = t - self._pulse_from
        if self._kind == "program":
            self._pulsed(self._at.of(levels), self._on.of(levels), width)
            return
        self.erase_pulses += 1
        done = self.erase_pulses >= (self._slow_pulses if self._slow_percent else 1)
        if width >= self.limits.pulses[1].min_ticks and self._on.of(levels) == 0xFF and done:
            self._blank()

    def drive(self, t: int) -> tuple[int, int]:
        if not self._enabled:
            return (0xFF, 0x5A) if t < self._float_until else (0, 0)
        levels = [HIGH if (level or 0) > HIGH else level for level in self._levels]
        at, a9 = self._at.of(levels), self._levels[self._a9] or 0
        asked = self.limits.identify_mv is not None and self.limits.identify_mv[0] <= a9 <= self.limits.identify_mv[1]
        word = self._id[at & 1] if asked else self._seen(at, self.cells[at], self._levels[self._sheet.package] or 0)
        return 0xFF, word if t >= self._valid_at else word ^ 0xFF

    def draw_ua(self, t: int, pin: int) -> int:
        if not self._levels[self._sheet.package]:
            return 0
        if pin == self._sheet.package:
            return self._sheet.currents["VCC program" if self._kind else "VCC"]
        if pin in self.limits.raised_pins and (self._levels[pin] or 0) > self.limits.maxima_mv[0]:
            return 200 if pin == self._a9 else self._sheet.currents["VPP"]
        return 0
