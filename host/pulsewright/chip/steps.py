"""Steps as a tree: all of them, and the same with their waits made anew."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace

from pulsewright.chip.model import Definition, EachStep, ExpectStep, Method, RepeatStep, Step, WaitStep, Window


def all_steps(steps: Iterable[Step]) -> list[Step]:
    """Steps with those inside them, in the order of the file."""
    found: list[Step] = []
    for step in steps:
        found.append(step)
        if isinstance(step, RepeatStep | EachStep):
            found += all_steps(step.steps)
        elif isinstance(step, ExpectStep):
            found += all_steps(step.else_)
    return found


def steps_of(defn: Definition) -> list[Step]:
    """Every step of a definition: methods with what they do at the end, protection on and off."""
    methods = [method for method in (defn.program, defn.protected, defn.erase) if method is not None]
    lists = [steps for method in methods for steps in (method.steps, method.finally_)]
    if defn.protect is not None:
        lists += [defn.protect.on, defn.protect.off]
    return [step for steps in lists for step in all_steps(steps)]


def least_wait_ps(window: Window) -> int:
    """What to wait for a parameter: its minimum; where only the chip's own maximum is given, that."""
    known = (window.min_ps, window.max_ps, window.typ_ps)
    return next((ps for ps in known if ps is not None), 0)


def with_waits(steps: tuple[Step, ...], timing: Mapping[str, Window]) -> tuple[Step, ...]:
    """The same steps, each wait for a parameter as long as `timing` has it."""
    return tuple(_with_waits(step, timing) for step in steps)


def _with_waits(step: Step, timing: Mapping[str, Window]) -> Step:
    if isinstance(step, WaitStep) and step.timing in timing:
        return replace(step, ps=least_wait_ps(timing[step.timing]))
    if isinstance(step, RepeatStep | EachStep):
        return replace(step, steps=with_waits(step.steps, timing))
    if isinstance(step, ExpectStep):
        return replace(step, else_=with_waits(step.else_, timing))
    return step


def method_with_waits(method: Method | None, timing: Mapping[str, Window]) -> Method | None:
    """The same method with its waits made anew."""
    if method is None:
        return None
    steps, finally_ = with_waits(method.steps, timing), with_waits(method.finally_, timing)
    return replace(method, steps=steps, finally_=finally_)
