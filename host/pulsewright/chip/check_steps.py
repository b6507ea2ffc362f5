"""Checks of [program], [erase], [verify]: every step list is walked as it runs, with the modes that can be in force."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from pulsewright import units
from pulsewright.chip.check_levels import control_pattern, enabled_by
from pulsewright.chip.findings import Findings
from pulsewright.chip.lines import KeyPath
from pulsewright.chip.model import (
    EachStep,
    EveryWord,
    ExpectStep,
    Method,
    Mode,
    ModeStep,
    PulseStep,
    RepeatStep,
    Step,
    WaitStep,
)

LOCK = (0xAA, 0x55, 0x80, 0xAA, 0x55, 0x40)  # boot-block lock of page-write flash: it can never be undone
_OTHER = {"L": "H", "H": "L"}


def check(found: Findings) -> None:
    """All checks of step lists."""
    for name, method in (("program", found.defn.program), ("erase", found.defn.erase)):
        if method is not None:
            _method(found, name, method)
    for index, one in enumerate(found.defn.verify):
        _read_mode(found, ("verify", "passes", index, "mode"), one.mode)
    for name in found.tree.names():
        _no_lock(found, name)


def _method(found: Findings, name: str, method: Method) -> None:
    written = found.tree.names(name)
    for key in ("bits", "unit"):
        if key not in written:
            found.at((name, key), "a key is missing", wanted=key)
    if "steps" not in written and "method" not in written:
        found.at((name, "steps"), "a key is missing", wanted="steps, or method")
    walk = _Walk(found, name)
    after = walk.steps(method.steps, frozenset(), inside_each=False)
    walk.steps(method.finally_, after, inside_each=False)
    for step in _all_steps(method.finally_):
        if isinstance(step, ModeStep):
            raised = ", ".join(found.raised_levels(step.mode))
            if raised:
                what = "finally raises a level"
                found.at(step.where, what, found=f"mode {step.mode} at {raised}", wanted="modes without raised levels")


def _all_steps(steps: Iterable[Step]) -> list[Step]:
    found: list[Step] = []
    for step in steps:
        found.append(step)
        if isinstance(step, (RepeatStep, EachStep)):
            found += _all_steps(step.steps)
    return found


def _read_mode(found: Findings, place: KeyPath, name: str) -> None:
    """A mode that a check reads in: it exists and the chip drives D in it."""
    if not found.has_mode(name):
        found.unknown(place, "mode", name, found.tree.names("modes"))
        return
    mode = found.defn.modes.get(name)
    if mode is not None and mode.data != "out":
        found.at(
            place, "a reading in a mode that does not read", found=f"{name} has D {mode.data!r}", wanted='D = "out"'
        )


class _Walk:
    """Walks steps in the order they run; `modes` are the names of those that may be in force."""

    def __init__(self, found: Findings, table: str) -> None:
        self.found = found
        self.table = table

    def steps(self, steps: Iterable[Step], modes: frozenset[str], *, inside_each: bool) -> frozenset[str]:
        for step in steps:
            modes = self.step(step, modes, inside_each)
        return modes

    def step(self, step: Step, modes: frozenset[str], inside_each: bool) -> frozenset[str]:
        if isinstance(step, ModeStep):
            self.mode(step, inside_each)
            return frozenset({step.mode})
        if isinstance(step, PulseStep):
            self.pulse(step, modes)
        elif isinstance(step, WaitStep):
            pass  # its name was checked where it is written, `waits`
        elif isinstance(step, ExpectStep):
            self.expect(step, modes, inside_each)
        elif isinstance(step, EachStep):
            return self.loop(step.steps, modes, inside_each=True)
        else:
            return self.repeat(step, modes, inside_each)
        return modes

    def loop(self, steps: tuple[Step, ...], modes: frozenset[str], *, inside_each: bool) -> frozenset[str]:
        """A body that runs again starts in the modes of its own end too; a second walk tells nothing twice."""
        end = self.steps(steps, modes, inside_each=inside_each)
        if not end <= modes:
            known = list(self.found.problems)
            end = self.steps(steps, modes | end, inside_each=inside_each)
            self.found.problems = known + [one for one in self.found.problems[len(known) :] if one not in known]
        return modes | end

    def mode(self, step: ModeStep, inside_each: bool) -> None:
        found = self.found
        if not found.has_mode(step.mode):
            found.unknown(step.where, "mode", step.mode, found.tree.names("modes"))
            return
        mode = found.defn.modes.get(step.mode)
        if mode is None:
            return
        if step.data is not None and mode.data != "in":
            what = "data for a mode that does not take it"
            found.at(step.where, what, found=f"{step.mode} has D {mode.data!r}", wanted='a mode with D = "in"')
        if step.data is None and mode.data == "in":
            found.at(
                step.where, "a mode that drives D without saying what", found=step.mode, wanted='D = "image" or a value'
            )
        self.value(step, step.data, inside_each)

    def value(self, step: Step, value: str | int | None, inside_each: bool) -> None:
        found = self.found
        if value == "image" and not inside_each:
            found.at(
                step.where, "the image's word outside `each`", found='"image"', wanted='inside { each = "word", ... }'
            )
        if isinstance(value, int) and value >= 1 << found.defn.width:
            found.at(step.where, "a value wider than a word", found=f"0x{value:X}", wanted=f"{found.defn.width} bits")

    def expect(self, step: ExpectStep, modes: frozenset[str], inside_each: bool) -> None:
        self.value(step, step.value, inside_each)
        if step.mask >= 1 << self.found.defn.width:
            wanted = f"{self.found.defn.width} bits"
            self.found.at(step.where, "a mask wider than a word", found=f"0x{step.mask:X}", wanted=wanted)
        if not modes:
            self.found.at(step.where, "a sample before any mode", wanted='a mode with D = "out" before it')
        for name in sorted(modes):
            mode = self.found.defn.modes.get(name)
            if mode is not None and mode.data != "out":
                what = "a sample while the chip does not drive D"
                self.found.at(
                    step.where, what, found=f"mode {name} has D {mode.data!r}", wanted='a mode with D = "out"'
                )

    def repeat(self, step: RepeatStep, modes: frozenset[str], inside_each: bool) -> frozenset[str]:
        after = self.loop(step.steps, modes, inside_each=inside_each)
        if step.until is None:
            if not any(isinstance(one, ExpectStep) for one in _own_steps(step.steps)):
                wanted = 'an expect inside, or until = { every = "word", ... }'
                self.found.at(step.where, "a repeat without a way to end", found=f"max {step.max}", wanted=wanted)
            return after
        self.every(step.until)
        return frozenset({step.until.mode})

    def every(self, until: EveryWord) -> None:
        found = self.found
        if not found.has_mode(until.mode):
            found.unknown(until.where, "mode", until.mode, found.tree.names("modes"))
        elif (mode := found.defn.modes.get(until.mode)) is not None and mode.data != "out":
            what = "a reading in a mode that does not read"
            found.at(until.where, what, found=f"{until.mode} has D {mode.data!r}", wanted='D = "out"')
        if until.is_ >= 1 << found.defn.width:
            found.at(
                until.where, "a value wider than a word", found=f"0x{until.is_:X}", wanted=f"{found.defn.width} bits"
            )

    def pulse(self, step: PulseStep, modes: frozenset[str]) -> None:
        found = self.found
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
        self.pulse_time(step)
        if not modes:
            found.at(step.where, "a pulse before any mode", found=step.pin, wanted="a mode step before it")
        for name in sorted(modes):
            mode = found.defn.modes.get(name)
            if mode is not None:
                self.pulse_in(step, mode)

    def pulse_in(self, step: PulseStep, mode: Mode) -> None:
        found = self.found
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
                found.at(
                    step.where, what, found=f"{mode.name} with {step.pin} {step.to} is as {out}", wanted="outputs off"
                )

    def pulse_time(self, step: PulseStep) -> None:
        found = self.found
        known = found.tree.names("timing")
        if step.timing not in known:
            if _is_time(step.timing):
                wanted = "the name of a timing parameter with min and max"
                found.at(step.where, "a pulse with no window", found=f'"{step.timing}"', wanted=wanted)
            else:
                found.unknown(step.where, "timing parameter", step.timing, known)
            return
        missing = [key for key in ("min", "max") if key not in found.tree.names("timing", step.timing)]
        if missing:
            lacks = f"{step.timing} without {' and '.join(missing)}"
            found.at(step.where, "a pulse with no window", found=lacks, wanted=f"min and max of {step.timing}")


def _own_steps(steps: Iterable[Step]) -> list[Step]:
    """Steps of a repeat, down to but not into a repeat inside it."""
    own: list[Step] = []
    for step in steps:
        own.append(step)
        if isinstance(step, EachStep):
            own += _own_steps(step.steps)
    return own


def _is_time(text: str) -> bool:
    try:
        units.parse_ps(text)
    except units.UnitMistake:
        return False
    return True


def check_waits(found: Findings) -> None:
    """Each `wait` names a timing parameter or is a time; read from the tree, as a wrong one builds no step."""
    for name in ("program", "erase"):
        table = found.tree.plain.get(name)
        if isinstance(table, Mapping):
            for key in ("steps", "finally"):
                _waits(found, table.get(key), (name, key))


def _waits(found: Findings, node: object, path: KeyPath) -> None:
    if isinstance(node, list):
        for index, one in enumerate(node):
            _waits(found, one, (*path, index))
    elif isinstance(node, Mapping):
        text = node.get("wait")
        if isinstance(text, str) and text not in found.tree.names("timing") and not _is_time(text):
            if units_wrong(text):
                found.at((*path, "wait"), "not a time", found=f'"{text}"', wanted='a time such as "2 us"')
            else:
                found.unknown((*path, "wait"), "timing parameter", text, found.tree.names("timing"))
        for key in ("repeat", "steps"):
            _waits(found, node.get(key), (*path, key))


def units_wrong(text: str) -> bool:
    """Whether a text was meant as a number with a unit, rather than a name."""
    return text.strip()[:1].isdigit() or text.strip()[:1] in ("+", "-")


# ---- the permanent lock ----


def _no_lock(found: Findings, table: str) -> None:
    """No table holds the lock's six data values in a row, whatever the steps that carry them are called."""
    values: list[tuple[int, KeyPath]] = []
    _data_values(found, found.tree.written.get(table), (table,), values)
    flat = [value for value, _ in values]
    for start in range(len(flat) - len(LOCK) + 1):
        if tuple(flat[start : start + len(LOCK)]) == LOCK:
            what = "a permanent lock in a step list"
            text = " ".join(f"{value:02X}" for value in LOCK)
            found.at(values[start][1], what, found=text, wanted="no such sequence: it can never be undone")


def _data_values(found: Findings, node: object, path: KeyPath, values: list[tuple[int, KeyPath]]) -> None:
    """Data in the order it would be written: D of steps, data of cycles, pairs of address and data, plain lists."""
    if isinstance(node, list):
        numbers = all(isinstance(one, int) for one in node)
        pair = numbers and len(node) == 2 and node[0] > 0xFF
        for index, one in enumerate(node):
            if isinstance(one, int):
                if not pair or index:
                    _data(found, values, one, (*path, index))
            else:
                _data_values(found, one, (*path, index), values)
    elif isinstance(node, Mapping):
        for key, one in node.items():
            if isinstance(one, int):
                if key in ("D", "data", "value", "byte"):
                    _data(found, values, one, (*path, key))
            elif key == "mode" and isinstance(one, str) and "D" not in node:
                mode = found.defn.modes.get(one)
                if mode is not None and isinstance(mode.data, int):
                    _data(found, values, mode.data, (*path, key))
            else:
                _data_values(found, one, (*path, key), values)


def _data(found: Findings, values: list[tuple[int, KeyPath]], value: int, path: KeyPath) -> None:
    """The same value held over several steps counts once; what is wider than a word is an address."""
    if value >= 1 << found.defn.width:
        return
    value &= 0xFF  # word-wide parts take the code in the low byte
    if not values or values[-1][0] != value:
        values.append((value, path))
