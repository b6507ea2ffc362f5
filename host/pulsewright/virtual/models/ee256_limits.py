"""What the published facts say of 28C256 EEPROMs, maker by maker: pins, levels, times, currents, the judge's limits.

Every value is typed by hand from the published facts and none comes from a definition file. Marks: S74, S1, S3b, S4 =
Atmel AT28C256; S1g, S76 = Atmel siblings; S77 = Atmel's note on software chip erase; S78b = Xicor X28C256; S79 =
Catalyst CAT28C256; S93 = a Catalyst sibling; "from memory" = recalled, not read; "common practice" = a rule of the
trade; "tightest" = this maker's value is not known, so it is the strictest of those that are. One tick is 62.5 ns: what
must last at least so long is rounded up, what at most, down.
"""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.virtual.interface import BusLimit, Limits

# The pins [S2, S16]: A14 on 1, WE on 27.
A = (10, 9, 8, 7, 6, 5, 4, 3, 25, 24, 21, 23, 2, 26, 1)
D = (11, 12, 13, 15, 16, 17, 18, 19)
CE, OE, WE, A9, GND, VCC = 20, 22, 27, 24, 14, 28
SIZE, PAGE = 32_768, 64  # [S1, S74, S78b, S79]
US, MS = 16, 16_000

VCC_READ = (4_500, 5_500)  # [S2, S3b]; Xicor and Catalyst: every part of the table unless a row says otherwise
VH = (11_500, 12_500)  # 12.0 +-0.5 V on A9 or OE, Atmel only [S3b]
USER = (0x7FC0, 64)  # user bytes behind A9 at VH: place [S74], size [S1c]

# Commands, A14..A0 decoded [S1i, S78b, S79 by the family's table]
ENABLE = ((0x5555, 0xAA), (0x2AAA, 0x55), (0x5555, 0xA0))
_SIX = ((0x5555, 0xAA), (0x2AAA, 0x55), (0x5555, 0x80), (0x5555, 0xAA), (0x2AAA, 0x55))
DISABLE = (*_SIX, (0x5555, 0x20))
ERASE = (*_SIX, (0x5555, 0x10))  # Atmel [S77]
CHIP_ERASE = 20 * MS  # tEC, most [S77]
HARD_ERASE = 10 * MS  # CE and WE low with OE at VH, least [S74]


@dataclass(frozen=True)
class Maker:
    """What differs from maker to maker. mV, ticks, uA; 0 is a time that the sheet does not give."""

    name: str
    most: int  # plain pins, absolute maximum
    most_vcc: int
    most_raised: int  # A9 and OE; above `most`: user bytes and hardware erase
    least: int
    cycle: int  # tWC, most
    load: tuple[int, int]  # tBLC, fall to fall: from memory, the table does not say between which edges
    oe_setup: int
    oe_hold: int
    address_hold: int
    data_hold: int
    high: int  # tWPH
    after_command: int  # tWPH2
    valid: int  # tDV
    ready: int  # tDW
    erases: bool  # software chip erase
    polls_at_once: bool  # the status may be read from the last load on, not only when the window has closed
    sense: int  # writes are shut out below
    power_up: int
    power_up_read: int
    access: int
    icc: int
    standby: int
    source: str


MAKERS = {
    maker.name: maker
    for maker in (
        Maker(
            name="atmel",
            most=6_250,  # [S3b]
            most_vcc=6_250,  # [S3b]
            most_raised=13_500,  # OE and A9 [S3b]
            least=-600,  # [S3b]
            cycle=10 * MS,  # [S1, S74]
            load=(0, 150 * US),  # [S1, S74]
            oe_setup=0,  # [S74]
            oe_hold=1,  # 0 after a write [S74], 10 ns before a poll [S1g, S76 siblings]
            address_hold=1,  # 50 ns [S74]
            data_hold=0,  # [S74]
            high=1,  # 50 ns [S74]
            after_command=0,  # none
            valid=0,  # no restriction [S74]
            ready=0,  # none
            erases=True,  # [S74, S77]
            polls_at_once=True,  # "at any time during the write cycle", which counts from the last load: from memory
            sense=3_800,  # typical [S4, S9]
            power_up=5 * MS,  # typical [S4, S9]
            power_up_read=0,  # none stated
            access=4,  # 250 ns, -25 [S1f]
            icc=50_000,  # from memory
            standby=200,  # from memory
            source="S74, S1, S3b, S4",
        ),
        Maker(
            name="xicor",
            most=7_000,  # every pin [S78b]
            most_vcc=7_000,  # [S78b]
            most_raised=7_000,  # no pin takes 12 V [S78b]
            least=-1_000,  # [S78b]
            cycle=10 * MS,  # 5 ms typical, 10 ms at most [S78b]
            load=(16, 100 * US),  # 1 us, 100 us [S78b]
            oe_setup=1,  # 10 ns [S78b]
            oe_hold=1,  # 10 ns [S78b]
            address_hold=3,  # 150 ns [S78b]
            data_hold=1,  # 10 ns [S78b]
            high=1,  # 50 ns [S78b]
            after_command=16,  # 1 us [S78b]
            valid=16,  # 1 us [S78b]
            ready=160,  # 10 us [S78b]
            erases=False,
            polls_at_once=False,  # not known: tightest
            sense=3_800,  # 3.5 V typical [S78b]; tightest
            power_up=5 * MS,  # [S78b]
            power_up_read=100 * US,  # [S78b]
            access=5,  # 300 ns, slowest grade [S78b]
            icc=60_000,  # from memory
            standby=200,  # from memory
            source="S78b",
        ),
        Maker(
            name="catalyst",
            most=6_500,  # VCC + 2.0 V [S79], at the lowest VCC
            most_vcc=7_000,  # [S79]
            most_raised=6_500,  # no pin takes more [S79]
            least=-2_000,  # [S79]
            cycle=5 * MS,  # [S10, S79]
            load=(2, 100 * US),  # 0.1 us, 100 us [S10, S79]
            oe_setup=0,  # [S79]
            oe_hold=1,  # 0 after a write [S79]; before a poll not known: 10 ns, tightest
            address_hold=1,  # 50 ns [S79]
            data_hold=1,  # 10 ns [S79]
            high=0,  # none stated [S79]
            after_command=0,  # none stated
            valid=0,  # none stated
            ready=0,  # none stated
            erases=False,
            polls_at_once=False,  # not known: tightest
            sense=3_800,  # 3.0 V of a sibling [S93]; tightest
            power_up=10 * MS,  # tINIT 5..10 ms [S79]: the longer
            power_up_read=0,  # none stated
            access=3,  # 150 ns [S79]
            icc=30_000,  # from memory
            standby=150,  # from memory
            source="S79, S10",
        ),
    )
}


def limits_of(maker: Maker) -> Limits:
    """What the judge watches on this maker's chip."""
    return Limits(
        package="DIP-28",
        maxima_mv={0: maker.most, VCC: maker.most_vcc, A9: maker.most_raised, OE: maker.most_raised},
        minimum_mv=maker.least,
        vcc_pin=VCC,
        gnd_pins=(GND,),
        address_pins=A,
        data_pins=D,
        enable_pins=(CE, OE),
        raised_pins=(),  # nothing that a job does raises a pin, also where the maker allows it
        pulses=(),
        access_ticks=maker.access,
        float_ticks=1,  # tDF 60 ns [S1f]; Xicor and Catalyst: the longest of the known
        rise_ticks=0,
        recovery_ticks=0,
        vcc_read_mv=VCC_READ,
        vcc_most_mv=VCC_READ[1],
        bus=BusLimit(
            ce=CE,
            oe=OE,
            we=WE,
            width_ticks=(2, 0),  # 100 ns at least, no most [S74, S78b, S79]
            setup_ticks={"address": 0, "oe": maker.oe_setup, "data": 1},  # tAS 0, tDS 50 ns [S74, S78b, S79]
            hold_ticks={"address": maker.address_hold, "data": maker.data_hold, "oe": maker.oe_hold},
            high_ticks=maker.high,
            valid_ticks=maker.valid,
            load_ticks=maker.load,
            busy_ticks=maker.cycle,
            ready_ticks=maker.ready,
            commands=(ENABLE, DISABLE) if maker.after_command else (),
            command_ticks=maker.after_command,
            power_up_ticks=maker.power_up,
            power_up_read_ticks=maker.power_up_read,
            source=maker.source,
        ),
        source=f"{maker.source}, value by value in this file",
    )
