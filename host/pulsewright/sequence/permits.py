"""What a sequence is permitted: made from the definition and the rig, sealed with the program's CRC-32."""

from __future__ import annotations

import zlib
from collections.abc import Iterable, Iterator

from pulsewright.chip.model import (
    Definition,
    EachStep,
    ExpectStep,
    Mode,
    ModeStep,
    PulseStep,
    RepeatStep,
    Step,
)
from pulsewright.rig.model import RailStep, Rig
from pulsewright.sequence.build import Builder
from pulsewright.sequence.identity import wanted_ids
from pulsewright.sequence.levels import choose_raised, top_mv
from pulsewright.sequence.modes import raised_steps
from pulsewright.sequence.pinmap import PinMap
from pulsewright.units import Rounding, ticks
from pulsewright.wire.permit import NO_SWITCH, Permit, VccStep
from pulsewright.wire.tables import Identity, Level

_RAISED_VCC_MV = 5_500  # VCC above this is a raised level


def _ceilings(b: Builder, modes: Iterable[str]) -> dict[int, int]:
    """Raised switch -> highest count any of these modes allows there."""
    ceilings: dict[int, int] = {}
    for name in modes:
        for pin, step in raised_steps(b, b.definition.modes[name]).items():
            switch = b.pins.switch(pin)
            count = switch.scaling.count_at_most(top_mv(b.definition, b.rig, pin, step))
            ceilings[switch.number] = max(count, ceilings.get(switch.number, 0))
    return ceilings


def vcc_windows(definition: Definition, rig: Rig, used: Iterable[tuple[str, RailStep]]) -> tuple[VccStep, ...]:
    """Each VCC rail step in use with the tightest window of the supply steps that use it."""
    windows: dict[int, tuple[int, int]] = {}
    for name, rail_step in used:
        step = definition.supplies[name]
        low, high = rig.socket_vcc.count_at_least(step.min_mv), rig.socket_vcc.count_at_most(step.max_mv)
        seen = windows.get(rail_step.number, (low, high))
        windows[rail_step.number] = max(low, seen[0]), min(high, seen[1])
    settle = ticks(rig.vcc.settle_ps, Rounding.AT_LEAST)
    return tuple(VccStep(number, low, high, settle) for number, (low, high) in sorted(windows.items()))


def _drives(definition: Definition, pins: PinMap) -> tuple[bytes, ...]:
    """Every control-line pattern of the mode table in which the chip drives D."""
    patterns = {pins.enabling(mode) for mode in definition.modes.values() if mode.data == "out"}
    return tuple(sorted(patterns))


def _pulsed(steps: Iterable[Step]) -> Iterator[tuple[str, PulseStep]]:
    """Each pulse step with the mode in which it comes."""
    mode = ""
    for step in steps:
        if isinstance(step, ModeStep):
            mode = step.mode
        elif isinstance(step, PulseStep):
            yield mode, step
        elif isinstance(step, RepeatStep | EachStep):
            yield from _pulsed(step.steps)
        elif isinstance(step, ExpectStep):
            yield from _pulsed(step.else_)


def _safe_mode(definition: Definition, pins: PinMap, modes: list[str]) -> Mode:
    """Standby; where that would be a pulse while a raised level still falls, the mode named inhibit."""
    standby = definition.modes["standby"]
    idle = pins.control_levels(standby)
    for method in (definition.program, definition.erase):
        for name, pulse in _pulsed(method.steps if method is not None else ()):
            if name not in modes or name not in definition.modes:
                continue
            row = pins.control_levels(definition.modes[name])
            row[pulse.pin] = Level.LOW if pulse.to == "L" else Level.HIGH
            if all(idle.get(role, level) == level for role, level in row.items()):
                return definition.modes.get("inhibit", standby)
    return standby


def make_permit(
    b: Builder, modes: Iterable[str], vcc_used: Iterable[tuple[str, RailStep]], code: bytes, self_timed: int = 0
) -> Permit:
    """The permit of a finished program that goes past the gate to raised `modes` and uses these steps of VCC.

    `self_timed`: ticks for which the part may be at work by itself when the program ends.
    """
    modes, vcc_used = list(modes), list(vcc_used)
    definition, rig = b.definition, b.rig
    switch, step, ceiling = NO_SWITCH, 0, 0
    over_vcc = any(definition.supplies[name].max_mv > _RAISED_VCC_MV for name, _ in vcc_used)
    identity = Identity.VOUCHED_NONE if modes or over_vcc else Identity.NONE
    if definition.identify == "command":
        identity = Identity.WANTED
    elif definition.identify == "mode":
        identity = Identity.WANTED
        wanted = raised_steps(b, definition.modes[definition.identify_mode])
        pin, supply = next(iter(wanted.items()))
        switch = b.pins.switch(pin).number
        step = choose_raised(definition, rig, wanted).number
        ceiling = b.pins.switch(pin).scaling.count_at_most(top_mv(definition, rig, pin, supply))
    return Permit(
        identity=identity,
        alternatives=tuple(tuple((cell.at, cell.is_) for cell in ids) for ids in wanted_ids(definition)),
        identify_switch=switch,
        identify_step=step,
        identify_ceiling=ceiling,
        raised=tuple(sorted(_ceilings(b, modes).items())),
        vcc=vcc_windows(definition, rig, vcc_used),
        vcc_to=b.pins.vcc_mask,
        drives=_drives(definition, b.pins),
        safe=b.pins.pattern(_safe_mode(definition, b.pins, modes)),
        self_timed=self_timed,
        crc32=zlib.crc32(code),
    )
