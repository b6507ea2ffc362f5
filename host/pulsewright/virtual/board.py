"""The virtual board: numbers of its rails, switches and converters, and the tables it tells the host.

Typed from the simulated circuit of the reference design ([sim]) and its arithmetic ([calc]), apart from the rig file,
so that neither can hide a slip of the other. Nothing here was measured on a built board. Times are ticks of 62.5 ns.
"""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.units import TICKS_PER_MS, TICKS_PER_US
from pulsewright.wire.fields import pack
from pulsewright.wire.tables import BLOBS, BLOCK_BYTES, OP_COST, PROGRAM_BYTES

POSITIONS = 32
GND_POSITION = 16
DATA_POSITIONS = (13, 14, 15, 17, 18, 19, 20, 21)  # D0..D7; a line has its position's number
RAISED_POSITIONS = (1, 3, 24, 25, 26)  # by switch number
VCC_POSITIONS = (28, 30, 32, 1, 3, 25)  # by switch number
POWER_POSITIONS = (28, 30, 32)  # where packages have their VCC: the bias group "power"

VCC_STEPS_MV = (0, 3_750, 4_200, 5_000, 5_250, 6_000, 6_250, 6_500)
RAISED_STEPS_MV = (0, 12_000, 12_500, 12_750, 13_000, 14_000, 21_000, 25_000)

COUNTS = 1_024
VCC_FULL_MV = 8_192  # 10 k / 10 k on a 4.096 V reference [calc]
RAISED_FULL_MV = 29_696  # 100 k / 16 k, and 150 k / 24 k at A9, on a 4.096 V reference [calc]


def count_of(mv: int, full_mv: int) -> int:
    """The converter's count for a level, to the nearest, inside its range."""
    return max(0, min(COUNTS - 1, (mv * COUNTS + full_mv // 2) // full_mv))


@dataclass(frozen=True)
class Board:
    """One virtual board; a bench makes a faulty one with `dataclasses.replace`. Millivolts, microamperes, ticks."""

    name: str = "virtual reference rig"
    window_blocks: int = 4
    receive_bytes: int = 2_560
    top_baud: int = 2_000_000
    driven_from_mv: int = 4_750
    off_below_mv: int = 500
    clear_above_vcc_mv: int = 300
    fall_limit_ticks: int = 1 * TICKS_PER_MS
    off_limit_ticks: int = 5 * TICKS_PER_MS
    ceilings_mv: tuple[int, ...] = (25_500, 25_500, 25_500, 25_500, 14_500)  # by raised switch
    button: bool = False  # the button or jumper that a vouched permit, or one above 14.5 V, asks for
    button_above_mv: int = 14_500

    vcc_settle_ticks: int = 4_600 * TICKS_PER_US  # 99 % [sim]
    vcc_on_ticks: int = 50 * TICKS_PER_US  # range switch closed to VCC at the socket: from memory
    vcc_off_ticks: int = 150 * TICKS_PER_US  # discharge to 0.5 V [sim]
    vcc_limit_ua: int = 170_000
    vcc_aside_drop_mv: int = 250  # at positions 1, 3, 25: small Schottky at 0.1 mA [sim]
    probe_ohm: int = 47
    diode_mv: int = 800  # VCC over a chip's diodes through the probe: from memory
    raised_settle_ticks: int = 22 * TICKS_PER_MS  # 99 % with 470 nF, up; down with 12 k about 18 ms [sim, calc]
    raised_limit_ua: int = 50_000  # the fault "rail-sag" lowers it
    raised_offset_mv: int = 0  # what the rail stands above its nominal step; the fault "rail-offset"
    vcc_offset_mv: int = 0  # the same of VCC; the fault "vcc-offset"
    fall_more_ticks: int = 0  # the fault "slow-fall"
    vcc_fall_more_ticks: int = 0  # the same of VCC; the fault "vcc-slow-fall"
    raised_ohm_tenths: int = 5  # a raised switch: 28 mV at 50 mA [sim]
    limiter_position: int = 26  # A9: mirror with limiter
    limiter_drop_mv: int = 91  # at no current [sim]
    limiter_ohm: int = 165  # 16 mV more for each 100 uA [sim]
    limiter_ua: int = 930  # short-circuit current [sim]

    def rise_ticks(self, mv: int) -> int:
        """Switch-on to the whole level: 2.5 us up to 14 V, 4.6 us above [sim, 100 pF / 4.7 k]."""
        return 40 if mv <= 14_500 else 74

    def fall_ticks(self, position: int, mv: int) -> int:
        """Switch-off to 0.8 V: 6.3 us up to 14 V, 10 us above, 12 us at A9 [sim]."""
        if position == self.limiter_position:
            return 192 + self.fall_more_ticks
        return (101 if mv <= 14_500 else 160) + self.fall_more_ticks

    def drop_mv(self, position: int, load_ua: int) -> int:
        """What a closed raised switch loses at a load."""
        if position == self.limiter_position:
            return self.limiter_drop_mv + load_ua * self.limiter_ohm // 1_000
        return load_ua * self.raised_ohm_tenths // 10_000

    def page(self, number: int) -> bytes | None:
        """A page of `describe`; None for one that does not exist."""
        if number == 0:
            return pack(BLOBS["describe"], self._table())
        if number == 1:
            counts = [count_of(mv, VCC_FULL_MV) for mv in VCC_STEPS_MV]
            counts += [count_of(mv, RAISED_FULL_MV) for mv in RAISED_STEPS_MV]
            return b"".join(count.to_bytes(2, "little") for count in counts)
        if number == 2:
            return b"".join(count_of(mv, RAISED_FULL_MV).to_bytes(2, "little") for mv in self.ceilings_mv)
        if number == 3:
            return b"".join(bytes([op, min(255, cost)]) for op, cost in OP_COST.items())
        return None

    def _table(self) -> dict[str, object]:
        return {
            "board": self.name.encode("ascii"),
            "window_blocks": self.window_blocks,
            "block_bytes": BLOCK_BYTES,
            "program_bytes": PROGRAM_BYTES,
            "receive_bytes": self.receive_bytes,
            "driven_from": count_of(self.driven_from_mv, VCC_FULL_MV),
            "off_below": count_of(self.off_below_mv, VCC_FULL_MV),
            "clear_above_vcc": self.clear_above_vcc_mv * COUNTS // RAISED_FULL_MV,
            "fall_limit": self.fall_limit_ticks,
            "off_limit": self.off_limit_ticks,
            "lines": POSITIONS,
            "data_lines": bytes(DATA_POSITIONS),
            "rails": 2,
            "steps": len(VCC_STEPS_MV),
            "switches": bytes(RAISED_POSITIONS),
            "vcc_switches": bytes(VCC_POSITIONS),
            "top_baud": self.top_baud,
        }
