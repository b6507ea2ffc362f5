"""Rig files: the reference rig as published, and every mistake with its line."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.errors import FileMistake, RigFileMistake
from pulsewright.rig.file import REFERENCE, load_rig
from pulsewright.rig.model import Scaling


def test_reference_rig_has_the_rails_a_bench_needs() -> None:
    """The steps are the list of hv-eprom.md section 27 item 10, which it derives from the parts' sheets."""
    rig = load_rig()

    assert [step.mv for step in rig.vcc.steps[1:]] == [3750, 4200, 5000, 5250, 6000, 6250, 6500]
    assert [step.mv for step in rig.raised.steps[1:]] == [12_000, 12_500, 12_750, 13_000, 14_000, 21_000, 25_000]


def test_reference_rig_is_a_trimmed_one() -> None:
    """Its error at 14 V is at most 100 mV, and its position 26 passes a limiter."""
    rig = load_rig()

    assert next(step.error_mv for step in rig.raised.steps if step.mv == 14_000) <= 100
    assert [switch.position for switch in rig.switches if switch.limiter] == [26]


def test_counts_never_move_a_limit_outwards() -> None:
    """A low limit rounds up and a high limit down, so a reading inside the counts is inside the volts."""
    scaling = Scaling(29_696, 1024, 29)

    assert scaling.mv(scaling.count_at_least(13_750)) >= 13_750
    assert scaling.mv(scaling.count_at_most(14_250)) <= 14_250


@pytest.mark.parametrize(
    ("old", "new", "line_has", "what"),
    [
        ('settle         = "25 ms"', 'settle         = "25 V"', "settle", "a time"),
        ('over_voltage = "comparator"', 'over_voltage = "hope"', "over_voltage", "comparator"),
        ("switch = 4, position = 26", "switch = 3, position = 26", "switch = 3, position = 26", "stands twice"),
        ("switch = 4, position = 26", "switch = 4, position = 40", "position = 40", "outside the site"),
        ('fall_limit     = "1 ms"', 'fal_limit     = "1 ms"', "fal_limit", "fall_limit"),
        ("format = 1", "format = 2", "format", "from 1 to 1"),
    ],
)
def test_each_mistake_names_its_line(tmp_path: Path, old: str, new: str, line_has: str, what: str) -> None:
    """A wrong unit, word, number or key in a rig file is told with the file, the line and what is wanted."""
    text = REFERENCE.read_text()
    assert old in text
    file = tmp_path / "rig.toml"
    file.write_text(text.replace(old, new))
    with pytest.raises(RigFileMistake) as refused:
        load_rig(file)

    lines = file.read_text().splitlines()
    told = [p for p in refused.value.problems if p.where.line and line_has in lines[p.where.line - 1]]
    assert any(what in str(problem) for problem in told)


def test_a_rig_file_that_is_not_toml(tmp_path: Path) -> None:
    """A text that is no TOML is one problem with its line; a file that is not there is a file mistake."""
    file = tmp_path / "rig.toml"
    file.write_text("format = 1\n[rig\n")
    with pytest.raises(RigFileMistake) as refused:
        load_rig(file)

    assert refused.value.problems[0].where.line == 2
    with pytest.raises(FileMistake):
        load_rig(tmp_path / "none.toml")
