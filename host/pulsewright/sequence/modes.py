"""Mode changes in their safe order: raised levels, D, outputs, VCC, rail, address, lines, D, raised levels again."""

from __future__ import annotations

from collections.abc import Iterable

from pulsewright.chip.model import Mode, SupplyStep
from pulsewright.rig.model import RailStep
from pulsewright.sequence.build import US, Builder
from pulsewright.sequence.levels import choose_raised, choose_vcc, top_mv
from pulsewright.units import Rounding, ticks
from pulsewright.wire.ops import Instruction
from pulsewright.wire.permit import VccStep
from pulsewright.wire.tables import Channel, Level, Op, Rail

_MEASURE_LIMIT_PS = 2_000 * US
_CLEAR_ABOVE_VCC_MV = 300  # a position that is no more than this above VCC is no longer raised (H5)


def raised_steps(b: Builder, mode: Mode) -> dict[str, SupplyStep]:
    """Pin -> supply step of a mode's raised pins."""
    return {pin: b.definition.supplies[name] for pin, name in b.pins.raised_levels(mode).items()}


def switch_mask(b: Builder, pins: dict[str, SupplyStep]) -> int:
    """Mask of the raised switches of some pins."""
    return sum(1 << b.pins.switch(pin).number for pin in pins)


def move_vcc(b: Builder, step: SupplyStep, rail_step: RailStep | None = None) -> None:
    """VCC to another step, with nothing raised and, where H cannot be driven on the way, H released."""
    target = rail_step or choose_vcc(b.definition, b.rig, step)
    if b.state.vcc == target:
        return
    floor = b.rig.driven_from_mv
    if b.state.high_driven and min(target.mv, b.state.vcc.mv if b.state.vcc else 0) < floor:
        b.emit(Op.HIGH, how=0)
        b.state.high_driven = False
        b.edge(b.line_settle_ps)
        b.wait(0)
    b.emit(Op.RAIL, rail=Rail.VCC, step=target.number)
    b.edge(b.rig.vcc.settle_ps + step.settle_ps)  # the part's own wait begins when the supply is good
    b.wait(0)
    measure_vcc(b, step, target)
    b.state.vcc = target
    if target.mv >= floor and not b.state.high_driven:
        b.emit(Op.HIGH, how=1)
        b.state.high_driven = True
        b.edge(b.line_settle_ps)


def measure_vcc(b: Builder, step: SupplyStep, rail_step: RailStep) -> None:
    """Full VCC measured in its window; `narrow_vcc` makes it the window of all that the rail step serves."""
    socket = b.rig.socket_vcc
    low, high = socket.count_at_least(step.min_mv), socket.count_at_most(step.max_mv)
    limit = ticks(_MEASURE_LIMIT_PS, Rounding.AT_LEAST)
    b.vcc_looks.append((len(b.items), rail_step.number))
    b.emit(Op.MEASURE, channel=Channel.SOCKET_VCC, low=low, high=high, limit=limit)


def narrow_vcc(b: Builder, windows: Iterable[VccStep]) -> None:
    """A rail step that serves several supplies is measured in the permit's window: VCC need not move between them."""
    by_step = {one.step: one for one in windows}
    for index, number in b.vcc_looks:
        instruction, origin = b.items[index]
        window = by_step.get(number)
        if window is not None and isinstance(instruction, Instruction):
            args = {**instruction.args, "low": window.low, "high": window.high}
            b.items[index] = (Instruction(instruction.op, args), origin)


def move_raised_rail(b: Builder, wanted: dict[str, SupplyStep]) -> None:
    """The raised rail to the step that serves these pins, settled; measured in the window it is to be held in."""
    target = choose_raised(b.definition, b.rig, wanted)
    scaling = b.rig.raised.scaling
    low = scaling.count_at_least(max(step.min_mv for step in wanted.values()))
    high = scaling.count_at_most(min(top_mv(b.definition, b.rig, pin, step) for pin, step in wanted.items()))
    if b.state.raised == target and low <= b.state.raised_low and b.state.raised_high <= high:
        return
    open_switches(b, {})
    if b.state.raised != target:
        b.emit(Op.RAIL, rail=Rail.RAISED, step=target.number)
        b.edge(b.rig.raised.settle_ps)
        b.wait(0)
    limit = ticks(_MEASURE_LIMIT_PS, Rounding.AT_LEAST)
    b.emit(Op.MEASURE, channel=Channel.RAISED_RAIL, low=low, high=high, limit=limit)
    b.state.raised, b.state.raised_low, b.state.raised_high = target, low, high


def measure_raised(b: Builder, wanted: dict[str, SupplyStep]) -> None:
    """Each raised level measured at its position (H8)."""
    for pin, step in wanted.items():
        switch = b.pins.switch(pin)
        low = switch.scaling.count_at_least(step.min_mv)
        high = switch.scaling.count_at_most(top_mv(b.definition, b.rig, pin, step))
        limit = ticks(_MEASURE_LIMIT_PS, Rounding.AT_LEAST)
        b.emit(Op.MEASURE, channel=Channel.POSITION + switch.number, low=low, high=high, limit=limit)


def open_switches(b: Builder, keep: dict[str, SupplyStep], *, look: bool = False) -> None:
    """Opens raised switches but those of the pins of `keep`; the longest fall passes before anything else.

    `look`: each is then measured to be gone, and waited for as long as the rig file allows. A word read under a level
    that falls too slowly would be an ID byte, or nothing.
    """
    stay = switch_mask(b, keep)
    going = b.state.switches & ~stay
    if not going:
        return
    b.emit(Op.SWITCHES, on=b.state.switches & stay)
    b.edge(max(s.fall_ps for s in b.rig.switches if going >> s.number & 1))
    b.wait(0)
    b.state.switches &= stay
    if look and b.state.vcc is not None:
        gone_mv = b.state.vcc.mv + b.state.vcc.error_mv + _CLEAR_ABOVE_VCC_MV
        limit = ticks(b.rig.fall_limit_ps, Rounding.AT_LEAST)
        for switch in (one for one in b.rig.switches if going >> one.number & 1):
            high = switch.scaling.count_at_most(gone_mv)
            b.emit(Op.MEASURE, channel=Channel.POSITION + switch.number, low=0, high=high, limit=limit)
    b.state.levels = {pin: level for pin, level in b.state.levels.items() if pin in keep}


def _close_switches(b: Builder, wanted: dict[str, SupplyStep]) -> bool:
    """Closes the raised switches of some pins, and whether any moved; what follows waits for the longest rise."""
    mask = switch_mask(b, wanted)
    b.state.levels = {pin: step.name for pin, step in wanted.items()}
    if b.state.switches == mask:
        return False
    b.emit(Op.SWITCHES, on=mask)
    b.edge(max(s.rise_ps for s in b.rig.switches if mask >> s.number & 1))
    b.state.switches = mask
    return True


def _kept(b: Builder, mode: Mode, wanted: dict[str, SupplyStep]) -> dict[str, SupplyStep]:
    """What may stay raised on the way to a mode: pins it wants at the level they have, with VCC and rail left alone."""
    if not wanted or b.state.vcc != choose_vcc(b.definition, b.rig, b.definition.supplies[mode.vcc]):
        return {}
    if b.state.raised != choose_raised(b.definition, b.rig, wanted):
        return {}
    return {pin: step for pin, step in wanted.items() if b.state.levels.get(pin) == step.name}


def _set_address(b: Builder, mode: Mode, at: int | None, *, word: bool) -> None:
    """The address a mode wants: a constant where its row says low, the word in hand in a word loop, else `at`."""
    bits = b.pins.raised_address_bits(mode)
    if mode.levels.get("A") == "L":
        b.address(bits)
    elif word:
        b.address_word()
    elif at is not None:
        b.address(at | bits)
    elif bits:
        b.address(bits)


def _drive(b: Builder, data: str | int | None) -> None:
    if data == "image":
        b.emit(Op.DRIVE_WORD)
    elif isinstance(data, int):
        b.emit(Op.DRIVE, word=data)
    else:
        return
    b.state.data = "driven"
    b.edge(b.line_settle_ps)


def enter(
    b: Builder,
    name: str,
    *,
    data: str | int | None = None,
    at: int | None = None,
    word: bool = False,
    drive: bool = True,
) -> None:
    """From the mode in force to another, in a fixed order.

    Raised off (but what the mode wants as it is), D off, outputs off, VCC, rail, address, lines, D, raised on.
    `data` overrides what the mode row says of D; `drive` False leaves D released whatever the row says; `word`: inside
    a loop over words, where no level is measured (`prove_level` did it before).
    """
    mode = b.definition.modes[name]
    levels = b.pins.control_levels(mode)
    drives = data if data is not None else (mode.data if isinstance(mode.data, int) else None)
    if not drive:
        drives = None
    wanted = raised_steps(b, mode)
    open_switches(b, _kept(b, mode, wanted), look=not word)
    if drives is None:
        b.release()
    rising = {role: level for role, level in levels.items() if level is Level.HIGH}
    was_on = b.state.outputs
    b.set_lines(rising)
    if was_on and mode.data != "out":
        b.wait(b.timing_max_ps("tDF"))
    b.state.outputs = mode.data == "out"
    move_vcc(b, b.definition.supplies[mode.vcc])
    if wanted:
        move_raised_rail(b, wanted)
    _set_address(b, mode, at, word=word)
    b.set_lines(levels)
    _drive(b, drives)
    if wanted and _close_switches(b, wanted) and not word:
        b.wait(0)
        measure_raised(b, wanted)
    b.state.mode = name


def prove_level(b: Builder, name: str) -> None:
    """Before a word loop: its raised level is made and measured once at its position, with nothing pulsed."""
    mode = b.definition.modes[name]
    wanted = raised_steps(b, mode)
    with b.about(f"{', '.join(step.name for step in wanted.values())} measured before its first use", where=mode.where):
        enter(b, name, drive=False)
        enter(b, "standby")
        b.wait(b.timing_min_ps("tVR"))
