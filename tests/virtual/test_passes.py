"""Programs that take the data in several passes, and failures that are noted before the chip is put in order."""

from __future__ import annotations

from pulsewright.wire.ops import Header, Label, assemble, ins
from pulsewright.wire.tables import Fail, Flow, Frame, Op, Outcome
from tests.virtual.gated import DISABLE, ENABLE, END, work
from tests.virtual.kit import ADDRESS, End, Host, Item, PlainChip, past_gate, permit_for, write_block


def drive_each(name: str) -> list[Item]:
    """A pass that drives each word and lets go."""
    return [
        ins(Op.EACH_BLOCK, to=f"end{name}"), ins(Op.EACH_WORD, to=f"block{name}"), ins(Op.ADDRESS_WORD),
        ins(Op.DRIVE_WORD), ins(Op.WAIT, ticks=32), ins(Op.RELEASE), ins(Op.NEXT_WORD), Label(f"block{name}"),
        ins(Op.NEXT_BLOCK), Label(f"end{name}"),
    ]  # fmt: skip


def run(items: list[Item], blocks: list[tuple[int, int, bytes]], passes: int) -> tuple[End, Host]:
    """Runs a writing program of so many passes; the host sends these blocks."""
    host = Host(PlainChip())
    header = Header(8, Flow.WRITE, ADDRESS, 65_536, 256, passes)
    code = assemble(header, [*past_gate(), *items, END])[0]
    return host.run(code, permit_for(code), blocks=blocks), host


DATA, LAST = (0, 2, write_block(b"\x01\x02")), (0, 0, b"")


def driven(host: Host) -> list[str]:
    """What was driven, in order."""
    return [text for text in host.texts() if text.startswith("D=") and text not in ("D=Z", "D=00")]


def test_each_pass_takes_the_data_anew() -> None:
    """Two loops over blocks, each to its own end of data, drive the words twice."""
    end, host = run([*drive_each("1"), *drive_each("2")], [DATA, LAST, DATA], passes=2)
    assert end.outcome is Outcome.DONE
    assert driven(host) == ["D=01", "D=02", "D=01", "D=02"]
    assert end.done["words"] == 4


def test_after_the_last_pass_no_loop_waits() -> None:
    """A loop more than the header's passes goes on at once."""
    end, host = run([*drive_each("1"), *drive_each("2")], [DATA], passes=1)
    assert end.outcome is Outcome.DONE
    assert driven(host) == ["D=01", "D=02"]


READ_BACK: list[Item] = [
    ins(Op.EACH_BLOCK, to="end"), ENABLE, ins(Op.EACH_WORD, to="block"), ins(Op.ADDRESS_WORD), ins(Op.WAIT, ticks=32),
    ins(Op.SAMPLE), ins(Op.COMPARE_WORD), ins(Op.BRANCH, when=1, depth=2, to="good"),
    ins(Op.FAILING, why=Fail.PROGRAM), DISABLE, ins(Op.BRANCH, when=2, depth=0, to="out"), Label("good"),
    ins(Op.NEXT_WORD), Label("block"), DISABLE, ins(Op.NEXT_BLOCK), Label("end"), END,
    Label("out"), ins(Op.ADDRESS, at=0x55), ins(Op.SAMPLE), ins(Op.FAIL, why=Fail.POLL),
]  # fmt: skip


def test_a_failure_that_was_noted_is_told_by_the_fail() -> None:
    """Why, address and sample are those of the failure, whatever the ops after it did."""
    chip = PlainChip(b"\x01\x07\x03")
    end, host = work(READ_BACK, chip=chip, flow=Flow.WRITE, blocks=[(0, 3, write_block(b"\x01\x02\x03"))])
    assert (end.outcome, end.fault["got"]) == (Outcome.FAILED, Fail.PROGRAM)
    assert (end.fault["address"], end.fault["sample"]) == (1, 7)
    assert [done.fields["failed"] for done in host.replies(Frame.BLOCK_DONE)] == [1]


def test_a_word_that_is_only_read_back_is_not_counted_as_written() -> None:
    """A second loop over the words of a block that drives nothing leaves the count alone."""
    end, host = work(READ_BACK, chip=PlainChip(b"\x01\x02"), flow=Flow.WRITE, blocks=[(0, 2, write_block(b"\x01\x02"))])
    assert end.outcome is Outcome.DONE
    assert [done.fields["words"] for done in host.replies(Frame.BLOCK_DONE)] == [0]
