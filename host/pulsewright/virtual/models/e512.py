"""A 27E512-type chip: 64K x 8, programmed at 12 V, erased at 14 V on OE/VPP and A9.

Pins, levels, times and currents stand in `e512_limits`, with the source of each. "Invented" marks what no sheet says
and a model must still do somehow.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pulsewright.virtual.interface import Levels
from pulsewright.virtual.models.cells import CellChip
from pulsewright.virtual.models.e512_limits import (
    A9,
    ACCESS,
    CE,
    ERASE_PULSE,
    FLOAT,
    HIGH,
    IA9,
    ICC_ACTIVE,
    ICC_STANDBY,
    ID,
    IPP_PULSE,
    IPP_STANDING,
    LIMITS,
    LOW_VCC,
    MOST,
    MOST_RAISED,
    NOT_A9,
    OE,
    POWERED,
    PROGRAM_PULSE,
    VCC,
    VCC_5V,
    VERIFY_ACCESS,
    VHH,
    VIH,
    VIL,
    VPE,
    VPP_PROGRAM,
    A,
    D,
)

_NONE, _PROGRAM, _ERASE = 0, 1, 2


class E512(CellChip):
    """The model. Cells change as the pulses at its pins have the time, the levels and the data to change them."""

    def __init__(self) -> None:
        super().__init__("27e512", LIMITS, 65_536, ID, PROGRAM_PULSE[0])
        self.erase_pulses = 0
        self._erased_ticks = 0  # at the erase levels since the last program pulse
        # Any, not int | None: comparisons with None are caught once, in _address, instead of asked for 16 times
        self._levels: Any = [None] * 29  # raised levels as HIGH; the levels themselves in _oe and _a9
        self._ce: int | None = None
        self._oe: int | None = None
        self._a9: int | None = None
        self._vcc: int | None = None
        self._a9_raised = False
        self._ce_low = False
        self._enabled = False
        self._verifying = False
        self._valid_at = 0
        self._float_until = 0
        self._word = -1
        self._mode = _NONE
        self._pulse_from = 0
        self._pulse_at = 0

    def state(self) -> dict[str, object]:
        return {**super().state(), "erase_pulses": self.erase_pulses, "erased_ticks": self._erased_ticks}

    def restore(self, state: Mapping[str, Any]) -> None:
        super().restore(state)
        self.erase_pulses = int(state.get("erase_pulses", 0))
        self._erased_ticks = int(state.get("erased_ticks", 0))

    # ---- the pins; these run a million times a burn, so they look first at what usually did not change ----

    def pins_changed(self, t: int, levels: Levels) -> None:
        v = self._levels = list(levels)
        oe, a9 = v[OE], v[A9]
        if oe is not None and oe > MOST:
            if oe > MOST_RAISED:
                self._destroy(OE, oe)
            v[OE] = HIGH
        if a9 is not None and a9 > MOST:
            if a9 > MOST_RAISED:
                self._destroy(A9, a9)
            v[A9] = HIGH
        if not self._harmless.issuperset(v):
            self._look_at_levels(v)
        self._word = -1
        if v[CE] == self._ce and oe == self._oe and v[VCC] == self._vcc:
            if a9 == self._a9 or not (self._a9_raised or a9 is None or a9 > MOST):
                self._a9 = a9
                self._valid_at = max(self._valid_at, t + ACCESS)
                if self._mode:
                    self._moved_in_pulse(t)
                return
        self._control(t, v[CE], oe, a9, v[VCC])

    def drive(self, t: int) -> tuple[int, int]:
        if self._enabled:
            word = self._word
            if word < 0:
                word = self._word = self._read()
            return (0xFF, word) if t >= self._valid_at else (0xFF, word ^ 0xFF)
        if t < self._float_until:
            return 0xFF, 0x5A  # going off: whatever; invented
        return 0, 0

    def draw_ua(self, t: int, pin: int) -> int:
        if pin == VCC:
            return (ICC_ACTIVE if self._ce_low else ICC_STANDBY) if self._vcc else 0
        if pin == OE and self._oe is not None and self._oe > MOST:
            return IPP_PULSE if self._ce_low else IPP_STANDING  # a level that sagged is still drawn from
        if pin == A9 and self._a9_raised:
            return IA9
        return 0

    def _control(self, t: int, ce: int | None, oe: int | None, a9: int | None, vcc: int | None) -> None:
        powered = vcc is not None and vcc >= POWERED
        ce_low = powered and ce is not None and ce <= VIL
        enabled = ce_low and oe is not None and oe <= VIL
        if not powered:
            self._verifying = False
        elif oe is not None and oe > MOST:
            self._verifying = True  # from the first raised level to power-down reads are verifies
        low_vcc = vcc is not None and vcc < LOW_VCC
        access = VERIFY_ACCESS if ce_low and not self._ce_low and (self._verifying or low_vcc) else ACCESS
        self._valid_at = max(self._valid_at, t + access)
        if self._enabled and not enabled:
            self._float_until = t + FLOAT
        self._ce, self._oe, self._a9, self._vcc = ce, oe, a9, vcc
        self._a9_raised = a9 is not None and a9 > MOST
        self._ce_low, self._enabled = ce_low, enabled
        mode = self._pulse_mode() if ce_low else _NONE
        if mode != self._mode:
            if self._mode:
                self._end_pulse(t)
            self._mode = mode
            if mode:
                self._begin_pulse(t)
        elif mode:
            self._moved_in_pulse(t)

    def _pulse_mode(self) -> int:
        oe, a9, vcc = self._oe, self._a9, self._vcc
        if oe is None or vcc is None or not VCC_5V[0] <= vcc <= VCC_5V[1]:
            return _NONE
        if VPP_PROGRAM[0] <= oe <= VPP_PROGRAM[1] and not self._a9_raised:
            return _PROGRAM
        if VPE[0] <= oe <= VPE[1] and a9 is not None and VPE[0] <= a9 <= VPE[1]:
            return _ERASE
        return _NONE

    def _address(self) -> int:
        v = self._levels
        try:
            address: int = (
                (v[10] >= VIH)
                | (v[9] >= VIH) << 1
                | (v[8] >= VIH) << 2
                | (v[7] >= VIH) << 3
                | (v[6] >= VIH) << 4
                | (v[5] >= VIH) << 5
                | (v[4] >= VIH) << 6
                | (v[3] >= VIH) << 7
                | (v[25] >= VIH) << 8
                | (v[24] >= VIH) << 9
                | (v[21] >= VIH) << 10
                | (v[23] >= VIH) << 11
                | (v[2] >= VIH) << 12
                | (v[26] >= VIH) << 13
                | (v[27] >= VIH) << 14
                | (v[1] >= VIH) << 15
            )
            return address
        except TypeError:  # an input that nothing drives reads as high: invented
            return sum((v[pin] is None or v[pin] >= VIH) << bit for bit, pin in enumerate(A))

    def _data(self) -> int:
        """What stands on D; a pin that nothing drives counts as low, so that a missing drive shows in the cell."""
        v = self._levels
        try:
            data: int = (
                (v[11] >= VIH)
                | (v[12] >= VIH) << 1
                | (v[13] >= VIH) << 2
                | (v[15] >= VIH) << 3
                | (v[16] >= VIH) << 4
                | (v[17] >= VIH) << 5
                | (v[18] >= VIH) << 6
                | (v[19] >= VIH) << 7
            )
            return data
        except TypeError:
            return sum((v[pin] is not None and v[pin] >= VIH) << bit for bit, pin in enumerate(D))

    def _read(self) -> int:
        address = self._address()
        a9 = self._a9
        if self._a9_raised and a9 is not None and VHH[0] <= a9 <= VHH[1]:
            return self._id[address & 1]  # A0 alone selects: from memory
        word = self.cells[address]
        half_erased = ERASE_PULSE[0] <= self._erased_ticks < ERASE_PULSE[0] * self._slow_pulses
        vcc = self._vcc or 0
        if half_erased and self._is_slow(address) and vcc >= LOW_VCC:
            word = 0xFF  # looks erased, and at low VCC it is not
        return self._seen(address, word, vcc)

    # ---- pulses ----

    def _begin_pulse(self, t: int) -> None:
        self._pulse_from = t
        self._pulse_at = self._address()

    def _moved_in_pulse(self, t: int) -> None:
        """Something moved inside a pulse: another address is another, shorter pulse on other cells."""
        if self._mode == _PROGRAM and self._address() != self._pulse_at:
            self._stress("the address moved inside a program pulse")
            self._end_pulse(t)
            self._begin_pulse(t)
        elif self._mode == _ERASE and not self._erase_pattern():
            self._stress("addresses or D moved inside an erase pulse")

    def _end_pulse(self, t: int) -> None:
        width = t - self._pulse_from
        if self._mode == _PROGRAM:
            self._program(width)
        else:
            self._erase(width)

    def _program(self, width: int) -> None:
        if width > PROGRAM_PULSE[1]:
            self._stress("a program pulse longer than 105 us")
        self._erased_ticks = 0  # an erase that was not finished is lost: invented
        self._pulsed(self._pulse_at, self._data(), width)

    def _erase_pattern(self) -> bool:
        v = self._levels
        return self._data() == 0xFF and all(v[pin] is not None and v[pin] <= VIL for pin in NOT_A9)

    def _erase(self, width: int) -> None:
        self.erase_pulses += 1
        if not self._erase_pattern():
            self._stress("an erase pulse without all addresses low and D high")
            return
        if width > ERASE_PULSE[1]:
            self._stress("an erase pulse longer than 105 ms")
        self._erased_ticks += width
        if self._erased_ticks < ERASE_PULSE[0]:
            return
        self._blank(slow_too=self._erased_ticks >= ERASE_PULSE[0] * self._slow_pulses)


def make_chip() -> E512:
    """A fresh, erased chip."""
    return E512()
