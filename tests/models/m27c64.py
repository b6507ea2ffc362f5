"""A 27C64 of the Intel and AMD kind, for tests of definitions with a program pin: `bench new ... --model` this file.

8K x 8, UV-erasable, VPP on pin 1, pulsed at PGM. Every value is typed by hand from the published facts. Marks: S29, S67
= siblings; S60 = Intel's parts with the same algorithm; "from memory" = recalled, not read; "common practice" = a rule
of the trade; "invented" = no sheet says it.
"""

from __future__ import annotations

from pulsewright.virtual.interface import Limits, PulseLimit, RaisedLimit
from pulsewright.virtual.models.uv_eprom import UvEprom, UvPart

# 1 VPP, 20 CE, 22 OE, 26 not connected, 27 PGM [S67]; the rest as every byte-wide 28-pin part
A = (10, 9, 8, 7, 6, 5, 4, 3, 25, 24, 21, 23, 2)
D = (11, 12, 13, 15, 16, 17, 18, 19)
VPP, CE, OE, PGM, A9, GND, VCC = 1, 20, 22, 27, 24, 14, 28

VCC_PROGRAM = (6_000, 6_500)  # 6.25 V +-0.25 V: from memory
VPP_PROGRAM = (12_500, 13_000)  # 12.75 +-0.25 V [S60 sibling]
SETUP = 32  # 2 us: address, data, CE, OE, VPP, VCC before the pulse; data after it: from memory

LIMITS = Limits(
    package="DIP-28",
    maxima_mv={0: 6_500, VCC: 6_500, VPP: 14_000, A9: 13_500},  # from memory; one maker allows 7.25 V [S67]
    minimum_mv=-600,  # [S67]
    vcc_pin=VCC,
    gnd_pins=(GND,),
    address_pins=A,
    data_pins=D,
    enable_pins=(CE, OE),
    raised_pins=(VPP, A9),
    pulses=(
        PulseLimit(
            name="program",
            pin=PGM,
            active_low=True,
            raised={VPP: VPP_PROGRAM},
            min_ticks=1_520,  # 95 us: from memory
            max_ticks=1_680,  # 105 us: from memory
            setup_ticks=dict.fromkeys(("address", "data", "raised", "vcc", "control"), SETUP),
            hold_ticks={"address": 0, "data": SETUP, "raised": 0, "control": SETUP},  # from memory
            vcc_mv=VCC_PROGRAM,
            most=25,  # [S60 sibling]
            high_pins=(OE,),  # mode table: from memory
            only_low=(CE,),  # CE high is inhibit: from memory
            source="from memory",
        ),
    ),
    standing=(
        RaisedLimit(
            name="verify",
            raised={VPP: VPP_PROGRAM},
            vcc_mv=VCC_PROGRAM,
            access_ticks=3,  # OE low to data 150 ns: from memory
            release_ticks=SETUP,  # 2 us from D released to OE low: as the other parts of this kind
            source="CE and OE low, PGM high: from memory",
        ),
    ),
    rest_mv={VPP: (600, 300)},  # VPP = VCC in read; how near: common practice
    access_ticks=5,  # 300 ns, slow grade: from memory
    float_ticks=3,  # 130 ns: from memory
    rise_ticks=1,  # at least 50 ns, as the parts whose sheets say it
    recovery_ticks=0,
    vcc_read_mv=(4_750, 5_250),  # 5 V, limits unknown: +-5 %, common practice
    vcc_most_mv=6_500,
    identify_mv=(11_500, 12_500),  # 12 +-0.5 V, as every part with an identify mode
    identify_pin=A9,
    source="value by value in this file, most from memory",
)


def make_chip() -> UvEprom:
    """A fresh, erased chip."""
    return UvEprom(
        UvPart(
            name="27c64",
            limits=LIMITS,
            size=8_192,
            ce=CE,
            oe=OE,
            vpp=VPP,
            id=(0x01, 0x15),  # AMD: from memory
            icc_program=50_000,  # as the 27C256: from memory
            icc_read=20_000,  # [S67]
            icc_standby=100,  # [S67]
            ipp_pulse=50_000,  # from memory
            ipp_standing=100,  # invented
            ipp_rest=100,  # as the 27C256
            ia9=200,  # as a 28F020
        )
    )
