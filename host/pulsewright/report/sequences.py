"""A compiled sequence for a reader: each op with what it is for and the definition's line, the permit in volts."""

from __future__ import annotations

from pulsewright.jobs.translate import scaling_of, volts
from pulsewright.report.modes import table
from pulsewright.rig.model import Rig
from pulsewright.sequence.types import Proof, Sequence
from pulsewright.units import show_mv, show_ticks
from pulsewright.wire.ops import Instruction, decode_program, line_of
from pulsewright.wire.permit import NO_SWITCH
from pulsewright.wire.tables import Bias, Channel, Fail, Group, Identity, Level, Op, Range
from pulsewright.wire.tables import Rail as RailNumber

_TIMES = ("ticks", "wait", "width", "max", "limit", "setup", "hold", "fall", "recover", "access", "float", "unit", "over_max")
_LEVELS = {Level.LOW: "L", Level.HIGH: "H", Level.RELEASED: "free"}


def lines_text(raw: bytes) -> str:
    """Line bytes as text: "22=H 24=L"."""
    shown = []
    for entry in raw:
        line, level = line_of(entry)
        shown.append(f"{line}={_LEVELS[level]}")
    return " ".join(shown) or "none"


def positions_text(mask: int, rig: Rig) -> str:
    """A mask of raised switches as positions."""
    return " ".join(f"position {switch.position}" for switch in rig.switches if mask >> switch.number & 1) or "none"


def op_text(instruction: Instruction, rig: Rig) -> str:
    """An op with its arguments as a person reads them: times, volts, lines, positions."""
    op, args = instruction.op, dict(instruction.args)
    parts = [op.name.lower()]
    if op is Op.MEASURE:
        name, scaling = scaling_of(rig, args["channel"])
        low, high = volts(scaling, args["low"]), volts(scaling, args["high"])
        return f"measure {name}: {low} to {high} within {show_ticks(args['limit'])}"
    if op is Op.RAIL:
        rail = rig.vcc if args["rail"] == RailNumber.VCC else rig.raised
        return f"rail {rail.name} to step {args['step']} ({show_mv(rail.step(args['step']).mv)})"
    for name, value in args.items():
        parts.append(f"{name}={_argument(op, name, value, rig)}")
    return " ".join(parts)


def _argument(op: Op, name: str, value: object, rig: Rig) -> str:
    if isinstance(value, bytes):
        return f"[{lines_text(value)}]"
    if not isinstance(value, int):
        return str(value)
    if name in _TIMES:
        return show_ticks(value)
    if name in ("line", "strobe"):
        return lines_text(bytes([value]))
    if (op, name) == (Op.SWITCHES, "on") or name == "switches":
        return positions_text(value, rig)
    if (op, name) == (Op.RANGE, "which"):
        return Range(value).name.lower()
    if (op, name) == (Op.BIAS, "how"):
        return Bias(value).name.lower()
    if (op, name) == (Op.BIAS, "groups"):
        return "+".join(group.name.lower() for group in Group if value & group) or "none"
    if (op, name) == (Op.FAIL, "why"):
        return Fail(value).name.lower()
    if name in ("at", "first", "word", "mask"):
        return f"{value:04X}"
    return str(value)


def permit_lines(sequence: Sequence, rig: Rig) -> list[str]:
    """The permit in volts and positions."""
    permit = sequence.permit
    lines = [f"identity: {Identity(permit.identity).name.lower().replace('_', ' ')}"]
    for cells in permit.alternatives:
        lines.append("ID " + ", ".join(f"{word:02X} at {at:04X}" for at, word in cells))
    if permit.identify_switch != NO_SWITCH:
        name, scaling = scaling_of(rig, Channel.POSITION + permit.identify_switch)
        step = show_mv(rig.raised.step(permit.identify_step).mv)
        lines.append(f"before the gate: {name} at {step}, ceiling {volts(scaling, permit.identify_ceiling)}")
    for switch, ceiling in permit.raised:
        name, scaling = scaling_of(rig, Channel.POSITION + switch)
        lines.append(f"past the gate: {name}, ceiling {volts(scaling, ceiling)}")
    for step in permit.vcc:
        window = f"{volts(rig.socket_vcc, step.low)} to {volts(rig.socket_vcc, step.high)}"
        lines.append(
            f"VCC step {step.step} ({show_mv(rig.vcc.step(step.step).mv)}): {window}, settles in {show_ticks(step.settle)}"
        )
    lines.append(f"safe pattern: {lines_text(permit.safe)}")
    lines.append(f"longest self-timed work: {show_ticks(permit.self_timed)}; CRC-32 {permit.crc32:08X}")
    return lines


def _rows(sequence: Sequence, rig: Rig) -> list[list[str]]:
    rows = []
    for offset, instruction in decode_program(sequence.code).code:
        origin = sequence.origin_at(offset)
        part, text, where = (origin.part, origin.text, str(origin.where)) if origin is not None else ("", "", "")
        rows.append([str(offset), op_text(instruction, rig), part, text, where])
    return rows


def sequence_lines(sequence: Sequence, proof: Proof, rig: Rig) -> list[str]:
    """Title, permit, every op with its origin, notes, and the proof's word."""
    lines = [f"{sequence.title}: {len(sequence.code)} bytes", "permit"]
    lines += [f"  {line}" for line in permit_lines(sequence, rig)]
    if sequence.data_sha256:
        lines.append(f"  data SHA-256 {sequence.data_sha256}")
    lines += table(["at", "op", "part", "for", "definition"], _rows(sequence, rig))
    lines += [f"note: {note}" for note in sequence.notes]
    if proof.accepted:
        lines.append(f"proof: accepted; {proof.ops} ops, {proof.states} states on all paths")
    else:
        lines.append(f"proof: refused, {len(proof.findings)} findings")
        lines += [f"  {finding}" for finding in proof.findings]
    return lines


def sequence_facts(sequence: Sequence, proof: Proof, rig: Rig) -> dict[str, object]:
    """The same as JSON values."""
    return {
        "kind": sequence.kind,
        "title": sequence.title,
        "bytes": len(sequence.code),
        "crc32": f"{sequence.permit.crc32:08X}",
        "data_sha256": sequence.data_sha256,
        "permit": permit_lines(sequence, rig),
        "ops": [
            {"at": int(at), "op": text, "part": part, "for": why, "definition": where}
            for at, text, part, why, where in _rows(sequence, rig)
        ],
        "notes": list(sequence.notes),
        "proof": {
            "accepted": proof.accepted,
            "ops": proof.ops,
            "states": proof.states,
            "findings": [str(finding) for finding in proof.findings],
        },
    }
