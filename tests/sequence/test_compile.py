"""The compiler: what a definition's steps become, with their origins, and what it refuses."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition, EachStep, RepeatStep
from pulsewright.errors import CannotMake
from pulsewright.rig.file import load_rig
from pulsewright.rig.model import Rig
from pulsewright.sequence.compile import (
    compile_blank,
    compile_burn,
    compile_erase,
    compile_identify,
    compile_read,
)
from pulsewright.sequence.types import Sequence
from pulsewright.wire.ops import Instruction, decode_program
from pulsewright.wire.tables import PROGRAM_BYTES, Channel, Op

US = 16  # ticks


@pytest.fixture(scope="module")
def definition() -> Definition:
    """The shipped definition."""
    return load("27e512")


@pytest.fixture(scope="module")
def rig() -> Rig:
    """The reference rig."""
    return load_rig()


def everything(definition: Definition, rig: Rig) -> list[Sequence]:
    """All five sequences over the whole chip."""
    last = definition.words - 1
    return [
        compile_identify(definition, rig),
        compile_read(definition, rig, 0, last),
        compile_blank(definition, rig, 0, last),
        compile_erase(definition, rig),
        compile_burn(definition, rig, 0, last, ""),
    ]


def ops_of(sequence: Sequence, op: Op) -> list[Instruction]:
    """The instructions of one op."""
    return [instruction for _, instruction in decode_program(sequence.code).code if instruction.op is op]


def test_every_op_has_an_origin_at_its_offset(definition: Definition, rig: Rig) -> None:
    """Each op of each sequence has exactly one origin, and it stands at the op's own offset."""
    for sequence in everything(definition, rig):
        offsets = [offset for offset, _ in decode_program(sequence.code).code]

        assert [origin.offset for origin in sequence.origins] == offsets


def test_work_names_the_line_of_the_definition(definition: Definition, rig: Rig) -> None:
    """The erase pulse's origin is the very line of the definition file that asks for it."""
    sequence = compile_erase(definition, rig)
    offset = next(at for at, i in decode_program(sequence.code).code if i.op is Op.PULSE)
    origin = sequence.origin_at(offset)

    assert origin is not None
    line = Path(definition.path).read_text().splitlines()[origin.where.line - 1]
    assert '{ pulse = "CE", to = "L", time = "tEW" }' in line


def test_burn_is_one_fused_op(definition: Definition, rig: Rig) -> None:
    """The word loop of the data sheet's flow chart becomes one pulse_verify of 100 us, at most 105 us, 25 tries."""
    (fused,) = ops_of(compile_burn(definition, rig, 0, 0xFFFF, ""), Op.PULSE_VERIFY)

    assert (fused.args["width"], fused.args["max"], fused.args["tries"]) == (100 * US, 105 * US, 25)


def test_waits_hold_what_the_rig_needs(definition: Definition, rig: Rig) -> None:
    """Set-up of the burn pulse is the switch's longest rise and the data sheet's 2 us, rounded up to whole ticks."""
    (fused,) = ops_of(compile_burn(definition, rig, 0, 0xFFFF, ""), Op.PULSE_VERIFY)
    rise_ps = next(switch for switch in rig.switches if switch.position == 24).rise_ps

    assert (fused.args["setup"] - 1) * 62_500 < rise_ps + 2_000_000 <= fused.args["setup"] * 62_500


def test_erase_pulses_are_bounded_as_the_sheet_says(definition: Definition, rig: Rig) -> None:
    """Erase is a loop of 20 around one CE pulse of 100 ms, at most 105 ms, and a scan of all 65536 words for FF."""
    sequence = compile_erase(definition, rig)
    (loop,), (pulse,), (scan,) = (ops_of(sequence, op) for op in (Op.LOOP, Op.PULSE, Op.SCAN))

    assert loop.args["count"] == 20
    assert (pulse.args["width"], pulse.args["max"]) == (100_000 * US, 105_000 * US)
    assert (scan.args["first"], scan.args["count"], scan.args["word"]) == (0, 65_536, 0xFF)


def test_a_step_that_cannot_be_fused_stays_primitive(definition: Definition, rig: Rig) -> None:
    """A word loop that is not pulse_verify's expansion is left as primitives, with the same pulse."""
    assert definition.program is not None
    (each,) = definition.program.steps
    (repeat,) = each.steps  # type: ignore[union-attr]  # the part's one step is a loop over words
    assert isinstance(repeat, RepeatStep)
    longer = replace(repeat, steps=(*repeat.steps, repeat.steps[4]))  # a second wait behind the read-back
    changed = replace(repeat, steps=(*longer.steps, repeat.steps[6], repeat.steps[-1]))
    program = replace(definition.program, steps=(replace(each, steps=(changed,)),))  # type: ignore[arg-type]  # as above
    sequence = compile_burn(replace(definition, program=program), rig, 0, 0xFFFF, "")

    assert not ops_of(sequence, Op.PULSE_VERIFY)
    assert [pulse.args["width"] for pulse in ops_of(sequence, Op.PULSE)] == [100 * US]


def test_size_does_not_grow_with_the_range(definition: Definition, rig: Rig) -> None:
    """A burn of 2 KB and one of 64 KB have programs of one length, inside a board's program memory."""
    small, large = (compile_burn(definition, rig, 0, last, "") for last in (0x7FF, 0xFFFF))

    assert len(small.code) == len(large.code) <= PROGRAM_BYTES


def test_only_permitted_levels_are_asked(definition: Definition, rig: Rig) -> None:
    """Reading permits nothing raised past the gate; burning OE/VPP alone; erasing OE/VPP and A9."""
    raised = {s.kind: [switch for switch, _ in s.permit.raised] for s in everything(definition, rig)}

    assert raised == {"identify": [], "read": [], "blank": [], "burn": [2], "erase": [2, 4]}


def test_no_step_that_serves_prints_both_sums(definition: Definition, rig: Rig) -> None:
    """With a rail error of 300 mV no step serves the 0.5 V window, and the refusal names what was wanted and got."""
    steps = tuple(replace(step, error_mv=300) if step.mv else step for step in rig.raised.steps)
    worse = replace(rig, raised=replace(rig.raised, steps=steps))
    with pytest.raises(CannotMake) as refused:
        compile_erase(definition, worse)

    text = "\n".join(refused.value.lines())
    assert "13.75 V .. 14.25 V" in text
    assert "14.385 V of 14.25 V" in text  # 14.0 + 0.3 + 0.085 of rebound
    assert "of 13.75 V" in text


def test_current_weighs_in_the_sum(definition: Definition, rig: Rig) -> None:
    """The A9 limiter's loss grows with the current: at 1 mA the erase level does not reach its window."""
    supplies = dict(definition.supplies)
    supplies["VH.erase"] = replace(supplies["VH.erase"], current_ua=1000)
    with pytest.raises(CannotMake, match=r"VH\.erase at A9"):
        compile_erase(replace(definition, supplies=supplies), rig)


def test_unknown_loop_unit_is_refused(definition: Definition, rig: Rig) -> None:
    """A loop over pages is refused with the place of the step, not compiled as something else."""
    assert definition.program is not None
    (each,) = definition.program.steps
    assert isinstance(each, EachStep)
    program = replace(definition.program, steps=(replace(each, unit="page"),))
    with pytest.raises(CannotMake, match="page"):
        compile_burn(replace(definition, program=program), rig, 0, 15, "")


def test_part_without_method_is_refused(definition: Definition, rig: Rig) -> None:
    """A part without an erase or a program method cannot be asked for one."""
    none: Any = replace(definition, program=None, erase=None)
    with pytest.raises(CannotMake):
        compile_erase(none, rig)
    with pytest.raises(CannotMake):
        compile_burn(none, rig, 0, 15, "")


def test_other_package_is_refused(definition: Definition, rig: Rig) -> None:
    """A package the site does not take is refused by name."""
    with pytest.raises(CannotMake, match="DIP-40"):
        compile_identify(replace(definition, package="DIP-40"), rig)


def test_a_rail_that_stays_is_measured_anew_in_the_window_it_is_used_in(definition: Definition, rig: Rig) -> None:
    """12 V serves identify and program: the burn measures the rail again, for the monitor to hold it to VPP.program."""
    windows = [
        (measure.args["low"], measure.args["high"])
        for measure in ops_of(compile_burn(definition, rig, 0, 7, ""), Op.MEASURE)
        if measure.args["channel"] == Channel.RAISED_RAIL
    ]
    scaling = rig.raised.scaling

    def counts(name: str) -> tuple[int, int]:
        step = definition.supplies[name]
        return scaling.count_at_least(step.min_mv), scaling.count_at_most(step.max_mv)

    assert windows == [counts("VH.identify"), counts("VPP.program")]
