"""A part's algorithm in words: the flow chart of the data sheet as numbered steps."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from pulsewright.chip.model import (
    Cycle,
    Definition,
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
from pulsewright.units import show_address, show_mv, show_ps


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


def cycles_text(definition: Definition, cycles: Sequence[Cycle]) -> str:
    """Bus write cycles as "AA at 5555, 55 at 2AAA, the image's word at its address"."""
    return ", ".join(
        "the image's word at its address"
        if cycle.at is None or cycle.word is None
        else f"{_word(definition, cycle.word)} at {show_address(cycle.at, definition.words)}"
        for cycle in cycles
    )


def _expect(definition: Definition, step: ExpectStep, *, in_turn: bool) -> str:
    word = _word(definition, step.value)
    if step.else_:
        return f"read D; where it is not {word}:"
    return f"read D; done when it is {word}" if in_turn else f"read D; it must be {word}"


def _sentence(definition: Definition, step: Step, *, in_turn: bool) -> str:
    match step:
        case ModeStep(mode=mode, data=data):
            given = f", D = {_word(definition, data)}" if data is not None else ""
            return f"mode {mode} ({_supplies(definition, mode)}){given}"
        case WaitStep(timing=timing, ps=ps):
            return f"wait at least {show_ps(ps)}" + (f" ({timing})" if timing else "")
        case PulseStep(pin=pin, to=to, timing=timing):
            return f"pulse {pin} to {to} for {_time(definition, timing)}"
        case ExpectStep():
            return _expect(definition, step, in_turn=in_turn)
        case WriteStep(cycles=cycles, command=command):
            return f"write {cycles_text(definition, cycles)}" + (f" ({command})" if command else "")
        case LoadStep():
            gap = definition.write.gap if definition.write is not None else ""
            pace = f", from one to the next {_time(definition, gap)}" if gap else ""
            return f"load the words of the page{pace}"
        case PollStep(bit=bit, mode=mode, timing=timing):
            return f"poll {bit} in mode {mode} until the part is done, within {_time(definition, timing)}"
        case RepeatStep(max=most, until=until):
            ends = _until(definition, until) if until is not None else "until it reads back"
            return f"at most {most} times, {ends}:"
        case EachStep(unit=unit):
            return f"for each {unit} to be written:"
    raise AssertionError(step)  # the type checker knows that no other step exists


def _numbered(
    definition: Definition, steps: Sequence[Step], number: str, depth: int, *, in_turn: bool = False
) -> Iterator[str]:
    for index, step in enumerate(steps, 1):
        own = f"{number}{index}"
        yield f"{'   ' * depth}{own}  {_sentence(definition, step, in_turn=in_turn)}"
        inner = step.steps if isinstance(step, RepeatStep | EachStep) else ()
        inner = step.else_ if isinstance(step, ExpectStep) else inner
        yield from _numbered(definition, inner, f"{own}.", depth + 1, in_turn=isinstance(step, RepeatStep))


def algorithm(definition: Definition, method: Method) -> list[str]:
    """The method's steps, numbered 1, 1.1, 1.1.1 as they nest; its `finally` steps at the end."""
    lines = list(_numbered(definition, method.steps, "", 0))
    if method.finally_:
        lines.append("at the end, whatever happened:")
        lines += _numbered(definition, method.finally_, "", 1)
    return lines
