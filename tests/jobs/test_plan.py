"""Planning: which words change, blocks, margins, lines that never change the data."""

from __future__ import annotations

import dataclasses
import random

from hypothesis import given
from hypothesis import strategies as st

from pulsewright.chip.load import load
from pulsewright.jobs.plan import (
    BLOCK_WORDS,
    alike_data_lines,
    change,
    joined_lines,
    unchanging_lines,
    verify_steps,
    write_blocks,
)
from pulsewright.jobs.pulses import tries_of
from pulsewright.rig.file import load_rig

words = st.binary(min_size=1, max_size=700)


@given(words, st.data())
def test_blocks_carry_each_marked_word_once_and_no_block_is_idle(want: bytes, data: st.DataObject) -> None:
    """Putting the marked words of all blocks together gives exactly the words to write."""
    write = data.draw(st.binary(min_size=len(want), max_size=len(want)).map(lambda raw: bytes(v & 1 for v in raw)))
    seen = {}
    for block in write_blocks(want, write, 0, len(want) - 1):
        assert block.mask is not None
        assert 0 < block.words <= BLOCK_WORDS
        assert len(block.mask) == (block.words + 7) // 8
        assert any(block.mask)
        for index in range(block.words):
            if block.mask[index // 8] >> index % 8 & 1:
                assert block.first + index not in seen
                seen[block.first + index] = block.data[index]
    assert seen == {at: want[at] for at, flag in enumerate(write) if flag}


@given(st.integers(1, 300), st.data())
def test_a_change_is_only_what_differs_and_is_used(size: int, data: st.DataObject) -> None:
    """Burning the words to write over what the chip has gives the image, unless a 0 would have to become a 1."""
    draw = st.binary(min_size=size, max_size=size)
    have, want = data.draw(draw), data.draw(draw)
    used = bytes(value & 1 for value in data.draw(draw))
    found = change(have, want, used)
    assert found.used == sum(used)
    assert found.differing == sum(found.to_write)
    for at in range(size):
        assert found.to_write[at] == (1 if used[at] and have[at] != want[at] else 0)
        burnt = have[at] & want[at]
        if found.to_write[at]:
            assert (at in found.impossible) == (burnt != want[at])


def test_without_named_passes_the_rig_steps_inside_the_read_window_are_taken() -> None:
    """Only 5.0 V ±34 mV of the reference rig lies inside 4.75 V to 5.25 V, so it is the one pass, and it is named."""
    steps = verify_steps(load("27e512"), load_rig())
    assert [(step.rail_step.mv if step.rail_step else None, step.text) for step in steps] == [
        (5000, "VCC 5.0 V (±0.034 V)")
    ]


def test_a_wider_window_gives_its_lowest_and_highest_step() -> None:
    """With 4.1 V to 5.5 V the rig's 4.2 V and 5.25 V are the margins."""
    definition = load("27e512")
    wide = dataclasses.replace(definition.supplies["VCC.read"], min_mv=4100, max_mv=5500)
    definition = dataclasses.replace(definition, supplies={**definition.supplies, "VCC.read": wide})
    steps = verify_steps(definition, load_rig())
    assert [step.rail_step.mv for step in steps if step.rail_step] == [4200, 5250]


def test_the_tries_are_those_of_the_flow_chart() -> None:
    """25 pulses a word, 20 for the erase."""
    definition = load("27e512")
    assert definition.program is not None
    assert definition.erase is not None
    assert (tries_of(definition.program), tries_of(definition.erase)) == (25, 20)


def test_an_address_line_that_changes_nothing_is_named() -> None:
    """An image that stands twice in the chip does not depend on the highest line; a mixed one on all."""
    mixed = bytes((at * 7 + at // 256) & 0xFF for at in range(1024))
    assert unchanging_lines(mixed + mixed) == [10]
    assert unchanging_lines(mixed) == []
    assert unchanging_lines(bytes(1024)) == []


def test_address_lines_that_touch_are_told_as_a_pair() -> None:
    """Whichever level wins where they differ; a chip with a line that changes nothing, or a plain one, has no pair."""
    data = random.Random(4).randbytes(1024)
    low_wins = bytes(data[at & ~0x60] if (at >> 5 & 1) != (at >> 6 & 1) else data[at] for at in range(1024))
    high_wins = bytes(data[at | 0x60] if (at >> 5 & 1) != (at >> 6 & 1) else data[at] for at in range(1024))
    assert joined_lines(low_wins) == [(5, 6)]
    assert joined_lines(high_wins) == [(5, 6)]
    assert joined_lines(data) == []
    assert joined_lines(data[:256] * 4) == []
    assert joined_lines(bytes(1024)) == []


def test_data_lines_that_always_read_alike_are_told() -> None:
    """Two data pins that touch give their lower level to both; a line that never changes is none of it."""
    data = random.Random(4).randbytes(200)
    touching = bytes(word if (word >> 2 & 1) == (word >> 5 & 1) else word & ~0x24 for word in data)
    assert alike_data_lines(touching) == [(2, 5)]
    assert alike_data_lines(data) == []
    assert alike_data_lines(bytes(200)) == []
    assert alike_data_lines(touching[:40]) == []
