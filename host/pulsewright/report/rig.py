"""A rig file for a reader: site, rails with their steps, switches."""

from __future__ import annotations

from pulsewright.report.modes import table
from pulsewright.rig.model import Rail, Rig
from pulsewright.units import show_mv, show_ps, show_ua


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
