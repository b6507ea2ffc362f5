"""Ops run behind an open gate, with the trace that begins at them."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from pulsewright.wire.ops import ins
from pulsewright.wire.tables import Flow, Op
from tests.virtual.kit import BOTH_HIGH, CE, OE, End, Host, Item, L, build, lines, past_gate, permit_for

END = ins(Op.END)
ENABLE, DISABLE = lines((CE, L), (OE, L)), ins(Op.LINES, lines=BOTH_HIGH)


def work(
    items: Sequence[Item], *, chip: Any = None, flow: Flow = Flow.NONE, blocks: Any = (), **changes: Any
) -> tuple[End, Host]:
    """Runs ops behind an open gate; the trace that is kept begins with them."""
    host = Host(chip)
    code = build([*past_gate(), *items, END], flow=flow)
    end = host.run(code, permit_for(code, **changes), blocks=blocks)
    texts = host.texts()
    begin = min(place for place, text in enumerate(texts) if text == f"{CE}H {OE}H" and "26 falls" in texts[:place])
    host.rig.trace = host.trace[begin + 1 :]
    return end, host
