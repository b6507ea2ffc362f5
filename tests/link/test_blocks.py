"""The window of blocks as such: what goes out, what goes out again, what is counted."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.errors import RigFault
from pulsewright.link.blocks import Window, requests
from pulsewright.link.results import Block
from pulsewright.wire.frames import Message
from pulsewright.wire.ops import Header
from pulsewright.wire.tables import Flow, Frame

READ = Header(8, Flow.READ, (1,), 64, 4)
WRITE = Header(8, Flow.WRITE, (1,), 64, 4)


def reader(blocks: int = 6, size: int = 3) -> Window:
    """A window over some read requests."""
    return Window(requests(0, 4 * blocks - 1, 4), READ, 9, size)


def reply(index: int, data: bytes = b"abcd") -> Message:
    """The rig's answer to a request."""
    return Message(Frame.BLOCK_DATA, 9, index, {"data": data})


def refusal(index: int, wanted: int) -> Message:
    """The rig's refusal of a block that came too early."""
    return Message(Frame.BLOCK_REFUSED, 9, index, {"wanted": wanted})


def indexes(frames: list[Message]) -> list[int]:
    """Indexes of frames."""
    return [frame.index for frame in frames]


def test_requests_cover_the_range() -> None:
    """The last request is as long as what is left."""
    assert [(block.first, block.words) for block in requests(3, 12, 4)] == [(3, 4), (7, 4), (11, 2)]


def test_the_window_is_filled_and_slides() -> None:
    """At most its size is under way, counted from the oldest unanswered block."""
    window = reader()
    assert indexes(window.due()) == [0, 1, 2]
    assert window.due() == []
    assert window.replied(reply(0)) == (True, [])
    assert indexes(window.due()) == [3]


def test_the_end_of_data_waits_for_all_answers() -> None:
    """No words goes out when every block is answered, and only once."""
    window = reader(blocks=1)
    window.due()
    assert window.due() == []
    window.replied(reply(0))
    last = window.due()
    assert [(frame.index, frame.fields["words"]) for frame in last] == [(1, 0)]
    assert window.due() == []


def test_a_reply_counts_once() -> None:
    """The second copy of a reply, and one to a block never sent, change nothing."""
    window = reader()
    window.due()
    assert window.replied(reply(1, b"efgh"))[0]
    assert not window.replied(reply(1, b"xxxx"))[0]
    assert not window.replied(reply(5))[0]
    window.replied(reply(0))
    assert window.data == b"abcdefgh"
    assert window.words == 8


def test_a_reply_that_is_missing_is_asked_for() -> None:
    """Where a later block is answered first, the earlier one's reply was lost: that block again, once."""
    window = reader()
    window.due()
    counted, again = window.replied(reply(1))
    assert (counted, indexes(again)) == (True, [0])
    assert indexes(window.replied(reply(2))[1]) == []


def test_a_refusal_goes_back_to_the_wanted_block() -> None:
    """All from the wanted one on go out again; the refusals of those that followed it do nothing more."""
    window = reader()
    window.due()
    assert indexes(window.refused(refusal(1, 0))) == [0, 1, 2]
    assert window.refused(refusal(2, 0)) == []


def test_the_same_loss_twice_goes_back_twice() -> None:
    """A refusal of a block already refused belongs to the second sending."""
    window = reader()
    window.due()
    window.refused(refusal(1, 0))
    window.refused(refusal(2, 0))
    assert indexes(window.refused(refusal(1, 0))) == [0, 1, 2]


def test_a_refusal_that_wants_nothing_of_ours_is_left() -> None:
    """A stale index is not followed."""
    window = reader()
    window.due()
    assert window.refused(refusal(1, 500)) == []


def test_heartbeats_without_an_answer_repeat_the_oldest() -> None:
    """At the second, fourth, eighth heartbeat and every eighth from there; an answer begins the count anew."""
    window = reader()
    window.due()
    sent = [number for number in range(1, 33) if window.beat()]
    assert sent == [2, 4, 8, 16, 24, 32]
    window.replied(reply(0))
    assert [bool(window.beat()) for _ in range(3)] == [False, False, True]


def test_a_block_is_masked_and_ordered() -> None:
    """The mask's bytes come first, all ones where none is given; then the words, low byte first."""
    window = Window([Block(0, 3, None, b"abc"), Block(3, 2, b"\x02", b"de")], WRITE, 9, 4)
    assert [frame.fields["data"] for frame in window.due()] == [b"\x07abc", b"\x02de"]


def test_a_block_whose_data_do_not_fit_is_a_mistake() -> None:
    """Three words want three bytes."""
    with pytest.raises(ValueError, match="3 words with 2 bytes"):
        Window([Block(0, 3, None, b"ab")], WRITE, 9, 4).due()


def test_a_reply_of_the_wrong_length_is_the_rigs_fault() -> None:
    """A whole frame with too few words is never taken for data."""
    window = reader()
    window.due()
    with pytest.raises(RigFault) as caught:
        window.replied(reply(0, b"abc"))
    assert (caught.value.wanted, caught.value.got) == ("4 bytes", "3 bytes")


def test_indexes_pass_the_end_of_sixteen_bits() -> None:
    """Block 65536 has index 0 on the wire and its own place in the data."""
    window = Window(requests(0, 65_539, 1), Header(8, Flow.READ, (1,), 65_540, 1), 9, 2)
    sent = [frame.index for frame in window.due()]
    for number in range(65_540):
        assert window.replied(reply(number % 65_536, bytes([number % 251])))[0]
        sent += [frame.index for frame in window.due()]
    assert sent[65_535:65_538] == [65_535, 0, 1]
    assert len(window.data) == 65_540
    assert window.data[65_536] == 65_536 % 251


@given(st.lists(st.integers(0, 7), max_size=60))
def test_any_order_of_replies_counts_each_once(order: list[int]) -> None:
    """Whatever comes, no block counts twice and the data are those of the blocks answered."""
    window = reader(blocks=8, size=8)
    window.due()
    counted = [index for index in order if window.replied(reply(index, bytes([index]) * 4))[0]]
    assert sorted(counted) == sorted(set(counted))
    assert window.data == b"".join(bytes([index]) * 4 for index in sorted(counted))
