"""Checks of [identify]: by the level at an address pin, by command writes on flash, or none; said once."""

from __future__ import annotations

from collections.abc import Mapping

from pulsewright.chip.check_bus import check_command, check_cycles
from pulsewright.chip.check_steps import check_least_time
from pulsewright.chip.findings import VCC_RAISED_ABOVE_MV, Findings
from pulsewright.chip.lines import KeyPath
from pulsewright.units import show_mv

_WAYS = ({"mode"}, {"kind"}, {"command", "mode"})


def check(found: Findings) -> None:
    """All checks of how a part is identified."""
    table = found.tree.written.get("identify")
    if not isinstance(table, Mapping):
        return
    keys = [key for key in ("command", "mode", "kind") if key in table]
    if set(keys) not in _WAYS:
        wanted = 'one of mode = "identify", kind = "none", or command with leave and mode'
        found.at(("identify",), "identification is said once", found=" and ".join(keys) or "nothing", wanted=wanted)
    if found.defn.identify == "command":
        _command(found, table)
        return
    for key in ("leave", "settle"):
        if key in table:
            found.at(("identify", key), "a key of identification by command", found=key, wanted="command beside it")
    if found.defn.identify_mode:
        _level(found, found.defn.identify_mode)


def _level(found: Findings, name: str) -> None:
    """One raised level, at VCC that is not raised, and the chip drives D."""
    path: KeyPath = ("identify", "mode")
    if not found.has_mode(name):
        found.unknown(path, "mode", name, found.tree.names("modes"))
        return
    mode = found.defn.modes.get(name)
    if mode is None:
        return
    raised = found.raised_levels(name)
    written_levels = [level for level in mode.levels.values() if "." in level]
    all_built = all(level in found.defn.supplies for level in written_levels)
    if all_built and len(raised) != 1:
        levels = ", ".join(f"{role} {step.name}" for role, step in raised.items()) or "no raised level"
        found.at(
            ("modes", name), "an identify mode has one raised level", found=levels, wanted='such as A9 = "VH.identify"'
        )
    if mode.data != "out":
        found.at(("modes", name, "D"), "an identify mode that does not read", found=str(mode.data), wanted='"out"')
    vcc = found.defn.supplies.get(mode.vcc)
    if vcc is not None and vcc.max_mv > VCC_RAISED_ABOVE_MV:
        reach = f"{vcc.name} up to {show_mv(vcc.max_mv)}"
        found.at(("modes", name, "VCC"), "an identify mode with VCC raised", found=reach, wanted="at most 5.5 V")


def _command(found: Findings, table: Mapping[str, object]) -> None:
    """Command writes before the part is known: only to flash that needs no raised supply (design, section 4)."""
    path: KeyPath = ("identify", "command")
    if found.defn.technology != "flash":
        what = "identification by command on a part that is not declared flash"
        # On an EEPROM or RAM the three command cycles are ordinary writes: they would change the chip.
        told = f'technology = "{found.defn.technology}"' if found.defn.technology else "no technology"
        found.at(path, what, found=told, wanted='[chip] technology = "flash", or identify.kind = "none"')
    needs = [f"mode {name}" for name in found.defn.modes if _needs_raised_supply(found, name)]
    if needs:
        what = "identification by command on a part that needs a raised supply"
        found.at(path, what, found=", ".join(needs), wanted='mode = "identify" with a level, or kind = "none"')
    if "leave" not in table:
        found.at(("identify", "leave"), "a key is missing", wanted="leave")
    for key in ("command", "leave"):
        check_command(found, ("identify", key), table.get(key))
    if (built := found.defn.identify_command) is not None:
        for key, cycles in (("command", built.enter), ("leave", built.leave)):
            if not isinstance(table.get(key), str):
                check_cycles(found, cycles)
    if isinstance(settle := table.get("settle"), str):
        check_least_time(found, settle, ("identify", "settle"))
    if "write" not in found.tree.names():
        found.at(path, "a bus write of a part that does not say how", wanted="[write] mode, pin, to, time")
    elif found.defn.write is not None and found.raised_pins(found.defn.write.mode):
        levels = ", ".join(found.raised_pins(found.defn.write.mode))
        found.at(path, "identification that raises a level", found=f"[write] at {levels}", wanted="no raised level")
    _read_in(found, table.get("mode"))


def _needs_raised_supply(found: Findings, name: str) -> bool:
    """A mode with VPP or VCC raised; a level on an address pin or OE alone, for other ends, is no supply."""
    steps = found.raised_levels(name).values()
    return any(step.supply == "VPP" for step in steps) or "VCC" in found.raised_pins(name)


def _read_in(found: Findings, name: object) -> None:
    path: KeyPath = ("identify", "mode")
    if not isinstance(name, str):
        return
    if not found.has_mode(name):
        found.unknown(path, "mode", name, found.tree.names("modes"))
        return
    mode = found.defn.modes.get(name)
    if mode is not None and mode.data != "out":
        found.at(path, "an identify mode that does not read", found=str(mode.data), wanted='"out"')
    if raised := ", ".join(found.raised_pins(name)):
        found.at(path, "identification that raises a level", found=f"{name} at {raised}", wanted="no raised level")
