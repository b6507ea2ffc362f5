"""The first part of every sequence: the look at the socket with VCC at most, from VCC off to `seated`."""

from __future__ import annotations

from pulsewright.chip.model import Mode
from pulsewright.sequence.build import US, Builder
from pulsewright.sequence.levels import choose_vcc
from pulsewright.sequence.modes import measure_vcc
from pulsewright.units import Rounding, ticks
from pulsewright.wire.ops import line_byte
from pulsewright.wire.tables import Bias, Channel, Fail, Group, Level, Op, Rail, Range

_BIAS_SETTLE_PS = 50 * US  # 100 k of weak pull on 200 pF of position, cable and chip, twice over
_NOTHING_MV = 300  # H11: what may stand with VCC off
_TURNED_MV = 1_500  # under this through the probe resistor: turned, shifted or short
_MEASURE_LIMIT_PS = 2_000 * US


def _measure_limit_ticks() -> int:
    return ticks(_MEASURE_LIMIT_PS, Rounding.AT_LEAST)


def standby(b: Builder) -> Mode:
    """The mode in which the chip neither drives D nor takes anything: the one named standby."""
    return b.definition.modes["standby"]


def vcc_off_look(b: Builder) -> None:
    """VCC off, lines low, D pulled down: what stands up is a short or is powered through a line."""
    with b.about("VCC off, lines low: nothing may stand up"):
        b.emit(Op.HIGH, how=0)
        b.emit(Op.RELEASE)  # at rest the rig holds D low like every line
        b.set_lines(dict.fromkeys(b.pins.control_roles, Level.LOW))
        b.address(0)
        b.emit(Op.BIAS, groups=Group.DATA, how=Bias.DOWN)
        b.edge()
        b.wait(_BIAS_SETTLE_PS)
        b.emit(Op.SAMPLE)
        b.emit(Op.COMPARE, word=0, mask=_data_mask(b))
        b.fail_unless(Fail.SEAT_STANDS_UP)
        socket = b.rig.socket_vcc
        b.emit(
            Op.MEASURE,
            channel=Channel.SOCKET_VCC,
            low=0,
            high=socket.count_at_most(_NOTHING_MV),
            limit=ticks(b.rig.off_limit_ps, Rounding.AT_LEAST),
        )
        for switch in b.rig.switches:
            high = switch.scaling.count_at_most(_NOTHING_MV)
            limit = ticks(b.rig.fall_limit_ps, Rounding.AT_LEAST)
            b.emit(Op.MEASURE, channel=Channel.POSITION + switch.number, low=0, high=high, limit=limit)


def _data_mask(b: Builder) -> int:
    return (1 << b.definition.width) - 1


def probe(b: Builder) -> None:
    """VCC through the probe resistor with every line low: a turned or shifted chip pulls it down."""
    step = b.definition.supplies[standby(b).vcc]
    rail_step = choose_vcc(b.definition, b.rig, step)
    socket = b.rig.socket_vcc
    high = socket.count_at_most(step.max_mv)
    with b.about("VCC through the probe resistor, lines low: turned, shifted or short?"):
        b.emit(Op.RAIL, rail=Rail.VCC, step=rail_step.number)
        b.emit(Op.RANGE, which=Range.PROBE)
        b.edge(b.rig.vcc.settle_ps)
        b.wait(0)
        low = socket.count_at_least(_TURNED_MV)
        b.emit(Op.MEASURE, channel=Channel.SOCKET_VCC, low=low, high=high, limit=_measure_limit_ticks())
    if step.current_ua is not None:
        drawn_mv = b.rig.probe_ohm * step.current_ua // 1000 + rail_step.error_mv + socket.error_mv
        with b.about("VCC through the probe resistor: the current the definition states"):
            low = socket.count_at_least(max(_TURNED_MV, rail_step.mv - drawn_mv))
            b.emit(Op.MEASURE, channel=Channel.SOCKET_VCC, low=low, high=high, limit=_measure_limit_ticks())
    other_power(b)
    b.state.vcc = rail_step


def other_power(b: Builder) -> None:
    """The power positions of other packages, pulled down weakly, must stay down."""
    own = {b.pins.position(pin) for pin in b.definition.pins["VCC"]}
    others = [s.position for s in b.rig.vcc_switches if s.position not in own and s.drop_mv < _NOTHING_MV]
    lines = [line for p in others if (line := b.rig.site.positions[p].line) is not None]
    with b.about("power positions of other packages stay low"):
        b.emit(Op.LINES, lines=bytes(line_byte(line, Level.RELEASED) for line in lines))
        b.emit(Op.BIAS, groups=Group.POWER, how=Bias.DOWN)
        b.edge()
        b.wait(_BIAS_SETTLE_PS)
        for line in lines:
            b.emit(Op.SENSE, line=line, **{"is": 0})
            b.fail_unless(Fail.SEAT_OTHER_POWER)
        b.emit(Op.BIAS, groups=Group.POWER, how=Bias.OFF)  # one of them carries an address later
        b.edge()
        b.address(0)


def full_vcc(b: Builder) -> None:
    """VCC to the socket without the resistor, measured in its window."""
    step = b.definition.supplies[standby(b).vcc]
    with b.about(f"{step.name} to the socket, measured", where=step.where):
        b.emit(Op.RANGE, which=Range.FULL)
        b.edge(b.rig.vcc.settle_ps + step.settle_ps)  # the part's own wait begins when the supply is good
        b.wait(0)
        if b.state.vcc is not None:
            measure_vcc(b, step, b.state.vcc)
            if b.state.vcc.mv >= b.rig.driven_from_mv:
                b.emit(Op.HIGH, how=1)
                b.state.high_driven = True


def bias_looks(b: Builder) -> None:
    """Outputs off: D follows the bias both ways; outputs on: it follows neither way."""
    idle = b.pins.control_levels(standby(b))
    reading = b.pins.control_levels(b.definition.modes["read"])
    mask = _data_mask(b)
    with b.about("outputs off: D follows a weak pull up and down"):
        b.set_lines(idle)
        for how, word, why in ((Bias.UP, mask, Fail.SEAT_DATA_LOW), (Bias.DOWN, 0, Fail.SEAT_DATA_HIGH)):
            b.emit(Op.BIAS, groups=Group.DATA, how=how)
            b.edge()
            b.wait(_BIAS_SETTLE_PS + b.timing_max_ps("tDF"))
            b.emit(Op.SAMPLE)
            b.emit(Op.COMPARE, word=word, mask=mask)
            b.fail_unless(why)
    with b.about("outputs on: a chip holds D against a weak pull"):
        b.set_lines(reading)
        for how in (Bias.UP, Bias.DOWN):
            b.emit(Op.BIAS, groups=Group.DATA, how=how)
            b.edge()
            b.wait(_BIAS_SETTLE_PS + b.access_ps("read"))
            b.emit(Op.SAMPLE)
            if how is Bias.UP:
                b.emit(Op.KEEP)
        b.emit(Op.COMPARE_KEPT, mask=mask)
        b.fail_unless(Fail.SEAT_FLOATING)
        b.set_lines(idle)
        b.emit(Op.BIAS, groups=Group.DATA, how=Bias.OFF)
        b.edge()
        b.wait(b.timing_max_ps("tDF"))
        b.emit(Op.SEATED)
    b.state.mode = "standby"


def power_up(b: Builder) -> None:
    """From everything off to a seated chip in standby at its read VCC."""
    with b.about("", part="seating"):
        vcc_off_look(b)
        probe(b)
        full_vcc(b)
        bias_looks(b)
