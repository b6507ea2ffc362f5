"""Checks of a pulse: its pin, its idle level in the mode in force, its window, and what it would enable."""

from __future__ import annotations

from pulsewright.chip.check_levels import control_pattern, enabled_by
from pulsewright.chip.findings import Findings, is_time
from pulsewright.chip.model import Mode, PulseStep

_OTHER = {"L": "H", "H": "L"}


def check_pulse(found: Findings, step: PulseStep, name: str) -> None:
    """A pulse at a pin of the mode `name` ("": before any mode)."""
    if step.pin not in found.tree.names("pins"):
        found.unknown(step.where, "pin", step.pin, found.control_roles())
        return
    if step.pin not in found.control_roles():
        found.at(
            step.where,
            "a pulse at a pin that is no control pin",
            found=step.pin,
            wanted=", ".join(found.control_roles()),
        )
        return
    _time(found, step)
    if not name:
        found.at(step.where, "a pulse before any mode", found=step.pin, wanted="a mode step before it")
    mode = found.defn.modes.get(name or "standby")  # which a sequence begins in
    if mode is not None:
        _in_mode(found, step, mode)


def _in_mode(found: Findings, step: PulseStep, mode: Mode) -> None:
    level = mode.levels.get(step.pin)
    if level is None:
        if step.pin not in found.tree.names("modes", mode.name):
            found.at(
                step.where,
                "a pulse at a pin the mode does not set",
                found=f"{step.pin} in {mode.name}",
                wanted=step.pin,
            )
    elif level == step.to:
        what = "a pulse that does not end at the pin's idle level"
        wanted = f'{step.pin} = "{_OTHER[step.to]}" in {mode.name}, or to = "{_OTHER[step.to]}"'
        found.at(step.where, what, found=f"{step.pin} is {level} in {mode.name} already", wanted=wanted)
    elif level != _OTHER[step.to]:
        what = "a pulse at a pin that has no idle level"
        found.at(step.where, what, found=f"{step.pin} is {level} in {mode.name}", wanted=f'"{_OTHER[step.to]}"')
    elif mode.data == "in" or isinstance(mode.data, int):
        out = enabled_by(found, {**control_pattern(found, mode), step.pin: step.to})
        if out:
            what = "a pulse that enables the outputs while D is driven"
            found.at(step.where, what, found=f"{mode.name} with {step.pin} {step.to} is as {out}", wanted="outputs off")


def _time(found: Findings, step: PulseStep) -> None:
    known = found.tree.names("timing")
    if step.timing not in known:
        if is_time(step.timing):
            wanted = "the name of a timing parameter with min and max"
            found.at(step.where, "a pulse with no window", found=f'"{step.timing}"', wanted=wanted)
        else:
            found.unknown(step.where, "timing parameter", step.timing, known)
        return
    missing = [key for key in ("min", "max") if key not in found.tree.names("timing", step.timing)]
    if missing:
        lacks = f"{step.timing} without {' and '.join(missing)}"
        found.at(step.where, "a pulse with no window", found=lacks, wanted=f"min and max of {step.timing}")
