"""What the published facts say of 27C256 EPROMs, maker by maker: pins, levels, times, currents, and the judge's limits.

Every limit is typed by hand from the published facts and none comes from a definition file. Marks: S11 = ST M27C256B;
S17 = Atmel AT27C256R; S27 = National NM27C256; S30 = TI TMS27C256; S33 = AMD Am27C256; S32 = other AMD EPROMs with
that algorithm; S15 = ST M27C4002; S66, S67 = siblings; "from memory" = recalled, not read; "common practice" = a rule
of the trade; "tightest" = this maker's value is not known, so it is the strictest of those that are.
"""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.virtual.interface import Limits, PulseLimit, RaisedLimit

# The pins [S11, S17, S27, S30 printed in full; AMD from memory].
A = (10, 9, 8, 7, 6, 5, 4, 3, 25, 24, 21, 23, 2, 26, 27)
D = (11, 12, 13, 15, 16, 17, 18, 19)
VPP, CE, OE, A9, GND, VCC = 1, 20, 22, 24, 14, 28
SIZE = 32_768

# Levels, mV
VCC_READ = (4_750, 5_250)  # "5 V" in read, standby and identify [S11, S17], limits unknown: +-5 %, common practice
VID = (11_500, 12_500)  # A9 [S11, S17, S27], AMD from memory, TI tightest
MOST = 7_000  # VCC and plain pins, absolute maximum [S11, S17], the others tightest
LEAST = -500  # lowest DC level, -0.5 or -0.6 V [S11, S17]: the tighter
REST = (600, 300)  # VPP = VCC in read [S11, S17]: at most 0.6 V below and 0.3 V above it, common practice

# Times, ticks of 62.5 ns
SETUP = 32  # 2 us: address, data, VPP and VCC before the pulse [S17]; VPP and VCC on ST from memory
DATA_HOLD = 32  # 2 us after the pulse [S11, S17]
RELEASE = 32  # 2 us from D released to OE low [S11, S17]
PULSE = (1_520, 1_680)  # 95..105 us [S11, S17], TI from memory, National and AMD tightest
FLOAT = 3  # outputs float at most 130 ns after OE high [S11, S17]
RISE = 1  # VPP in at least 50 ns [S17], the others tightest

# Currents, uA
ICC_READ, ICC_STANDBY = 20_000, 100  # unknown for the 27C256; as a 27C64 [S67]
IA9 = 200  # as a 28F020 [S40], unknown for EPROMs


@dataclass(frozen=True)
class Maker:
    """What differs from maker to maker."""

    name: str
    id: tuple[int, int]
    vcc: tuple[int, int]  # program, verify and inhibit
    vpp: tuple[int, int]
    checks: tuple[tuple[int, int], ...]  # VCC of the final reads, beside the 5 V
    most_a9: int
    most_vpp: int
    pulses: int  # at most, of one word
    access: int  # ticks, slowest grade listed
    verify_access: int  # ticks, OE low to data with VPP up
    verify_ce_open: bool  # CE does not matter in the verify row
    icc: int
    ipp: int
    ipp_rest: int  # with VPP = VCC
    source: str


MAKERS = {
    maker.name: maker
    for maker in (
        Maker(
            name="st",
            id=(0x20, 0x8D),  # [S11]
            vcc=(6_000, 6_500),  # 6.25 +-0.25 V [S11]
            vpp=(12_500, 13_000),  # 12.75 +-0.25 V [S11]
            checks=(
                (5_700, 6_300),
                (3_990, 4_410),
            ),  # all words at 6 V, then 4.2 V [S15 sibling], +-5 %: common practice
            most_a9=13_500,  # [S11]
            most_vpp=14_000,  # [S11]
            pulses=25,  # algorithm A5, flow chart [S15 sibling]
            access=2,  # 80 ns, slowest column read [S11]
            verify_access=2,  # 100 ns [S11]
            verify_ce_open=False,  # CE high [S11]
            icc=50_000,  # [S11]
            ipp=50_000,  # [S11]
            ipp_rest=100,  # [S11]
            source="S11",
        ),
        Maker(
            name="atmel",
            id=(0x1E, 0x8C),  # [S17]
            vcc=(6_250, 6_750),  # 6.5 +-0.25 V [S17]
            vpp=(12_750, 13_250),  # 13.0 +-0.25 V [S17]
            checks=(),  # VCC = VPP = 5.0 V [S17]
            most_a9=14_000,  # [S17]
            most_vpp=14_000,  # [S17]
            pulses=11,  # one blind, then up to 10 more: algorithm A8 [S17]
            access=3,  # 150 ns, -15 [S17]
            verify_access=3,  # 150 ns [S17]
            verify_ce_open=True,  # CE X [S17]
            icc=25_000,  # [S17]
            ipp=25_000,  # [S17]
            ipp_rest=10,  # [S17]
            source="S17",
        ),
        Maker(
            name="ti",
            id=(0x97, 0x04),  # from memory
            vcc=(6_250, 6_750),  # 6.5 V [S30], tolerance unknown: +-0.25 V as all the others, tightest
            vpp=(12_750, 13_250),  # 13 V [S30], tolerance likewise
            checks=((4_500, 5_500),),  # 5 V +-10 %: from memory
            most_a9=13_500,  # unknown: tightest
            most_vpp=14_000,  # from memory
            pulses=10,  # algorithm A9: from memory
            access=4,  # 250 ns, -25 [S30]
            verify_access=3,  # unknown: 150 ns, tightest
            verify_ce_open=False,  # unknown: tightest
            icc=50_000,  # unknown: the most of the known
            ipp=50_000,  # unknown: the most of the known
            ipp_rest=100,  # unknown: the most of the known
            source="S30 and from memory",
        ),
        Maker(
            name="national",
            id=(0x8F, 0x04),  # [S27]
            vcc=(6_000, 6_500),  # 6.25 V [S66 sibling], tolerance unknown: +-0.25 V, tightest
            vpp=(12_500, 13_000),  # 12.75 V [S27], tolerance likewise
            checks=(),  # 5 V: algorithm A12
            most_a9=13_500,  # unknown: tightest
            most_vpp=13_500,  # unknown: tightest
            pulses=25,  # algorithm A12, fast: from memory
            access=4,  # 200 ns [S27]; CE unknown: 250 ns, the slowest of the known
            verify_access=3,  # unknown: 150 ns, tightest
            verify_ce_open=False,  # unknown: tightest
            icc=50_000,  # unknown: the most of the known
            ipp=50_000,  # unknown: the most of the known
            ipp_rest=100,  # unknown: the most of the known
            source="S27, S66 sibling and from memory",
        ),
        Maker(
            name="amd",
            id=(0x01, 0x10),  # from memory
            vcc=(6_000, 6_500),  # 6.25 V from memory, tolerance unknown: +-0.25 V, tightest
            vpp=(12_500, 13_000),  # 12.75 V from memory, +-0.25 V [S32 sibling]
            checks=((4_988, 5_512),),  # VCC = VPP = 5.25 V from memory, +-5 %: common practice
            most_a9=13_500,  # from memory
            most_vpp=13_500,  # from memory
            pulses=25,  # algorithm A7: from memory
            access=4,  # 250 ns, -255 [S33]
            verify_access=3,  # unknown: 150 ns, tightest
            verify_ce_open=False,  # unknown: tightest
            icc=50_000,  # from memory
            ipp=30_000,  # from memory
            ipp_rest=100,  # [S33]
            source="S33, S32 sibling and from memory",
        ),
    )
}


def limits_of(maker: Maker) -> Limits:
    """What the judge watches on this maker's chip."""
    return Limits(
        package="DIP-28",
        maxima_mv={0: MOST, VCC: MOST, VPP: maker.most_vpp, A9: maker.most_a9},
        minimum_mv=LEAST,
        vcc_pin=VCC,
        gnd_pins=(GND,),
        address_pins=A,
        data_pins=D,
        enable_pins=(CE, OE),
        raised_pins=(VPP, A9),
        pulses=(
            PulseLimit(
                name="program",
                pin=CE,
                active_low=True,
                raised={VPP: maker.vpp},
                min_ticks=PULSE[0],
                max_ticks=PULSE[1],
                setup_ticks={"address": SETUP, "data": SETUP, "raised": SETUP, "vcc": SETUP},
                hold_ticks={"address": 0, "data": DATA_HOLD, "raised": 0},  # address: 0 after OE high [S11, S17]
                vcc_mv=maker.vcc,
                most=maker.pulses,
                high_pins=(OE,),  # the mode table [S11, S17]
                only_high=(OE,) if maker.verify_ce_open else (),
                source=maker.source,
            ),
        ),
        standing=(
            RaisedLimit(
                name="verify",
                raised={VPP: maker.vpp},
                vcc_mv=maker.vcc,
                output_pins=(OE,),  # CE high, or whatever it is [S11, S17]
                access_ticks=maker.verify_access,
                release_ticks=RELEASE,
                source=maker.source,
            ),
        ),
        rest_mv={VPP: REST},
        access_ticks=maker.access,
        float_ticks=FLOAT,
        rise_ticks=RISE,
        recovery_ticks=0,  # a pin of its own needs none before the next enable
        vcc_read_mv=VCC_READ,
        vcc_steps_mv=maker.checks,
        vcc_most_mv=maker.vcc[1],
        identify_mv=VID,
        identify_pin=A9,
        source=f"{maker.source}, value by value in this file",
    )
