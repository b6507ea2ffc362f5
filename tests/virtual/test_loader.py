"""What the loader and the permit check refuse, each with its code and the place of the op to blame."""

from __future__ import annotations

import zlib
from dataclasses import replace
from typing import Any

import pytest

from pulsewright.virtual.loader import Loaded, Unfit, check_permit, load
from pulsewright.wire.ops import Header, Instruction, Label, encode_program, ins, line_byte
from pulsewright.wire.permit import Permit, VccStep
from pulsewright.wire.tables import Fault, Flow, Identity, Level, Op
from tests.virtual.kit import ADDRESS, CE, L, build, permit_for, vcc, vpp

END = ins(Op.END)
PULSE = {"line": line_byte(CE, L), "width": 16, "max": 16}


def refused(code: bytes, permit: Permit | None = None) -> tuple[Fault, int]:
    """Code and place of the refusal."""
    with pytest.raises(Unfit) as unfit:
        load(code, permit or permit_for(code))
    return unfit.value.code, unfit.value.pc


def raw(tail: bytes, header: Header | None = None) -> bytes:
    """A program of a good header and bytes."""
    return encode_program(header or Header(8, Flow.NONE, ADDRESS, 0, 0), []) + tail


HEADER_BYTES = len(raw(b""))


def test_a_good_program_is_loaded_flat() -> None:
    """Fused ops become primitives, each with the byte offset of the op it came from."""
    code = build([ins(Op.READ_RUN, wait=8), END], flow=Flow.READ)
    loaded = load(code, permit_for(code))
    assert isinstance(loaded, Loaded)
    assert [instruction.op for _, instruction in loaded.flat][:3] == [Op.EACH_BLOCK, Op.EACH_WORD, Op.ADDRESS_WORD]
    assert {offset for offset, _ in loaded.flat} == {HEADER_BYTES, HEADER_BYTES + 5}
    assert loaded.depths[:3] == (0, 1, 2)


def test_an_unknown_op_is_named_by_its_place() -> None:
    """A byte that is no op."""
    assert refused(raw(bytes([Op.RELEASE, 0xEE]))) == (Fault.UNKNOWN_OP, HEADER_BYTES + 1)


def test_cut_arguments_are_refused() -> None:
    """A wait of two bytes."""
    assert refused(raw(bytes([Op.WAIT, 1, 2]))) == (Fault.BAD_ARGUMENT, HEADER_BYTES)


def test_the_crc_is_the_permits() -> None:
    """A program with one bit turned is not the one the permit was made for."""
    code = build([END])
    assert refused(code[:-1] + bytes([Op.RELEASE]), permit_for(code))[0] is Fault.BAD_CRC


def test_a_program_longer_than_the_memory_is_refused() -> None:
    """1025 bytes."""
    assert refused(raw(bytes([Op.RELEASE]) * (1_025 - HEADER_BYTES)))[0] is Fault.TOO_LONG


@pytest.mark.parametrize(
    "items", [[], [ins(Op.RELEASE)], [ins(Op.BRANCH, when=0, depth=0, to="e"), END, Label("e"), ins(Op.KEEP)]]
)
def test_a_program_that_runs_past_its_end_is_refused(items: list[Instruction | Label]) -> None:
    """The last op ends or fails."""
    assert refused(build(items))[0] is Fault.NO_END


def test_a_branch_to_behind_the_program_is_refused() -> None:
    """No op stands there."""
    assert refused(build([ins(Op.BRANCH, when=0, depth=0, to="e"), END, Label("e")]))[0] is Fault.BAD_NESTING


NESTING: dict[str, tuple[list[Instruction | Label], Flow]] = {
    "a loop without its end": ([ins(Op.LOOP, count=2), END], Flow.NONE),
    "an end without its loop": ([ins(Op.NEXT), END], Flow.NONE),
    "loops that cross": (
        [ins(Op.EACH_BLOCK, to="e"), ins(Op.LOOP, count=2), ins(Op.NEXT_BLOCK), ins(Op.NEXT), Label("e"), END],
        Flow.READ),
    "four loops deep": ([*[ins(Op.LOOP, count=2)] * 4, *[ins(Op.NEXT)] * 4, END], Flow.NONE),
    "a branch back": ([Label("b"), ins(Op.KEEP), ins(Op.BRANCH, when=2, depth=0, to="b"), END], Flow.NONE),
    "a branch into a loop": (
        [ins(Op.BRANCH, when=2, depth=1, to="b"), ins(Op.LOOP, count=2), Label("b"), ins(Op.NEXT), END], Flow.NONE),
    "a branch into the loop after": (
        [ins(Op.LOOP, count=2), ins(Op.BRANCH, when=2, depth=1, to="b"), ins(Op.NEXT), ins(Op.LOOP, count=2),
         Label("b"), ins(Op.NEXT), END], Flow.NONE),
    "a branch with the wrong depth": (
        [ins(Op.LOOP, count=2), ins(Op.BRANCH, when=2, depth=1, to="b"), ins(Op.NEXT), Label("b"), END], Flow.NONE),
    "words without a block": ([ins(Op.EACH_WORD, to="e"), ins(Op.NEXT_WORD), Label("e"), END], Flow.READ),
    "blocks where the header has none": ([ins(Op.READ_RUN, wait=1), END], Flow.NONE),
    "a word in hand outside its loop": ([ins(Op.DRIVE_WORD), END], Flow.WRITE),
    "a word to write in a reading program": (
        [ins(Op.EACH_BLOCK, to="e"), ins(Op.EACH_WORD, to="b"), ins(Op.DRIVE_WORD), ins(Op.NEXT_WORD), Label("b"),
         ins(Op.NEXT_BLOCK), Label("e"), END], Flow.READ),
    "a report outside its block": ([ins(Op.REPORT), END], Flow.READ),
    "fused ops too deep": (
        [*[ins(Op.LOOP, count=2)] * 2, ins(Op.SCAN, first=0, count=4, word=0, wait=1), *[ins(Op.NEXT)] * 2, END],
        Flow.NONE),
}


@pytest.mark.parametrize(("items", "flow"), NESTING.values(), ids=NESTING.keys())
def test_what_does_not_nest_is_refused(items: list[Instruction | Label], flow: Flow) -> None:
    """Loops nest at most three deep, branches go forward and out, and no routine is unbounded."""
    assert refused(build(items, flow=flow))[0] is Fault.BAD_NESTING


def test_a_branch_between_ops_is_refused() -> None:
    """An offset at which no op begins."""
    branch = ins(Op.BRANCH, when=2, depth=0, to=HEADER_BYTES + 6).encode()
    wait = ins(Op.WAIT, ticks=5).encode()
    assert refused(raw(branch + wait + END.encode()))[0] is Fault.BAD_NESTING


@pytest.mark.parametrize(
    "item",
    [
        ins(Op.PULSE, **{**PULSE, "width": 0}),
        ins(Op.PULSE, **{**PULSE, "max": 15}),
        ins(Op.BUS_WRITES, strobe=line_byte(CE, L), setup=1, width=0, hold=1, cycles=((0, 0),)),
    ],
    ids=str,
)
def test_a_pulse_without_an_end_is_refused(item: Instruction) -> None:
    """No width, or a width above its own maximum."""
    assert refused(build([item, END])) == (Fault.PULSE_WITHOUT_END, HEADER_BYTES)


@pytest.mark.parametrize(
    "item",
    [
        ins(Op.LINES, lines=bytes([line_byte(16, L)])),
        ins(Op.LINES, lines=bytes([line_byte(33, L)])),
        ins(Op.LINES, lines=bytes([line_byte(13, Level.HIGH)])),
        ins(Op.LINES, lines=bytes([CE | 3 << 6])),
        ins(Op.PULSE, **{**PULSE, "line": line_byte(CE, Level.RELEASED)}),
        ins(Op.PULSE, **{**PULSE, "line": line_byte(13, L)}),
        ins(Op.HIGH, how=2),
        ins(Op.DRIVE, word=256),
        ins(Op.ADDRESS, at=65_536),
        ins(Op.SCAN, first=1, count=65_536, word=0, wait=1),
        ins(Op.SCAN, first=0, count=65_537, word=0, wait=1),
        ins(Op.SENSE, line=CE, **{"is": 2}),
        ins(Op.RAIL, rail=0, step=8),
        ins(Op.RAIL, rail=2, step=1),
        ins(Op.RANGE, which=3),
        ins(Op.SWITCHES, on=32),
        ins(Op.BIAS, groups=0, how=1),
        ins(Op.BIAS, groups=8, how=1),
        ins(Op.MEASURE, channel=3, low=0, high=1, limit=1),
        ins(Op.MEASURE, channel=21, low=0, high=1, limit=1),
        ins(Op.MEASURE, channel=2, low=2, high=1, limit=1),
        ins(Op.POLL, kind=4, enable=b"", access=1, disable=b"", gap=1, mantissa=1, exponent=1),
        ins(Op.POLL, kind=0, enable=b"", access=1, disable=b"", gap=1, mantissa=1, exponent=30),
    ],
    ids=str,
)
def test_an_argument_that_the_board_does_not_have_is_refused(item: Instruction) -> None:
    """Lines, levels, steps, switches, channels and kinds that do not exist; D set as if it were a control line."""
    assert refused(build([item, END])) == (Fault.BAD_ARGUMENT, HEADER_BYTES)


@pytest.mark.parametrize(
    "header",
    [
        Header(16, Flow.NONE, ADDRESS, 0, 0),
        Header(8, Flow.NONE, (16,), 0, 0),
        Header(8, Flow.NONE, (5, 5), 0, 0),
        Header(8, Flow.READ, ADDRESS, 10, 0),
        Header(8, Flow.READ, ADDRESS, 10, 513),
    ],
    ids=str,
)
def test_a_header_that_the_site_cannot_serve_is_refused(header: Header) -> None:
    """Sixteen bits, lines that are none, a line twice, blocks of no or too many words."""
    assert refused(raw(END.encode(), header))[0] is Fault.BAD_ARGUMENT


def test_without_identity_a_permit_with_an_identify_step_allows_no_write() -> None:
    """A permit `none` may name the identify step only where nothing is driven."""
    code = build([ins(Op.DRIVE, word=0), END])
    none = replace(permit_for(code), identity=Identity.NONE, alternatives=(), raised=())
    assert refused(code, none)[0] is Fault.BAD_PERMIT
    assert load(code, replace(none, identify_switch=0xFF, identify_step=0)).flat


CEILINGS = (vpp(25_500),) * 4 + (vpp(14_500),)
NOMINAL = tuple(vcc(mv) for mv in (0, 3_750, 4_200, 5_000, 5_250, 6_000, 6_250, 6_500))


@pytest.mark.parametrize(
    "changes",
    [
        {"alternatives": ()},
        {"alternatives": ((),)},
        {"identity": Identity.NONE},
        {"raised": ((5, 100),)},
        {"raised": ((4, vpp(14_600)),)},
        {"raised": ((2, 100), (2, 101))},
        {"identify_step": 0},
        {"identify_step": 8},
        {"identify_ceiling": vpp(15_000)},
        {"vcc": ()},
        {"vcc": (VccStep(0, 0, 10, 0),)},
        {"vcc": (VccStep(8, 0, 1_000, 0),)},
        {"vcc": (VccStep(3, vcc(5_100), vcc(5_250), 0),)},
        {"vcc": (VccStep(3, vcc(4_750), vcc(5_250), 0),) * 2},
        {"vcc_to": 0},
        {"vcc_to": 64},
        {"safe": bytes([line_byte(16, L)])},
        {"drives": (bytes([line_byte(40, L)]),)},
    ],
    ids=str,
)
def test_a_permit_that_contradicts_itself_or_the_board_is_refused(changes: dict[str, Any]) -> None:
    """Each single contradiction is found; the permit without it is fine."""
    good = permit_for(b"")
    assert check_permit(good, CEILINGS, NOMINAL)
    assert not check_permit(replace(good, **changes), CEILINGS, NOMINAL)


def test_the_crc_is_the_catalogues() -> None:
    """CRC-32/ISO-HDLC of "123456789" is CBF43926 (catalogue of parametrised CRC algorithms)."""
    assert zlib.crc32(b"123456789") == 0xCBF43926
