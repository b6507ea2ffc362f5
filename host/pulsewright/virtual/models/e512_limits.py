"""What the published facts say of a 27E512-type chip: pins, levels, times, currents, and the judge's limits.

Every limit is typed by hand from the published facts and none comes from a definition file. Marks: S37 = mode table
text of a sibling part number of the same maker; S38 = page 1 of two sibling sheets (June 2000, Nov 1999); S18 = a
512K EPROM sheet with shared OE/VPP; "from memory" = recalled, not read; "common practice" = a rule of the trade;
"invented" = the sheet says nothing and a model must do something.
"""

from __future__ import annotations

from pulsewright.virtual.interface import Limits, PulseLimit

# The pins [S38].
A = (10, 9, 8, 7, 6, 5, 4, 3, 25, 24, 21, 23, 2, 26, 27, 1)
D = (11, 12, 13, 15, 16, 17, 18, 19)
CE, OE, A9, GND, VCC = 20, 22, 24, 14, 28
NOT_A9 = tuple(pin for pin in A if pin != A9)

# Levels, mV
VIL, VIH = 800, 2000  # TTL levels: common practice
HIGH = 5000  # any level above VIH will do
VCC_5V = (4750, 5250)  # 5 V in every mode [S37], limits unknown: +-5 %, common practice
VCC_VERIFY = (3563, 3937)  # 3.75 V [S37], limits unknown: +-5 %, common practice
VPP_PROGRAM = (11750, 12250)  # 12 V [S37], limits from memory
VPE = (13750, 14250)  # 14 V on OE/VPP and on A9 [S37], limits from memory
VHH = (11500, 12500)  # 12 V on A9 [S37], limits from memory
MOST_RAISED = 14500  # A9 and OE/VPP, absolute maximum: from memory
MOST = 7000  # VCC, absolute maximum: from memory; taken for all others too
LEAST = -600  # lowest level of a pin: common practice
POWERED = 3000  # the part does nothing below: invented
LOW_VCC = 4500  # below, a half-erased cell still reads its old 0: invented

# Times, ticks of 62.5 ns
ACCESS = 3  # 150 ns, slowest grade, from address and CE [S38]
VERIFY_ACCESS = 16  # CE low to data 1 us while verifying: from memory
FLOAT = 3  # outputs float at most 130 ns after CE or OE high: from memory
SETUP = 32  # 2 us class throughout, set-up and hold: from memory
RECOVERY = 32  # 2 us from the raised level gone to the next enable [S18], "2 us class" from memory
RISE = 1  # at least 50 ns, as on other parts with a shared OE/VPP [S18]
PROGRAM_PULSE = (1_520, 1_680)  # 95..105 us: from memory
PROGRAM_PULSES, ERASE_PULSES = 25, 20  # at most, of a word and of the chip: from memory
ERASE_PULSE = (1_520_000, 1_680_000)  # 95..105 ms: from memory

# Currents, uA: 30 mA at most, active and programming, 1 mA standby [S38]; A9 as a 28F020 takes it; the rest invented
ICC_ACTIVE, ICC_STANDBY = 20_000, 1_000
IPP_PULSE, IPP_STANDING = 30_000, 100
IA9 = 200

ID = (0xDA, 0x08)  # [S37]
_SETUPS = {"address": SETUP, "data": SETUP, "raised": SETUP, "vcc": SETUP}
_HOLDS = {"address": SETUP, "data": SETUP, "raised": SETUP}

LIMITS = Limits(
    package="DIP-28",
    maxima_mv={0: MOST, VCC: MOST, OE: MOST_RAISED, A9: MOST_RAISED},
    minimum_mv=LEAST,
    vcc_pin=VCC,
    gnd_pins=(GND,),
    address_pins=A,
    data_pins=D,
    enable_pins=(CE, OE),
    raised_pins=(OE, A9),
    pulses=(
        PulseLimit(
            name="program",
            pin=CE,
            active_low=True,
            raised={OE: VPP_PROGRAM},
            min_ticks=PROGRAM_PULSE[0],
            max_ticks=PROGRAM_PULSE[1],
            setup_ticks=_SETUPS,
            hold_ticks=_HOLDS,
            vcc_mv=VCC_5V,
            most=PROGRAM_PULSES,
            source="levels S37, widths and times from memory",
        ),
        PulseLimit(
            name="erase",
            pin=CE,
            active_low=True,
            raised={OE: VPE, A9: VPE},
            min_ticks=ERASE_PULSE[0],
            max_ticks=ERASE_PULSE[1],
            setup_ticks=_SETUPS,
            hold_ticks=_HOLDS,
            vcc_mv=VCC_5V,
            data=0xFF,
            low_pins=NOT_A9,
            most=ERASE_PULSES,
            source="levels, addresses low and D high S37, widths and times from memory",
        ),
    ),
    access_ticks=ACCESS,
    verify_access_ticks=VERIFY_ACCESS,
    float_ticks=FLOAT,
    rise_ticks=RISE,
    recovery_ticks=RECOVERY,
    vcc_read_mv=VCC_5V,
    vcc_steps_mv=(VCC_5V, VCC_VERIFY),
    identify_mv=VHH,
    identify_pin=A9,
    source="S37, S38 and from memory, value by value in this file",
)
