"""The board's own tables against the rig file: a board that is wired or scaled otherwise is refused before VCC."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from pulsewright.errors import RigFault
from pulsewright.jobs.board import check_board
from pulsewright.jobs.read import read
from pulsewright.link.results import RigFacts
from pulsewright.rig.file import load_rig
from pulsewright.wire.frames import Hello
from tests.jobs.fake import FakeSession, context, facts_of

RIG = load_rig()
FITS = facts_of(RIG, Hello(1, 4, 512, 0, 7))


def test_a_board_that_fits_is_accepted() -> None:
    """The same levels may be rounded another way: one count is no difference."""
    check_board(RIG, FITS)
    check_board(RIG, replace(FITS, nominal=tuple(tuple(max(0, c - 1) for c in rail) for rail in FITS.nominal)))


@pytest.mark.parametrize(
    ("changes", "told"),
    [
        ({"data_lines": (14, 13, 15, 17, 18, 19, 20, 21)}, "data lines"),
        ({"switches": (1, 3, 25, 24, 26)}, "raised switches at positions"),
        ({"vcc_switches": (28, 30, 32)}, "VCC switches at positions"),
        ({"nominal": (FITS.nominal[0], tuple(c * 9 // 10 for c in FITS.nominal[1]))}, "rail RAISED step 1"),
        ({"nominal": (FITS.nominal[0][:4], FITS.nominal[1])}, "VCC step 4: the rig file says 5.25 V, the board none"),
        ({"ceilings": (*FITS.ceilings[:4], 879)}, "ceiling at position 26: the rig file says 14.5 V"),
    ],
)
def test_each_difference_is_told(changes: dict[str, Any], told: str) -> None:
    """Lines, switches, steps and ceilings: whatever differs is named, and nothing was powered."""
    with pytest.raises(RigFault) as refused:
        check_board(RIG, replace(FITS, **changes))
    assert any(told in fact for fact in refused.value.facts)
    assert "nothing was powered" in refused.value.did


def test_a_job_asks_before_it_sends_a_sequence(monkeypatch: pytest.MonkeyPatch) -> None:
    """No job of any kind sends anything to a board that does not fit."""
    other: RigFacts = replace(FITS, switches=(1, 3, 25, 24, 26))
    monkeypatch.setattr(FakeSession, "facts", property(lambda self: other))
    session = FakeSession()
    with pytest.raises(RigFault, match="not the one that the rig file describes"):
        read(context(session))
    assert session.kinds == []
