"""What a sequence is permitted: made from the definition and the rig, sealed with the program's CRC-32."""

from __future__ import annotations

import zlib
from collections.abc import Iterable

from pulsewright.chip.model import Definition
from pulsewright.rig.model import RailStep, Rig
from pulsewright.sequence.build import Builder
from pulsewright.sequence.identity import wanted_ids
from pulsewright.sequence.levels import choose_raised, top_mv
from pulsewright.sequence.lower import raised_steps
from pulsewright.sequence.pinmap import PinMap
from pulsewright.units import Rounding, ticks
from pulsewright.wire.permit import NO_SWITCH, Permit, VccStep
from pulsewright.wire.tables import Identity


def _ceilings(b: Builder, modes: Iterable[str]) -> dict[int, int]:
    """Raised switch -> highest count any of these modes allows there."""
    ceilings: dict[int, int] = {}
    for name in modes:
        for pin, step in raised_steps(b, b.definition.modes[name]).items():
            switch = b.pins.switch(pin)
            count = switch.scaling.count_at_most(top_mv(b.definition, b.rig, pin, step))
            ceilings[switch.number] = max(count, ceilings.get(switch.number, 0))
    return ceilings


def _vcc_steps(definition: Definition, rig: Rig, used: dict[str, RailStep]) -> tuple[VccStep, ...]:
    """Each VCC rail step in use with the tightest window of the supply steps that use it."""
    windows: dict[int, tuple[int, int]] = {}
    for name, rail_step in used.items():
        step = definition.supplies[name]
        low, high = rig.socket_vcc.count_at_least(step.min_mv), rig.socket_vcc.count_at_most(step.max_mv)
        seen = windows.get(rail_step.number, (low, high))
        windows[rail_step.number] = max(low, seen[0]), min(high, seen[1])
    settle = ticks(rig.vcc.settle_ps, Rounding.AT_LEAST)
    return tuple(VccStep(number, low, high, settle) for number, (low, high) in sorted(windows.items()))


def _drives(definition: Definition, pins: PinMap) -> tuple[bytes, ...]:
    """Every control-line pattern of the mode table in which the chip drives D."""
    patterns = {pins.pattern(mode) for mode in definition.modes.values() if mode.data == "out"}
    return tuple(sorted(patterns))


def make_permit(b: Builder, modes: Iterable[str], vcc_used: dict[str, RailStep], code: bytes) -> Permit:
    """The permit of a finished program that goes past the gate to `modes` and uses these steps of VCC."""
    definition, rig = b.definition, b.rig
    switch, step, ceiling = NO_SWITCH, 0, 0
    identity = Identity.NONE
    if definition.identify == "mode":
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
        vcc=_vcc_steps(definition, rig, vcc_used),
        vcc_to=b.pins.vcc_mask,
        drives=_drives(definition, b.pins),
        safe=b.pins.pattern(definition.modes["standby"]),
        self_timed=0,
        crc32=zlib.crc32(code),
    )
