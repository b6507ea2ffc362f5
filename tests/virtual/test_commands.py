"""Frames at the rig: greetings, one answer each, indexes, permits, heartbeats, blocks, rates, counters."""

from __future__ import annotations

from typing import Any

import pytest

from pulsewright.virtual.board import Board
from pulsewright.virtual.contacts import NEVER
from pulsewright.virtual.serial_line import SerialLine, byte_ticks
from pulsewright.wire.fields import unpack
from pulsewright.wire.frames import Message, decode_hello, encode_frame
from pulsewright.wire.ops import Instruction, Label, ins
from pulsewright.wire.tables import BLOBS, FINGERPRINT, HELLO_REQUEST, OP_COST, Fault, Flow, Frame, Op, Outcome, State
from tests.virtual.kit import CE, MS, OE, Host, L, build, code_of, end_of, lines, past_gate, permit_for, power_up

END = ins(Op.END)
READING = build([*past_gate(), lines((CE, L), (OE, L)), ins(Op.READ_RUN, wait=16), END], flow=Flow.READ, words=1_000)
IDLING = build([ins(Op.WAIT, ticks=1_100 * MS), END])


def status(host: Host) -> dict[str, Any]:
    """State and counters."""
    data = host.ask(Frame.STATUS).fields["data"]
    return unpack([*BLOBS["status"], *BLOBS["fault"]], data)


def reading() -> Host:
    """A host whose rig waits for its first block."""
    host = Host()
    host.start(READING)
    host.pass_time(150 * MS)
    return host


# ---- greeting, tables, rate ---------------------------------------------------------------------------------------


def test_a_greeting_is_answered_with_32_bytes_at_any_time() -> None:
    """Idle, and in the middle of a run: layout, fingerprint, boot number, receive window."""
    for host in (Host(), reading()):
        host.rig.take_output()
        host.rig.receive(HELLO_REQUEST, host.rig.t)
        host.rig.run_to(host.rig.t + 20 * MS)
        hello = decode_hello(host.rig.take_output()[-32:])
        assert (hello.fingerprint, hello.boot, hello.window_blocks, hello.fault) == (FINGERPRINT, 7, 4, 0)


def test_a_greeting_is_no_damage() -> None:
    """The counters stay at zero."""
    host = Host()
    host.rig.receive(HELLO_REQUEST, 0)
    host.rig.run_to(20 * MS)
    host.rig.take_output()
    assert status(host)["damaged"] == 0


def test_describe_gives_the_boards_tables() -> None:
    """Page 0 the table, page 1 nominal counts, page 2 ceilings, page 3 costs; there is no page 4."""
    host = Host()
    table = unpack(BLOBS["describe"], host.ask(Frame.DESCRIBE, page=0).fields["data"])
    assert (tuple(table["switches"]), tuple(table["vcc_switches"])) == ((1, 3, 24, 25, 26), (28, 30, 32, 1, 3, 25))
    assert (table["program_bytes"], table["block_bytes"], table["window_blocks"]) == (1_024, 512, 4)
    counts = host.ask(Frame.DESCRIBE, page=1).fields["data"]
    assert int.from_bytes(counts[6:8], "little") == 5_000 * 1_024 // 8_192
    assert int.from_bytes(counts[16 + 10 : 16 + 12], "little") == 483  # 14.0 V of 29.696 V
    assert len(host.ask(Frame.DESCRIBE, page=2).fields["data"]) == 10
    costs = host.ask(Frame.DESCRIBE, page=3).fields["data"]
    assert dict(zip(costs[::2], costs[1::2], strict=True))[Op.WAIT] == OP_COST[Op.WAIT]
    assert code_of(host.ask(Frame.DESCRIBE, page=4)) == Fault.BAD_FRAME


def test_a_new_rate_holds_from_behind_its_answer() -> None:
    """The answer leaves at the old rate; what follows goes at the new one; both ends count ten bits a byte."""
    host = Host()
    host.ask(Frame.RATE, baud=1_000_000)
    host.pass_time(2 * MS)
    assert host.rig.baud == 1_000_000
    begun = host.rig.t
    assert host.ask(Frame.ECHO, data=bytes(100)).fields["data"] == bytes(100)
    assert 2 * 100 * byte_ticks(1_000_000) < host.rig.t - begun < 5 * MS


def test_a_rate_that_nothing_follows_falls_back() -> None:
    """After 500 ms without a valid frame the rate is that of greetings again."""
    host = Host()
    host.ask(Frame.RATE, baud=500_000)
    host.pass_time(499 * MS)
    assert host.rig.baud == 500_000
    host.pass_time(3 * MS)
    assert host.rig.baud == 38_400


def test_bytes_at_another_rate_are_noise() -> None:
    """A host that stays at the old rate is not understood, until the rig falls back to it."""
    host = Host()
    host.ask(Frame.RATE, baud=500_000)
    host.pass_time(MS)
    host.rig.host_baud = 38_400
    host.send(Message(Frame.STATUS, 0, 9))
    host.rig.run_to(host.rig.t + 600 * MS)
    assert host.rig.take_output() == b""
    host.rig.receive(b"\0", host.rig.t)  # ends the noise
    host.index = 20
    assert status(host)["state"] == State.IDLE


def test_bytes_handed_over_at_once_follow_one_another() -> None:
    """Two frames put on the line at the same tick arrive one behind the other, ten bits a byte."""
    line = SerialLine()
    line.receive(b"ab\0", 100)
    line.receive(b"c\0", 100)
    arrived = []
    while line.arrives_at < NEVER:
        arrived.append((line.arrives_at, line.take()))
    ticks = byte_ticks(38_400)
    assert arrived == [(100 + 3 * ticks, b"ab\0"), (100 + 5 * ticks, b"c\0")]


def test_frames_under_no_permit_do_not_feed_the_dead_man() -> None:
    """A keep-alive with permit 0 is a valid frame, but not one of this permit."""
    host = Host()
    host.start(build([*power_up(), ins(Op.WAIT, ticks=900 * MS), END]))
    host.keep_alive = False
    for _ in range(30):
        host.send(Message(Frame.KEEP_ALIVE, 0, host.index))
        host.pass_time(25 * MS)
    assert host.end().fault["code"] == Fault.DEAD_MAN


@pytest.mark.parametrize("baud", [0, 1_199, 2_000_001])
def test_a_rate_that_the_board_cannot_make_is_refused(baud: int) -> None:
    """Below 1200 and above the top rate."""
    host = Host()
    assert host.ask(Frame.RATE, baud=baud).fields["outcome"] == Outcome.REFUSED
    assert host.rig.baud == 38_400


# ---- one answer each ----------------------------------------------------------------------------------------------


def test_an_accepted_command_is_acknowledged_at_once() -> None:
    """A heartbeat with the command's index comes before its answer."""
    host = Host()
    host.ask(Frame.STATUS)
    assert [(m.kind, m.index) for m in host.heard] == [(Frame.HEARTBEAT, 1), (Frame.ANSWER, 1)]


def test_a_running_command_beats_every_250_ms() -> None:
    """The first beat at once, then four a second; the same index again is answered with a beat, not a second run."""
    host = Host()
    host.start(IDLING)
    host.pass_time(900 * MS)
    beats = [at for at, m in zip(host.heard_at, host.heard, strict=True)
             if m.kind is Frame.HEARTBEAT and m.index == host.index]
    assert len(beats) == 4
    assert {beats[n + 1] - beats[n] for n in (1, 2)} == {250 * MS}
    assert host.heard[-1].fields["state"] == State.RUNNING
    host.send(Message(Frame.RUN, host.number, host.index))
    host.pass_time(20 * MS)
    again = [m for m in host.heard if m.kind is Frame.HEARTBEAT and m.index == host.index]
    assert len(again) == 5
    assert host.end().outcome is Outcome.DONE
    assert status(host)["repeated"] == 1


def test_a_command_repeated_after_its_end_gets_the_kept_answer() -> None:
    """The same index again brings the same bytes, and the work is not done twice."""
    host = Host()
    host.seal(build([END]))
    host.index += 1
    run = Message(Frame.RUN, host.number, host.index)
    host.send(run)
    first = host.answer(host.index)
    groups = len(host.trace)
    host.send(run)
    host.pass_time(100 * MS)
    answers = [m for m in host.heard if m.kind is Frame.ANSWER and m.index == host.index]
    assert answers == [first, first]
    assert len(host.trace) == groups


def test_a_late_command_is_dropped() -> None:
    """A frame with an index that was passed already does nothing and is counted."""
    host = Host()
    for _ in range(5):
        host.ask(Frame.STATUS)
    heard = len(host.heard)
    host.send(Message(Frame.CLEAR, 0, 3))
    assert host.pass_time(50 * MS) == []
    assert len(host.heard) == heard
    assert status(host)["dropped"] == 1


def test_a_greeting_begins_the_indexes_anew() -> None:
    """Another session may begin at any index, even that of the answer that is kept."""
    host = Host()
    host.ask(Frame.ECHO, data=b"one")
    host.rig.receive(HELLO_REQUEST, host.rig.t)
    host.rig.run_to(host.rig.t + 20 * MS)
    host.rig.take_output()
    host.index = 0
    host.heard.clear()
    assert host.ask(Frame.ECHO, data=b"two").fields["data"] == b"two"


def test_a_greeting_while_a_sequence_runs_begins_the_indexes_anew_behind_it() -> None:
    """The next session may come while the last one's sequence runs, and its indexes may be lower."""
    host = Host()
    for _ in range(3):
        host.ask(Frame.STATUS)
    host.start(READING)
    host.pass_time(150 * MS)
    host.rig.receive(HELLO_REQUEST, host.rig.t)
    host.rig.run_to(host.rig.t + 600 * MS)  # past the dead-man
    assert host.rig.state is State.SAFE
    host.rig.take_output()
    host.index = 0
    host.heard.clear()
    assert host.ask(Frame.ECHO, data=b"two").fields["data"] == b"two"


def test_while_one_runs_other_commands_are_dropped() -> None:
    """Stop and wait: only keep-alives, blocks and the abort are heard."""
    host = Host()
    host.start(IDLING)
    host.pass_time(30 * MS)
    host.send(Message(Frame.STATUS, host.number, host.index + 1))
    assert [m for m in host.pass_time(100 * MS) if m.kind is Frame.ANSWER] == []
    assert host.end().outcome is Outcome.DONE


def test_damage_is_counted_and_answered_by_silence() -> None:
    """A frame with a bit turned is not answered."""
    host = Host()
    frame = bytearray(encode_frame(Message(Frame.STATUS, 0, 1)))
    frame[3] ^= 4
    host.rig.receive(bytes(frame), 0)
    assert host.pass_time(50 * MS) == []
    assert status(host)["damaged"] == 1


# ---- permit, load, seal -------------------------------------------------------------------------------------------


def test_a_permit_of_another_boot_is_refused() -> None:
    """The permit names the boot it was made for."""
    host = Host()
    assert code_of(host.ask(Frame.PERMIT, permit=permit_for(b"", boot=6).encode())) == Fault.WRONG_BOOT


def test_a_permit_number_is_used_once() -> None:
    """A number that was in force in this boot does not come back; 0 is none."""
    host = Host()
    assert host.ask(Frame.PERMIT, permit=permit_for(b"").encode()).fields["outcome"] == Outcome.DONE
    for number in (1, 0):
        answer = host.ask(Frame.PERMIT, permit=permit_for(b"", number=number).encode())
        assert code_of(answer) == Fault.WRONG_PERMIT


def test_a_permit_that_does_not_decode_is_refused() -> None:
    """A byte too few, and an identity that does not exist."""
    host = Host()
    good = permit_for(b"").encode()
    assert code_of(host.ask(Frame.PERMIT, permit=good[:-1])) == Fault.BAD_FRAME
    assert code_of(host.ask(Frame.PERMIT, permit=good[:6] + b"\x09" + good[7:])) == Fault.BAD_FRAME


def test_a_permit_that_contradicts_the_board_is_refused() -> None:
    """A ceiling above the board's."""
    host = Host()
    assert code_of(host.ask(Frame.PERMIT, permit=permit_for(b"", raised=((4, 1_000),)).encode())) == Fault.BAD_PERMIT


def test_commands_in_the_wrong_state_are_refused() -> None:
    """Load and seal want a permit, run wants a seal, and a sealed program takes no more bytes and runs once."""
    host = Host()
    assert code_of(host.ask(Frame.LOAD, offset=0, code=b"x")) == Fault.WRONG_STATE
    assert code_of(host.ask(Frame.SEAL)) == Fault.WRONG_STATE
    code = build([END])
    host.ask(Frame.PERMIT, permit=permit_for(code).encode())
    assert code_of(host.ask(Frame.RUN, under=1)) == Fault.WRONG_STATE
    host.ask(Frame.LOAD, offset=0, code=code)
    assert host.ask(Frame.SEAL).fields["outcome"] == Outcome.DONE
    assert code_of(host.ask(Frame.LOAD, offset=0, code=code)) == Fault.WRONG_STATE
    assert end_of(host.ask(Frame.RUN, under=1)).outcome is Outcome.DONE
    assert code_of(host.ask(Frame.RUN, under=1)) == Fault.WRONG_STATE
    assert host.rig.state is State.SAFE


def test_a_program_is_loaded_whole_and_inside_the_memory() -> None:
    """A hole and a program past 1024 bytes are refused."""
    host = Host()
    host.ask(Frame.PERMIT, permit=permit_for(b"").encode())
    assert code_of(host.ask(Frame.LOAD, offset=4, code=b"x")) == Fault.BAD_FRAME
    for at in range(0, 1_000, 200):
        host.ask(Frame.LOAD, offset=at, code=bytes(200))
    assert code_of(host.ask(Frame.LOAD, offset=1_000, code=bytes(25))) == Fault.TOO_LONG


def test_a_seal_names_the_op_it_refuses() -> None:
    """Code, op and byte offset come with the refusal, and nothing can be run."""
    code = build([ins(Op.RELEASE), ins(Op.PULSE, line=CE, width=0, max=5), END])
    host = Host()
    fault = unpack(BLOBS["fault"], host.seal(code).fields["data"])
    assert (fault["code"], fault["op"], fault["pc"]) == (Fault.PULSE_WITHOUT_END, Op.PULSE, len(code) - 11)
    assert code_of(host.ask(Frame.RUN, under=1)) == Fault.WRONG_STATE


def test_frames_of_another_permit_do_nothing() -> None:
    """They are dropped and counted, and do not feed the dead-man."""
    host = Host()
    host.seal(build([*power_up(), ins(Op.WAIT, ticks=900 * MS), END]))
    host.index += 1
    host.send(Message(Frame.RUN, host.number, host.index))
    host.keep_alive = False
    for _ in range(30):
        host.send(Message(Frame.KEEP_ALIVE, host.number + 1, host.index))
        host.pass_time(25 * MS)
    assert host.end().fault["code"] == Fault.DEAD_MAN
    assert status(host)["dropped"] >= 20


def test_a_run_under_another_permit_does_not_start() -> None:
    """A run command with the number of an earlier permit is dropped."""
    host = Host()
    host.seal(build([END]))
    host.send(Message(Frame.RUN, 9, host.index + 1))
    assert host.pass_time(100 * MS) == []
    assert host.rig.state is State.SEALED


def test_the_state_is_told_with_the_latched_fault() -> None:
    """Status after a trip: state safe, gate shut, the fault with its place."""
    items: list[Instruction | Label] = [*power_up(), ins(Op.DRIVE, word=1), END]
    host = Host(board=Board())
    end = host.run(build(items))
    told = status(host)
    assert (told["state"], told["gate"], told["boot"]) == (State.SAFE, 0, 7)
    assert (told["code"], told["pc"]) == (Fault.GATE_SHUT, end.fault["pc"])
