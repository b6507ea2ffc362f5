"""The order of rule H5 in the trace, however a run ends."""

from __future__ import annotations

import re

import pytest

from pulsewright.virtual.board import Board
from pulsewright.wire.frames import Message
from pulsewright.wire.ops import Instruction, ins
from pulsewright.wire.tables import Fail, Fault, Frame, Op, Outcome, Range
from tests.virtual.kit import (
    BOTH_LOW,
    CE,
    MS,
    OE,
    PIN_CE,
    PIN_OE,
    PIN_VCC,
    US,
    End,
    Host,
    Item,
    build,
    past_gate,
    permit_for,
    power_up,
    pulse,
    raise_oe,
)

LONG = 300 * MS
RAISED = [*past_gate(), ins(Op.ADDRESS, at=0x1234), ins(Op.DRIVE, word=0x5A), *raise_oe()]
PULSING: list[Item] = [*RAISED, pulse(LONG), ins(Op.END)]


def where(host: Host, pattern: str, *, after: int = 0) -> int:
    """Index in the trace of the first group after `after` whose text matches."""
    for place, (_, text) in enumerate(host.trace):
        if place >= after and re.fullmatch(pattern, text):
            return place
    raise AssertionError(f"{pattern} is not in {host.texts()[after:]}")


def in_pulse() -> Host:
    """A host whose rig is in the middle of a long pulse with OE raised."""
    host = Host()
    host.start(build(PULSING))
    for _ in range(1_000):
        if host.texts()[-1:] == [f"{CE}L"] and f"{OE} stands 14000" in host.texts():
            return host
        host.pass_time(MS)
    raise AssertionError("the pulse did not begin")


def check_order(host: Host, begun: int, *, pulsed: bool) -> None:
    """From index `begun` of the trace on: idle, switches, D, pattern, VCC, all low, rail."""
    at = begun
    steps = [f"{CE}H"] if pulsed else []
    steps += [f"{OE} falls", f"{OE} stands [0-5].*", "D=Z", ".*L.*", "VCC off 0", "VCC stands 0", "all L", "rail 0"]
    for step in steps:
        at = where(host, step, after=at) + 1
    assert at == len(host.trace)


def test_the_end_op_makes_safe_in_order() -> None:
    """Switches open and fallen, D let go, addresses low and the safe pattern, VCC off and gone, all low, rail at 0."""
    host = Host()
    code = build([*RAISED, ins(Op.END)])
    assert host.run(code).outcome is Outcome.DONE
    check_order(host, where(host, f"{OE} stands 14000"), pulsed=False)


def test_the_fail_op_makes_safe_in_order_and_says_why() -> None:
    """Outcome failed carries the why, the address and the registers."""
    host = Host()
    end = host.run(build([*RAISED, ins(Op.SAMPLE), ins(Op.KEEP), ins(Op.FAIL, why=Fail.ERASE)]))
    assert (end.outcome, end.fault["code"], end.fault["got"]) == (Outcome.FAILED, Fault.FAILED, Fail.ERASE)
    assert (end.fault["address"], end.fault["sample"], end.fault["kept"]) == (0x1234, 0x5A, 0x5A)
    check_order(host, where(host, f"{OE} stands 14000"), pulsed=False)
    assert host.rig.hello().fault == Fault.NONE  # a failed sequence is no trip: nothing is latched


def test_an_abort_in_a_pulse_ends_it_and_makes_safe_in_order() -> None:
    """Four zeros end the pulse at once; the answer says aborted, and that a pulse was cut."""
    host = in_pulse()
    begun = len(host.trace)
    t = host.rig.t
    host.rig.receive(bytes(4), t)
    end = host.end()
    assert (end.outcome, end.fault["code"], end.fault["pulsing"]) == (Outcome.ABORTED, Fault.ABORTED, 1)
    assert end.fault["address"] == 0x1234
    assert host.trace[begun] == (t + 3 * 4_167, f"{CE}H")  # at 38400 baud; the last frame's zero is the first
    check_order(host, begun, pulsed=True)


def test_a_line_break_aborts() -> None:
    """A break does what four zeros do, at its own tick."""
    host = in_pulse()
    begun, t = len(host.trace), host.rig.t
    host.rig.line_break(t + 5)
    assert host.end().outcome is Outcome.ABORTED
    assert host.trace[begun] == (t + 5, f"{CE}H")
    check_order(host, begun, pulsed=True)


def test_the_dead_man_ends_a_pulse_half_a_second_after_the_last_frame() -> None:
    """With the host silent the pulse ends 500 ms after the last frame heard, and the fault is latched."""
    host = Host()
    host.start(build([*RAISED, pulse(3_000 * MS), ins(Op.END)]))
    while f"{OE} stands 14000" not in host.texts():
        host.pass_time(MS)
    host.send(keep_alive(host))
    host.keep_alive = False
    fed = host.rig.t
    host.pass_time(30 * MS)
    begun = len(host.trace)
    end = host.end()
    assert (end.outcome, end.fault["code"], end.fault["pulsing"]) == (Outcome.TRIPPED, Fault.DEAD_MAN, 1)
    late = host.trace[begun][0] - fed - 500 * MS
    assert 0 <= late < 60_000  # the keep-alive itself took its time on the line
    check_order(host, begun, pulsed=True)
    assert host.rig.hello().fault == Fault.DEAD_MAN


def keep_alive(host: Host) -> Message:
    """A keep-alive of the run."""
    return Message(Frame.KEEP_ALIVE, host.number, host.index)


def test_a_host_that_answers_heartbeats_keeps_the_dead_man_away() -> None:
    """A pulse of two seconds ends by itself while keep-alives come."""
    host = Host()
    end = host.run(build([*RAISED, pulse(2_000 * MS), ins(Op.END)]))
    assert end.outcome is Outcome.DONE
    assert host.chip.pulses[-1][1] == 2_000 * MS


def test_the_dead_man_sleeps_while_nothing_stands() -> None:
    """With VCC off a silent host is no danger: the program goes on."""
    host = Host()
    host.keep_alive = False
    assert host.run(build([ins(Op.WAIT, ticks=900 * MS), ins(Op.END)])).outcome is Outcome.DONE


def test_a_wrong_voltage_cuts_vcc_a_millisecond_after_the_raised_levels() -> None:
    """A VCC trip waits for no measured fall: switches open at once, VCC goes 1 ms later."""
    host = in_pulse()
    host.chip.draw[PIN_VCC] = 400_000
    begun = len(host.trace)
    assert host.end().fault["code"] == Fault.VCC_OUTSIDE
    opened = host.trace[where(host, f"{OE} falls", after=begun)][0]
    cut = host.trace[where(host, "VCC off 0", after=begun)][0]
    assert MS <= cut - opened <= MS + 32
    assert where(host, f"{CE}H", after=begun) == begun


def test_the_self_timed_write_is_waited_for_before_vcc_goes() -> None:
    """After a pulse VCC stays for the permit's self-timed wait; without a pulse it does not."""
    times = {}
    for pulses in (0, 1):
        host = Host()
        code = build([*RAISED, *[pulse()] * pulses, ins(Op.END)])
        host.run(code, permit_for(code, self_timed=40 * MS))
        safe = where(host, "D=Z", after=where(host, f"{OE} stands 14000"))
        times[pulses] = host.trace[where(host, "VCC off 0", after=safe)][0] - host.trace[safe][0]
    assert times[0] < MS
    assert 40 * MS <= times[1] < 41 * MS


def test_a_second_abort_skips_the_self_timed_wait() -> None:
    """The first abort waits for the chip's own write, a second one does not."""
    host = Host()
    code = build(PULSING)
    host.start(code, permit_for(code, self_timed=800 * MS))
    while host.texts()[-1:] != [f"{CE}L"]:
        host.pass_time(MS)
    host.rig.receive(bytes(4), host.rig.t)
    host.pass_time(100 * MS)
    assert "VCC off 0" not in host.texts()
    second = host.rig.t
    host.send(keep_alive(host))  # more zeros right behind the first four would be the same abort
    host.rig.receive(bytes(4), second)
    assert host.end().outcome is Outcome.ABORTED
    assert host.trace[where(host, "VCC off 0")][0] - second < 20 * MS


def test_before_vcc_is_whole_lines_stay_low() -> None:
    """A sequence that ends in the probe range never lifts a line: there the safe pattern waits for no chip."""
    host = Host()
    code = build([ins(Op.RELEASE), ins(Op.RAIL, rail=0, step=3), ins(Op.RANGE, which=Range.PROBE),
                  ins(Op.WAIT, ticks=7 * MS), ins(Op.FAIL, why=Fail.SEAT_DATA_LOW)])
    assert host.run(code).outcome is Outcome.FAILED
    assert all((level or 0) == 0 for _, level in host.log.levels_of(PIN_CE))


def test_no_line_is_above_a_falling_vcc() -> None:
    """H11: H is released before VCC goes, and no pin but a raised one ever stands above the VCC pin."""
    host = Host()
    host.run(build([*RAISED, pulse(), ins(Op.END)]))
    level: dict[int, int] = {}
    for _, changed in host.log.groups:
        level.update({pin: mv or 0 for pin, mv in changed})
        plain = [mv for pin, mv in level.items() if pin not in (PIN_OE, 24)]
        assert max(plain) <= level.get(PIN_VCC, 0) + 300


def test_a_raised_position_that_does_not_fall_is_latched() -> None:
    """Past the limit the converter is shut down, VCC follows within 100 ms, and the fault names the position."""

    class Sticky(Board):
        def fall_ticks(self, position: int, mv: int) -> int:
            return 50 * MS

    host = Host(board=Sticky())
    end = host.run(build([*past_gate_slowly(), *raise_oe(), ins(Op.END)]))
    assert (end.outcome, end.fault["code"], end.fault["low"]) == (Outcome.TRIPPED, Fault.STILL_RAISED, OE)
    converter = where(host, "rail 0")
    cut = where(host, "VCC off 0")
    assert converter < cut
    assert host.trace[cut][0] - host.trace[converter][0] <= 101 * MS
    assert host.rig.hello().fault == Fault.STILL_RAISED


def past_gate_slowly() -> list[Item]:
    """Past the gate on a board whose raised positions fall slowly."""
    items = past_gate()
    for place, item in enumerate(items):
        if isinstance(item, Instruction) and item.op is Op.WAIT and item.args["ticks"] == 20 * US:
            items[place] = ins(Op.WAIT, ticks=60 * MS)
    return items


def test_vcc_that_does_not_fall_is_latched() -> None:
    """VCC above 0.5 V past its limit: the fault says so, and how high it still was."""
    host = Host(board=Board(vcc_off_ticks=80 * MS))
    end = host.run(build([*power_up(), ins(Op.END)]))
    assert (end.outcome, end.fault["code"]) == (Outcome.TRIPPED, Fault.STILL_POWERED)
    assert end.fault["got"] > end.fault["high"]


def test_a_power_cut_leaves_everything_to_the_hardware() -> None:
    """Lines to their pulls and switches open at once, fallen within 100 us, VCC cut 1 ms later; no answer comes."""
    host = in_pulse()
    begun, t = len(host.trace), host.rig.t
    heard = len(host.heard)
    host.rig.power_cut()
    host.pass_time(20 * MS)
    assert [text for _, text in host.trace[begun:]][:3] == ["reset", f"{OE} falls", f"{OE} stands 5000"]
    assert host.trace[begun + 2][0] - t <= 100 * US
    assert host.trace[where(host, "VCC off 0", after=begun)][0] == t + MS
    assert len(host.heard) == heard


def test_a_restart_counts_the_boot_and_knows_no_permit() -> None:
    """After a reset the boot number is one higher, a permit for the old boot is refused, and all lines are low."""
    host = in_pulse()
    host.rig.restart()
    assert host.rig.boot == 8
    assert host.texts()[-1] == "all L"
    answer = host.ask(Frame.PERMIT, permit=permit_for(b"", number=9).encode())
    assert (answer.fields["outcome"], answer.fields["data"][0]) == (Outcome.REFUSED, Fault.WRONG_BOOT)


@pytest.mark.parametrize("place", range(40))
def test_an_abort_at_any_time_is_safe(place: int) -> None:
    """Wherever the abort falls, the run ends aborted (or was done), with OE never raised after VCC has gone."""
    host = Host()
    host.start(build([*RAISED, pulse(2 * MS), ins(Op.SWITCHES, on=0), ins(Op.WAIT, ticks=20 * US), ins(Op.RELEASE),
                      ins(Op.LINES, lines=BOTH_LOW), ins(Op.END)]))
    host.pass_time(3 * MS + place * 3 * MS + place * 997)
    host.rig.receive(bytes(4), host.rig.t)
    end: End = host.end()
    assert end.outcome in (Outcome.ABORTED, Outcome.DONE)
    vcc = 0
    for _, changed in host.log.groups:
        for pin, mv in changed:
            vcc = (mv or 0) if pin == PIN_VCC else vcc
            assert not (pin == PIN_OE and (mv or 0) > 6_000 and vcc < 4_750)
    assert host.texts()[-2:] == ["all L", "rail 0"]
    assert host.socket.range == Range.OFF
