"""A 2716, for tests of definitions whose pulse goes up: `bench new ... --model` this file.

2K x 8, UV-erasable, 24 pins, VPP 25 V on pin 21, one pulse of 50 ms up at CE/PGM for each word, no identify mode. Every
value is typed by hand from the published facts. Marks: S1 = ST M2716, pages 1 and 2; S77 = a note on the 2716; "from
memory" = recalled, not read; "common practice" = a rule of the trade; "invented" = no sheet says it.
"""

from __future__ import annotations

from pulsewright.virtual.interface import Limits, PulseLimit, RaisedLimit
from pulsewright.virtual.models.uv_eprom import UvEprom, UvPart

# 18 CE/PGM, 20 OE, 21 VPP: from memory, signal set [S1]; the rest as every byte-wide 24-pin part
A = (8, 7, 6, 5, 4, 3, 2, 1, 23, 22, 19)
D = (9, 10, 11, 13, 14, 15, 16, 17)
CE, OE, VPP, GND, VCC = 18, 20, 21, 12, 24

VCC_5V = (4_750, 5_250)  # in every mode, never raised: from memory
VPP_PROGRAM = (24_000, 26_000)  # 25 V nominal [S1], limits from memory
SETUP = 32  # 2 us before and after the pulse: from memory; VPP and VCC before it: common practice

LIMITS = Limits(
    package="DIP-24",
    maxima_mv={0: 6_000, VCC: 6_000, VPP: 26_500},  # [S1]; A9 is a plain pin
    minimum_mv=-300,  # [S1]
    vcc_pin=VCC,
    gnd_pins=(GND,),
    address_pins=A,
    data_pins=D,
    enable_pins=(CE, OE),
    raised_pins=(VPP,),
    pulses=(
        PulseLimit(
            name="program",
            pin=CE,
            active_low=False,  # from memory; S77 has it low, against the sheets' name of the pin
            raised={VPP: VPP_PROGRAM},
            min_ticks=720_000,  # 45 ms: from memory, nominal 50 ms [S77]
            max_ticks=880_000,  # 55 ms: from memory; CE/PGM may not be high longer with VPP at 25 V, whatever OE is
            setup_ticks=dict.fromkeys(("address", "data", "raised", "vcc", "control"), SETUP),
            hold_ticks={"address": SETUP, "data": SETUP, "raised": 0, "control": SETUP},
            vcc_mv=VCC_5V,
            most=1,  # one pulse is the limit, not to be repeated: from memory
            high_pins=(OE,),  # mode table: from memory
            source="25 V S1, the rest from memory",
        ),
    ),
    standing=(
        RaisedLimit(
            name="verify",
            raised={VPP: VPP_PROGRAM},
            vcc_mv=VCC_5V,
            access_ticks=4,  # OE low to data 200 ns: from memory
            source="CE and OE low: from memory",
        ),
    ),
    rest_mv={VPP: (600, 300)},  # 5 V in read: from memory; how near to VCC: common practice
    access_ticks=8,  # 450 ns, slow grade [S1]
    float_ticks=4,  # 200 ns: from memory
    rise_ticks=0,  # unknown
    recovery_ticks=0,
    vcc_read_mv=VCC_5V,
    vcc_most_mv=5_250,
    source="S1 and from memory, value by value in this file",
)


def make_chip() -> UvEprom:
    """A fresh, erased chip."""
    return UvEprom(
        UvPart(
            name="2716",
            limits=LIMITS,
            size=2_048,
            ce=CE,
            oe=OE,
            vpp=VPP,
            id=None,
            icc_program=57_000,  # the sheet's 525 mW (100 mA) are the most [S1]; what a usual chip draws: from memory
            icc_read=57_000,
            icc_standby=25_000,  # 132 mW [S1]
            ipp_pulse=30_000,  # from memory
            ipp_standing=5_000,  # from memory
            ipp_rest=5_000,  # unknown: as in inhibit
        )
    )
