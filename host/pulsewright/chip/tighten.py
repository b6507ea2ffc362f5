"""The tightest definition over all maker rows: what holds until the ID bytes have told which row it is."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, fields, is_dataclass, replace

from pulsewright.chip.model import Definition, Maximum, Method, PollStep, SupplyStep, WaitStep, Window
from pulsewright.chip.steps import method_with_waits, steps_of, with_waits
from pulsewright.chip.words import RESPONSE_TIMINGS
from pulsewright.errors import Problem, Where
from pulsewright.units import show_mv, show_ps

_APART = "make two definitions"


@dataclass(frozen=True)
class Tightest:
    """The tightest definition, and what no value satisfies."""

    defn: Definition
    problems: tuple[Problem, ...]


def tightest(rows: Sequence[Definition], base: Definition | None = None) -> Tightest:
    """Each limit the tightest of all rows; what no limit can settle stays the first row's and is named in `apart`.

    Steps are those of `base`, the file without its rows, where it has them: a row that is not chosen never runs its
    own. Waits in them are as long as the longest of all rows. What stands only in some rows is kept as it is there.
    One row is that row. `rows` are definitions of one file.
    """
    if len(rows) == 1:
        return Tightest(rows[0], ())
    problems: list[Problem] = []
    responses = _responses(rows)
    supplies = {
        name: _supply([row.supplies[name] for row in rows if name in row.supplies], problems)
        for name in _names(row.supplies for row in rows)
    }
    timing = {
        name: _window([row.timing[name] for row in rows if name in row.timing], name in responses, problems)
        for name in _names(row.timing for row in rows)
    }
    vcc = [step for row in rows for step in row.supplies.values() if step.supply == "VCC"]
    maxima = {
        name: _maximum([one for row in rows if (one := row.maximum_of(name)) is not None], vcc, problems)
        for name in _names(row.maxima for row in rows)
    }
    problems += _looks_apart(rows)
    merged = replace(rows[0], supplies=supplies, timing=timing, maxima=maxima, row=None, apart=apart(rows))
    if merged.identify_command is not None:
        settles = [row.identify_command.settle_ps for row in rows if row.identify_command is not None]
        merged = replace(merged, identify_command=replace(merged.identify_command, settle_ps=max(settles)))
    if merged.write is not None:
        begins = [row.write.begin_ps for row in rows if row.write is not None]
        merged = replace(merged, write=replace(merged.write, begin_ps=max(begins)))
    return Tightest(_with_steps(merged, rows[0] if base is None else base), tuple(problems))


def _with_steps(merged: Definition, base: Definition) -> Definition:
    """`merged` with the steps of `base`, where it has any, and every wait as `merged` has its times."""
    timing = merged.timing
    protect = merged.protect if base.protect is None else base.protect
    if protect is not None:
        protect = replace(protect, on=with_waits(protect.on, timing), off=with_waits(protect.off, timing))

    def chosen(own: Method | None, other: Method | None) -> Method | None:
        return method_with_waits(own if other is None or not other.steps else other, timing)

    return replace(
        merged,
        program=chosen(merged.program, base.program),
        protected=chosen(merged.protected, base.protected),
        erase=chosen(merged.erase, base.erase),
        protect=protect,
        verify=base.verify or merged.verify,
    )


# ---- what no limit settles ----

_IN_COMMON = ("words", "width", "package", "blank", "erase_kind", "pins")
_BY_KEY = {
    "geometry.page": "page",
    "write": "write",
    "commands": "commands",
    "identify": "identify",
    "identify.mode": "identify_mode",
    "identify.command": "identify_command",
    "program": "program",
    "program.protected": "protected",
    "erase": "erase",
    "protect": "protect",
    "verify": "verify",
    **{f"chip.{name}" if name != "pins" else name: name for name in _IN_COMMON},
}
_NO_MATTER = ("where", "source", "settle_ps", "current_ua", "limits_known", "begin_ps")  # or tightened


def apart(rows: Sequence[Definition]) -> tuple[str, ...]:
    """The dotted keys in which rows differ beyond times and maxima, which have a tightest: levels, steps, pages ..."""
    keys = [key for key, name in _BY_KEY.items() if _differ([getattr(row, name) for row in rows])]
    for table in ("modes", "supplies"):
        names = _names(getattr(row, table) for row in rows)
        keys += [f"{table}.{name}" for name in names if _differ([getattr(row, table).get(name) for row in rows])]
    return tuple(keys)


def _differ(values: Sequence[object]) -> bool:
    first = _content(values[0])
    return any(_content(value) != first for value in values[1:])


def _content(value: object) -> object:
    """A value without its place and source; a wait for a parameter without its length, which is tightened."""
    if is_dataclass(value) and not isinstance(value, type):
        skipped = (*_NO_MATTER, "ps") if isinstance(value, WaitStep) and value.timing else _NO_MATTER
        kept = [field.name for field in fields(value) if field.name not in skipped]
        return type(value).__name__, [_content(getattr(value, name)) for name in kept]
    if isinstance(value, Mapping):
        return {name: _content(one) for name, one in value.items()}
    return [_content(one) for one in value] if isinstance(value, tuple | list) else value


def _looks_apart(rows: Sequence[Definition]) -> list[Problem]:
    """Rows with IDs are told apart by one look, so the look is the same for all of them."""
    with_id = [row for row in rows if row.row is not None and row.row.ids]
    problems = []
    for row in with_id[1:]:
        pair = (with_id[0], row)
        keys = [key for key in _BY_KEY if key.startswith(("identify", "pins")) and key in apart(pair)]
        looks = [f"modes.{name}" for name in (row.identify_mode, "standby") if name and f"modes.{name}" in apart(pair)]
        if (keys or looks) and row.row is not None:
            what = "maker rows that no one look tells apart"
            problems.append(Problem(row.row.where, what, ", ".join([*keys, *looks]), _APART))
    return problems


def _names(tables: Iterable[Iterable[str]]) -> list[str]:
    return list(dict.fromkeys(name for table in tables for name in table))


def _responses(rows: Sequence[Definition]) -> set[str]:
    """Timing parameters that say how long the chip takes: the rig waits for the slowest."""
    names = {*RESPONSE_TIMINGS, *(mode.access for row in rows for mode in row.modes.values())}
    names |= {row.write.busy for row in rows if row.write is not None}
    least = {name for row in rows for name, window in row.timing.items() if window.min_ps is not None}
    for row in rows:
        for step in steps_of(row):
            if isinstance(step, PollStep) or (isinstance(step, WaitStep) and step.timing not in least):
                names.add(step.timing)
    return names


def _nothing_fits(where: Where, name: str, found: Sequence[str]) -> Problem:
    return Problem(where, "no value satisfies all maker rows", f"{name}: {' and '.join(found)}", _APART)


def _source(sources: Iterable[str]) -> str:
    """One source of a value that comes of several; `from memory` outweighs the rest."""
    sources = list(sources)
    return next((text for text in sources if "from memory" in text), sources[0])


def _supply(steps: Sequence[SupplyStep], problems: list[Problem]) -> SupplyStep:
    low, high = max(step.min_mv for step in steps), min(step.max_mv for step in steps)
    if low > high:
        windows = [f"{show_mv(step.min_mv)} to {show_mv(step.max_mv)}" for step in steps]
        problems.append(_nothing_fits(steps[-1].where, steps[0].name, list(dict.fromkeys(windows))))
        return steps[0]
    typ = next((step.typ_mv for step in steps if low <= step.typ_mv <= high), (low + high) // 2)
    currents = [step.current_ua for step in steps if step.current_ua is not None]
    return replace(
        steps[0],
        typ_mv=typ,
        min_mv=low,
        max_mv=high,
        limits_known=all(step.limits_known for step in steps),
        current_ua=max(currents) if currents else None,
        settle_ps=max(step.settle_ps for step in steps),
        source=_source(step.source for step in steps),
    )


def _window(windows: Sequence[Window], response: bool, problems: list[Problem]) -> Window:
    lows = [window.min_ps for window in windows if window.min_ps is not None]
    highs = [window.max_ps for window in windows if window.max_ps is not None]
    typs = [window.typ_ps for window in windows if window.typ_ps is not None]
    low = max(lows) if lows else None
    high = (max(highs) if response else min(highs)) if highs else None
    if low is not None and high is not None and low > high:
        texts = [f"{show_ps(window.min_ps or 0)} to {show_ps(window.max_ps or 0)}" for window in windows]
        problems.append(_nothing_fits(windows[-1].where, windows[0].name, list(dict.fromkeys(texts))))
        return windows[0]
    typ = next((ps for ps in typs if (low is None or low <= ps) and (high is None or ps <= high)), None)
    if typ is None and typs and low is not None and high is not None:
        typ = (low + high) // 2
    source = _source(window.source for window in windows)
    return replace(windows[0], min_ps=low, typ_ps=typ, max_ps=high, source=source)


def _maximum(maxima: Sequence[Maximum], vcc: Sequence[SupplyStep], problems: list[Problem]) -> Maximum:
    """The lowest; a maximum above VCC and an absolute one compare only if one is lower at every VCC of the part."""
    source = _source(one.source for one in maxima)
    fixed = min((one for one in maxima if not one.above_vcc), key=lambda one: one.mv, default=None)
    above = min((one for one in maxima if one.above_vcc), key=lambda one: one.mv, default=None)
    chosen = fixed or above
    if fixed is not None and above is not None and vcc:
        if above.mv + max(step.max_mv for step in vcc) <= fixed.mv:
            chosen = above
        elif above.mv + min(step.min_mv for step in vcc) < fixed.mv:
            texts = [show_mv(fixed.mv), f"VCC + {show_mv(above.mv)}"]
            problems.append(_nothing_fits(maxima[-1].where, "a maximum", texts))
    return replace(chosen or maxima[0], source=source)
