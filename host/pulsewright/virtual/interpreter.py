"""The reference interpreter: a loaded program as a list of closures, and the run of it as one generator.

The generator is the firmware's main flow. It yields the tick it waits for, or None to let what is due happen first; an
abort, the dead-man or the monitor is thrown into it where it waits. However it ends, it makes safe and returns.
"""

from __future__ import annotations

from collections.abc import Callable

from pulsewright.virtual import gate, ops, ops_flow, ops_read, ops_supply
from pulsewright.virtual.blocks import Blocks
from pulsewright.virtual.loader import Loaded
from pulsewright.virtual.machine import Ended, Machine, Trip, Waiting
from pulsewright.virtual.safe import make_safe
from pulsewright.wire.tables import BLOBS, Fault, Flow, Op, Outcome

Maker = Callable[[Machine, ops.Args, int], ops.Step]
_MAKERS: dict[Op, Maker] = {
    Op.END: ops_flow.end,
    Op.FAIL: ops_read.fail,
    Op.FAILING: ops_read.failing,
    Op.HIGH: ops.high,
    Op.LINES: ops.lines,
    Op.ADDRESS: ops.address,
    Op.STEP: ops.step_address,
    Op.ADDRESS_WORD: ops.address_word,
    Op.DRIVE: ops.drive,
    Op.DRIVE_WORD: ops.drive_word,
    Op.RELEASE: ops.release,
    Op.WAIT: ops.wait,
    Op.PULSE: ops.pulse,
    Op.OVER_PULSE: ops.over_pulse,
    Op.SAMPLE: ops_read.sample,
    Op.KEEP: ops_read.keep,
    Op.COMPARE: ops_read.compare,
    Op.COMPARE_WORD: ops_read.compare_word,
    Op.COMPARE_KEPT: ops_read.compare_kept,
    Op.SENSE: ops_read.sense,
    Op.REPORT: ops_read.report,
    Op.POLL: ops_read.poll,
    Op.RAIL: ops_supply.rail,
    Op.RANGE: ops_supply.set_range,
    Op.SWITCHES: ops_supply.switches,
    Op.BIAS: ops_supply.bias,
    Op.MEASURE: ops_supply.measure,
    Op.SEATED: ops_supply.seated,
    Op.GATE_LOOK: gate.gate_look,
    Op.GATE: gate.gate,
}


def bind(m: Machine, loaded: Loaded, blocks: Blocks) -> None:
    """Makes the program's closures: one for each primitive, each knowing what comes after it."""
    m.blocks = blocks
    m.offsets = [offset for offset, _ in loaded.flat]
    m.op_codes = [int(instruction.op) for _, instruction in loaded.flat]
    flat = loaded.flat
    for place, (_, instruction) in enumerate(flat):
        op, args, after = instruction.op, instruction.args, place + 1
        opening = loaded.partner.get(place, 0)
        opened = flat[opening][1].args
        if op is Op.LOOP:
            step = ops_flow.loop(m, loaded.depths[place], after)
        elif op is Op.NEXT:
            outer = _turn_of(loaded, loaded.around[opening])
            step = ops_flow.next_turn(m, loaded.depths[opening], opened["count"], opening + 1, after, outer)
        elif op is Op.BRANCH:
            leaves = loaded.depths[args["to"]] < loaded.depths[place]
            outer = _turn_of(loaded, loaded.around[args["to"]]) if leaves else -1
            step = ops_flow.branch(m, args["when"], args["to"], after, outer)
        elif op is Op.EACH_BLOCK:
            step = ops_flow.each_block(m, blocks, args["to"], after)
        elif op is Op.NEXT_BLOCK:
            if loaded.header.flow is Flow.WRITE:
                m.writing.update(range(opening, place))
            step = ops_flow.next_block(m, blocks, opening)
        elif op is Op.EACH_WORD:
            step = ops_flow.each_word(m, blocks, args["to"], after)
        elif op is Op.NEXT_WORD:
            writes = loaded.header.flow is Flow.WRITE
            step = ops_flow.next_word(m, blocks, opened["to"], opening + 1, writes=writes)
        else:
            step = _MAKERS[op](m, args, after)
        m.code.append(step)


def _turn_of(loaded: Loaded, opening: int) -> int:
    """Index of the turn of a counted loop, -1 where `opening` is none."""
    return loaded.depths[opening] if opening >= 0 and loaded.flat[opening][1].op is Op.LOOP else -1


def execute(m: Machine) -> Waiting:
    """Runs the program until something ends it: always by Ended or Trip."""
    code = m.code
    pc = 0
    while True:
        if m.t >= m.next_event:
            yield None
        m.pc = pc
        pc = code[pc]()
        if pc < 0:
            assert m.slow is not None
            pc = yield from m.slow


class Ending:
    """How a run ended: its outcome, and the fault with where and when it happened."""

    def __init__(self) -> None:
        self.outcome = Outcome.DONE
        self.fault: dict[str, int] | None = None


def run_program(m: Machine, ending: Ending) -> Waiting:
    """The whole run: the program, then making safe. `ending` is filled in before it returns."""
    reason: Trip | None = None
    try:
        yield from execute(m)
    except Ended:
        pass
    except Trip as trip:
        reason = trip
        ending.outcome = trip.outcome
        ending.fault = fault_of(m, trip)
        if trip.outcome is Outcome.FAILED and m.pc in m.writing and m.blocks is not None:
            m.blocks.fail(m, m.address)
    try:
        yield from make_safe(m, reason)
    except Trip as trip:  # nothing throws into it; a fault of its own is a fault of this program
        raise AssertionError(f"{trip} while making safe") from trip
    if m.safe_fault is not None:
        if ending.fault is None or ending.outcome is not Outcome.TRIPPED:
            ending.fault = fault_of(m, m.safe_fault)
        ending.outcome = Outcome.TRIPPED
    return 0


def fault_of(m: Machine, trip: Trip) -> dict[str, int]:
    """The fault blob's values: code, where in the program, when, the numbers and the registers."""
    return {
        "code": int(trip.code),
        "op": m.op_codes[m.pc],
        "pc": m.offsets[m.noted.pc if m.noted is not None and trip.outcome is Outcome.FAILED else m.pc],
        "tick": m.t & 0xFFFFFFFF,
        "got": trip.got & 0xFFFF,
        "low": trip.low & 0xFFFF,
        "high": trip.high & 0xFFFF,
        "address": m.address & 0xFFFFFFFF,
        "sample": m.sample & 0xFFFF,
        "kept": m.kept & 0xFFFF,
        "pulsing": int(m.pulsing is not None),
    }


NO_FAULT = {"code": int(Fault.NONE), **{name: 0 for name, _ in BLOBS["fault"] if name != "code"}}
