"""Blocks at the rig: in order, once, kept, refused, and what they feed."""

from __future__ import annotations

from typing import Any

from pulsewright.wire.fields import unpack
from pulsewright.wire.ops import ins
from pulsewright.wire.tables import BLOBS, Flow, Frame, Op, Outcome
from tests.virtual.kit import CE, ID, MS, OE, Host, L, build, lines, past_gate, permit_for

END = ins(Op.END)
READING = build([*past_gate(), lines((CE, L), (OE, L)), ins(Op.READ_RUN, wait=16), END], flow=Flow.READ, words=1_000)
IDLING = build([ins(Op.WAIT, ticks=1_100 * MS), END])


def status(host: Host) -> dict[str, Any]:
    """State and counters."""
    data = host.ask(Frame.STATUS).fields["data"]
    return unpack([*BLOBS["status"], *BLOBS["fault"]], data)


def reading() -> Host:
    """A host whose rig waits for its first block."""
    host = Host()
    host.start(READING)
    host.pass_time(150 * MS)
    return host


def test_blocks_are_answered_in_order() -> None:
    """Two requests sent together come back one after the other, each with its own index."""
    host = reading()
    host.chip.cells[:8] = b"pulsewri"
    host.block(0, 0, 5, b"")
    host.block(1, 5, 3, b"")
    host.block(2, 0, 0, b"")
    end = host.end()
    assert [(m.index, m.fields["data"]) for m in host.replies(Frame.BLOCK_DATA)] == [(0, b"pulse"), (1, b"wri")]
    assert (end.done["blocks"], end.done["words"], end.id) == (2, 8, bytes(ID))


def test_a_block_sent_again_gets_the_kept_reply() -> None:
    """What was answered is not read anew: the reply is the one that was kept."""
    host = reading()
    host.block(0, 0, 2, b"")
    host.pass_time(20 * MS)
    host.chip.cells[0] = 0x11
    host.block(0, 0, 2, b"")
    host.pass_time(20 * MS)
    assert [m.fields["data"] for m in host.replies(Frame.BLOCK_DATA)] == [b"\xff\xff", b"\xff\xff"]


def test_as_many_replies_are_kept_as_the_window_has_blocks() -> None:
    """The fourth last is still there, the fifth last is not."""
    host = reading()
    for index in range(6):
        host.block(index, index, 1, b"")
        host.pass_time(15 * MS)
    host.heard.clear()
    for index in (1, 2, 5):
        host.block(index, index, 1, b"")
    host.pass_time(30 * MS)
    assert [m.index for m in host.replies(Frame.BLOCK_DATA)] == [2, 5]


def test_a_block_that_comes_too_early_is_refused_with_the_wanted_index() -> None:
    """Index 1 before 0: refused; 0 is wanted."""
    host = reading()
    host.block(1, 5, 3, b"")
    host.pass_time(20 * MS)
    refused = host.replies(Frame.BLOCK_REFUSED)
    assert [(m.index, m.fields["wanted"]) for m in refused] == [(1, 0)]
    assert host.replies(Frame.BLOCK_DATA) == []


def test_a_window_of_blocks_is_queued_while_the_program_works() -> None:
    """Four blocks are kept while the program is busy, a fifth is refused."""
    host = Host()
    busy = [*past_gate(), ins(Op.WAIT, ticks=200 * MS), ins(Op.READ_RUN, wait=16), END]
    host.start(build(busy, flow=Flow.READ))
    host.pass_time(100 * MS)
    for index in range(5):
        host.block(index, index, 1, b"")
    host.pass_time(60 * MS)
    assert [(m.index, m.fields["wanted"]) for m in host.replies(Frame.BLOCK_REFUSED)] == [(4, 4)]
    host.pass_time(200 * MS)
    assert [m.index for m in host.replies(Frame.BLOCK_DATA)] == [0, 1, 2, 3]


def test_block_indexes_begin_at_zero_under_each_permit() -> None:
    """A new permit forgets the blocks of the one before."""
    host = reading()
    host.block(0, 0, 1, b"")
    host.block(1, 0, 0, b"")
    host.end()
    host.start(READING, permit_for(READING, number=2))
    host.block(0, 0, 3, b"")
    host.block(1, 0, 0, b"")
    assert host.end().outcome is Outcome.DONE
    replies = host.replies(Frame.BLOCK_DATA)
    assert [(m.permit, m.index, len(m.fields["data"])) for m in replies] == [(1, 0, 1), (2, 0, 3)]


def test_blocks_without_a_run_are_dropped() -> None:
    """Nobody waits for them."""
    host = Host()
    host.seal(READING)
    host.block(0, 0, 1, b"")
    assert host.pass_time(50 * MS) == []
    assert status(host)["dropped"] == 1


def test_a_block_frame_feeds_the_dead_man() -> None:
    """With blocks coming and no other frame the run goes on for longer than half a second."""
    host = reading()
    host.keep_alive = False
    for index in range(8):
        host.block(index, index, 1, b"")
        host.pass_time(200 * MS)
    host.block(8, 0, 0, b"")
    assert host.end().outcome is Outcome.DONE
