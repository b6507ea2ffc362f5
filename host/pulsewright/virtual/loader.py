"""The firmware's loader: what it demands of a program before it may run. It changes nothing.

Ops are known, arguments are ones the board has, loops and branches nest and go forward, the last op ends, every pulse
has an end, and CRC-32 and length are the permit's and the board's.
"""

from __future__ import annotations

import zlib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from pulsewright.virtual.board import (
    DATA_POSITIONS,
    GND_POSITION,
    POSITIONS,
    RAISED_POSITIONS,
    RAISED_STEPS_MV,
    VCC_POSITIONS,
    VCC_STEPS_MV,
)
from pulsewright.wire.expand import flatten
from pulsewright.wire.fields import WireMistake
from pulsewright.wire.ops import Header, Instruction, decode_instruction, decode_program, line_of
from pulsewright.wire.permit import NO_SWITCH, Permit
from pulsewright.wire.tables import (
    BLOCK_BYTES,
    HEADER_LAYOUT,
    LOOP_DEPTH,
    PROGRAM_BYTES,
    Bias,
    Channel,
    Fault,
    Flow,
    Group,
    Identity,
    Level,
    Op,
    PollKind,
    Rail,
    Range,
)

_OPENING = {Op.LOOP: Op.NEXT, Op.EACH_BLOCK: Op.NEXT_BLOCK, Op.EACH_WORD: Op.NEXT_WORD}
_CLOSING = frozenset(_OPENING.values())
_IN_WORD = (Op.DRIVE_WORD, Op.COMPARE_WORD)
_WRITES = (Op.DRIVE, Op.DRIVE_WORD)
_MOST_GROUPS = Group.DATA | Group.ADDRESS | Group.POWER
_MOST_EXPONENT = 24


class Unfit(Exception):
    """A program that is refused: the fault's code, and the op's code and byte offset where one is to blame."""

    def __init__(self, code: Fault, op: int = 0, pc: int = 0) -> None:
        super().__init__(code.name)
        self.code = code
        self.op = op
        self.pc = pc


@dataclass(frozen=True)
class Loaded:
    """A program fit to run: its header and the flat list of primitives with their byte offsets."""

    header: Header
    flat: tuple[tuple[int, Instruction], ...]
    depths: tuple[int, ...]  # loops around each entry; at a closing op, its own included
    partner: Mapping[int, int]  # closing entry -> its opening one
    around: tuple[int, ...]  # opening entry of the innermost loop around each entry, -1: none; as for depths


def load(code: bytes, permit: Permit) -> Loaded:
    """The program, checked whole; Unfit with the first thing that is wrong."""
    if len(code) > PROGRAM_BYTES:
        raise Unfit(Fault.TOO_LONG)
    if zlib.crc32(code) != permit.crc32:
        raise Unfit(Fault.BAD_CRC)
    header, instructions = _decode(code)
    _check_header(header)
    for offset, instruction in instructions:
        _check_args(offset, instruction, header)
    try:
        flat, _ = flatten(tuple(instructions))
    except KeyError:
        raise Unfit(Fault.BAD_NESTING) from None
    depths, partner, around = _check_nesting(flat, header)
    _check_identity(flat, header, permit)
    return Loaded(header, tuple(flat), depths, partner, around)


def _decode(code: bytes) -> tuple[Header, list[tuple[int, Instruction]]]:
    from pulsewright.wire.fields import unpack_from

    try:
        _, at = unpack_from(HEADER_LAYOUT, code)
        header = decode_program(code[:at]).header
    except WireMistake:
        raise Unfit(Fault.BAD_ARGUMENT) from None
    instructions = []
    while at < len(code):
        if code[at] not in Op._value2member_map_:
            raise Unfit(Fault.UNKNOWN_OP, code[at], at)
        try:
            instruction, end = decode_instruction(code, at)
        except WireMistake:
            raise Unfit(Fault.BAD_ARGUMENT, code[at], at) from None
        instructions.append((at, instruction))
        at = end
    return header, instructions


def _is_line(line: int) -> bool:
    return 1 <= line <= POSITIONS and line != GND_POSITION


def _is_free_line(line: int) -> bool:
    return _is_line(line) and line not in DATA_POSITIONS


def _check_header(header: Header) -> None:
    lines = header.address
    fits = (
        header.width == 8  # the site has eight data lines
        and all(_is_free_line(line) for line in lines)
        and len(set(lines)) == len(lines)
        and len(lines) <= 24
        and (header.flow is Flow.NONE or (0 < header.block_words <= BLOCK_BYTES and header.passes > 0))
    )
    if not fits:
        raise Unfit(Fault.BAD_ARGUMENT)


# ---- arguments ----------------------------------------------------------------------------------------------------


def _lines_fit(lines: bytes) -> bool:
    for entry in lines:
        try:
            line, level = line_of(entry)
        except WireMistake:
            return False
        if not _is_line(line) or (line in DATA_POSITIONS and level is not Level.RELEASED):
            return False
    return True


def _pulse_line_fits(entry: int) -> bool:
    return _lines_fit(bytes([entry])) and entry & 63 not in DATA_POSITIONS and entry >> 6 != Level.RELEASED


def _channel_fits(channel: int) -> bool:
    if channel >= Channel.POSITION:
        return channel - Channel.POSITION < len(RAISED_POSITIONS)
    return channel in (Channel.VCC_RAIL, Channel.RAISED_RAIL, Channel.SOCKET_VCC)


def _rail_fits(a: Mapping[str, Any]) -> bool:
    steps = {Rail.VCC: len(VCC_STEPS_MV), Rail.RAISED: len(RAISED_STEPS_MV)}
    return a["rail"] in steps and a["step"] < steps[a["rail"]]


def _poll_fits(a: Mapping[str, Any]) -> bool:
    if not (_lines_fit(a["enable"]) and _lines_fit(a["disable"])):
        return False
    return bool(a["kind"] <= PollKind.TOGGLE_6_LIMIT_5 and a["exponent"] <= _MOST_EXPONENT and a["mantissa"] > 0)


_FITS: dict[Op, Callable[[Mapping[str, Any]], bool]] = {
    Op.HIGH: lambda a: a["how"] <= 1,
    Op.LINES: lambda a: _lines_fit(a["lines"]),
    Op.DRIVE: lambda a: a["word"] <= 0xFF,
    Op.PULSE: lambda a: _pulse_line_fits(a["line"]),
    Op.OVER_PULSE: lambda a: _pulse_line_fits(a["line"]),
    Op.SENSE: lambda a: _is_line(a["line"]) and a["is"] <= 1,
    Op.RAIL: _rail_fits,
    Op.RANGE: lambda a: a["which"] <= Range.FULL,
    Op.SWITCHES: lambda a: a["on"] < 1 << len(RAISED_POSITIONS),
    Op.BIAS: lambda a: 0 < a["groups"] <= _MOST_GROUPS and a["how"] <= Bias.UP,
    Op.MEASURE: lambda a: _channel_fits(a["channel"]) and a["low"] <= a["high"],
    Op.BRANCH: lambda a: a["when"] <= 2,
    Op.POLL: _poll_fits,
    Op.SCAN: lambda a: a["count"] > 0 and (a["count"] <= 65_536 or a["count"] % 65_536 == 0),
    Op.PULSE_VERIFY: lambda a: (
        _pulse_line_fits(a["line"])
        and a["switches"] < 1 << len(RAISED_POSITIONS)
        and _lines_fit(a["enable"])
        and _lines_fit(a["disable"])
    ),
    Op.BUS_WRITES: lambda a: _pulse_line_fits(a["strobe"]) and all(word <= 0xFF for _, word in a["cycles"]),
    Op.WRITE_POLL: lambda a: _pulse_line_fits(a["strobe"]) and _poll_fits(a),
    Op.PAGE_LOAD: lambda a: _pulse_line_fits(a["strobe"]),
}
_ENDS: dict[Op, Callable[[Mapping[str, Any]], bool]] = {
    Op.PULSE: lambda a: 0 < a["width"] <= a["max"],
    Op.OVER_PULSE: lambda a: 0 < a["unit"] <= a["max"] and a["factor"] > 0,
    Op.PULSE_VERIFY: lambda a: 0 < a["width"] <= a["max"] and (a["factor"] == 0 or a["width"] <= a["over_max"]),
    Op.BUS_WRITES: lambda a: a["width"] > 0,
    Op.WRITE_POLL: lambda a: a["width"] > 0,
    Op.PAGE_LOAD: lambda a: a["width"] > 0,
}


def _check_args(offset: int, instruction: Instruction, header: Header) -> None:
    op, args = instruction.op, instruction.args
    fits, ends = _FITS.get(op), _ENDS.get(op)
    if fits is not None and not fits(args):
        raise Unfit(Fault.BAD_ARGUMENT, op, offset)
    if ends is not None and not ends(args):
        raise Unfit(Fault.PULSE_WITHOUT_END, op, offset)
    if op in (Op.ADDRESS, Op.SCAN):
        last = args["at"] if op is Op.ADDRESS else args["first"] + args["count"] - 1
        if last >> len(header.address):
            raise Unfit(Fault.BAD_ARGUMENT, op, offset)


# ---- nesting ------------------------------------------------------------------------------------------------------


def _check_nesting(
    flat: list[tuple[int, Instruction]], header: Header
) -> tuple[tuple[int, ...], dict[int, int], tuple[int, ...]]:
    """Depths, partners and surroundings as in Loaded; Unfit for what does not nest, or does not end."""
    depths: list[int] = []
    inside: list[int] = []
    partner: dict[int, int] = {}
    opened: list[int] = []
    for place, (offset, instruction) in enumerate(flat):
        op = instruction.op
        around = [flat[index][1].op for index in opened]
        depths.append(len(opened))
        inside.append(opened[-1] if opened else -1)
        if not _may_stand(op, around, header):
            raise Unfit(Fault.BAD_NESTING, op, offset)
        if op in _OPENING:
            opened.append(place)
            if len(opened) > LOOP_DEPTH:
                raise Unfit(Fault.BAD_NESTING, op, offset)
        elif op in _CLOSING:
            if not opened or _OPENING[flat[opened[-1]][1].op] is not op:
                raise Unfit(Fault.BAD_NESTING, op, offset)
            partner[place] = opened.pop()
    if opened:
        offset, instruction = flat[opened[-1]]
        raise Unfit(Fault.BAD_NESTING, instruction.op, offset)
    for place, (offset, instruction) in enumerate(flat):
        _check_target(flat, depths, place, offset, instruction)
    _check_end(flat)
    return tuple(depths), partner, tuple(inside)


def _may_stand(op: Op, around: list[Op], header: Header) -> bool:
    if op is Op.EACH_BLOCK:
        return header.flow is not Flow.NONE and Op.EACH_BLOCK not in around
    if op is Op.EACH_WORD:
        return Op.EACH_BLOCK in around and Op.EACH_WORD not in around
    if op is Op.ADDRESS_WORD:
        return Op.EACH_WORD in around
    if op in _IN_WORD:
        return Op.EACH_WORD in around and header.flow is Flow.WRITE
    if op is Op.REPORT:
        return Op.EACH_BLOCK in around and header.flow is Flow.READ
    if op is Op.OVER_PULSE:
        return Op.EACH_WORD in around or Op.LOOP in around
    return True


def _check_target(
    flat: list[tuple[int, Instruction]], depths: list[int], place: int, offset: int, instruction: Instruction
) -> None:
    """A branch goes forward, to the loop depth it names, and never into another loop."""
    op = instruction.op
    if op not in (Op.BRANCH, Op.EACH_BLOCK, Op.EACH_WORD):
        return
    to = instruction.args["to"]
    depth = instruction.args["depth"] if op is Op.BRANCH else depths[place]
    if to == len(flat):
        raise Unfit(Fault.NO_END, op, offset)
    between = depths[place + 1 : to]
    if to <= place or depths[to] != depth or depth > depths[place] or any(each < depth for each in between):
        raise Unfit(Fault.BAD_NESTING, op, offset)


def _check_end(flat: list[tuple[int, Instruction]]) -> None:
    if not flat:
        raise Unfit(Fault.NO_END)
    offset, last = flat[-1]
    if last.op not in (Op.END, Op.FAIL):
        raise Unfit(Fault.NO_END, last.op, offset)


def _check_identity(flat: list[tuple[int, Instruction]], header: Header, permit: Permit) -> None:
    """Without identity the identify step may be raised only where nothing can be written."""
    if permit.identity is Identity.NONE and permit.identify_switch != NO_SWITCH:
        writes = next((entry for entry in flat if entry[1].op in _WRITES), None)
        if writes is not None:
            raise Unfit(Fault.BAD_PERMIT, writes[1].op, writes[0])
        if header.flow is Flow.WRITE:
            raise Unfit(Fault.BAD_PERMIT)


def check_permit(permit: Permit, ceilings: tuple[int, ...], nominal_vcc: tuple[int, ...]) -> bool:
    """Whether the permit agrees with itself and with the board (ceilings by switch, nominal counts by VCC step)."""
    if permit.identity is Identity.WANTED:
        if not permit.alternatives or any(not cells for cells in permit.alternatives):
            return False
    if permit.identity is Identity.NONE and permit.raised:
        return False
    pairs = list(permit.raised)
    if permit.identify_switch != NO_SWITCH:
        pairs.append((permit.identify_switch, permit.identify_ceiling))
        if not 0 < permit.identify_step < len(RAISED_STEPS_MV):
            return False
    if any(switch >= len(ceilings) or ceiling > ceilings[switch] for switch, ceiling in pairs):
        return False
    if len({switch for switch, _ in permit.raised}) != len(permit.raised):
        return False
    steps = [entry.step for entry in permit.vcc]
    if not steps or len(set(steps)) != len(steps) or any(not 0 < step < len(nominal_vcc) for step in steps):
        return False
    if any(not entry.low <= nominal_vcc[entry.step] <= entry.high for entry in permit.vcc):
        return False
    if not 0 < permit.vcc_to < 1 << len(VCC_POSITIONS):
        return False
    return all(_lines_fit(lines) for lines in (permit.safe, *permit.drives))
