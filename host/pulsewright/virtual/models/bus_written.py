"""A chip that is written on the bus: reads and write cycles at CE, OE and WE, and how it shows that it is busy.

What a write means - a load of a page, a command, a byte - is the part's own. Times are ticks, levels millivolts.
"Invented" marks what no sheet says and a model must still do somehow.
"""

from __future__ import annotations

from operator import itemgetter

from pulsewright.virtual.interface import Levels, Limits
from pulsewright.virtual.models.cells import CellChip
from pulsewright.virtual.pin_number import PinNumber

VIL, VIH = 800, 2_000  # TTL levels: common practice
HIGH = 5_000  # any level above VIH will do
POWERED = 3_000  # the part does nothing below: invented
NEVER = 1 << 62
STROBE_HIGH = 3  # outputs off for at least 150 ns between two looks at the toggle bit [five-volt S1g, S76]


class BusWritten(CellChip):
    """CE, OE and WE, the write that runs, and the outputs. A part adds `written`, `due`, `status` and `cut`."""

    def __init__(self, name: str, limits: Limits, size: int, own_id: tuple[int, int], *, sense_mv: int) -> None:
        """`sense_mv`: VCC below which writes are shut out."""
        super().__init__(name, limits, size, own_id, 0)
        bus = limits.bus
        if bus is None:
            raise ValueError("limits without a bus")
        self._bus = bus
        self._sense = sense_mv
        most = limits.maxima_mv[0]
        self._plain_most = most
        self._raisable = [(pin, mv) for pin, mv in limits.maxima_mv.items() if pin and mv > most]
        self._lines_of = itemgetter(bus.ce, bus.oe, bus.we, limits.vcc_pin, *(pin for pin, _ in self._raisable))
        self._lines: tuple[int | None, ...] = ()
        self._levels: list[int | None] = [None] * (self.pins + 1)  # raised levels as HIGH
        self._address = PinNumber(limits.address_pins, VIH, floating=True)  # what floats reads as high: invented
        self._data = PinNumber(limits.data_pins, VIH, floating=False)  # and as low on D, so that it shows in the cell
        self._raised: dict[int, int] = {}  # pin -> level of what stands above a plain pin's maximum
        self._vcc = 0
        self._ready_at = NEVER  # from here on writes are taken
        self._ce_low = False
        self._enabled = False
        self._valid_at = 0
        self._float_until = 0
        self._off_at = 0
        self._word = -1  # what stands on D, -1: not looked up yet
        self._writing = False
        self._deaf = ""  # why the write that runs is not taken: "early", "busy"
        self._write_at = 0
        self._write_from = 0
        self._due = NEVER  # something in the chip ends here
        self._busy = False
        self._toggle = 0  # the toggle bit, as it stands
        self._look_at = -1  # where the last look went

    def is_busy(self, t: int) -> bool:
        """Whether a write cycle runs at t: more than any pin tells, for the judge."""
        if t >= self._due:
            self._advance(t)
        return self._busy

    def _polled(self) -> bool:
        """Whether a look now shows that the chip is at work."""
        return self._busy

    # ---- what the part adds ----

    def written(self, t: int, began: int, at: int, word: int) -> None:
        """A write cycle that began at `began` has ended at t."""
        raise NotImplementedError

    def due(self, t: int) -> None:
        """`_due` has come, at t exactly."""
        raise NotImplementedError

    def word_at(self, at: int) -> int:
        """What a read of the chip at rest gives."""
        return self._seen(at, self.cells[at], self._vcc)

    def status(self, at: int) -> int | None:
        """What a read gives while something runs, None for the cell."""
        raise NotImplementedError

    def cut(self) -> None:
        """VCC falls below where writes are shut out, whether or not something runs."""
        raise NotImplementedError

    def unheard(self, at: int, word: int) -> None:
        """A write came while the chip was busy."""
        self._stress("a write while the chip was busy")

    def _store(self, at: int, word: int) -> None:
        if at not in self._dead:
            self.cells[at] = word
        if at in self._stuck:
            self._keep_stuck()

    # ---- the pins; these run a million times a burn, so they look first at what usually did not change ----

    def pins_changed(self, t: int, levels: Levels) -> None:
        v = self._levels = list(levels)
        for pin, most in self._raisable:
            level = v[pin]
            if level is not None and level > self._plain_most:
                if level > most:
                    self._destroy(pin, level)
                v[pin] = HIGH
        if not self._harmless.issuperset(v):
            self._look_at_levels(v)
        self._word = -1
        lines = self._lines_of(levels)
        if lines == self._lines:
            if self._enabled:
                self._valid_at = max(self._valid_at, t + self.limits.access_ticks)
            return
        self._lines = lines
        raised = zip(self._raisable, lines[4:], strict=True)
        self._raised = {pin: mv for (pin, _), mv in raised if mv is not None and mv > self._plain_most}
        self._control(t, *lines[:4])

    def drive(self, t: int) -> tuple[int, int]:
        if self._enabled:
            if t >= self._due:
                self._advance(t)
            word = self._word
            if word < 0:
                word = self._word = self._read()
            return 0xFF, word if t >= self._valid_at else word ^ 0xFF
        if t < self._float_until:
            return 0xFF, 0x5A  # going off: whatever; invented
        return 0, 0

    def _control(self, t: int, ce: int | None, oe: int | None, we: int | None, vcc: int | None) -> None:
        if t >= self._due:
            self._advance(t)
        self._supply(t, vcc or 0)
        self._ce_low = self._vcc >= POWERED and ce is not None and ce <= VIL
        we_low = we is not None and we <= VIL
        writing = self._ce_low and we_low and oe is not None and oe >= VIH
        if writing != self._writing:
            self._writing = writing
            if writing:
                self._begin(t)
            else:  # OE that goes low shuts the write out, and so does VCC
                self._end(t, whole=self._vcc >= self._sense and oe is not None and oe >= VIH)
        self._outputs(t, self._ce_low and not we_low and oe is not None and oe <= VIL)

    def _advance(self, t: int) -> None:
        while t >= self._due:
            at, self._due = self._due, NEVER
            self.due(at)
        self._word = -1

    def _supply(self, t: int, vcc: int) -> None:
        if vcc < self._sense <= self._vcc:
            self.cut()
            self._ready_at = self._due = NEVER
            self._busy = False
        elif self._vcc < self._sense <= vcc:
            self._ready_at = t + self._bus.power_up_ticks
        self._vcc = vcc

    def _outputs(self, t: int, enabled: bool) -> None:
        self._valid_at = max(self._valid_at, t + self.limits.access_ticks)
        if enabled == self._enabled:
            return
        self._enabled = enabled
        if not enabled:
            self._off_at = t
            self._float_until = t + self.limits.float_ticks
            return
        at = self._address.of(self._levels)
        if self._polled() and at == self._look_at and t - self._off_at >= STROBE_HIGH:
            self._toggle ^= 0x40
        self._look_at = at

    def _read(self) -> int:
        at = self._address.of(self._levels)
        status = self.status(at)
        return self.word_at(at) if status is None else status

    # ---- writes ----

    def _begin(self, t: int) -> None:
        self._write_from = t
        self._write_at = self._address.of(self._levels)
        self._deaf = "early" if t < self._ready_at else "busy" if self._busy else ""

    def _end(self, t: int, *, whole: bool) -> None:
        if not whole or t - self._write_from < self._bus.width_ticks[0]:
            return  # cut, or shorter than any write
        word = self._data.of(self._levels)
        if not self._deaf:
            self.written(t, self._write_from, self._write_at, word)
        elif self._deaf == "early":
            self._stress("a write too soon after power-up")
        else:
            self.unheard(self._write_at, word)
