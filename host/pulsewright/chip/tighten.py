"""The tightest definition over all maker rows: what holds until the ID bytes have told which row it is."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

from pulsewright.chip.model import Definition, Maximum, SupplyStep, Window
from pulsewright.chip.schema import RESPONSE_TIMINGS
from pulsewright.errors import Problem, Where
from pulsewright.units import show_mv, show_ps

_APART = "make two definitions"


@dataclass(frozen=True)
class Tightest:
    """The tightest definition, and what no value satisfies."""

    defn: Definition
    problems: tuple[Problem, ...]


def tightest(rows: Sequence[Definition]) -> Tightest:
    """Each limit the tightest of all rows; modes, pins and steps stay the first row's, limits alone can be tightened.

    What stands only in some rows is kept as it is there. One row is that row. `rows` are definitions of one file.
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
    merged = replace(rows[0], supplies=supplies, timing=timing, maxima=maxima, row=None)
    return Tightest(merged, tuple(problems))


def _names(tables: Iterable[Iterable[str]]) -> list[str]:
    return list(dict.fromkeys(name for table in tables for name in table))


def _responses(rows: Iterable[Definition]) -> set[str]:
    """Timing parameters that say how long the chip takes: the rig waits for the slowest."""
    return {*RESPONSE_TIMINGS, *(mode.access for row in rows for mode in row.modes.values())}


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
