"""The seams of the virtual rig: what a chip model is, what watches the pins.

A chip model is the seat for strangers (`bench new --model FILE` loads a Python file with `make_chip() -> ChipModel`),
so this interface is small and fixed. Times `t` are ticks of 62.5 ns since the rig's start; levels are millivolts by
package pin, index 0 unused, None for a pin that nothing drives.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Protocol

Levels = Sequence[int | None]


@dataclass(frozen=True)
class PulseLimit:
    """While the raised `pins` stand in their windows, `pin` may be at its active level only for min..max ticks."""

    name: str
    pin: int
    active_low: bool
    raised: Mapping[int, tuple[int, int]]  # pin -> (min_mv, max_mv) that mark this kind of pulse
    min_ticks: int
    max_ticks: int
    setup_ticks: Mapping[str, int]  # "address", "data", "raised", "vcc", "control" -> least time before the pulse
    hold_ticks: Mapping[str, int]  # "address", "data", "raised", "control" -> least time after it
    vcc_mv: tuple[int, int]
    data: int | None = None  # what must stand on D, None: anything driven
    low_pins: tuple[int, ...] = ()  # pins that must be low meanwhile
    most: int = 0  # such pulses at one address while VCC stands, others between them or not; 0: the sheet does not say
    high_pins: tuple[int, ...] = ()  # pins that must be high meanwhile (OE); "control" with the next two
    only_low: tuple[int, ...] = ()  # it is a pulse only with these low (CE, where PGM is pulsed): else inhibit
    only_high: tuple[int, ...] = ()  # it is a pulse only with these high (OE, where verify leaves CE open): else verify
    source: str = ""


@dataclass(frozen=True)
class RaisedLimit:
    """Raised levels that may stand while D is read and no pulse is given: verify, inhibit, a margin mode."""

    name: str
    raised: Mapping[int, tuple[int, int]]  # pin -> (min_mv, max_mv), all of them and no others
    vcc_mv: tuple[int, int]
    output_pins: tuple[int, ...] = ()  # all low: outputs on while these levels stand; none: the enable pins
    access_ticks: int = 0  # outputs on to data valid, longest; 0: as without raised levels
    release_ticks: int = 0  # the rig's D released to outputs on, least
    source: str = ""


@dataclass(frozen=True)
class BusLimit:
    """Writes as bus cycles at logic levels: CE and WE low while OE is high.

    The later fall of CE and WE ("the fall") takes the address, the earlier rise ("the rise") the data. Times are ticks;
    0 is a time that the sheet does not give.
    """

    ce: int
    oe: int
    we: int
    width_ticks: tuple[int, int]  # fall to rise: least, most
    setup_ticks: Mapping[str, int]  # "address", "oe" (high) before the fall, "data" before the rise
    hold_ticks: Mapping[str, int]  # "address" after the fall, "data", "oe" (high) after the rise
    high_ticks: int = 0  # rise to the next fall, least
    valid_ticks: int = 0  # fall to data valid, most
    load_ticks: tuple[int, int] = (0, 0)  # fall to fall between the loads of one page: least, most
    busy_ticks: int = 0  # rise of a page's last load to the end of its write cycle, most
    ready_ticks: int = 0  # a poll that says done to the next fall, least
    # lists of (address, word) after whose last write `command_ticks` pass before the next fall
    commands: tuple[tuple[tuple[int, int], ...], ...] = ()
    command_ticks: int = 0
    power_up_ticks: int = 0  # VCC in its window to the first fall, least
    power_up_read_ticks: int = 0  # VCC in its window to the first read, least
    source: str = ""


@dataclass(frozen=True)
class Limits:
    """What the waveform judge watches for one part; typed by hand from a data sheet, never from a definition."""

    package: str
    maxima_mv: Mapping[int, int]  # absolute maximum by pin; pin 0: all others
    minimum_mv: int  # lowest level of any pin, e.g. -600
    vcc_pin: int
    gnd_pins: tuple[int, ...]
    address_pins: tuple[int, ...]
    data_pins: tuple[int, ...]
    enable_pins: tuple[int, ...]  # all low: outputs on (CE, OE)
    raised_pins: tuple[int, ...]  # pins that may ever stand above VCC
    pulses: tuple[PulseLimit, ...]
    access_ticks: int  # address or enable to data valid, longest
    float_ticks: int  # outputs off to D free, longest
    rise_ticks: int  # least rise time of a raised pin
    recovery_ticks: int  # raised pin gone to the next enable
    vcc_read_mv: tuple[int, int]
    vcc_steps_mv: tuple[tuple[int, int], ...] = ()  # every window in which VCC may be used
    identify_mv: tuple[int, int] | None = None  # window of the identify level
    identify_pin: int | None = None
    verify_access_ticks: int = 0  # CE low to data valid after a raised level or below the read VCC; 0: as access
    standing: tuple[RaisedLimit, ...] = ()  # raised levels under which D may be read; the identify level apart
    # pin -> (so far below VCC, so far above it) at most while D is read and nothing is raised there (VPP = VCC)
    rest_mv: Mapping[int, tuple[int, int]] = field(default_factory=dict)
    vcc_most_mv: int = 0  # the highest operating VCC of any mode; 0: only its absolute maximum counts
    bus: BusLimit | None = None  # a part that is written on the bus
    source: str = ""


class ChipModel(Protocol):
    """A modelled chip. `outputs` are the pins it can drive, in the order of the bits of `drive`."""

    name: str
    pins: int
    outputs: tuple[int, ...]
    limits: Limits
    cells: bytearray  # width 8: one byte a word; width 16: two, low byte first
    erased_word: int

    def pins_changed(self, t: int, levels: Levels) -> None:
        """Levels at the pins are now these (after one group of edges); `levels` may not be kept or changed."""

    def drive(self, t: int) -> tuple[int, int]:
        """(mask, bits) over `outputs`: which it drives now, and to what; what is not valid yet is wrong on purpose."""

    def draw_ua(self, t: int, pin: int) -> int:
        """Current into a supply or raised pin now, microamperes."""

    def state(self) -> dict[str, object]:
        """What a bench file keeps besides the cells: JSON values (damage, stress, counters)."""

    def restore(self, state: Mapping[str, object]) -> None:
        """The reverse of `state`."""


@dataclass
class Violation:
    """Something a data sheet forbids, seen at the pins."""

    rule: str
    pin: int
    at_us: int
    wanted: str
    got: str


class Watcher(Protocol):
    """Something that sees every group of edges at the chip's pins."""

    def edges(self, t: int, levels: Levels, changed: Sequence[int], driven: Sequence[int] | None = None) -> None:
        """Pins `changed` (package pins) have new levels at t; a ramp is two calls, its begin and its end."""

    def sampled(self, t: int) -> None:
        """The rig samples D at t and means what it reads."""

    def rig_drives(self, t: int, driving: bool) -> None:
        """The rig begins or ends to drive D."""


@dataclass
class PinHistory:
    """What a pin has seen."""

    max_mv: int = 0
    min_mv: int = 0


@dataclass
class BenchReport:
    """What `bench show --json` tells of the pins."""

    pins: dict[int, PinHistory] = field(default_factory=dict)
    violations: list[Violation] = field(default_factory=list)
    stressed: list[str] = field(default_factory=list)
    probe_wrote: list[str] = field(default_factory=list)
    damaged: bool = False
