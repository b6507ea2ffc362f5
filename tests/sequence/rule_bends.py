"""For each safety rule that the proof can know: ways to bend any compiled sequence so that it breaks just that rule.

A bend takes the ops of a sequence and draws where and how much; it gives other ops, or other fields of the permit. It
breaks its rule by what it is, whatever the part. A bend that a sequence has no place for raises NoPlace.
"""

from __future__ import annotations

from collections.abc import Callable

from hypothesis import strategies as st

from pulsewright.wire.ops import ins, line_byte
from pulsewright.wire.permit import VccStep
from pulsewright.wire.tables import Bias, Channel, Identity, Level, Op, Rail, Range
from tests.sequence.bend_case import Case, NoPlace
from tests.sequence.proof_bends import RIG

Bend = Callable[[Case], None]

# ---- H1: seating, and VCC before anything raised --------------------------------------------------------------------


def without_seated(case: Case) -> None:
    """The seating check is never said to have passed."""
    case.drop(Op.SEATED, 0)


def without_a_position(case: Case) -> None:
    """One raised position, or VCC, is not looked at while VCC is off."""
    case.drop(Op.MEASURE, case.number(0, len(RIG.switches)))


def a_look_at_some_bits(case: Case) -> None:
    """One of the looks at D leaves bits out."""
    case.set(Op.COMPARE, case.number(0, 2), mask=case.number(0, 0xFE))


def a_look_unheeded(case: Case) -> None:
    """What a look at D found makes no difference."""
    case.set(Op.BRANCH, case.one_of(case.where(Op.BRANCH, when=1)[:6]), when=2)


def without_keep(case: Case) -> None:
    """The two looks with outputs on are not compared with each other."""
    case.drop(Op.KEEP, 0)


# ---- H2: before the gate --------------------------------------------------------------------------------------------


def without_gate(case: Case) -> None:
    """The gate is left out."""
    case.drop(Op.GATE, 0)


def without_look(case: Case) -> None:
    """No look at the ID cells without the level."""
    case.drop(Op.GATE_LOOK, case.one_of(case.where(Op.GATE_LOOK)))


def another_step_before_the_gate(case: Case) -> None:
    """Before the gate the raised rail goes to any other step."""
    turn = case.one_of(case.where(Op.RAIL, rail=Rail.RAISED)[: len(case.where(Op.GATE_LOOK))])
    right = case.args(Op.RAIL, turn)["step"]
    if case.sequence.permit.identify_step != right:
        raise NoPlace
    case.set(Op.RAIL, turn, step=case.draw(st.sampled_from([n for n in range(1, 8) if n != right])))


def another_switch_before_the_gate(case: Case) -> None:
    """Before the gate other switches close than the one at the identify position."""
    if case.sequence.permit.identify_step == 0:
        raise NoPlace
    case.set(Op.SWITCHES, 0, on=case.draw(st.integers(1, 31).filter(lambda mask: mask != 0x10)))


def driven_before_the_gate(case: Case) -> None:
    """D is driven before the gate."""
    case.put(Op.GATE, 0, ins(Op.DRIVE, word=case.number(0, 255)))


def another_program(case: Case) -> None:
    """The permit is sealed for other bytes."""
    case.permit["crc32"] = case.sequence.permit.crc32 ^ case.number(1, 0xFFFFFFFF)


# ---- H3: only the permit's levels, inside window and maximum --------------------------------------------------------


def ceiling_too_high(case: Case) -> None:
    """A ceiling of the permit above window or maximum."""
    raised = list(case.sequence.permit.raised)
    at = case.one_of(list(range(len(raised))))
    number, count = raised[at]
    raised[at] = number, count + case.number(1, 1_023 - count)
    case.permit["raised"] = tuple(raised)


def a_level_for_nothing(case: Case) -> None:
    """The permit names a raised switch that nothing uses."""
    free = [one.number for one in RIG.switches if one.number not in dict(case.sequence.permit.raised)]
    extra = (case.draw(st.sampled_from(free)), case.number(0, 1_023))
    case.permit["raised"] = (*case.sequence.permit.raised, extra)


def vcc_outside_the_permit(case: Case) -> None:
    """VCC to a step that the permit does not have."""
    have = {one.step for one in case.sequence.permit.vcc}
    step = case.draw(st.sampled_from([one.number for one in RIG.vcc.steps if one.number and one.number not in have]))
    case.set(Op.RAIL, case.one_of(case.where(Op.RAIL, rail=Rail.VCC)), step=step)


def vcc_to_other_pins(case: Case) -> None:
    """The permit brings VCC to other positions."""
    case.permit["vcc_to"] = case.sequence.permit.vcc_to ^ case.number(1, 63)


def vcc_window_wide(case: Case) -> None:
    """The permit lets VCC go where no supply of the part allows it."""
    vcc = list(case.sequence.permit.vcc)
    at = case.number(0, len(vcc) - 1)
    one = vcc[at]
    vcc[at] = VccStep(one.step, one.low, one.high + case.number(60, 200), one.settle)
    case.permit["vcc"] = tuple(vcc)


# ---- H4: VPP never without VCC --------------------------------------------------------------------------------------


def rail_before_vcc(case: Case) -> None:
    """The raised rail rises before VCC stands."""
    case.put(Op.RANGE, case.number(0, 1), ins(Op.RAIL, rail=Rail.RAISED, step=case.number(1, 7)))


def vcc_goes_under_a_level(case: Case) -> None:
    """VCC is switched or moved while a raised level stands."""
    gone = ins(Op.RANGE, which=Range.OFF)
    moved = ins(Op.RAIL, rail=case.number(0, 1), step=case.number(1, 7))
    case.behind(Op.SWITCHES, case.one_of(case.raises()), case.draw(st.sampled_from([gone, moved])))


# ---- H5: how it ends ------------------------------------------------------------------------------------------------


def safe_pattern_wrong(case: Case) -> None:
    """A line of the safe pattern is released, or not in it, or twice."""
    safe = bytearray(case.sequence.permit.safe)
    at = case.number(0, len(safe) - 1)
    how = case.draw(st.sampled_from(("released", "left out", "twice")))
    if how == "released":
        safe[at] = line_byte(safe[at] & 63, Level.RELEASED)
    elif how == "left out":
        del safe[at]
    else:
        safe.append(safe[at])
    case.permit["safe"] = bytes(safe)


def safe_pattern_reads(case: Case) -> None:
    """In the safe pattern the chip drives D."""
    reads = {entry & 63: entry for entry in case.draw(st.sampled_from(case.sequence.permit.drives))}
    case.permit["safe"] = bytes(reads.get(entry & 63, entry) for entry in case.sequence.permit.safe)


def self_timed_short(case: Case) -> None:
    """The permit waits less than the part may be at work by itself."""
    if not case.sequence.permit.self_timed:
        raise NoPlace
    case.permit["self_timed"] = case.number(0, case.sequence.permit.self_timed - 1)


def no_end(case: Case) -> None:
    """The program has no end."""
    case.drop(Op.END, -1)


# ---- H6: one of rig and chip drives D -------------------------------------------------------------------------------


def driven_against_outputs(case: Case) -> None:
    """D is driven while the chip's outputs are on."""
    case.put(Op.KEEP, 0, ins(Op.DRIVE, word=case.number(0, 255)))


def data_line_by_itself(case: Case) -> None:
    """A data line is moved as if it were a control line."""
    line = case.draw(st.sampled_from(RIG.site.data_lines))
    level = case.draw(st.sampled_from((Level.LOW, Level.HIGH)))
    case.put(Op.GATE, 0, ins(Op.LINES, lines=bytes([line_byte(line, level)])))


def outputs_unknown(case: Case) -> None:
    """The permit does not know when the chip drives D."""
    case.permit["drives"] = ()


def a_supply_pin_driven(case: Case) -> None:
    """The line at the chip's own VCC pin is driven."""
    position = RIG.site.position_of(case.part.package, case.part.pins["VCC"][0])
    case.put(Op.GATE, 0, ins(Op.LINES, lines=bytes([line_byte(position, Level.HIGH)])))


# ---- H7: pulses and waits -------------------------------------------------------------------------------------------


def pulse_outside(case: Case) -> None:
    """A pulse shorter or longer than its window, or that may become so."""
    case.opened()
    turn = case.one_of(case.where(Op.PULSE))
    window = _pulse_window(case)
    if window is None:
        raise NoPlace
    low, high = window
    width = case.draw(st.one_of(st.integers(1, low - 1), st.integers(high + 1, 2 * high)))
    case.set(Op.PULSE, turn, width=width, max=max(width, high))


def _pulse_window(case: Case) -> tuple[int, int] | None:
    """Ticks in which every pulse of the sequence must be: none where it writes on the bus."""
    if case.part.write is not None:
        return None
    one = case.part.timing["tEW" if case.sequence.kind == "erase" else "tPW"]
    return -(-(one.min_ps or 0) // 62_500), (one.max_ps or 0) // 62_500


def pulse_bound_late(case: Case) -> None:
    """The bound that ends a pulse by itself lies past the window."""
    case.opened()
    turn = case.one_of(case.where(Op.PULSE))
    window = _pulse_window(case)
    if window is None:
        raise NoPlace
    case.set(Op.PULSE, turn, max=window[1] + case.number(1, 10_000))


def strobe_short(case: Case) -> None:
    """A bus write with less than its width, set-up or hold, the rig's edges in it."""
    op, turn = case.draw(st.sampled_from([(op, turn) for op in _STROBES for turn in case.where(op)] or [(Op.END, 0)]))
    if op is Op.END:
        raise NoPlace
    what = case.draw(st.sampled_from(("width", "setup", "hold")))
    edge = 16  # 1 us
    case.set(op, turn, **{what: case.number(1, edge - 1)})


_STROBES = (Op.BUS_WRITES, Op.PAGE_LOAD)


def read_early(case: Case) -> None:
    """D is read sooner than address or enable allow."""
    op = Op.READ_RUN if case.where(Op.READ_RUN) else Op.SCAN
    turn = case.one_of(case.where(op))
    case.set(op, turn, wait=case.number(0, 15))  # the rig's own edges take 16


def steps_left_out(case: Case) -> None:
    """The pulse, load, command or look that the steps have is not there."""
    case.opened()
    found = [(op, turn) for op in (Op.PULSE, Op.COMPARE_WORD, Op.POLL) for turn in case.where(op)]
    if not found:
        raise NoPlace
    op, turn = case.draw(st.sampled_from(found))
    case.drop(op, turn)


# ---- H8: measured before use ----------------------------------------------------------------------------------------


def _raised_measures(case: Case) -> list[int]:
    turns = case.where(Op.MEASURE)
    return [turn for turn in turns if case.args(Op.MEASURE, turn)["low"] and _of_raised(case, turn)]


def _of_raised(case: Case, turn: int) -> bool:
    channel = int(case.args(Op.MEASURE, turn)["channel"])
    return channel == Channel.RAISED_RAIL or channel >= Channel.POSITION


def unmeasured_rail(case: Case) -> None:
    """The raised rail is not measured after a move."""
    case.drop(Op.MEASURE, case.one_of(case.where(Op.MEASURE, channel=Channel.RAISED_RAIL)))


def wide_window(case: Case) -> None:
    """A raised level is measured against a window that goes below or above its supply's."""
    turn = case.one_of(_raised_measures(case))
    case.set(Op.MEASURE, turn, **case.draw(st.sampled_from([{"low": 1}, {"high": 1_023}])))


def wide_vcc(case: Case) -> None:
    """Full VCC is measured against a window that is not its step's."""
    turn = case.one_of(case.where(Op.MEASURE, channel=Channel.SOCKET_VCC)[-1:])
    case.set(Op.MEASURE, turn, **case.draw(st.sampled_from([{"low": 1}, {"high": 1_023}])))


def endless_measure(case: Case) -> None:
    """A measurement may take longer than any converter has."""
    turn = case.one_of(case.where(Op.MEASURE))
    case.set(Op.MEASURE, turn, limit=case.number(1_600_001, (1 << 32) - 1))


def blinded_monitor(case: Case) -> None:
    """The permit's settling time keeps the monitor from VCC for too long, or shorter than VCC settles."""
    one = case.sequence.permit.vcc[0]
    settle = case.draw(st.one_of(st.integers(0, one.settle - 1), st.integers(2 * one.settle + 1, 1 << 24)))
    case.permit["vcc"] = (VccStep(one.step, one.low, one.high, settle), *case.sequence.permit.vcc[1:])


# ---- H9: the permit's side ------------------------------------------------------------------------------------------


def identity_waived(case: Case) -> None:
    """A part with an ID under a permit that wants none, with or without the operator's word."""
    if case.part.identify == "none":
        raise NoPlace
    case.permit["identity"] = case.draw(st.sampled_from((Identity.NONE, Identity.VOUCHED_NONE)))


# ---- H11: nothing above the socket's VCC ----------------------------------------------------------------------------


def high_without_vcc(case: Case) -> None:
    """A line is high while VCC is off or behind the probe resistor."""
    line = next(entry & 63 for entry in case.sequence.permit.safe)
    case.put(Op.RANGE, case.number(0, 1), ins(Op.LINES, lines=bytes([line_byte(line, Level.HIGH)])))


def driven_without_vcc(case: Case) -> None:
    """H is driven before full VCC stands."""
    case.put(Op.RANGE, case.number(0, 1), ins(Op.HIGH, how=1))


def data_without_vcc(case: Case) -> None:
    """D is driven with ones while VCC is off."""
    case.put(Op.SAMPLE, 0, ins(Op.DRIVE, word=case.number(1, 255)))


def pulled_up_without_vcc(case: Case) -> None:
    """A weak pull upwards without full VCC."""
    case.put(Op.RANGE, case.number(0, 1), ins(Op.BIAS, groups=1, how=Bias.UP))


def driven_on_the_way_down(case: Case) -> None:
    """H stays driven while VCC moves to a low step, or goes."""
    turns = case.where(Op.HIGH, how=0)[1:]
    if turns:
        case.drop(Op.HIGH, case.one_of(turns))
    else:
        case.put(Op.GATE, 0, ins(Op.RANGE, which=Range.OFF))


BENDS: dict[str, tuple[Bend, ...]] = {
    "H1": (without_seated, without_a_position, a_look_at_some_bits, a_look_unheeded, without_keep),
    "H2": (without_gate, without_look, another_step_before_the_gate, another_switch_before_the_gate,
           driven_before_the_gate, another_program),
    "H3": (ceiling_too_high, a_level_for_nothing, vcc_outside_the_permit, vcc_to_other_pins, vcc_window_wide),
    "H4": (rail_before_vcc, vcc_goes_under_a_level),
    "H5": (safe_pattern_wrong, safe_pattern_reads, self_timed_short, no_end),
    "H6": (driven_against_outputs, data_line_by_itself, outputs_unknown, a_supply_pin_driven),
    "H7": (pulse_outside, pulse_bound_late, strobe_short, read_early, steps_left_out),
    "H8": (unmeasured_rail, wide_window, wide_vcc, endless_measure, blinded_monitor),
    "H9": (identity_waived,),
    "H11": (high_without_vcc, driven_without_vcc, data_without_vcc, pulled_up_without_vcc, driven_on_the_way_down),
}  # fmt: skip
