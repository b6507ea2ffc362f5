"""Does the board that answered fit the rig file? Volts travel as raw counts: a wrong scaling is a wrong voltage."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from pulsewright.errors import RigFault, Where
from pulsewright.link.results import RigFacts
from pulsewright.rig.model import Rail, Rig
from pulsewright.units import show_mv

_ROUNDING = 1  # counts by which two ways of rounding the same level may differ


def check_board(rig: Rig, facts: RigFacts) -> None:
    """RigFault with every difference between what the board tells of itself and what the rig file says."""
    differences = list(_differences(rig, facts))
    if differences:
        raise RigFault(
            f"the board ({facts.board}) is not the one that the rig file describes",
            where=Where(rig.path),
            facts=differences,
            did="told its tables; nothing was powered",
            hint="name the rig file that belongs to this board, or set the board's own tables right",
        )


def _differences(rig: Rig, facts: RigFacts) -> Iterator[str]:
    site = rig.site
    raised = tuple(switch.position for switch in sorted(rig.switches, key=lambda switch: switch.number))
    vcc = tuple(switch.position for switch in sorted(rig.vcc_switches, key=lambda switch: switch.number))
    for what, here, there in (
        ("data lines", site.data_lines, facts.data_lines),
        ("raised switches at positions", raised, facts.switches),
        ("VCC switches at positions", vcc, facts.vcc_switches),
    ):
        if here != there:
            yield f"{what}: the rig file says {_listed(here)}, the board {_listed(there)}"
    yield from _rail(rig.vcc, facts.nominal)
    yield from _rail(rig.raised, facts.nominal)
    for switch in rig.switches:
        here_count = switch.scaling.count_at_most(switch.ceiling_mv)
        there_count = facts.ceilings[switch.number] if switch.number < len(facts.ceilings) else 0
        if abs(here_count - there_count) > _ROUNDING:
            wanted, told = show_mv(switch.ceiling_mv), show_mv(switch.scaling.mv(there_count))
            yield f"ceiling at position {switch.position}: the rig file says {wanted}, the board {told}"


def _rail(rail: Rail, nominal: Sequence[Sequence[int]]) -> Iterator[str]:
    counts = nominal[rail.number] if rail.number < len(nominal) else ()
    for step in rail.steps:
        there = counts[step.number] if step.number < len(counts) else None
        if there is None or abs(there - rail.scaling.count_at_most(step.mv)) > _ROUNDING:
            told = "none" if there is None else f"count {there}, {show_mv(rail.scaling.mv(there))}"
            yield f"rail {rail.name} step {step.number}: the rig file says {show_mv(step.mv)}, the board {told}"


def _listed(numbers: Sequence[int]) -> str:
    return ", ".join(map(str, numbers)) or "none"
