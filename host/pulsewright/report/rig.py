"""A rig file for a reader: site, rails with their steps, switches; and the serial ports, with what answers on them."""

from __future__ import annotations

from collections.abc import Sequence

from pulsewright.errors import PortMissing
from pulsewright.link.machine import PortHere
from pulsewright.link.ports import RIG, PortAnswer
from pulsewright.report.modes import table
from pulsewright.rig.model import Rail, Rig
from pulsewright.units import show_mv, show_ps, show_ua

_EMPTY = PortMissing.stage


def _rail(rail: Rail) -> list[str]:
    rows = [
        [
            str(step.number),
            show_mv(step.mv),
            f"±{show_mv(step.error_mv)}",
            show_mv(step.overshoot_mv),
            f"{show_mv(step.dip_mv)} for {step.dip_us} us",
        ]
        for step in rail.steps
        if step.number
    ]
    head = f"rail {rail.name}: up to {show_ua(rail.limit_ua)}, settles in {show_ps(rail.settle_ps)}"
    return [head, *table(["step", "level", "error", "overshoot", "dip"], rows)]


def rig_lines(rig: Rig) -> list[str]:
    """The whole rig file as text."""
    packages = ", ".join(f"{name} at +{offset}" for name, offset in rig.site.packages.items())
    switches = [
        [
            str(switch.position),
            show_mv(switch.ceiling_mv),
            f"{show_mv(switch.drop_mv)} at {show_ua(switch.drop_at_ua)}",
            f"{show_ps(switch.rise_ps)} / {show_ps(switch.fall_ps)}",
            "yes" if switch.limiter else "no",
        ]
        for switch in rig.switches
    ]
    vcc = ", ".join(f"{switch.position} (drop {show_mv(switch.drop_mv)})" for switch in rig.vcc_switches)
    return [
        f"{rig.name}  ({rig.path})",
        f"site {rig.site.name}: {packages}",
        f"over-voltage guard: {rig.over_voltage}; what a port may draw: {show_ua(rig.port_limit_ua)}",
        "",
        *_rail(rig.vcc),
        f"reaches positions {vcc}; probe resistor {rig.probe_ohm} ohm",
        "",
        *_rail(rig.raised),
        *table(["position", "ceiling", "drop", "rise / fall", "1 mA limiter"], switches),
    ]


def rig_facts(rig: Rig) -> dict[str, object]:
    """The same as JSON values."""
    return {
        "rig": rig.name,
        "file": rig.path,
        "packages": dict(rig.site.packages),
        "rails": {
            rail.name: [
                {"step": step.number, "mv": step.mv, "error_mv": step.error_mv} for step in rail.steps if step.number
            ]
            for rail in (rig.vcc, rig.raised)
        },
        "raised_positions": {str(switch.position): switch.ceiling_mv for switch in rig.switches},
        "vcc_positions": [switch.position for switch in rig.vcc_switches],
    }


def port_lines(ports: Sequence[PortHere]) -> list[str]:
    """The serial ports of this machine by name; none of them was opened."""
    if not ports:
        return ["serial ports here: none"]
    return ["serial ports here, none of them opened:", *(f"  {port}" for port in ports)]


def port_facts(ports: Sequence[PortHere]) -> list[dict[str, object]]:
    """The same as JSON values."""
    return [{"name": port.name, "description": port.description} for port in ports]


def answer_lines(answers: Sequence[PortAnswer]) -> list[str]:
    """What is behind each port: one sentence on all, then a line for each; names without a device share one line."""
    rigs = [answer.port.name for answer in answers if answer.stage == RIG]
    if not answers:
        return ["this machine has no serial port"]
    asked = f"{len(answers)} serial port{'s' if len(answers) > 1 else ''} asked"
    lines = [f"{asked}; a rig answers on {', '.join(rigs)}" if rigs else f"{asked}; no rig answers"]
    empty = [answer.port.name for answer in answers if answer.stage == _EMPTY]
    rows = [[one.port.name, one.port.description, one.says] for one in answers if one.stage != _EMPTY]
    if rows:
        lines += table(["port", "description", "what answers"], rows)
    if empty:
        lines.append(f"no device behind {', '.join(empty)}")
    return lines


def answer_facts(answers: Sequence[PortAnswer]) -> list[dict[str, object]]:
    """The same as JSON values: `stage` is "rig", or where the way to one ended."""
    return [
        {
            "name": answer.port.name,
            "description": answer.port.description,
            "stage": answer.stage,
            "says": answer.says,
            "boot": answer.hello.boot if answer.hello is not None else None,
            "fingerprint": f"{answer.hello.fingerprint:08X}" if answer.hello is not None else None,
        }
        for answer in answers
    ]
