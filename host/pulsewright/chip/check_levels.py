"""Checks of [supplies], [maxima], [modes] and [timing]: windows, maxima, rails, and who drives D."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence

from pulsewright.chip.findings import Findings
from pulsewright.chip.kinds import nearest
from pulsewright.chip.lines import KeyPath
from pulsewright.chip.model import Maximum, Mode, SupplyStep
from pulsewright.chip.words import MEANT_TIMINGS, TIMING_NAME
from pulsewright.units import show_mv, show_ps


def check(found: Findings) -> None:
    """All checks of levels and times."""
    _supplies(found)
    for name, mode in found.defn.modes.items():
        _names(found, name, mode)
        _maxima(found, name, mode)
        _one_rail(found, name)
    _drives_against_outputs(found)
    _plain_modes(found)
    _timing(found)


# ---- supplies ----


def _supplies(found: Findings) -> None:
    for supply, table in found.tree.plain.get("supplies", {}).items():
        for name, entry in table.items():
            if isinstance(entry, Mapping):
                _limits_given(found, ("supplies", supply, name), entry)
    for step in found.defn.supplies.values():
        if step.limits_known and not step.min_mv <= step.typ_mv <= step.max_mv:
            window = f"{show_mv(step.min_mv)} to {show_mv(step.max_mv)}"
            found.at(
                step.where, "a step outside its own window", found=f"{step.name} {show_mv(step.typ_mv)}", wanted=window
            )
        if step.supply == "VCC":
            _vcc_maximum(found, step)
    if found.tree.names("supplies", "VCC") and "read" not in found.tree.names("supplies", "VCC"):
        found.at(("supplies", "VCC", "read"), "a supply step is missing", wanted="VCC.read")


def _limits_given(found: Findings, path: KeyPath, entry: Mapping[str, str]) -> None:
    given = [key for key in ("min", "max") if key in found.tree.names(*path)]
    if "limits" in entry and given:
        found.at(
            path, "limits unknown, yet given", found=" and ".join(given), wanted='min and max, or limits = "unknown"'
        )
    elif "limits" not in found.tree.names(*path) and len(given) < 2:
        missing = " and ".join(key for key in ("min", "max") if key not in given)
        found.at(path, "a step without its window", found=f"no {missing}", wanted='min and max, or limits = "unknown"')


def _vcc_maximum(found: Findings, step: SupplyStep) -> None:
    own, other = found.defn.maxima.get("VCC"), found.defn.maxima.get("other")
    if own is not None and own.above_vcc:
        found.at(own.where, "the maximum of VCC relative to itself", wanted='a voltage such as "7.0 V"')
    elif own is not None and step.max_mv > own.mv:
        reach = f"{step.name} up to {show_mv(step.max_mv)}"
        found.at(step.where, "a step above the maximum of VCC", found=reach, wanted=f"at most {show_mv(own.mv)}")
    if other is not None and not other.above_vcc and step.max_mv > other.mv:
        reach = f"lines at {step.name} up to {show_mv(step.max_mv)}"
        wanted = f"at most {show_mv(other.mv)} (maxima.other)"
        found.at(step.where, "lines follow VCC above the maximum of other pins", found=reach, wanted=wanted)


# ---- modes ----


def _names(found: Findings, name: str, mode: Mode) -> None:
    """Pins and steps a mode names exist, and it says what every control pin is at."""
    roles = found.tree.names("pins")
    for role, level in mode.levels.items():
        path: KeyPath = ("modes", name, role)
        if (
            role not in roles
            and not found.defn.pin_of(role)
            and not (role[:1] in "AD" and role[:1] not in found.defn.pins)
        ):
            found.unknown(path, "pin", role, [*found.control_roles(), "A", "D"])
        if "." in level:
            _step_exists(found, path, level)
    _step_exists(found, ("modes", name, "VCC"), mode.vcc)
    if isinstance(mode.data, int) and mode.data >= 1 << found.defn.width:
        what = "a constant wider than a word"
        found.at(("modes", name, "D"), what, found=f"0x{mode.data:X}", wanted=f"{found.defn.width} bits")
    written = found.tree.names("modes", name)
    for role in found.control_roles():
        if role not in written:
            found.at(("modes", name, role), "a mode that does not say what a pin is at", found=name, wanted=role)
    for alias in mode.levels:
        if alias in ("GND", "BUSY", "NC", "DC"):
            found.at(
                ("modes", name, alias), "a mode that drives a pin nobody drives", found=alias, wanted="leave it out"
            )
    if mode.access and mode.access not in found.tree.names("timing"):
        found.unknown(("modes", name, "access"), "timing parameter", mode.access, found.tree.names("timing"))


def _step_exists(found: Findings, path: KeyPath, step: str) -> None:
    supply, name = step.split(".", 1)
    if name in found.tree.names("supplies", supply):
        return
    known = [f"{one}.{each}" for one in found.tree.names("supplies") for each in found.tree.names("supplies", one)]
    found.unknown(path, "supply step", step, known)


def _maxima(found: Findings, name: str, mode: Mode) -> None:
    """No window reaches above the maximum of the pin it stands at; a raised pin has a maximum of its own."""
    maxima = found.tree.names("maxima")
    for role, level in mode.levels.items():
        step = found.defn.supplies.get(level)
        if step is None:
            continue
        path: KeyPath = ("modes", name, role)
        if found.raised(level) is not None and role not in maxima:
            known = ", ".join(maxima)
            found.at(
                path, "a raised level on a pin without a maximum of its own", found=f"{role} at {level}", wanted=known
            )
            continue
        maximum = found.defn.maximum_of(role)
        vcc = found.defn.supplies.get(mode.vcc)
        limit = _limit_mv(maximum, vcc)
        if limit is not None and step.max_mv > limit:
            reach = f"{level} up to {show_mv(step.max_mv)}"
            found.at(path, f"a step above the maximum of {role}", found=reach, wanted=f"at most {show_mv(limit)}")


def _limit_mv(maximum: Maximum | None, vcc: SupplyStep | None) -> int | None:
    """The maximum in millivolts; one above VCC is taken at the lowest VCC of the mode."""
    if maximum is None or not maximum.above_vcc:
        return None if maximum is None else maximum.mv
    return None if vcc is None else vcc.min_mv + maximum.mv


def _one_rail(found: Findings, name: str) -> None:
    """All raised levels come from one rail, so a mode can want one voltage only."""
    raised = found.raised_levels(name)
    if len({step.typ_mv for step in raised.values()}) > 1:
        levels = ", ".join(f"{role} at {step.name} {show_mv(step.typ_mv)}" for role, step in raised.items())
        found.at(("modes", name), "a mode that wants two levels of one rail", found=levels, wanted="one raised voltage")


def control_pattern(found: Findings, mode: Mode) -> dict[str, str]:
    """What the control pins are at; VPP's own pin does not count, as its level does not float the outputs."""
    levels = {role: mode.levels[role] for role in found.control_roles() if role != "VPP" and role in mode.levels}
    return {role: "H" if level == "VCC" else level for role, level in levels.items()}


def enabled_by(found: Findings, pattern: Mapping[str, str]) -> str:
    """The mode with D = "out" that has this pattern of control pins (X may be either level), "" if none has."""
    for name, mode in found.defn.modes.items():
        if mode.data != "out":
            continue
        other = control_pattern(found, mode)
        if other and all(_may_be_equal(pattern.get(role, "X"), level) for role, level in other.items()):
            return name
    return ""


def _may_be_equal(one: str, other: str) -> bool:
    loose = ("X", "Z")
    if one in loose or other in loose:
        return "." not in one and "." not in other
    return one == other


def _drives_against_outputs(found: Findings) -> None:
    for name, mode in found.defn.modes.items():
        if mode.data != "in" and not isinstance(mode.data, int):
            continue
        out = enabled_by(found, control_pattern(found, mode))
        if out:
            pattern = ", ".join(f"{role} {level}" for role, level in control_pattern(found, mode).items())
            what = "a mode that drives D against enabled outputs"
            found.at(("modes", name), what, found=f"{pattern}, as in {out}", wanted='D = "out" or "Z", or other levels')


def _plain_modes(found: Findings) -> None:
    """Reading and standby are where every job starts and ends: the chip drives D, or nobody, and nothing is raised."""
    for name, data in (("read", "out"), ("standby", "Z")):
        mode = found.defn.modes.get(name)
        if mode is None:
            continue
        if mode.data != data:
            found.at(
                ("modes", name), f"{name} has another use of D", found=f"D = {mode.data!r}", wanted=f'D = "{data}"'
            )
        raised = ", ".join(f"{role} {step.name}" for role, step in found.raised_levels(name).items())
        if raised:
            found.at(("modes", name), f"{name} raises a level", found=raised, wanted="no raised level")


# ---- timing ----


def _timing(found: Findings) -> None:
    for name, window in found.defn.timing.items():
        known = [ps for ps in (window.min_ps, window.typ_ps, window.max_ps) if ps is not None]
        if not known and not set(found.tree.names("timing", name)) & {"min", "typ", "max"}:
            found.at(("timing", name), "a timing parameter without a limit", found=name, wanted="min, typ or max")
        if known != sorted(known):
            times = ", ".join(show_ps(ps) for ps in known)
            found.at(("timing", name), "a time outside its own window", found=times, wanted="min <= typ <= max")
    written = found.tree.names("timing")
    if "timing" not in found.tree.names():
        return
    for name, mode in found.defn.modes.items():
        if mode.data == "out" and not mode.access and "tACC" not in written:
            what = "nothing says when D is valid"
            found.at(("timing", "tACC"), what, found=f"mode {name} without access", wanted="tACC")
            break
    drives = any(mode.data == "in" or isinstance(mode.data, int) for mode in found.defn.modes.values())
    if drives and "tDF" not in written:
        found.at(("timing", "tDF"), "nothing says when the outputs float", wanted="tDF")


def check_unused(rows: Sequence[Findings]) -> None:
    """Warns of timing parameters that have no meaning by their name and are used in no row."""
    used = {name for found in rows for name in _used_timings(found)}
    for found in rows:
        for name in found.tree.names("timing"):
            if name not in MEANT_TIMINGS and name not in used and re.fullmatch(TIMING_NAME, name):
                close = nearest(name, MEANT_TIMINGS)
                what = "a timing parameter that nothing uses"
                found.at(
                    ("timing", name), what, found=name, wanted="a name with a meaning", nearest=close, warning=True
                )


def _used_timings(found: Findings) -> set[str]:
    """Names that steps or modes refer to."""
    used = {mode.access for mode in found.defn.modes.values()}
    for name in ("program", "erase", "protect", "write", "identify"):
        used |= set(_texts(found.tree.written.get(name)))
    return used


def _texts(node: object) -> list[str]:
    if isinstance(node, str):
        return [node]
    if isinstance(node, Mapping):
        return [text for one in node.values() for text in _texts(one)]
    return [text for one in node for text in _texts(one)] if isinstance(node, list) else []
