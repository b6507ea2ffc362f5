"""The mode table of a part as a data sheet prints it, and its supplies with their windows."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from pulsewright.chip.model import Definition, Mode, SupplyStep
from pulsewright.units import show_mv, show_ps, show_ua


def table(head: Sequence[str], rows: Iterable[Sequence[str]]) -> list[str]:
    """Columns of text under their heads, a rule between; ends of lines are bare."""
    body = [list(row) for row in rows]
    widths = [max(len(row[column]) for row in [list(head), *body]) for column in range(len(head))]
    rule = ["-" * width for width in widths]
    return [
        "  ".join(f"{cell:<{width}}" for cell, width in zip(row, widths, strict=True)).rstrip()
        for row in [list(head), rule, *body]
    ]


def _roles(definition: Definition) -> list[str]:
    named: list[str] = []
    for mode in definition.modes.values():
        named += [role for role in mode.levels if role not in named and role not in ("VCC", "D")]
    order = [role for role in definition.pins if role in named]
    return order + [role for role in named if role not in order]


def _level(definition: Definition, text: str) -> str:
    step = definition.supplies.get(text)
    return f"{show_mv(step.typ_mv)} {text}" if step is not None else text


def _cell(definition: Definition, mode: Mode, role: str) -> str:
    if role in mode.levels:
        return _level(definition, mode.levels[role])
    return "address" if role in ("A", *(f"A{bit}" for bit in range(len(definition.pins.get("A", ()))))) else "-"


def mode_table(definition: Definition) -> list[str]:
    """One row a mode, one column a pin that a mode names, then VCC and D."""
    roles = _roles(definition)
    rows = []
    for mode in definition.modes.values():
        data = mode.data if isinstance(mode.data, str) else f"{mode.data:0{definition.width // 4}X}"
        cells = [_cell(definition, mode, role) for role in roles]
        rows.append([mode.name, *cells, _level(definition, mode.vcc), data])
    return table(["mode", *roles, "VCC", "D"], rows)


def window_text(step: SupplyStep) -> str:
    """A step's voltage and window: "14.0 V (13.75 V to 14.25 V)"."""
    return f"{show_mv(step.typ_mv)} ({show_mv(step.min_mv)} to {show_mv(step.max_mv)})"


def source_text(step: SupplyStep) -> str:
    """Where a step's numbers are from; says so where its limits are not published."""
    unknown = "" if step.limits_known else "limits not published: typ ±5 % taken (common practice)"
    return "; ".join(part for part in (step.source, unknown) if part)


def supply_table(definition: Definition) -> list[str]:
    """Each supply step: level, window, current, and where the number is from if not from the part's own source."""
    rows = [
        [
            step.name,
            window_text(step),
            show_ua(step.current_ua) if step.current_ua is not None else "not stated",
            source_text(step),
        ]
        for step in definition.supplies.values()
    ]
    return table(["supply", "level", "current", "from"], rows)


def maxima_table(definition: Definition) -> list[str]:
    """The absolute maximum ratings."""
    rows = [
        [role, f"VCC + {show_mv(maximum.mv)}" if maximum.above_vcc else show_mv(maximum.mv), maximum.source]
        for role, maximum in definition.maxima.items()
    ]
    return table(["absolute maximum", "level", "from"], rows)


def timing_table(definition: Definition) -> list[str]:
    """The timing parameters: min, typ, max."""
    rows = []
    for window in definition.timing.values():
        limits = [
            show_ps(limit) if limit is not None else "-" for limit in (window.min_ps, window.typ_ps, window.max_ps)
        ]
        rows.append([window.name, *limits, window.source])
    return table(["timing", "min", "typ", "max", "from"], rows)
