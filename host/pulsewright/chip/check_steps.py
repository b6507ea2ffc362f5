"""Checks of [program], [erase], [protect], [verify]: every step list is walked as it runs, with the mode in force."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

from pulsewright.chip.check_bus import check_load, check_poll, check_write
from pulsewright.chip.check_pulse import check_pulse
from pulsewright.chip.findings import Findings, is_time
from pulsewright.chip.lines import KeyPath
from pulsewright.chip.model import (
    EachStep,
    EveryWord,
    ExpectStep,
    LoadStep,
    Method,
    ModeStep,
    PollStep,
    PulseStep,
    RepeatStep,
    Step,
    WaitStep,
    WriteStep,
)
from pulsewright.chip.steps import all_steps

MOST_LOOPS = 3  # one inside the other (design: the rig's routines loop three deep); each = "word" is two by itself
_AT_REST = "standby"  # the mode a sequence enters before its first step
_UNKNOWN = "?"  # a mode that is told of where it is named


@dataclass(frozen=True)
class Scope:
    """What is around a step: loops over data, other loops, and whether there is any data to loop over."""

    data: bool  # the steps are given words to write
    unit: str = ""  # what the method writes at once
    page: bool = False  # inside a loop over pages
    word: bool = False  # inside a loop over words: the image's word is known
    repeat: bool = False
    loops: int = 0


def check(found: Findings) -> None:
    """All checks of step lists."""
    defn = found.defn
    methods = ((("program",), defn.program), (("program", "protected"), defn.protected), (("erase",), defn.erase))
    for path, method in methods:
        if method is not None:
            _method(found, path, method)
    if defn.protect is not None:
        _protect(found, "on", defn.protect.on)
        _protect(found, "off", defn.protect.off)
    for index, one in enumerate(defn.verify):
        _read_mode(found, ("verify", "passes", index, "mode"), one.mode)


def _method(found: Findings, path: KeyPath, method: Method) -> None:
    written = found.tree.names(*path)
    around = found.tree.names(*path[:-1]) if len(path) > 1 else ()
    for key in ("bits", "unit"):
        if key not in written and key not in around:
            found.at((*path, key), "a key is missing", wanted=key)
    if "steps" not in written and "method" not in written:
        found.at((*path, "steps"), "a key is missing", wanted="steps, or method")
    if method.unit == "page" and "unloaded" not in (*written, *around):
        wanted = 'unloaded = "kept", "undefined" or "blank"'
        found.at((*path, "unloaded"), "nothing says what becomes of words that are not loaded", wanted=wanted)
    elif method.unit != "page" and "unloaded" in written:
        what = "unloaded words of a part that is not written in pages"
        found.at((*path, "unloaded"), what, found=f'unit = "{method.unit}"', wanted='unit = "page"')
    walk = _Walk(found)
    walk.steps(method.steps, "", Scope(data=path[0] == "program", unit=method.unit))
    walk.steps(method.finally_, "", Scope(data=False))
    _raise_nothing(found, "finally", method.finally_)


def _protect(found: Findings, key: str, steps: tuple[Step, ...]) -> None:
    end = _Walk(found).steps(steps, "", Scope(data=False))
    if end not in ("", _AT_REST, _UNKNOWN):
        wanted = '{ mode = "standby" } at the end'
        found.at(("protect", key), "protect does not end in standby", found=f"it ends in {end}", wanted=wanted)
    _raise_nothing(found, "protect", steps)


def _raise_nothing(found: Findings, name: str, steps: Iterable[Step]) -> None:
    for step in all_steps(steps):
        modes = []
        if isinstance(step, ModeStep | PollStep):
            modes = [step.mode]
        elif isinstance(step, RepeatStep) and step.until is not None:
            modes = [step.until.mode]
        elif isinstance(step, WriteStep) and found.defn.write is not None:
            modes = [found.defn.write.mode]
        for mode in modes:
            raised = ", ".join(found.raised_pins(mode))
            if raised:
                what = f"{name} raises a level"
                found.at(step.where, what, found=f"mode {mode} at {raised}", wanted="modes without raised levels")


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
    """Walks steps in the order they run, with the name of the mode in force ("": at rest, before the first mode)."""

    def __init__(self, found: Findings) -> None:
        self.found = found

    def steps(self, steps: Iterable[Step], mode: str, scope: Scope) -> str:
        for step in steps:
            mode = self.step(step, mode, scope)
        return mode

    def step(self, step: Step, mode: str, scope: Scope) -> str:
        """The mode in force behind the step; a loop that does not end where it began is told, and the rest goes on."""
        found = self.found
        match step:
            case ModeStep():
                self.mode(step, scope)
                return step.mode if found.has_mode(step.mode) else _UNKNOWN
            case PulseStep():
                check_pulse(found, step, mode)
            case WaitStep():
                pass  # its name is checked where it is written, `check_waits`
            case ExpectStep():
                self.expect(step, mode, scope)
            case EachStep():
                self.each(step, mode, scope)
            case RepeatStep():
                return self.repeat(step, mode, scope)
            case PollStep():
                check_poll(found, step, mode or _AT_REST, in_hand=scope.word or scope.page)
            case WriteStep() | LoadStep():
                if isinstance(step, WriteStep):
                    check_write(found, step, in_word=scope.word)
                else:
                    check_load(found, step, in_page=scope.page and not scope.word)
                return found.defn.write.mode if found.defn.write is not None else _UNKNOWN
        return mode

    def mode(self, step: ModeStep, scope: Scope) -> None:
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
        self.value(step, step.data, scope)

    def value(self, step: Step, value: str | int | None, scope: Scope) -> None:
        found = self.found
        if value == "image" and not scope.word:
            found.at(
                step.where, "the image's word outside `each`", found='"image"', wanted='inside { each = "word", ... }'
            )
        if isinstance(value, int) and value >= 1 << found.defn.width:
            found.at(step.where, "a value wider than a word", found=f"0x{value:X}", wanted=f"{found.defn.width} bits")

    def expect(self, step: ExpectStep, mode: str, scope: Scope) -> None:
        found = self.found
        self.value(step, step.value, scope)
        if step.mask >= 1 << found.defn.width:
            wanted = f"{found.defn.width} bits"
            found.at(step.where, "a mask wider than a word", found=f"0x{step.mask:X}", wanted=wanted)
        if not mode:
            found.at(step.where, "a sample before any mode", wanted='a mode with D = "out" before it')
        row = found.defn.modes.get(mode)
        if row is not None and row.data != "out":
            what = "a sample while the chip does not drive D"
            found.at(step.where, what, found=f"mode {mode} has D {row.data!r}", wanted='a mode with D = "out"')
        self.back(step, "else", self.steps(step.else_, mode, scope), mode)

    def back(self, step: Step, name: str, end: str, begin: str) -> None:
        """What runs again, or only now and then, leaves the chip as it found it."""
        if _UNKNOWN in (end, begin) or not self.found.has_mode(_AT_REST):
            return
        if (end or _AT_REST) != (begin or _AT_REST):
            what = f"{name} does not end in the mode it began in"
            begin = begin or f"{_AT_REST} (at rest)"
            self.found.at(step.where, what, found=f"begins in {begin}, ends in {end}", wanted=f"{begin} at its end")

    # ---- loops ----

    def each(self, step: EachStep, mode: str, scope: Scope) -> None:
        found = self.found
        around = scope.page or scope.word
        if around and not (step.unit == "word" and scope.page and not scope.word):
            found.at(step.where, "a loop over the data inside another", found=f"each {step.unit}", wanted=_NESTED)
        elif not around and not scope.data:
            what = "a loop over the data where there is none"
            found.at(step.where, what, found=f"each {step.unit}", wanted="steps of [program]")
        elif not around and scope.repeat:
            found.at(step.where, "a loop over the data inside a repeat", found=f"each {step.unit}", wanted=_NESTED)
        if step.unit == "page" and scope.unit != "page":
            what = "a loop over pages in a method of another unit"
            found.at(step.where, what, found=f'unit = "{scope.unit}"', wanted='unit = "page"')
        if step.unit == "page" and "page" not in found.tree.names("geometry"):
            found.at(step.where, "pages of a part that has none", wanted="[geometry] page = ...")
        loops = 2 if step.unit == "word" and not around else 1
        inside = replace(scope, page=scope.page or step.unit == "page", word=step.unit == "word")
        end = self.steps(step.steps, mode, self.deeper(step, inside, loops))
        self.back(step, f"each {step.unit}", end, mode)

    def deeper(self, step: Step, scope: Scope, loops: int) -> Scope:
        if scope.loops <= MOST_LOOPS < scope.loops + loops:
            wanted = f"at most {MOST_LOOPS}, of which a loop over words alone is two"
            what = "too many loops one inside the other"
            self.found.at(step.where, what, found=str(scope.loops + loops), wanted=wanted)
        return replace(scope, loops=scope.loops + loops)

    def repeat(self, step: RepeatStep, mode: str, scope: Scope) -> str:
        found = self.found
        end = self.steps(step.steps, mode, self.deeper(step, replace(scope, repeat=True), 1))
        if step.max > 1:
            self.back(step, "repeat", end, mode)
        looks = [one for one in step.steps if isinstance(one, ExpectStep) and not one.else_]
        if step.until is not None:
            self.every(step.until)
        elif not looks:
            wanted = 'an expect at the top of its list, or until = { every = "word", ... }'
            found.at(step.where, "a repeat without a way to end", found=f"max {step.max}", wanted=wanted)
        for one in looks if step.until is not None else looks[:-1]:
            wanted = "one expect at the top of a repeat, none where it reads every word"
            found.at(one.where, "an expect that decides nothing", found=f"expect {one.value}", wanted=wanted)
        return end

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


_NESTED = 'loops one after the other, or each = "word" inside each = "page"'


def check_waits(found: Findings) -> None:
    """Each `wait` names a timing parameter or is a time; read from the tree, as a wrong one builds no step."""
    for name in ("program", "erase", "protect"):
        _waits(found, found.tree.plain.get(name), (name,))


def _waits(found: Findings, node: object, path: KeyPath) -> None:
    if isinstance(node, list):
        for index, one in enumerate(node):
            _waits(found, one, (*path, index))
    elif isinstance(node, Mapping):
        if isinstance(text := node.get("wait"), str):
            check_least_time(found, text, (*path, "wait"))
        for key, one in node.items():
            if key != "parameters":
                _waits(found, one, (*path, key))


def check_least_time(found: Findings, text: str, path: KeyPath) -> None:
    """A timing parameter of the file, or a time."""
    if text in found.tree.names("timing") or is_time(text):
        return
    if text.strip()[:1].isdigit() or text.strip()[:1] in ("+", "-"):
        found.at(path, "not a time", found=f'"{text}"', wanted='a time such as "2 us"')
    else:
        found.unknown(path, "timing parameter", text, found.tree.names("timing"))
