"""A part's algorithm in words: the flow chart of the data sheet as numbered steps."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from pulsewright.chip.model import (
    Definition,
    EachStep,
    EveryWord,
    ExpectStep,
    Method,
    ModeStep,
    PulseStep,
    RepeatStep,
    Step,
    WaitStep,
)
from pulsewright.units import show_mv, show_ps


def _word(definition: Definition, value: str | int) -> str:
    if isinstance(value, str):
        return "the image's word" if value == "image" else value
    return f"{value:0{definition.width // 4}X}"


def _supplies(definition: Definition, mode: str) -> str:
    row = definition.modes[mode]
    raised = [
        f"{pin} at {show_mv(definition.supplies[level].typ_mv)}"
        for pin, level in row.levels.items()
        if pin != "VCC" and level in definition.supplies
    ]
    vcc = definition.supplies.get(row.vcc)
    return ", ".join([f"VCC {show_mv(vcc.typ_mv)}" if vcc is not None else "VCC as it is", *raised])


def _time(definition: Definition, name: str) -> str:
    window = definition.timing[name]
    limits = [
        f"{word} {show_ps(limit)}"
        for word, limit in (("at least", window.min_ps), ("at most", window.max_ps))
        if limit is not None
    ]
    typ = f"{show_ps(window.typ_ps)} " if window.typ_ps is not None else ""
    return f"{typ}({name}: {', '.join(limits)})"


def _until(definition: Definition, until: EveryWord) -> str:
    vcc = _supplies(definition, until.mode)
    return f"until every word reads {_word(definition, until.is_)} in mode {until.mode} ({vcc})"


def _sentence(definition: Definition, step: Step) -> str:
    match step:
        case ModeStep(mode=mode, data=data):
            given = f", D = {_word(definition, data)}" if data is not None else ""
            return f"mode {mode} ({_supplies(definition, mode)}){given}"
        case WaitStep(timing=timing, ps=ps):
            return f"wait at least {show_ps(ps)}" + (f" ({timing})" if timing else "")
        case PulseStep(pin=pin, to=to, timing=timing):
            return f"pulse {pin} to {to} for {_time(definition, timing)}"
        case ExpectStep(value=value):
            return f"read D; done with this word when it is {_word(definition, value)}"
        case RepeatStep(max=most, until=until):
            ends = _until(definition, until) if until is not None else "until it reads back"
            return f"at most {most} times, {ends}:"
        case EachStep(unit=unit):
            return f"for each {unit} to be written:"
    raise AssertionError(step)  # the type checker knows that no other step exists


def _numbered(definition: Definition, steps: Sequence[Step], number: str, depth: int) -> Iterator[str]:
    for index, step in enumerate(steps, 1):
        own = f"{number}{index}"
        yield f"{'   ' * depth}{own}  {_sentence(definition, step)}"
        if isinstance(step, RepeatStep | EachStep):
            yield from _numbered(definition, step.steps, f"{own}.", depth + 1)


def algorithm(definition: Definition, method: Method) -> list[str]:
    """The method's steps, numbered 1, 1.1, 1.1.1 as they nest; its `finally` steps at the end."""
    lines = list(_numbered(definition, method.steps, "", 0))
    if method.finally_:
        lines.append("at the end, whatever happened:")
        lines += _numbered(definition, method.finally_, "", 1)
    return lines
