"""Fields, ops, programs and permits go to bytes and come back; what does not decode is refused."""

from __future__ import annotations

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.wire.fields import WireMistake, pack, unpack
from pulsewright.wire.ops import (
    Header,
    Instruction,
    Label,
    assemble,
    decode_instruction,
    decode_program,
    encode_program,
    ins,
    line_byte,
    line_of,
)
from pulsewright.wire.permit import Permit, VccStep, decode_permit
from pulsewright.wire.tables import BLOBS, FRAME_FIELDS, OP_ARGS, Fields, Flow, Identity, Level, Op

U8, U16, U32 = st.integers(0, 255), st.integers(0, 0xFFFF), st.integers(0, 0xFFFFFFFF)


def values_of(kind: Any) -> st.SearchStrategy[Any]:
    """Values that a field type can hold."""
    if kind == "cycle*":
        return st.lists(st.tuples(U32, U16), max_size=5).map(tuple)
    plain = {"u8": U8, "u16": U16, "u32": U32, "i8": st.integers(-128, 127), "bytes": st.binary(max_size=20),
             "u8*": st.binary(max_size=20)}
    if isinstance(kind, str):
        return plain[kind]
    return st.lists(all_of(kind), max_size=3).map(tuple)


def all_of(fields: Fields) -> st.SearchStrategy[dict[str, Any]]:
    """Values for a whole field list."""
    return st.fixed_dictionaries({name: values_of(kind) for name, kind in fields})


INSTRUCTIONS = st.sampled_from(list(Op)).flatmap(lambda op: st.builds(Instruction, st.just(op), all_of(OP_ARGS[op])))
WIDTHS = st.sampled_from([8, 16])
HEADERS = st.builds(Header, WIDTHS, st.sampled_from(Flow), st.binary(max_size=20).map(tuple), U32, U16)


@pytest.mark.parametrize("fields", [*FRAME_FIELDS.values(), *BLOBS.values()])
@given(data=st.data())
def test_fields_come_back(fields: Fields, data: st.DataObject) -> None:
    """Every frame and blob of the table."""
    values = data.draw(all_of(fields))
    assert unpack(fields, pack(fields, values)) == values


def test_numbers_are_little_endian() -> None:
    """The wire's order, on a value by hand."""
    assert pack((("a", "u16"), ("b", "u32"), ("c", "i8")), {"a": 0x1234, "b": 0x89ABCDEF, "c": -2}).hex() == (
        "3412efcdab89fe"
    )


@pytest.mark.parametrize(
    ("kind", "value"), [("u8", 256), ("u16", -1), ("u32", 1 << 32), ("i8", 128), ("u8*", bytes(256))]
)
def test_a_value_that_does_not_fit_is_refused(kind: str, value: object) -> None:
    """No number is cut to its field."""
    with pytest.raises(WireMistake):
        pack((("x", kind),), {"x": value})


@given(INSTRUCTIONS, st.integers(0, 40))
def test_a_cut_instruction_is_refused(instruction: Instruction, cut: int) -> None:
    """Bytes that end inside the arguments never decode."""
    data = instruction.encode()
    if cut >= len(data) - 1:
        assert decode_instruction(data, 0) == (instruction, len(data))
        return
    with pytest.raises(WireMistake):
        decode_instruction(data[: cut + 1], 0)


@given(HEADERS, st.lists(INSTRUCTIONS, max_size=12))
def test_a_program_comes_back(header: Header, code: list[Instruction]) -> None:
    """Header and ops, each with its own byte offset."""
    data = encode_program(header, code)
    program = decode_program(data)
    assert (program.header, [instruction for _, instruction in program.code]) == (header, code)
    at = len(header.encode())
    for offset, instruction in program.code:
        assert offset == at
        at += len(instruction.encode())
    assert at == program.length == len(data)


@pytest.mark.parametrize(("at", "value"), [(0, 2), (1, 9), (2, 7), (-1, 0xFE)])
def test_a_program_that_does_not_decode_is_refused(at: int, value: int) -> None:
    """Another version, an odd width, an unknown flow, an unknown op."""
    data = bytearray(encode_program(Header(8, Flow.NONE, (), 0, 0), [ins(Op.END)]))
    data[at] = value
    with pytest.raises(WireMistake):
        decode_program(bytes(data))


def test_labels_become_byte_offsets() -> None:
    """A branch forward and a loop's exit name the byte at which the op behind the label begins."""
    header = Header(8, Flow.READ, (1, 2), 4, 4)
    data, offsets = assemble(
        header,
        [
            ins(Op.EACH_BLOCK, to="out"),
            ins(Op.BRANCH, when=1, depth=1, to="next"),
            ins(Op.SAMPLE),
            Label("next"),
            ins(Op.NEXT_BLOCK),
            Label("out"),
            ins(Op.END),
        ],
    )
    code = decode_program(data).code
    assert [offset for offset, _ in code] == list(offsets)
    assert code[0][1].args["to"] == offsets[4]
    assert code[1][1].args["to"] == offsets[3]


@given(st.integers(0, 63), st.sampled_from(Level))
def test_a_line_byte_comes_back(line: int, level: Level) -> None:
    """Line number and level share a byte."""
    assert line_of(line_byte(line, level)) == (line, level)


def test_a_level_that_does_not_exist_is_refused() -> None:
    """The fourth value of two bits."""
    with pytest.raises(WireMistake):
        line_of(0xC1)


PERMITS = st.builds(
    Permit,
    identity=st.sampled_from(Identity),
    alternatives=st.lists(st.lists(st.tuples(U32, U16), max_size=4).map(tuple), max_size=8).map(tuple),
    identify_switch=U8,
    identify_step=U8,
    identify_ceiling=U16,
    raised=st.lists(st.tuples(U8, U16), max_size=5).map(tuple),
    vcc=st.lists(st.builds(VccStep, U8, U16, U16, U32), max_size=4).map(tuple),
    vcc_to=U8,
    drives=st.lists(st.binary(max_size=4), max_size=8).map(tuple),
    safe=st.binary(max_size=8),
    self_timed=U32,
    crc32=U32,
    number=U16,
    boot=U32,
)


@given(PERMITS)
def test_a_permit_comes_back(permit: Permit) -> None:
    """Every field, groups inside groups as well."""
    assert decode_permit(permit.encode()) == permit


@given(PERMITS, st.integers(1, 400))
def test_a_cut_permit_is_refused(permit: Permit, cut: int) -> None:
    """Fewer bytes than it has never make a permit, nor do more."""
    data = permit.encode()
    with pytest.raises(WireMistake):
        decode_permit(data[: max(0, len(data) - cut)])
    with pytest.raises(WireMistake):
        decode_permit(data + b"\0")


@given(PERMITS, U16, U32)
def test_sealing_changes_number_and_boot_alone(permit: Permit, number: int, boot: int) -> None:
    """All else is what was proven."""
    sealed = permit.sealed_for(number, boot)
    assert (sealed.number, sealed.boot) == (number, boot)
    assert sealed.sealed_for(permit.number, permit.boot) == permit
