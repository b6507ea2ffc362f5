"""The fused ops' expansions: primitives only, properly nested, every branch resolved."""

from __future__ import annotations

from typing import Any

import pytest

from pulsewright.wire.expand import EXPANSIONS, expand, flatten
from pulsewright.wire.ops import Header, Instruction, Label, decode_program, encode_program, ins, line_byte
from pulsewright.wire.tables import LOOP_DEPTH, Flow, Level, Op

OFF = bytes([line_byte(24, Level.HIGH)])
ON = bytes([line_byte(24, Level.LOW)])
STROBE: dict[str, Any] = {"strobe": line_byte(22, Level.LOW), "setup": 2, "width": 4, "hold": 3}
FUSED = [
    ins(Op.READ_RUN, wait=7),
    ins(Op.SCAN, first=5, count=9, word=0xFF, wait=7),
    ins(Op.SCAN, first=0, count=131_072, word=0xFF, wait=7),
    ins(Op.PULSE_VERIFY, tries=25, switches=4, setup=1, line=22, width=10, max=11, hold=2, fall=3, recover=4, enable=ON,
        access=5, disable=OFF, float=6, factor=3, over_max=99),
    ins(Op.BUS_WRITES, **STROBE, cycles=((0x5555, 0xAA), (0x2AAA, 0x55))),
    ins(Op.WRITE_POLL, **STROBE, kind=0, enable=ON, access=5, disable=OFF, gap=6, mantissa=3, exponent=4),
    ins(Op.PAGE_LOAD, **STROBE),
]
OPENING = (Op.LOOP, Op.EACH_BLOCK, Op.EACH_WORD)
CLOSING = {Op.NEXT: Op.LOOP, Op.NEXT_BLOCK: Op.EACH_BLOCK, Op.NEXT_WORD: Op.EACH_WORD}


def test_every_fused_op_is_tried_here() -> None:
    """The list above misses none."""
    assert {instruction.op for instruction in FUSED} == set(EXPANSIONS)


@pytest.mark.parametrize("instruction", FUSED, ids=lambda i: i.op.name.lower())
def test_an_expansion_is_primitives_that_nest(instruction: Instruction) -> None:
    """No fused op inside, loops close in order and are at most three deep, every branch names a label behind it."""
    items = expand(instruction, 0)
    labels = {item.name: place for place, item in enumerate(items) if isinstance(item, Label)}
    open_loops: list[Op] = []
    for place, item in enumerate(items):
        if isinstance(item, Label):
            continue
        assert item.op not in EXPANSIONS
        if item.op in OPENING:
            open_loops.append(item.op)
        elif item.op in CLOSING:
            assert open_loops.pop() is CLOSING[item.op]
        if "to" in item.args:
            assert labels[item.args["to"]] > place
        assert len(open_loops) <= LOOP_DEPTH
    assert open_loops == []


def test_a_primitive_expands_to_itself() -> None:
    """Nothing is added."""
    instruction = ins(Op.WAIT, ticks=5)
    assert expand(instruction, 2) == [instruction]


def test_a_flat_program_has_every_target_as_an_index() -> None:
    """Each branch leads to the op whose offset it named, fused ops before it or not."""
    header = Header(8, Flow.READ, (1, 2), 4, 4)
    head = len(header.encode())
    read, branch = ins(Op.READ_RUN, wait=7), ins(Op.BRANCH, when=2, depth=0, to=0)
    after = head + len(read.encode()) + len(branch.encode()) + 1
    code = [read, ins(Op.BRANCH, when=2, depth=0, to=after), ins(Op.SAMPLE), ins(Op.END)]
    flat, index_of = flatten(decode_program(encode_program(header, code)).code)
    ops = [instruction.op for _, instruction in flat]
    assert ops[-3:] == [Op.BRANCH, Op.SAMPLE, Op.END]
    assert flat[-3][1].args["to"] == index_of[after] == len(flat) - 1
    assert flat[0][1].args["to"] == ops.index(Op.BRANCH)  # read_run's end of data goes on behind it
    assert {offset for offset, _ in flat[:8]} == {head}


@pytest.mark.parametrize("count", [1, 9, 65_536])
def test_a_scan_visits_each_word(count: int) -> None:
    """Turns of the inner loop times those of the outer one are the words wanted."""
    loops = [item.args["count"] or 65_536 for item in expand(ins(Op.SCAN, first=0, count=count, word=0, wait=1), 0)
             if isinstance(item, Instruction) and item.op is Op.LOOP]
    assert loops[0] * loops[1] == count


def test_over_programming_is_only_there_when_asked_for() -> None:
    """Factor 0 leaves it out."""
    ops = {Op.OVER_PULSE}
    plain = Instruction(Op.PULSE_VERIFY, {**FUSED[3].args, "factor": 0})
    assert ops <= {item.op for item in expand(FUSED[3], 0) if isinstance(item, Instruction)}
    assert not ops & {item.op for item in expand(plain, 0) if isinstance(item, Instruction)}
