"""Ops as values, and programs as bytes: a routine header and a list of ops."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

from pulsewright.wire.fields import WireMistake, pack, unpack_from
from pulsewright.wire.tables import HEADER_LAYOUT, HEADER_VERSION, OP_ARGS, Flow, Level, Op

_BRANCHING = (Op.BRANCH, Op.EACH_BLOCK, Op.EACH_WORD)


def line_byte(line: int, level: Level) -> int:
    """The wire's byte for a line (0..63) at a level."""
    return line | level << 6


def line_of(entry: int) -> tuple[int, Level]:
    """Line number and level of a line byte; WireMistake for a level that does not exist."""
    try:
        return entry & 63, Level(entry >> 6)
    except ValueError:
        raise WireMistake(f"line byte {entry:02X} names no level") from None


@dataclass(frozen=True)
class Instruction:
    """One op with its arguments; `to` of a branching op is a byte offset into the encoded program."""

    op: Op
    args: Mapping[str, Any] = field(default_factory=dict)

    def encode(self) -> bytes:
        """Code byte and arguments."""
        return bytes([self.op]) + pack(OP_ARGS[self.op], self.args)

    def __str__(self) -> str:
        shown = []
        for name, value in self.args.items():
            if isinstance(value, bytes):
                value = value.hex(" ") or "-"
            shown.append(f"{name}={value}")
        return " ".join([self.op.name.lower(), *shown])


def ins(op: Op, **args: Any) -> Instruction:
    """An instruction from keyword arguments, in the table's order."""
    return Instruction(op, {name: args[name] for name, _ in OP_ARGS[op]})


@dataclass(frozen=True)
class Header:
    """The routine header: word width, what blocks carry, address lines, bounds of words, passes over the data."""

    width: int
    flow: Flow
    address: tuple[int, ...]
    words: int
    block_words: int
    passes: int = 1

    def encode(self) -> bytes:
        """The header's bytes."""
        return pack(
            HEADER_LAYOUT,
            {
                "version": HEADER_VERSION,
                "width": self.width,
                "flow": self.flow,
                "passes": self.passes,
                "address": bytes(self.address),
                "words": self.words,
                "block_words": self.block_words,
            },
        )


@dataclass(frozen=True)
class Program:
    """A decoded program: header and instructions, each with its byte offset in the encoded form."""

    header: Header
    code: tuple[tuple[int, Instruction], ...]
    length: int


def decode_instruction(data: bytes, at: int) -> tuple[Instruction, int]:
    """The instruction at an offset and the offset behind it; WireMistake for an unknown op or cut arguments."""
    try:
        op = Op(data[at])
    except ValueError:
        raise WireMistake(f"unknown op {data[at]:02X} at {at}") from None
    args, end = unpack_from(OP_ARGS[op], data, at + 1)
    return Instruction(op, args), end


def decode_program(data: bytes) -> Program:
    """Header and instructions of an encoded program; WireMistake for anything that does not decode."""
    values, at = unpack_from(HEADER_LAYOUT, data)
    if values["version"] != HEADER_VERSION:
        raise WireMistake(f"header version {values['version']}; {HEADER_VERSION} is known")
    try:
        flow = Flow(values["flow"])
    except ValueError:
        raise WireMistake(f"unknown flow {values['flow']}") from None
    if values["width"] not in (8, 16):
        raise WireMistake(f"word width {values['width']}; 8 or 16 are known")
    sizes = values["words"], values["block_words"], values["passes"]
    header = Header(values["width"], flow, tuple(values["address"]), *sizes)
    code = []
    while at < len(data):
        instruction, end = decode_instruction(data, at)
        code.append((at, instruction))
        at = end
    return Program(header, tuple(code), len(data))


def encode_program(header: Header, code: Iterable[Instruction]) -> bytes:
    """Header and instructions as bytes; branch targets must be byte offsets already (see `assemble`)."""
    return header.encode() + b"".join(instruction.encode() for instruction in code)


@dataclass(frozen=True)
class Label:
    """A place in a list for `assemble`; branching ops name it in `to`."""

    name: str


def assemble(header: Header, code: Iterable[Instruction | Label]) -> tuple[bytes, tuple[int, ...]]:
    """Bytes of a program whose branches name labels, and the byte offset of each instruction (labels left out).

    KeyError for a label that is not there.
    """
    items = list(code)
    at = len(header.encode())
    places: dict[str, int] = {}
    offsets = []
    for item in items:
        if isinstance(item, Label):
            places[item.name] = at
            continue
        offsets.append(at)
        sized = Instruction(item.op, {**item.args, "to": 0}) if item.op in _BRANCHING else item
        at += len(sized.encode())
    encoded = [header.encode()]
    for item in items:
        if isinstance(item, Label):
            continue
        if item.op in _BRANCHING:
            item = Instruction(item.op, {**item.args, "to": places[item.args["to"]]})
        encoded.append(item.encode())
    return b"".join(encoded), tuple(offsets)
