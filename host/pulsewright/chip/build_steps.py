"""Steps, commands and timing windows of an examined tree; what is incomplete or was wrong is left out."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from typing import Any

from pulsewright import units
from pulsewright.chip.lines import KeyPath
from pulsewright.chip.model import (
    Cycle,
    EachStep,
    EveryWord,
    ExpectStep,
    LoadStep,
    ModeStep,
    PollStep,
    PulseStep,
    RepeatStep,
    Step,
    WaitStep,
    Window,
    WriteStep,
)
from pulsewright.chip.source import Tree
from pulsewright.chip.steps import least_wait_ps
from pulsewright.chip.words import CYCLE


def windows(tree: Tree) -> dict[str, Window]:
    """The timing parameters by name."""
    found = {}
    for name, entry in tree.plain.get("timing", {}).items():
        if not isinstance(entry, Mapping):
            continue
        limits = {f"{key}_ps": units.parse_ps(entry[key]) for key in ("min", "typ", "max") if key in entry}
        path = ("timing", name)
        found[name] = Window(name, **limits, source=tree.source_of(path), where=tree.places.where(path))
    return found


class StepBuilder:
    """Builds steps, with the commands and times they name put in."""

    def __init__(self, tree: Tree) -> None:
        self.tree = tree
        self.timing = windows(tree)
        self.commands = {
            name: self.cycles(entry, ("commands", name))
            for name, entry in tree.plain.get("commands", {}).items()
            if isinstance(entry, list)
        }

    def steps(self, entries: Iterable[Any], path: KeyPath) -> tuple[Step, ...]:
        """A list of steps."""
        built = [self.step(entry, (*path, index)) for index, entry in enumerate(entries) if isinstance(entry, Mapping)]
        return tuple(step for step in built if step is not None)

    def step(self, entry: Mapping[str, Any], path: KeyPath) -> Step | None:
        """One step; the key that tells it comes before those that other kinds have too."""
        where = self.tree.places.where(path)
        if "repeat" in entry:
            inner = self.steps(entry["repeat"], (*path, "repeat"))
            return RepeatStep(inner, entry.get("max", 1), self.until(entry.get("until"), (*path, "until")), where)
        if "each" in entry:
            return EachStep(entry["each"], self.steps(entry.get("steps", ()), (*path, "steps")), where)
        if "pulse" in entry:
            complete = "to" in entry and "time" in entry
            return PulseStep(entry["pulse"], entry["to"], entry["time"], where) if complete else None
        if "expect" in entry:
            width = self.tree.plain.get("chip", {}).get("width", 8)
            otherwise = self.steps(entry.get("else", ()), (*path, "else"))
            return ExpectStep(entry["expect"], entry.get("mask", (1 << width) - 1), where, otherwise)
        if "write" in entry:
            name = entry["write"] if isinstance(entry["write"], str) else ""
            return WriteStep(self.cycles(entry["write"], (*path, "write")), name, where)
        if "load" in entry:
            return LoadStep(where)
        if "poll" in entry:
            complete = "mode" in entry and "within" in entry
            return PollStep(entry["poll"], entry["mode"], entry["within"], where) if complete else None
        if "wait" in entry:
            return self.wait(entry["wait"], path)
        return ModeStep(entry["mode"], entry.get("D"), where) if "mode" in entry else None

    def until(self, entry: object, path: KeyPath) -> EveryWord | None:
        """The end of a repeat that reads every word; None for one that ends by an expect."""
        if isinstance(entry, Mapping) and "mode" in entry and "is" in entry:
            return EveryWord(entry["mode"], entry["is"], self.tree.places.where(path))
        return None

    def cycles(self, entry: str | list[Any], path: KeyPath) -> tuple[Cycle, ...]:
        """Bus write cycles: those of a command by its name, or those of a list."""
        if isinstance(entry, str):
            return self.commands.get(entry, ())
        built = []
        for index, text in enumerate(entry):
            where = self.tree.places.where((*path, index))
            match = re.fullmatch(CYCLE, text) if isinstance(text, str) else None
            if text == "image":
                built.append(Cycle(None, None, where))
            elif match is not None:
                built.append(Cycle(int(match[2], 16), int(match[1], 16), where))
        return tuple(built)

    def wait(self, text: str, path: KeyPath) -> WaitStep | None:
        """A wait for a timing parameter, or for a time."""
        where = self.tree.places.where((*path, "wait"))
        ps = self.least_ps(text)
        return None if ps is None else WaitStep(text if text in self.timing else "", ps, where)

    def least_ps(self, text: str) -> int | None:
        """Picoseconds of a timing parameter, at least, or of a time; None for a text that is neither."""
        window = self.timing.get(text)
        if window is not None:
            return least_wait_ps(window)
        try:
            return units.parse_ps(text)
        except units.UnitMistake:
            return None
