"""A compiled sequence for a reader: each op under what it is for and the definition's line, the permit in volts."""

from __future__ import annotations

from pulsewright.chip.model import Definition
from pulsewright.jobs.story import scaling_of, volts
from pulsewright.report.pinout import positions_of
from pulsewright.rig.model import Rig
from pulsewright.sequence.types import Origin, Proof, Sequence
from pulsewright.units import show_count, show_mv, show_ticks
from pulsewright.wire.ops import Instruction, decode_program, line_of
from pulsewright.wire.permit import NO_SWITCH
from pulsewright.wire.tables import Bias, Channel, Fail, Group, Identity, Level, Op, Range
from pulsewright.wire.tables import Rail as RailNumber

_TIMES = ("ticks", "wait", "width", "max", "limit", "setup", "hold", "fall", "recover", "access", "float", "unit")
_LEVELS = {Level.LOW: "L", Level.HIGH: "H", Level.RELEASED: "released"}


class Wording:
    """Says ops and permits of one definition on one rig in its pins' names, in volts and in times."""

    def __init__(self, definition: Definition, rig: Rig) -> None:
        self._rig = rig
        roles = {position: definition.role_of(pin) for pin, position in positions_of(definition, rig).items()}
        positions = rig.site.positions.values()
        self._names = {
            position.line: roles.get(position.number) or f"position {position.number}"
            for position in positions
            if position.line is not None
        }

    def lines(self, raw: bytes) -> str:
        """Line bytes as text: "CE=H OE=L"."""
        shown = []
        for entry in raw:
            line, level = line_of(entry)
            shown.append(f"{self._names.get(line, f'line {line}')}={_LEVELS[level]}")
        return " ".join(shown) or "none"

    def switches(self, mask: int) -> str:
        """A mask of raised switches as positions."""
        found = [f"position {switch.position}" for switch in self._rig.switches if mask >> switch.number & 1]
        return " and ".join(found) or "none"

    def op(self, instruction: Instruction) -> str:
        """An op with its arguments: times, volts, pins."""
        op, args = instruction.op, instruction.args
        if op is Op.MEASURE:
            name, scaling = scaling_of(self._rig, args["channel"])
            window = f"{volts(scaling, args['low'])} to {volts(scaling, args['high'])}"
            return f"measure {name}: {window} within {show_ticks(args['limit'])}"
        if op is Op.RAIL:
            rail = self._rig.vcc if args["rail"] == RailNumber.VCC else self._rig.raised
            return f"rail {rail.name} to step {args['step']} ({show_mv(rail.step(args['step']).mv)})"
        return " ".join(
            [op.name.lower(), *(f"{name}={self._argument(op, name, value)}" for name, value in args.items())]
        )

    def _argument(self, op: Op, name: str, value: object) -> str:
        if isinstance(value, bytes):
            return f"[{self.lines(value)}]"
        if not isinstance(value, int):
            return str(value)
        if name in _TIMES or name == "over_max":
            return show_ticks(value)
        if name == "line" and op is Op.SENSE:
            return self._names.get(value & 63, str(value))
        if name in ("line", "strobe"):
            return self.lines(bytes([value]))
        if name == "switches" or (op, name) == (Op.SWITCHES, "on"):
            return self.switches(value)
        if (op, name) == (Op.RANGE, "which"):
            return Range(value).name.lower()
        if (op, name) == (Op.BIAS, "how"):
            return Bias(value).name.lower()
        if (op, name) == (Op.BIAS, "groups"):
            return "+".join(group.name.lower() for group in Group if value & group) or "none"
        if (op, name) == (Op.FAIL, "why"):
            return Fail(value).name.lower()
        return f"{value:04X}" if name in ("at", "first", "word", "mask") else str(value)

    def permit(self, sequence: Sequence) -> list[str]:
        """The permit in volts and positions."""
        rig, permit = self._rig, sequence.permit
        lines = [f"identity: {Identity(permit.identity).name.lower().replace('_', ' ')}"]
        lines += ["ID " + ", ".join(f"{word:02X} at {at:04X}" for at, word in cells) for cells in permit.alternatives]
        if permit.identify_switch != NO_SWITCH:
            name, scaling = scaling_of(rig, Channel.POSITION + permit.identify_switch)
            step = show_mv(rig.raised.step(permit.identify_step).mv)
            lines.append(f"before the gate: {name} at {step}, ceiling {volts(scaling, permit.identify_ceiling)}")
        for switch, ceiling in permit.raised:
            name, scaling = scaling_of(rig, Channel.POSITION + switch)
            lines.append(f"past the gate: {name}, ceiling {volts(scaling, ceiling)}")
        for vcc in permit.vcc:
            window = f"{volts(rig.socket_vcc, vcc.low)} to {volts(rig.socket_vcc, vcc.high)}"
            level = show_mv(rig.vcc.step(vcc.step).mv)
            lines.append(f"VCC step {vcc.step} ({level}): {window}, settles in {show_ticks(vcc.settle)}")
        lines.append(f"safe pattern: {self.lines(permit.safe)}")
        timed = show_ticks(permit.self_timed) if permit.self_timed else "none"
        return [*lines, f"longest self-timed work: {timed}", f"CRC-32 of the ops {permit.crc32:08X}"]


def _heading(origin: Origin | None) -> str:
    if origin is None:
        return "unknown"
    place = f"  ({origin.where})" if str(origin.where) else ""
    return f"{origin.part}: {origin.text}{place}"


def sequence_lines(sequence: Sequence, proof: Proof, definition: Definition, rig: Rig) -> list[str]:
    """Title, permit, every op under its origin, notes, and the proof's word."""
    wording = Wording(definition, rig)
    lines = [f"{sequence.title}: {len(sequence.code)} bytes", "permit"]
    lines += [f"  {line}" for line in wording.permit(sequence)]
    if sequence.data_sha256:
        lines.append(f"  data SHA-256 {sequence.data_sha256}")
    heading = ""
    for offset, instruction in decode_program(sequence.code).code:
        own = _heading(sequence.origin_at(offset))
        if own != heading:
            lines.append(own)
            heading = own
        lines.append(f"  {offset:>4}  {wording.op(instruction)}")
    lines += [f"note: {note}" for note in sequence.notes]
    if proof.accepted:
        lines.append(f"proof: accepted; {proof.ops} ops, {proof.states} states on all paths")
    else:
        lines.append(f"proof: refused, {show_count(len(proof.findings), 'finding')}")
        lines += [f"  {finding}" for finding in proof.findings]
    return lines


def sequence_facts(sequence: Sequence, proof: Proof, definition: Definition, rig: Rig) -> dict[str, object]:
    """The same as JSON values."""
    wording = Wording(definition, rig)
    ops = []
    for offset, instruction in decode_program(sequence.code).code:
        origin = sequence.origin_at(offset)
        ops.append(
            {
                "at": offset,
                "op": wording.op(instruction),
                "part": origin.part if origin is not None else "",
                "for": origin.text if origin is not None else "",
                "definition": str(origin.where) if origin is not None else "",
            }
        )
    return {
        "kind": sequence.kind,
        "title": sequence.title,
        "bytes": len(sequence.code),
        "crc32": f"{sequence.permit.crc32:08X}",
        "data_sha256": sequence.data_sha256,
        "permit": wording.permit(sequence),
        "ops": ops,
        "notes": list(sequence.notes),
        "proof": {
            "accepted": proof.accepted,
            "ops": proof.ops,
            "states": proof.states,
            "findings": [str(finding) for finding in proof.findings],
        },
    }
