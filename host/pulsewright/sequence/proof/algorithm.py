"""The pulses a definition's own steps allow: where, how wide, after and before which waits, how often, how verified."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

from pulsewright.chip.model import (
    Definition,
    EachStep,
    ExpectStep,
    Method,
    ModeStep,
    PulseStep,
    RepeatStep,
    Step,
    WaitStep,
    Window,
)

IMAGE = "image"


@dataclass(frozen=True)
class Pulse:
    """One pulse step of a method in its place. Times in picoseconds; `data` "image", a constant, None: D released."""

    index: int
    mode: str
    pin: str
    to: str
    window: Window
    data: str | int | None
    each: str  # "word", or "" for the whole chip
    repeats: int
    before_ps: int  # waits between the mode and the pulse
    after_ps: int  # waits between the pulse and the next step that moves a pin
    verify_modes: tuple[str, ...]
    verify_value: str | int | None  # "image", a constant, or None: never read back
    whole: bool  # every word of the chip is read back


@dataclass
class _Place:
    """Where the walk through the steps stands."""

    mode: str = ""
    data: str | int | None = None
    waited_ps: int = 0
    each: str = ""
    repeats: int = 1
    last: int = -1  # pulse since which only waits came


def _data_of(definition: Definition, step: ModeStep) -> str | int | None:
    if step.data is not None:
        return step.data
    mode = definition.modes.get(step.mode)
    if mode is None or mode.data in ("out", "Z"):
        return None
    return IMAGE if mode.data == "in" else mode.data


def _expected(steps: tuple[Step, ...], mode: str) -> Iterator[tuple[str, str | int]]:
    """(mode, value) of each expect in a list of steps; only a compare of whole words counts."""
    for step in steps:
        if isinstance(step, ModeStep):
            mode = step.mode
        elif isinstance(step, ExpectStep):
            yield mode, step.value


class _Reader:
    """Walks a method's steps in order and notes its pulses."""

    def __init__(self, definition: Definition) -> None:
        self.definition = definition
        self.pulses: list[Pulse] = []
        self.place = _Place()
        self.verified: tuple[tuple[str, ...], str | int | None, bool] = ((), None, False)

    def read(self, steps: tuple[Step, ...]) -> None:
        """Takes in a list of steps; a kind of step that is not known here allows nothing."""
        for step in steps:
            if isinstance(step, ModeStep):
                self.place.mode, self.place.data = step.mode, _data_of(self.definition, step)
                self.place.waited_ps, self.place.last = 0, -1
            elif isinstance(step, WaitStep):
                self._wait(step)
            elif isinstance(step, PulseStep):
                self._pulse(step)
            elif isinstance(step, RepeatStep):
                self._repeat(step)
            elif isinstance(step, EachStep):
                outer, self.place.each = self.place.each, step.unit
                self.read(step.steps)
                self.place.each = outer

    def _wait(self, step: WaitStep) -> None:
        if self.place.last < 0:
            self.place.waited_ps += step.ps
        else:
            pulse = self.pulses[self.place.last]
            self.pulses[self.place.last] = replace(pulse, after_ps=pulse.after_ps + step.ps)

    def _repeat(self, step: RepeatStep) -> None:
        outer, verified = self.place.repeats, self.verified
        self.place.repeats = outer * step.max
        if step.until is not None:
            self.verified = ((step.until.mode,), step.until.is_, True)
        else:
            found = list(_expected(step.steps, self.place.mode))
            values = {value for _, value in found}
            value = values.pop() if len(values) == 1 else None
            self.verified = (tuple(mode for mode, _ in found), value, False)
        self.read(step.steps)
        self.place.repeats, self.verified = outer, verified

    def _pulse(self, step: PulseStep) -> None:
        window = self.definition.timing.get(step.timing)
        if window is None or window.min_ps is None or window.max_ps is None:
            return  # a pulse without a window is allowed nowhere
        modes, value, whole = self.verified
        place = self.place
        self.pulses.append(
            Pulse(
                len(self.pulses), place.mode, step.pin, step.to, window, place.data, place.each, place.repeats,
                place.waited_ps, 0, modes, value, whole,
            )
        )  # fmt: skip
        place.last, place.waited_ps = len(self.pulses) - 1, 0


def pulses_of(definition: Definition) -> tuple[Pulse, ...]:
    """Every pulse the definition's program and erase methods know, in their order."""
    reader = _Reader(definition)
    for method in (definition.program, definition.erase):
        if isinstance(method, Method):
            reader.place = _Place()
            reader.read(method.steps)
            reader.place = _Place()
            reader.read(method.finally_)
    return tuple(reader.pulses)
