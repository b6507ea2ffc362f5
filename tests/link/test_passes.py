"""Data that a program takes more than once: what the window sends, and when."""

from __future__ import annotations

from pulsewright.link.blocks import Window
from pulsewright.link.results import Block
from pulsewright.wire.frames import Message
from pulsewright.wire.ops import Header
from pulsewright.wire.tables import Flow, Frame

TWICE = Header(8, Flow.WRITE, (1,), 64, 4, passes=2)
BLOCKS = [Block(0, 2, data=b"ab"), Block(4, 2, data=b"cd")]


def sent(frames: list[Message]) -> list[tuple[int, int, int]]:
    """Index, first word and size of each block frame."""
    return [(frame.index, frame.fields["first"], frame.fields["words"]) for frame in frames]


def done(index: int) -> Message:
    """The rig's answer to a block written."""
    fields = {"words": 2, "worst": 0, "worst_tries": 0, "failed": 0xFFFFFFFF, "histogram": b""}
    return Message(Frame.BLOCK_DONE, 9, index, fields)


def test_the_data_goes_out_again_after_its_end() -> None:
    """Blocks, end, the same blocks under later indexes, end; nothing after that."""
    window = Window(BLOCKS, TWICE, 9, 3)
    assert sent(window.due()) == [(0, 0, 2), (1, 4, 2)]
    window.replied(done(0))
    assert window.due() == []
    window.replied(done(1))
    assert sent(window.due()) == [(2, 0, 0), (3, 0, 2), (4, 4, 2)]
    window.replied(done(3))
    window.replied(done(4))
    assert sent(window.due()) == [(5, 0, 0)]
    assert window.due() == []
    assert [(block.index, block.turn) for block in window.results] == [(0, 0), (1, 0), (3, 1), (4, 1)]


def test_an_end_of_data_takes_no_blocks_place() -> None:
    """A window of one block still gets to the second pass."""
    window = Window(BLOCKS, TWICE, 9, 1)
    window.due()
    window.replied(done(0))
    window.due()
    window.replied(done(1))
    assert sent(window.due()) == [(2, 0, 0), (3, 0, 2)]


def test_a_lost_end_of_data_is_sent_again() -> None:
    """The rig refuses the block behind it and wants the end first: both go out again."""
    window = Window(BLOCKS, TWICE, 9, 2)
    window.due()
    window.replied(done(0))
    window.replied(done(1))
    window.due()
    again = window.refused(Message(Frame.BLOCK_REFUSED, 9, 3, {"wanted": 2}))
    assert sent(again) == [(2, 0, 0), (3, 0, 2), (4, 4, 2)]


def test_what_is_overdue_behind_an_end_of_data_is_sent_again_with_it() -> None:
    """An end has no answer: where none comes, the block behind it may be lost, with nothing after it."""
    window = Window(BLOCKS[:1], TWICE, 9, 2)
    window.due()
    window.beat()
    window.replied(done(0))
    assert sent(window.due()) == [(1, 0, 0), (2, 0, 2)]
    assert [sent(window.beat()) for _ in range(3)] == [[], [], [(1, 0, 0), (2, 0, 2)]]


def test_no_data_is_as_many_ends() -> None:
    """Without blocks each pass is its end alone."""
    window = Window([], TWICE, 9, 2)
    assert sent(window.due()) == [(0, 0, 0), (1, 0, 0)]
    assert window.due() == []
