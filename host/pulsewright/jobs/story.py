"""All that is known of a sequence that did not end well: the op that stopped, its origin, its numbers in volts."""

from __future__ import annotations

from dataclasses import dataclass

from pulsewright.chip.model import Definition
from pulsewright.errors import Where
from pulsewright.link.results import RunResult, Trouble
from pulsewright.rig.model import Rig, Scaling
from pulsewright.sequence.types import Origin, Sequence
from pulsewright.units import show_address, show_mv
from pulsewright.wire.fields import WireMistake
from pulsewright.wire.ops import Instruction, decode_instruction
from pulsewright.wire.tables import Channel, Fault, Op

MADE_SAFE = "raised levels off, chip to its safe pattern, VCC off"


@dataclass(frozen=True)
class Story:
    """All that a translation may speak of; `want` has the words of the image, where the sequence writes one."""

    sequence: Sequence
    definition: Definition
    rig: Rig
    result: RunResult
    fault: Trouble
    want: bytes | None = None

    @property
    def origin(self) -> Origin | None:
        """Where the op that stopped comes from."""
        return self.sequence.origin_at(self.fault.pc)

    @property
    def instruction(self) -> Instruction | None:
        """The op that stopped."""
        return instruction_at(self.sequence, self.fault.pc)

    def address(self) -> str:
        """The fault's address as text."""
        return show_address(self.fault.address, self.definition.words)

    def word(self, value: int) -> str:
        """A word as hex digits of the chip's width."""
        return f"{value & ((1 << self.definition.width) - 1):0{self.definition.width // 4}X}"

    def step(self) -> str:
        """The step as text for a message: "work: erase pulse"."""
        return f"{self.origin.part}: {self.origin.text}" if self.origin is not None else ""

    def where(self) -> Where | None:
        """The definition's line the op comes from, if it comes from one."""
        return self.origin.where if self.origin is not None and str(self.origin.where) else None


def instruction_at(sequence: Sequence, offset: int) -> Instruction | None:
    """The op at a byte offset; None where the offset is none of an op."""
    try:
        return decode_instruction(sequence.code, offset)[0]
    except (WireMistake, IndexError):
        return None


def scaling_of(rig: Rig, channel: int) -> tuple[str, Scaling | None]:
    """Name and converter of a measuring channel."""
    if channel == Channel.VCC_RAIL:
        return "VCC rail", rig.vcc.scaling
    if channel == Channel.RAISED_RAIL:
        return "raised rail", rig.raised.scaling
    if channel == Channel.SOCKET_VCC:
        return "VCC at the socket", rig.socket_vcc
    for switch in rig.switches:
        if Channel.POSITION + switch.number == channel:
            return f"position {switch.position}", switch.scaling
    return f"channel {channel}", None


def volts(scaling: Scaling | None, count: int) -> str:
    """A raw count in volts, as far as its converter is known; the ends of the range say so."""
    if scaling is None:
        return f"count {count}"
    if count >= scaling.counts - 1:
        return f"at least {show_mv(scaling.mv(scaling.counts - 1))}"
    return show_mv(scaling.mv(count))


def readings_of(result: RunResult, sequence: Sequence, rig: Rig) -> list[dict[str, object]]:
    """The measurements of a run for its record: what was measured, in which step, how many mV."""
    rows: list[dict[str, object]] = []
    for offset, count in result.readings:
        instruction, origin = instruction_at(sequence, offset), sequence.origin_at(offset)
        if instruction is None or instruction.op is not Op.MEASURE:
            continue
        name, scaling = scaling_of(rig, instruction.args["channel"])
        rows.append(
            {
                "what": name,
                "step": origin.text if origin is not None else "",
                "mv": scaling.mv(count) if scaling is not None else None,
                "count": count,
            }
        )
    return rows


def _channel(story: Story) -> tuple[str, Scaling | None]:
    instruction = story.instruction
    if story.fault.code == Fault.MEASURED_OUTSIDE and instruction is not None and instruction.op is Op.MEASURE:
        return scaling_of(story.rig, instruction.args["channel"])
    if story.fault.code in (Fault.VCC_OUTSIDE, Fault.STILL_POWERED):
        return scaling_of(story.rig, Channel.SOCKET_VCC)
    return scaling_of(story.rig, Channel.RAISED_RAIL)


def measured(story: Story) -> tuple[str, str, str]:
    """What was measured, what it was, and the window that was wanted, in volts."""
    name, scaling = _channel(story)
    low, high = story.fault.low, story.fault.high
    if scaling is not None and high >= scaling.counts - 1:
        wanted = f"at least {volts(scaling, low)}"
    elif low == 0:
        wanted = f"at most {volts(scaling, high)}"
    else:
        wanted = f"{volts(scaling, low)} to {volts(scaling, high)}"
    return name, f"{volts(scaling, story.fault.got)} (count {story.fault.got})", wanted
