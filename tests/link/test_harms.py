"""Whatever the line does to a byte, each word is touched exactly once, or the session says that the link is lost."""

from __future__ import annotations

from typing import Any, get_args

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pulsewright.errors import LinkFault
from pulsewright.link.faulty import Faulty, Harm, Kind, Way
from pulsewright.link.inprocess import InProcess
from pulsewright.link.results import RunResult
from pulsewright.wire.frames import Message, encode_frame
from pulsewright.wire.tables import HELLO_REQUEST, Flow, Frame, Outcome, State
from tests.link.fake_rig import MS, FakeRig
from tests.link.kit import IMAGE, WORDS, Desk, image_blocks, sequence

ONCE = dict.fromkeys(range(WORDS), 1)
EACH: tuple[Kind, ...] = ("drop", "flip", "double")
WAYS: tuple[Way, ...] = get_args(Way)


def job(flow: Flow, harms: list[Harm], rig: FakeRig | None = None) -> tuple[Desk, RunResult | None]:
    """A whole session with harms; None for a lost link."""
    desk = Desk(rig, harms)
    if flow is Flow.READ:
        desk.rig.cells[:WORDS] = IMAGE
    try:
        desk.session.connect()
        return desk, desk.session.run(sequence(flow), None if flow is Flow.READ else image_blocks())
    except LinkFault:
        return desk, None


def check(flow: Flow, desk: Desk, result: RunResult | None) -> None:
    """Each word exactly once and the result right; after a lost link or a trip: no word twice."""
    if result is None or result.outcome is Outcome.TRIPPED:
        assert all(count == 1 for count in desk.rig.touched.values())
        return
    assert result.outcome is Outcome.DONE
    assert desk.rig.touched == ONCE
    assert desk.rig.runs == 1
    assert bytes(desk.rig.cells[:WORDS]) == IMAGE
    assert result.data == (IMAGE if flow is Flow.READ else b"")
    assert [block.index for block in result.blocks] == [0, 1]


def positions(flow: Flow, way: Way) -> range:
    """The bytes of one way: of the whole session when reading, of the run alone when writing."""
    first = 0
    if flow is Flow.WRITE:
        desk = Desk()
        desk.session.connect()
        first = desk.line.passed[way]
    desk, _ = job(flow, [])
    return range(first, desk.line.passed[way])


@pytest.mark.parametrize("way", WAYS)
@pytest.mark.parametrize("flow", [Flow.READ, Flow.WRITE])
def test_each_byte_lost_turned_or_doubled(flow: Flow, way: Way) -> None:
    """One byte harmed, at every position of both directions and in every way: the job is whole, each word once."""
    for at in positions(flow, way):
        for kind in EACH:
            desk, result = job(flow, [Harm(way, at, kind)])
            assert result is not None, (at, kind)
            check(flow, desk, result)


@settings(max_examples=150)
@given(
    flow=st.sampled_from([Flow.READ, Flow.WRITE]),
    harms=st.lists(
        st.builds(
            Harm,
            st.sampled_from(WAYS),
            st.integers(0, 700),
            st.sampled_from([*EACH, "stall"]),
            st.integers(1, 255),
            st.integers(0, 400_000),
        ),
        max_size=30,
    ),
)
def test_many_harms_together(flow: Flow, harms: list[Harm]) -> None:
    """However many bytes are harmed, no word is touched twice, and a job that ends done is whole."""
    desk, result = job(flow, harms)
    check(flow, desk, result)


def test_each_heartbeat_lost() -> None:
    """With slow words, one frame of the rig lost after the other: the dead-man never ends the job."""
    desk = Desk()
    desk.session.connect()
    first = desk.line.passed["from rig"]
    for at in range(first, first + 240, 7):
        desk, result = job(Flow.WRITE, [Harm("from rig", at, "drop")], FakeRig(word_ticks=90 * MS))
        assert result is not None
        check(Flow.WRITE, desk, result)


def test_a_cut_line_never_touches_a_word_twice() -> None:
    """Cut at any byte of either way: a lost link, or the rig's own trip heard, or the run had ended; no word twice."""
    clean, _ = job(Flow.WRITE, [])
    for way in WAYS:
        endings = []
        for at in range(0, clean.line.passed[way], 7):
            desk, result = job(Flow.WRITE, [Harm(way, at, "cut")])
            check(Flow.WRITE, desk, result)
            assert not desk.rig.powered
            endings.append("lost" if result is None else result.outcome.name)
        assert endings == sorted(endings, key=["lost", "TRIPPED", "DONE"].index)
        assert len(set(endings)) == (3 if way == "to rig" else 2)


def test_a_stall_delays_and_loses_nothing() -> None:
    """Bytes held back come later and whole."""
    line = Faulty(InProcess(FakeRig()), [Harm("to rig", 2, "stall", for_us=20_000)])
    line.write(HELLO_REQUEST)
    answer = b""
    while len(answer) < 32 and (data := line.read(100_000)):
        answer += data
    assert len(answer) == 32
    assert line.now_us() > 20_000


def test_a_reply_of_an_earlier_sequence_is_not_taken_for_this_one(monkeypatch: pytest.MonkeyPatch) -> None:
    """A block's reply that comes late, under the permit before, is dropped: its words are those of another reading."""
    desk = Desk()
    desk.session.connect()
    desk.rig.cells[:WORDS] = bytes(WORDS)
    assert desk.session.run(sequence(Flow.READ)).data == bytes(WORDS)
    desk.rig.cells[:WORDS] = IMAGE
    reply, late = desk.rig._reply, list(desk.rig._replies.values())

    def with_late(kind: Frame, index: int, **fields: Any) -> Message:
        if desk.rig.state is State.RUNNING and late:
            desk.rig._send(encode_frame(late.pop(0)))
        return reply(kind, index, **fields)

    monkeypatch.setattr(desk.rig, "_reply", with_late)
    assert desk.session.run(sequence(Flow.READ)).data == IMAGE
    assert not late
