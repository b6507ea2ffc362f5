"""A fault planted in the compiler for each safety rule that the proof can know: the proof refuses by that rule."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition, EachStep, ExpectStep
from pulsewright.rig.file import load_rig
from pulsewright.rig.model import Rig
from pulsewright.sequence import bus, levels, lower, modes, permits, seating
from pulsewright.sequence import compile as compiler
from pulsewright.sequence.build import Builder
from pulsewright.sequence.proof import prove
from pulsewright.sequence.types import Sequence
from pulsewright.units import Rounding, ticks
from pulsewright.wire.permit import Permit
from pulsewright.wire.tables import Fail, Identity, Op, Range
from tests.sequence.proof_bends import part_of

Compile = Callable[[Definition, Rig], Sequence]


def erase(definition: Definition, rig: Rig) -> Sequence:
    """The erase."""
    return compiler.compile_erase(definition, rig)


def burn(definition: Definition, rig: Rig) -> Sequence:
    """The burn of the whole chip."""
    return compiler.compile_burn(definition, rig, 0, definition.words - 1, "")


def forget_seated(patch: pytest.MonkeyPatch) -> None:
    """H1: the looks with the bias, and `seated` itself, are left out."""

    def idle(b: Builder) -> None:
        b.set_lines(b.pins.control_levels(seating.standby(b)))
        b.state.mode = "standby"

    patch.setattr(seating, "bias_looks", idle)


def forget_gate(patch: pytest.MonkeyPatch) -> None:
    """H2: the work begins without the gate."""
    patch.setattr(compiler, "pass_gate", lambda b: None)


def step_too_high(patch: pytest.MonkeyPatch) -> None:
    """H3: the raised rail's next higher step is taken."""
    right = levels.choose_raised

    def wrong(definition: Definition, rig: Rig, wanted: Any) -> Any:
        return rig.raised.step(right(definition, rig, wanted).number + 1)

    patch.setattr(modes, "choose_raised", wrong)


def vcc_off_under_raised(patch: pytest.MonkeyPatch) -> None:
    """H4: VCC is taken from the socket while a switch is closed."""
    right = modes.measure_raised

    def wrong(b: Builder, wanted: Any) -> None:
        right(b, wanted)
        b.emit(Op.RANGE, which=Range.OFF)

    patch.setattr(modes, "measure_raised", wrong)


def wrong_permit(patch: pytest.MonkeyPatch, **changes: Any) -> None:
    """A permit with other values than the compiler would give it."""
    right = permits.make_permit

    def wrong(*args: Any) -> Permit:
        return replace(right(*args), **changes)

    patch.setattr(compiler, "make_permit", wrong)


def unsafe_pattern(patch: pytest.MonkeyPatch) -> None:
    """H5: the permit's safe pattern is the one in which the chip drives D."""
    wrong_permit(patch, safe=b"\x16\x18")


def drive_against_outputs(patch: pytest.MonkeyPatch) -> None:
    """H6: D is driven while the chip reads out."""
    right = lower.Lowering._one

    def wrong(self: lower.Lowering, step: Any, **place: Any) -> None:
        if isinstance(step, ExpectStep):
            self.b.emit(Op.DRIVE_WORD)
        right(self, step, **place)

    patch.setattr(lower.Lowering, "_one", wrong)


def pulse_too_long(patch: pytest.MonkeyPatch) -> None:
    """H7: pulses are half as long again as the sheet allows."""

    def wrong(ps: int, rounding: Rounding) -> int:
        return ticks(ps, rounding) * 3 // 2 if rounding in (Rounding.NEAREST, Rounding.AT_MOST) else ticks(ps, rounding)

    patch.setattr(lower, "ticks", wrong)


def setup_too_short(patch: pytest.MonkeyPatch) -> None:
    """H7: every wait is rounded down and halved."""

    def wrong(self: Builder, ps: int) -> None:
        self.emit(Op.WAIT, ticks=ps // 2 // 62_500)

    patch.setattr(Builder, "wait", wrong)


def level_unmeasured(patch: pytest.MonkeyPatch) -> None:
    """H8: raised levels are used unmeasured."""
    patch.setattr(modes, "measure_raised", lambda b, wanted: None)


def identity_waived(patch: pytest.MonkeyPatch) -> None:
    """H9: the permit asks for no identity though the part has one."""
    wrong_permit(patch, identity=Identity.NONE)


def vouch_smuggled(patch: pytest.MonkeyPatch) -> None:
    """H9: the permit is vouched for though the part has an ID."""
    wrong_permit(patch, identity=Identity.VOUCHED_NONE)


PLANTED = [
    ("H1", forget_seated, erase),
    ("H2", forget_gate, burn),
    ("H3", step_too_high, erase),
    ("H3", step_too_high, burn),
    ("H4", vcc_off_under_raised, erase),
    ("H5", unsafe_pattern, burn),
    ("H6", drive_against_outputs, burn),
    ("H7", pulse_too_long, burn),
    ("H7", pulse_too_long, erase),
    ("H7", setup_too_short, burn),
    ("H8", level_unmeasured, erase),
    ("H8", level_unmeasured, burn),
    ("H9", identity_waived, burn),
    ("H9", vouch_smuggled, erase),
]


@pytest.mark.parametrize(("rule", "plant", "compile_it"), PLANTED, ids=lambda value: getattr(value, "__name__", value))
def test_a_planted_fault_is_caught_by_its_rule(
    rule: str, plant: Callable[[pytest.MonkeyPatch], None], compile_it: Compile, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The proof accepts the true compiler's sequence, and refuses the faulty one's by the rule it breaks."""
    definition, rig = load("27e512"), load_rig()
    true = compile_it(definition, rig)
    assert prove(true.code, true.permit, definition, rig).findings == ()
    plant(monkeypatch)
    faulty = compile_it(definition, rig)

    assert rule in {finding.rule for finding in prove(faulty.code, faulty.permit, definition, rig).findings}


def test_lines_kept_driven_into_a_low_vcc_are_caught() -> None:
    """H11: compiled for a rig that drives high at any VCC, the erase is refused on the rig that does not."""
    definition, rig = load("27e512"), load_rig()
    faulty = compiler.compile_erase(definition, replace(rig, driven_from_mv=0))

    assert "H11" in {finding.rule for finding in prove(faulty.code, faulty.permit, definition, rig).findings}


# ---- parts that are burnt otherwise ---------------------------------------------------------------------------------


def loads_at_once(patch: pytest.MonkeyPatch) -> None:
    """H7: after a load nothing waits for the load gap to end."""

    def wrong(b: Builder) -> None:
        b.state.written = False

    patch.setattr(bus, "end_load", wrong)


def holds_forgotten(patch: pytest.MonkeyPatch) -> None:
    """H7: address, data and pause have no time behind a strobe but the rig's edges."""
    patch.setattr(bus, "_HOLDS", ("tNONE",))


def polls_short(patch: pytest.MonkeyPatch) -> None:
    """H7: a poll gives up at a quarter of the part's longest time."""
    right = bus._scaled

    def wrong(limit: int) -> tuple[int, int]:
        return right(limit // 4)

    patch.setattr(bus, "_scaled", wrong)


def end_left_out(patch: pytest.MonkeyPatch) -> None:
    """H5: a failure leaves out the steps that end a method."""

    def wrong(self: lower.Lowering, why: Fail) -> None:
        self.b.emit(Op.FAIL, why=why)

    patch.setattr(lower.Lowering, "_leave", wrong)


def raised_kept(patch: pytest.MonkeyPatch) -> None:
    """H4: the raised level stays whatever the next mode wants."""
    patch.setattr(modes, "open_switches", lambda b, keep, **_: None)


def standby_taken_for_safe(patch: pytest.MonkeyPatch) -> None:
    """H5: the safe pattern is standby on every part."""
    patch.setattr(permits, "_safe_mode", lambda definition, pins, names: definition.modes["standby"])


def self_timed_forgotten(patch: pytest.MonkeyPatch) -> None:
    """H5: the permit knows of no work that the part does by itself."""
    patch.setattr(compiler, "_busy", lambda b, method: 0)


def second_pass_forgotten(patch: pytest.MonkeyPatch) -> None:
    """H7: of a blind pass and a look at every word only the first is compiled."""
    right = lower.Lowering.run

    def wrong(self: lower.Lowering, steps: Any) -> None:
        passes = [step for step in steps if isinstance(step, EachStep)]
        right(self, tuple(step for step in steps if step not in passes[1:]))

    patch.setattr(lower.Lowering, "run", wrong)


OTHER_PARTS = [
    ("H7", loads_at_once, "28c256", "Xicor"),
    ("H7", holds_forgotten, "28c256", "Xicor"),
    ("H7", polls_short, "28c256", "Atmel"),
    ("H5", self_timed_forgotten, "28c256", "Catalyst"),
    ("H5", end_left_out, "28c256", "Xicor"),
    ("H4", raised_kept, "27c256", "ST"),
    ("H7", second_pass_forgotten, "27c256", "Atmel"),
    ("H5", standby_taken_for_safe, "2716", ""),
]


@pytest.mark.parametrize(("rule", "plant", "name", "maker"), OTHER_PARTS, ids=lambda one: getattr(one, "__name__", one))
def test_a_fault_planted_for_another_part_is_caught(
    rule: str, plant: Callable[[pytest.MonkeyPatch], None], name: str, maker: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Pages, passes, a standing VPP, a pulse upwards: the true burn is accepted, the faulty one refused by its rule."""
    definition, rig = part_of(name, maker), load_rig()
    protected = definition.protected is not None

    def compiled() -> Sequence:
        return compiler.compile_burn(definition, rig, 0, definition.words - 1, "", protected=protected)

    true = compiled()
    assert prove(true.code, true.permit, definition, rig).findings == ()
    plant(monkeypatch)
    faulty = compiled()
    found = prove(faulty.code, faulty.permit, definition, rig).findings
    assert rule in {finding.rule for finding in found}
