"""Fault numbers become what they mean at the bench; the sequences are really compiled, only the answers are made up."""

from __future__ import annotations

from typing import Any

import pytest

from pulsewright.chip.load import load
from pulsewright.errors import (
    ChipFault,
    Difference,
    IdentityRefused,
    Interrupted,
    PulsewrightError,
    RigFault,
    SeatingRefused,
    Tripped,
    VouchNeeded,
)
from pulsewright.jobs.story import readings_of, volts
from pulsewright.jobs.translate import IMITATION, translate
from pulsewright.link.results import Counters, RunResult, Trouble
from pulsewright.rig.file import load_rig
from pulsewright.sequence.compile import compile_blank, compile_burn, compile_erase, compile_identify
from pulsewright.sequence.types import Sequence
from pulsewright.wire.ops import decode_program
from pulsewright.wire.tables import Channel, Fail, Fault, Op, Outcome

DEFINITION, RIG = load("27e512"), load_rig()
LAST = DEFINITION.words - 1


def result(outcome: Outcome, code: Fault | None = None, **numbers: Any) -> RunResult:
    """A result as a session would give it."""
    fields: dict[str, Any] = {"id_bytes": b"", "readings": ()}
    fields |= {key: numbers.pop(key) for key in tuple(fields) if key in numbers}
    trouble = Trouble(int(code), code.name.lower(), **numbers) if code is not None else None
    counters = Counters(0, 0, 0, None, 1000)
    return RunResult(outcome, trouble, None, data=b"", blocks=(), counters=counters, **fields)


def error_of(sequence: Sequence, answer: RunResult, want: bytes | None = None) -> PulsewrightError:
    """The error an answer stands for."""
    error = translate(answer, sequence, DEFINITION, RIG, want)
    assert error is not None
    return error


def failed(sequence: Sequence, why: Fail, **numbers: Any) -> PulsewrightError:
    """The error of a `fail` op, at the first such op of the sequence."""
    ops = decode_program(sequence.code).code
    pc = next((at for at, one in ops if one.op is Op.FAIL and one.args["why"] == why), ops[-1][0])
    return error_of(sequence, result(Outcome.FAILED, Fault.FAILED, got=int(why), pc=pc, **numbers))


def measure_at(sequence: Sequence, part: str, channel: int) -> int:
    """The offset of the first measure of a channel in a part."""
    for at, one in decode_program(sequence.code).code:
        origin = sequence.origin_at(at)
        if one.op is Op.MEASURE and one.args["channel"] == channel and origin is not None and origin.part == part:
            return at
    raise AssertionError(f"no measure of {channel} in {part}")


IDENTIFY = compile_identify(DEFINITION, RIG)


def test_done_is_no_error() -> None:
    """A sequence that ended well has nothing to say."""
    assert translate(result(Outcome.DONE), IDENTIFY, DEFINITION, RIG) is None


@pytest.mark.parametrize(
    ("why", "numbers", "says"),
    [
        (Fail.SEAT_STANDS_UP, {"sample": 0x08}, "D3 (pin 15)"),
        (Fail.SEAT_DATA_LOW, {"sample": 0xFE}, "D0 (pin 11)"),
        (Fail.SEAT_DATA_HIGH, {"sample": 0x80}, "D7 (pin 19)"),
        (Fail.SEAT_FLOATING, {"sample": 0x00, "kept": 0xFF}, "no chip answers"),
        (Fail.SEAT_FLOATING, {"sample": 0x20, "kept": 0x28}, "D3 (pin 15)"),
        (Fail.SEAT_OTHER_POWER, {}, "DIP-28"),
    ],
)
def test_a_failed_seating_names_the_contact(why: Fail, numbers: dict[str, int], says: str) -> None:
    """Each look of the seating check refuses with exit 3 and names what it saw by pin."""
    error = failed(IDENTIFY, why, **numbers)
    assert isinstance(error, SeatingRefused)
    assert error.exit_code == 3
    assert says in "\n".join(error.lines())
    assert "nothing was raised" in error.did


def test_a_measure_that_fails_while_seating_is_a_refusal_in_volts() -> None:
    """VCC pulled down through the probe resistor: wanted and got are volts by the rig's converter."""
    pc = measure_at(IDENTIFY, "seating", Channel.SOCKET_VCC)
    error = error_of(IDENTIFY, result(Outcome.TRIPPED, Fault.MEASURED_OUTSIDE, pc=pc, got=75, low=188, high=656))
    assert isinstance(error, SeatingRefused)
    assert error.got == "0.6 V (count 75)"
    assert error.wanted == "1.504 V to 5.248 V"
    assert error.step.startswith("seating: ")


def test_the_same_measure_outside_seating_is_a_trip() -> None:
    """The raised rail out of its window in the gate is exit 5 and named."""
    pc = measure_at(IDENTIFY, "gate", Channel.RAISED_RAIL)
    error = error_of(
        IDENTIFY, result(Outcome.TRIPPED, Fault.MEASURED_OUTSIDE, pc=pc, got=345, low=397, high=431, tick=16_000_000)
    )
    assert isinstance(error, Tripped)
    assert error.exit_code == 5
    assert "raised rail" in error.what
    assert error.got == "10.005 V (count 345)"
    assert "after 1 s on the rig's clock" in error.facts


def test_a_wrong_id_shows_both() -> None:
    """The bytes read and the bytes wanted stand side by side, with their places and maker."""
    error = error_of(IDENTIFY, result(Outcome.TRIPPED, Fault.WRONG_ID, id_bytes=b"\x01\x02"))
    assert isinstance(error, IdentityRefused)
    assert error.got == "01 at 0000, 02 at 0001"
    assert error.wanted == "DA at 0000 (manufacturer), 08 at 0001 (device): maker row DA"


def test_no_id_mode_says_what_has_the_same_look() -> None:
    """The refusal says that an image which imitates the ID looks the same."""
    error = error_of(IDENTIFY, result(Outcome.TRIPPED, Fault.NO_ID_MODE, id_bytes=b"\xda\x08"))
    assert isinstance(error, IdentityRefused)
    assert IMITATION in error.facts


def test_an_erase_that_fails_names_the_first_word() -> None:
    """20 of 20 pulses, the address, what it reads, and the low VCC of the erase verify."""
    error = failed(compile_erase(DEFINITION, RIG), Fail.ERASE, address=0x1234, sample=0x7F)
    assert isinstance(error, ChipFault)
    assert error.exit_code == 4
    assert "20 of 20 pulses" in error.what
    assert "word 1234 reads 7F" in error.got
    assert error.wanted == "every word FF at VCC 3.75 V"


def test_a_word_that_does_not_program_shows_wanted_got_and_tries() -> None:
    """The image's word, the chip's, and 25 of 25."""
    sequence = compile_burn(DEFINITION, RIG, 0, LAST, "")
    want = bytes(0x2000) + b"\x5a" + bytes(LAST - 0x2000)
    answer = result(Outcome.FAILED, Fault.FAILED, got=int(Fail.PROGRAM), pc=414, address=0x2000, sample=0x5B)
    error = error_of(sequence, answer, want)
    assert isinstance(error, ChipFault)
    assert "word 2000" in error.what
    assert "25 of 25" in error.what
    assert (error.wanted, error.got) == ("5A", "5B")


def test_not_blank_is_a_difference() -> None:
    """Exit 1, with the first word that is not blank."""
    error = failed(compile_blank(DEFINITION, RIG, 0, LAST), Fail.NOT_BLANK, address=3, sample=0)
    assert isinstance(error, Difference)
    assert error.what == "not blank: word 0003 reads 00"


def test_a_chip_that_is_not_done_in_time_is_a_chip_fault() -> None:
    """A poll that runs out is exit 4."""
    assert isinstance(failed(IDENTIFY, Fail.POLL, address=5), ChipFault)


def test_an_abort_says_which_word_is_undefined() -> None:
    """Only where a pulse was cut."""
    cut = error_of(IDENTIFY, result(Outcome.ABORTED, Fault.ABORTED, address=7, pulsing=True))
    whole = error_of(IDENTIFY, result(Outcome.ABORTED, Fault.ABORTED, address=7))
    assert isinstance(cut, Interrupted)
    assert cut.exit_code == 130
    assert cut.facts == ("a pulse was cut: word 0007 undefined",)
    assert whole.facts == ()


def test_a_cut_erase_pulse_leaves_every_word_undefined() -> None:
    """The address an erase pulse is given at is no word of its own; the rail that failed is named once."""
    sequence = compile_erase(DEFINITION, RIG)
    tripped = error_of(sequence, result(Outcome.TRIPPED, Fault.RAISED_OUTSIDE, address=0x200, pulsing=True))
    assert "a pulse was cut: every word undefined" in tripped.facts
    assert tripped.what.count("raised rail") == 1
    stopped = error_of(sequence, result(Outcome.ABORTED, Fault.ABORTED, address=0x200, pulsing=True))
    assert stopped.facts == ("a pulse was cut: every word undefined",)


@pytest.mark.parametrize("code", [code for code in Fault if Fault.DEAD_MAN <= code <= Fault.NOT_MEASURED])
def test_every_trip_of_the_wire_is_told(code: Fault) -> None:
    """Each reason to trip becomes a refusal or a trip with words of its own, never a traceback."""
    error = error_of(IDENTIFY, result(Outcome.TRIPPED, code, pc=10_000))
    assert isinstance(error, Tripped | IdentityRefused)
    assert code.name.lower() not in error.what


def test_a_trip_by_silence_is_no_matter_of_supply_or_chip() -> None:
    """The dead-man speaks of the way to the rig; any other trip of the rails."""
    silent = error_of(IDENTIFY, result(Outcome.TRIPPED, Fault.DEAD_MAN))
    assert "cable" in silent.hint
    assert "supply" not in silent.hint
    assert "supply" in error_of(IDENTIFY, result(Outcome.TRIPPED, Fault.VCC_OUTSIDE)).hint


def test_a_refusal_and_an_answer_without_reason_are_rig_faults() -> None:
    """What the rig would not do is exit 5 and named; so is an end without a reason."""
    refused = error_of(IDENTIFY, result(Outcome.REFUSED, Fault.BAD_CRC))
    assert type(refused) is RigFault
    assert "bad_crc" in refused.what
    assert type(error_of(IDENTIFY, result(Outcome.TRIPPED))) is RigFault
    assert type(error_of(IDENTIFY, result(Outcome.FAILED, Fault.FAILED, got=99))) is RigFault


def test_readings_become_millivolts_with_their_step() -> None:
    """A reading is told by the rail or position it was taken of, and what it was taken for."""
    pc = measure_at(IDENTIFY, "gate", Channel.POSITION + 4)
    rows = readings_of(result(Outcome.DONE, readings=((pc, 410), (9999, 1))), IDENTIFY, RIG)
    assert rows == [{"what": "position 26", "step": "gate: mode identify", "mv": 11890, "count": 410}]


def test_the_end_of_the_converter_is_said() -> None:
    """A full-scale count stands for at least its level; without a converter the count itself is shown."""
    assert volts(RIG.socket_vcc, 1023) == "at least 8.184 V"
    assert volts(None, 7) == "count 7"


def test_a_word_without_the_button_is_refused() -> None:
    """H9: a gate op that trips because the gate stays shut means that the button is not held: exit 3, not a trip."""
    gate = next(at for at, one in decode_program(IDENTIFY.code).code if one.op is Op.GATE)
    error = error_of(IDENTIFY, result(Outcome.TRIPPED, Fault.GATE_SHUT, pc=gate))
    assert isinstance(error, VouchNeeded)
    assert error.exit_code == 3
    assert "button" in error.what
    assert isinstance(error_of(IDENTIFY, result(Outcome.TRIPPED, Fault.GATE_SHUT)), Tripped)
