"""The proof as a whole: what it accepts, what it makes of bytes that are no program, and of compiled sequences."""

from __future__ import annotations

import zlib
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from pulsewright.rig.file import load_rig
from pulsewright.rig.model import Rig
from pulsewright.sequence import compile as compiler
from pulsewright.sequence.proof import prove
from pulsewright.wire.ops import Instruction, ins
from pulsewright.wire.tables import Fail, Op
from tests.sequence.proof_programs import WORK, encoded, permit, program

RIG = load_rig()
CHIP = load("27e512", maker="DA")


@pytest.fixture(scope="module")
def definition() -> Definition:
    """The part, for its maker's row."""
    return CHIP


@pytest.fixture(scope="module")
def rig() -> Rig:
    """The reference rig."""
    return RIG


@pytest.mark.parametrize("kind", WORK)
def test_a_good_program_is_accepted(kind: str, definition: Definition, rig: Rig) -> None:
    """A program written by hand that keeps every rule has no finding, and each of its ops is reached."""
    code = encoded(kind, program(kind))
    proof = prove(code, permit(kind, code), definition, rig)

    assert proof.findings == ()
    assert proof.states >= proof.ops > 60


@pytest.mark.parametrize("maker", [None, "DA"])
def test_every_compiled_sequence_of_the_part_is_accepted(maker: str | None, rig: Rig) -> None:
    """What the compiler makes for the 27e512, with and without a row chosen, the proof accepts."""
    part = load("27e512", maker=maker)
    last = part.words - 1
    for sequence in (
        compiler.compile_identify(part, rig),
        compiler.compile_read(part, rig, 0, last),
        compiler.compile_read(part, rig, 5, 9),
        compiler.compile_blank(part, rig, 0, last),
        compiler.compile_erase(part, rig),
        compiler.compile_burn(part, rig, 16, last, "00"),
    ):
        assert [str(one) for one in prove(sequence.code, sequence.permit, part, rig).findings] == [], sequence.title


def test_a_changed_byte_is_seen_by_the_checksum(definition: Definition, rig: Rig) -> None:
    """The permit's CRC-32 is over the whole program: any other program is refused under it."""
    code = encoded("read", program("read"))
    for at in range(0, len(code), 7):
        other = code[:at] + bytes([code[at] ^ 1]) + code[at + 1 :]
        found = prove(other, permit("read", code), definition, rig).findings

        assert any(one.rule == "H2" and "CRC-32" in one.text for one in found)


@pytest.mark.parametrize(
    "code",
    [b"", b"\x00", b"\xff" * 64, encoded("read", [])[:-1], encoded("read", []), encoded("read", []) + b"\xee"],
    ids=["empty", "zero", "all ones", "cut header", "no op", "unknown op"],
)
def test_garbage_is_refused(code: bytes, definition: Definition, rig: Rig) -> None:
    """Bytes that are no program are refused, under a permit with their own checksum too."""
    assert not prove(code, permit("read", code), definition, rig).accepted


@settings(deadline=None, max_examples=150)
@given(st.binary(max_size=200))
def test_random_bytes_never_crash_it_and_are_refused(tail: bytes) -> None:
    """Random ops behind a good header are refused, without an exception."""
    code = encoded("burn", []) + tail
    assert not prove(code, permit("burn", code), CHIP, RIG).accepted


@settings(deadline=None, max_examples=200)
@given(st.sampled_from(sorted(WORK)), st.data())
def test_damaged_programs_never_crash_it(kind: str, data: st.DataObject) -> None:
    """Good programs with bytes changed, cut or put in are judged without an exception, findings with their texts."""
    code = bytearray(encoded(kind, program(kind)))
    for _ in range(data.draw(st.integers(1, 4))):
        at = data.draw(st.integers(0, len(code) - 1))
        choice = data.draw(st.sampled_from(["change", "insert", "cut"]))
        if choice == "change":
            code[at] = data.draw(st.integers(0, 255))
        elif choice == "insert":
            code.insert(at, data.draw(st.integers(0, 255)))
        elif len(code) > 1:
            del code[at]
    proof = prove(bytes(code), permit(kind, bytes(code)), CHIP, RIG)

    assert all(str(one).startswith("H") for one in proof.findings)


@settings(deadline=None, max_examples=200)
@given(st.sampled_from(sorted(WORK)), st.data())
def test_shuffled_ops_never_crash_it(kind: str, data: st.DataObject) -> None:
    """Programs with ops moved about are judged without an exception, whatever nonsense their order makes."""
    items = program(kind)
    for _ in range(data.draw(st.integers(1, 5))):
        item = items.pop(data.draw(st.integers(0, len(items) - 1)))
        items.insert(data.draw(st.integers(0, len(items))), item)
    code = encoded(kind, items)
    proof = prove(code, permit(kind, code), CHIP, RIG)

    assert proof.states < 5_000


@settings(deadline=None, max_examples=100)
@given(st.integers(0, 255), st.binary(max_size=6), st.binary(max_size=6), st.integers(0, 65_535))
def test_random_permits_never_crash_it(switch: int, safe: bytes, drives: bytes, count: int) -> None:
    """A permit with nonsense in it is judged, not stumbled over; a ceiling or pattern that is wrong is refused."""
    code = encoded("burn", program("burn"))
    bent = permit(
        "burn", code, raised=((switch, count),), safe=safe, drives=(drives,), identify_switch=switch, vcc_to=switch
    )

    assert not prove(code, bent, CHIP, RIG).accepted


def test_a_package_the_rig_does_not_take_is_refused(definition: Definition, rig: Rig) -> None:
    """A part in a package that fits no position of the site has no proof."""
    code = encoded("read", program("read"))
    proof = prove(code, permit("read", code), replace(definition, package="DIP-40"), rig)

    assert [one.rule for one in proof.findings] == ["H6"]


def test_a_loop_of_many_turns_costs_no_more_than_one_of_few(definition: Definition, rig: Rig) -> None:
    """Loops are followed to a fixed point: the number of states does not grow with counts or image."""

    def states(count: int) -> int:
        scan: list[Instruction] = [
            ins(Op.LINES, lines=bytes([22, 24])),
            ins(Op.WAIT, ticks=20),
            ins(Op.SCAN, first=0, count=count, word=0xFF, wait=20),
            ins(Op.FAIL, why=Fail.NOT_BLANK),
        ]
        code = encoded("identify", [*program("identify")[:-1], *scan])
        proof = prove(code, replace(permit("identify", code), crc32=zlib.crc32(code)), definition, rig)
        assert proof.accepted
        return proof.states

    assert states(65_536) == states(2)
