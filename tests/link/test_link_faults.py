"""A whole burn over a line that does every kind of harm: done as if undisturbed, or exit 5, safe, and completed by a
second run. The deep sweep, each byte in every way, is `python -m tests.link.deep_line_faults`.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator
from itertools import islice
from typing import Any

import pytest

from pulsewright.errors import LinkFault
from tests.link.frame_line import Blackout
from tests.link.line_cases import (
    AWAY_US,
    ENDING,
    MENDED,
    TREATS,
    Case,
    away,
    bad_order,
    bursts,
    cut_in_frames,
    many_harms,
    one_harm_a_part,
    reset_at_each_frame,
    reset_inside_pulses,
    stale,
    sweep,
)
from tests.link.line_hosts import faults_after_death, stretches_at
from tests.link.line_map import bytes_of, stretches_of
from tests.link.small_blocks import small_blocks
from tests.link.whole_job import OTHER, QUICK, SLOW, TWICE, TWICE_ONE, Table, Work, pulses_us


@pytest.fixture(autouse=True, scope="module")
def small() -> Iterator[None]:
    """Blocks of two words, so that a short job has more of them than the window holds."""
    with small_blocks():
        yield


def _struck(work: Work, cases: list[Case]) -> tuple[set[Any], dict[Any, set[Any]]]:
    """The bytes that cases harm, and by way and frame kind the harms it meets."""
    kinds = {(part, way, at): kind for part, way, at, kind, _ in bytes_of(work)}
    places: set[Any] = set()
    met: dict[Any, set[Any]] = defaultdict(set)
    for harm in (harm for case in cases for harm in case.harms):
        place = (harm.part, harm.way, harm.at)
        places.add(place)
        met[harm.way, kinds[place]].add((harm.kind, harm.mask, harm.for_us))
    return places, met


def test_the_sweep_strikes_every_byte_and_every_kind_of_frame_in_every_way() -> None:
    """No byte of the job is left out, and no kind of frame meets less than all six harms that repeats mend."""
    assert len(list(bytes_of(QUICK))) > 5_000
    places, met = _struck(QUICK, list(one_harm_a_part(QUICK)))
    assert places == {(part, way, at) for part, way, at, _, _ in bytes_of(QUICK)}
    assert {pair: len(harms) for pair, harms in met.items()} == dict.fromkeys(met, len(MENDED))
    _, met = _struck(QUICK, list(cut_in_frames(QUICK)))
    assert {pair for pair, harms in met.items() if len(harms) == len(ENDING)} >= {
        pair for pair in met if sum((one.way, one.kind) == pair for one in stretches_of(QUICK)) > 1
    }


def test_each_byte_harmed_burns_each_word_as_often_as_without() -> None:
    """A byte lost, turned, made zero, doubled or late, anywhere in the job: the same result, the same pulses."""
    tally = sweep(QUICK, one_harm_a_part(QUICK))
    assert tally.wrong == []
    assert set(tally.endings) == {"done"}


def test_a_line_cut_in_a_frame_leaves_a_safe_rig_and_a_chip_that_a_second_run_completes() -> None:
    """Cut for good, or still for longer than the dead-man's patience, in frames of every kind, of either way."""
    tally = sweep(QUICK, cut_in_frames(QUICK))
    assert tally.wrong == []
    assert tally.endings.keys() >= {"done", "LinkFault", "Tripped", "RigSilent"}


@pytest.mark.parametrize("work", [QUICK, SLOW])
def test_a_line_that_is_away_for_a_while_mends_or_tells_the_word_that_was_cut(work: Work) -> None:
    """Away both ways from behind every other frame on, for 0.1 to 4 s: healed, tripped, or lost and the rig asked."""
    tally = sweep(work, islice(away(work), 0, None, 2 * len(AWAY_US) + 1))
    assert tally.wrong == []
    assert tally.endings.keys() >= {"done", "LinkFault", "Tripped"}


def test_a_word_whose_pulse_was_cut_while_the_line_was_away_is_told() -> None:
    """The rig greets again after the session gave up: its own fault names the word, and the counters are both ends'."""
    table = Table(SLOW)
    begin, end = pulses_us(SLOW)[9]
    ended = table.run(lambda line, rig: Blackout(line, (begin + end) // 2 - 500_000, 4_000_000))
    assert isinstance(ended.error, LinkFault)
    assert ended.error.did.startswith("answers greetings again")
    assert [fact for fact in ended.error.facts if "undefined" in fact] == [
        f"word {SLOW.first + 9:04X} is undefined: its pulse was cut"
    ]
    assert any(fact.startswith("frames at the rig: ") and "not known" not in fact for fact in ended.error.facts)


def test_frames_out_of_order_or_repeated_change_nothing() -> None:
    """Each frame behind the next, twice, or once more later: at once, in three, or in a later sequence."""
    cases = islice(bad_order(QUICK), 0, None, len(TREATS) - 1)  # the step wanders over the treats
    tally = sweep(QUICK, cases)
    assert tally.wrong == []
    assert set(tally.endings) == {"done"}


def test_frames_lost_in_a_row_are_mended_or_end_by_the_dead_man() -> None:
    """Two to six frames of one way lost, from every third on: more than the window holds, and no reply is missed."""
    tally = sweep(QUICK, islice(bursts(QUICK), 0, None, 3))
    assert tally.wrong == []
    assert tally.endings["done"] > 60


def test_data_taken_twice_is_burnt_as_often_as_without_harm() -> None:
    """A part whose method takes the data in two passes: a byte harmed in each part of a job, frames lost in a row, and
    harm upon harm, also where a pass is one block and nothing behind it tells that it is missing.
    """
    mended = sweep(TWICE_ONE, islice(one_harm_a_part(TWICE_ONE), 0, None, 23))
    assert mended.wrong == []
    assert set(mended.endings) == {"done"}
    lost = sweep(TWICE, islice(bursts(TWICE), 0, None, 9))
    assert lost.wrong == []
    many = sweep(TWICE_ONE, many_harms(TWICE_ONE, range(8), 80))
    assert many.wrong == []


@pytest.mark.parametrize("early_us", [0, 3_000_000])
def test_frames_of_an_earlier_boot_do_no_harm(early_us: int) -> None:
    """Before each frame one of another burn's, of the boot before, with other words, also where the host's clock began
    anew: never a wrong one is burnt.
    """
    tally = sweep(QUICK, stale(QUICK, OTHER, every=597, early_us=early_us))
    assert tally.wrong == []
    assert tally.jobs > 100


@pytest.mark.parametrize("work", [QUICK, SLOW])
def test_a_line_that_harms_one_byte_of_eighty(work: Work) -> None:
    """Harm upon harm: done as if undisturbed, or the rig's own trip, and completed by a second run."""
    tally = sweep(work, many_harms(work, range(24), 80))
    assert tally.wrong == []
    assert tally.endings.keys() == {"done", "Tripped"}


@pytest.mark.parametrize("fast", [True, False])
@pytest.mark.parametrize("work", [QUICK, SLOW])
def test_a_host_that_dies_leaves_a_chip_that_the_next_one_completes(work: Work, fast: bool) -> None:
    """Killed behind any frame, and begun again at once, while the rig may still be at work: also at the rate of
    greetings, where the rig hears the new host in the middle of the old one's sequence.
    """
    died = 0
    for one in stretches_at(work, fast=fast)[::9]:
        dead, found = faults_after_death(work, one, fast=fast)
        assert found == [], one
        died += dead
    assert died > 15


def test_a_reset_at_any_frame_is_told_and_a_second_run_completes_the_chip() -> None:
    """The rig reset behind frames it sends, and as frames that it is sent have arrived: at every other one."""
    tally = sweep(QUICK, islice(reset_at_each_frame(QUICK), 0, None, 2))
    assert tally.wrong == []
    assert set(tally.endings) == {"done", "RigRestarted"}


@pytest.mark.parametrize(("work", "every"), [(QUICK, 3), (SLOW, 4)])
def test_a_reset_inside_a_pulse_is_told_and_a_second_run_completes_the_chip(work: Work, every: int) -> None:
    """The rig reset at moments spread over pulses of 100 us and of 50 ms."""
    tally = sweep(work, reset_inside_pulses(work, every, 5))
    assert tally.wrong == []
    assert set(tally.endings) == {"RigRestarted"}
