"""Writes on the bus that each break a rule of the judge, by a tick where it has a number, and which rule.

Those of a 28C256 are for the maker whose table has the number [S74, S78b, S79]; those of `FLASH_WAVES` for a 39SF020A
[S70].
"""

from __future__ import annotations

from collections.abc import Callable

from tests.virtual.bus_wave import DISABLE, ENABLE, EeBus
from tests.virtual.waveform import A9, CE, HIGH, MS, OE, US, A, D

WE = 27
Wave = Callable[[EeBus], None]


def ready(bus: EeBus, at: int = 0x100, word: int = 0x33) -> None:
    """CE low, address and data standing, everything but WE."""
    bus.set({bus.ce: 0})
    bus.address(at)
    bus.drive(word)
    bus.wait(6)


def strobe(bus: EeBus, width: int = 3) -> None:
    """The WE pulse."""
    bus.set({bus.we: 0})
    bus.wait(width)
    bus.set({bus.we: HIGH})


# ---- one write ----


def narrow(bus: EeBus) -> None:
    """62.5 ns of WE, 100 ns wanted."""
    ready(bus)
    strobe(bus, 1)


def narrow_ce(bus: EeBus) -> None:
    """62.5 ns of CE under WE."""
    bus.address(0x100)
    bus.set({WE: 0})
    bus.drive(0x33)
    bus.wait(6)
    bus.set({CE: 0})
    bus.wait(1)
    bus.set({CE: HIGH})


def address_with_the_fall(bus: EeBus) -> None:
    """The address moves in the group in which WE falls: in which order, nobody knows."""
    ready(bus, 0x100)
    bus.set({A[0]: HIGH, WE: 0})
    bus.wait(3)
    bus.set({WE: HIGH})


def address_held_short(bus: EeBus) -> None:
    """The address moves 125 ns after WE's fall, 150 ns wanted [S78b]."""
    ready(bus, 0x100)
    bus.set({WE: 0})
    bus.wait(2)
    bus.set({A[0]: HIGH})
    bus.wait(2)
    bus.set({WE: HIGH})


def data_with_the_rise(bus: EeBus) -> None:
    """D moves in the group in which WE rises, 50 ns of set-up wanted."""
    ready(bus)
    bus.set({WE: 0})
    bus.wait(3)
    bus.set({D[0]: 0, WE: HIGH})


def data_held_short(bus: EeBus) -> None:
    """D moves with the tick of WE's rise, 10 ns of hold wanted [S78b, S79]."""
    ready(bus)
    strobe(bus)
    bus.drive(0x44)


def data_let_go(bus: EeBus) -> None:
    """D is let go with the tick of WE's rise."""
    ready(bus)
    strobe(bus)
    bus.release()


def data_late(bus: EeBus) -> None:
    """D moves 1.0625 us after the fall, valid within 1 us wanted [S78b]."""
    ready(bus)
    bus.set({WE: 0})
    bus.wait(17)
    bus.drive(0x44)
    bus.wait(2)
    bus.set({WE: HIGH})


def not_driven(bus: EeBus) -> None:
    """D is let go before the rise, pulled to a level all the same."""
    ready(bus)
    bus.set({WE: 0})
    bus.wait(1)
    bus.release()
    bus.set(dict.fromkeys(D, HIGH))
    bus.wait(2)
    bus.set({WE: HIGH})


def floating_address(bus: EeBus) -> None:
    """An address pin at 1.4 V."""
    ready(bus)
    bus.set({A[3]: 1_400})
    bus.wait(6)
    strobe(bus)


def open_address(bus: EeBus) -> None:
    """An address pin that nothing drives."""
    ready(bus)
    bus.set({A[3]: None})
    bus.wait(6)
    strobe(bus)


def floating_data(bus: EeBus) -> None:
    """A data pin at 1.4 V."""
    ready(bus)
    bus.set({D[3]: 1_400})
    bus.wait(6)
    strobe(bus)


def oe_just_high(bus: EeBus) -> None:
    """OE rises in the group in which WE falls, CE low before with D free: 10 ns wanted [S78b], and never with it."""
    bus.set({CE: 0, OE: 0})
    bus.address(0x100)
    bus.wait(6)
    bus.set({OE: HIGH, WE: 0})
    bus.wait(1)
    bus.drive(0x33)
    bus.wait(3)
    bus.set({WE: HIGH})


def oe_low(bus: EeBus) -> None:
    """WE strobed with OE low and D driven: no write, and a bus fight on top."""
    bus.address(0x100)
    bus.set({OE: 0})
    bus.drive(0x33)
    bus.wait(6)
    bus.set({CE: 0, WE: 0})
    bus.wait(3)
    bus.set({WE: HIGH, CE: HIGH})


def oe_falls(bus: EeBus) -> None:
    """OE falls in the pulse; the outputs go on against D."""
    ready(bus)
    bus.set({WE: 0})
    bus.wait(2)
    bus.set({OE: 0})
    bus.wait(2)
    bus.set({WE: HIGH, OE: HIGH})


def oe_back_too_soon(bus: EeBus) -> None:
    """OE falls with the tick of WE's rise, 10 ns wanted; CE high then, so that D is nobody's."""
    ready(bus)
    bus.set({WE: 0})
    bus.wait(3)
    bus.set({CE: HIGH})
    bus.set({OE: 0})


# ---- and the next ----


def strobed_too_soon(bus: EeBus) -> None:
    """WE high for no whole tick, 50 ns wanted [S74]: address and data stood already."""
    ready(bus)
    strobe(bus)
    strobe(bus)


def loads_too_fast(bus: EeBus) -> None:
    """15 ticks from fall to fall, 1 us wanted [S78b]."""
    bus.load(0x100, 0x33)
    bus.pause = 6
    bus.load(0x101, 0x33)
    bus.load(0x102, 0x33)


def load_stalls(bus: EeBus) -> None:
    """A tick more than 100 us from load to load [S78b]; the next two are lost with it."""
    bus.load(0x100, 0x33)
    bus.wait(100 * US + 1 - bus.width - bus.pause - bus.setup)
    bus.load(0x101, 0x33)


def load_stalls_long(bus: EeBus) -> None:
    """9.9 ms from load to load."""
    bus.load(0x100, 0x33)
    bus.wait(9_900 * US)
    bus.load(0x101, 0x33)


def after_the_command(bus: EeBus) -> None:
    """WE high for 15 ticks after the last byte of the command, 1 us wanted [S78b]."""
    bus.width = 4
    bus.loads(ENABLE[:2])
    bus.pause = 9
    bus.load(*ENABLE[2])
    bus.load(0x100, 0x33)


def after_the_other_command(bus: EeBus) -> None:
    """The same after the six bytes that take protection off."""
    bus.width = 4
    bus.loads(DISABLE[:5])
    bus.pause = 9
    bus.load(*DISABLE[5])
    bus.load(0x100, 0x33)


def busy_all_the_same(bus: EeBus) -> None:
    """A look, whatever it said, and the next page while the write cycle runs."""
    bus.loads([(0x100, 0x33)])
    bus.wait(MS)
    bus.look(0x100)
    bus.wait(US)
    bus.loads([(0x140, 0x33)])


def ready_too_soon(bus: EeBus) -> None:
    """A write 159 ticks after the poll that said done, 10 us wanted [S78b]."""
    bus.loads([(0x100, 0x33)])
    bus.wait(20 * MS)
    bus.look(0x100)
    bus.wait(159 - 3 - bus.setup)
    bus.load(0x140, 0x33)


def early_write(bus: EeBus) -> None:
    """A write a tick before the 5 ms after power-up [S78b]."""
    bus.down()
    bus.wait(MS)
    bus.power()
    bus.standby()
    bus.wait(5 * MS - US - bus.setup - 1)
    bus.load(0x100, 0x33)


def early_read(bus: EeBus) -> None:
    """A read a tick before the 100 us after power-up [S78b]."""
    bus.down()
    bus.wait(MS)
    bus.power()
    bus.standby()
    bus.wait(100 * US - US - 1 - bus.access)
    bus.look(0x100)


def low_supply(bus: EeBus) -> None:
    """A write at VCC 4.499 V."""
    bus.power(4_499)
    bus.wait(20 * MS)
    bus.load(0x100, 0x33)


def load_stalls_after_a_look(bus: EeBus) -> None:
    """A look before the page does not excuse what comes in it."""
    bus.look(0x100)
    bus.wait(US)
    load_stalls(bus)


def blind_sample(bus: EeBus) -> None:
    """A sample with the outputs off is no look at the chip."""
    bus.load(0x100, 0x33)
    bus.wait(MS)
    bus.sample()
    bus.load(0x101, 0x33)


def ready_too_soon_after_all(bus: EeBus) -> None:
    """The first look came before the window closed: the poll that counts is the last, 159 ticks before the write."""
    bus.loads([(0x100, 0x33)])
    bus.look(0x100)
    bus.wait(MS)
    bus.look(0x100)
    bus.wait(20 * MS)
    bus.look(0x100)
    bus.wait(159 - 3 - bus.setup)
    bus.load(0x140, 0x33)


def raised_pin(bus: EeBus) -> None:
    """A9 at 12 V, which the part stands and no job uses."""
    bus.set({A9: 12_000})


def too_high_a_pin(bus: EeBus) -> None:
    """A9 at 12 V on a part that stands 7 V [S78b]."""
    bus.set({A9: 12_000})


BUS_WAVES: list[tuple[str, Wave, set[str]]] = [
    *((maker, narrow, {"write width"}) for maker in ("atmel", "xicor", "catalyst")),
    ("atmel", narrow_ce, {"write width"}),
    ("atmel", address_with_the_fall, {"address setup"}),
    ("xicor", address_held_short, {"address hold"}),
    ("atmel", data_with_the_rise, {"data setup"}),
    ("xicor", data_held_short, {"data hold"}),
    ("catalyst", data_held_short, {"data hold"}),
    ("catalyst", data_let_go, {"data hold"}),
    ("xicor", data_late, {"data valid"}),
    ("atmel", not_driven, {"data not driven"}),
    ("atmel", floating_address, {"floating input"}),
    ("atmel", open_address, {"floating input"}),
    ("atmel", floating_data, {"floating input"}),
    ("atmel", oe_just_high, {"control setup"}),
    ("xicor", oe_just_high, {"control setup"}),
    ("atmel", oe_low, {"pulse control", "bus fight"}),
    ("atmel", oe_falls, {"control in pulse", "bus fight"}),
    ("atmel", oe_back_too_soon, {"control hold"}),
    ("atmel", strobed_too_soon, {"write high"}),
    ("xicor", loads_too_fast, {"load gap"}),
    ("xicor", load_stalls, {"load gap"}),
    ("catalyst", load_stalls, {"load gap"}),
    ("atmel", load_stalls_long, {"load gap"}),
    ("xicor", load_stalls_after_a_look, {"load gap"}),
    ("atmel", blind_sample, {"load gap"}),
    ("xicor", after_the_command, {"command gap"}),
    ("xicor", after_the_other_command, {"command gap"}),
    ("atmel", busy_all_the_same, {"write while busy"}),
    ("xicor", ready_too_soon, {"ready time"}),
    ("xicor", ready_too_soon_after_all, {"ready time"}),
    ("atmel", early_write, {"power-up"}),
    ("xicor", early_write, {"power-up"}),
    ("catalyst", early_write, {"power-up"}),
    ("xicor", early_read, {"power-up"}),
    ("atmel", low_supply, {"power-up"}),
    ("atmel", raised_pin, {"above VCC"}),
    ("xicor", too_high_a_pin, {"absolute maximum"}),
]

# the same on makers whose table does not have the number: nothing to report
SILENT: list[tuple[str, Wave]] = [
    ("atmel", address_held_short),
    ("catalyst", address_held_short),
    ("atmel", data_held_short),
    ("atmel", data_let_go),
    ("atmel", data_late),
    ("catalyst", data_late),
    ("atmel", loads_too_fast),
    ("catalyst", loads_too_fast),
    ("atmel", load_stalls),
    ("catalyst", after_the_command),
    ("atmel", after_the_command),
    ("atmel", ready_too_soon),
    ("catalyst", ready_too_soon),
    ("atmel", early_read),
    ("catalyst", early_read),
]
