"""The proof on parts that are written over the bus: whole groups in their order, times, polls, the steps at the end."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from pulsewright.chip.model import Cycle, Definition, Protect, WriteStep
from pulsewright.wire.ops import ins
from pulsewright.wire.tables import Fail, Op
from tests.sequence.proof_bends import (
    Bend,
    bent,
    both,
    compiled,
    drop,
    kinds_of,
    opened,
    part_of,
    put,
    put_after,
    set_,
    told,
    wait_after,
)
from tests.sequence.proof_programs import MS, lines, measure

PAGES = part_of("28c256", "Xicor")
CE, OE, WE = 22, 24, 29
READ = lines(l22="L", l24="L")
ON = ((0x5555, 0xAA), (0x2AAA, 0x55), (0x5555, 0xA0))


@pytest.mark.parametrize("maker", ["", "Atmel", "Xicor", "Catalyst"])
def test_every_sequence_of_the_28c256_is_accepted(maker: str) -> None:
    """Pages loaded, polled and read back, protection on and off: whatever the row, nothing is found."""
    part = part_of("28c256", maker)
    for kind in kinds_of(part):
        assert bent(part, kind) == (), kind


def other_times(**times: dict[str, Any]) -> Definition:
    """The part, had its sheet other times."""
    timing = dict(PAGES.timing)
    for name, change in times.items():
        timing[name] = replace(timing[name], **change)
    return replace(PAGES, timing=timing)


US_PS = 10**6
SAMPLE_AT_ONCE = (ins(Op.LINES, lines=READ), ins(Op.WAIT, ticks=30), ins(Op.SAMPLE))

BENT: list[tuple[str, str, str, Bend, str]] = [
    # groups
    ("half a command", "H7", "protect on", set_(Op.BUS_WRITES, cycles=ON[:2]), "before a group of bus writes is"),
    ("another word", "H7", "protect on", set_(Op.BUS_WRITES, cycles=(*ON[:2], (0x5555, 0xA1))), "do not have here"),
    ("another address", "H7", "protect on", set_(Op.BUS_WRITES, cycles=(*ON[:2], (0x5554, 0xA0))), "do not have here"),
    ("cycles swapped", "H7", "protect on", set_(Op.BUS_WRITES, cycles=(ON[1], ON[0], ON[2])), "do not have here"),
    ("the command twice", "H7", "protect on", set_(Op.BUS_WRITES, cycles=ON * 2), "do not have here"),
    ("no command", "H7", "burn protected", drop(Op.BUS_WRITES), "a bus write that the steps do not have here"),
    ("a command too many", "H7", "burn", put(Op.END, -1, ins(Op.BUS_WRITES, strobe=WE, setup=17, width=18, hold=19,
                                                             cycles=ON)), "no step of the definition pulses line 29"),
    ("a pause in a load", "H7", "burn protected", put(Op.PAGE_LOAD, 0, measure(2, 563, 687)), "before a group of bus"),
    ("a look in a load", "H7", "burn protected", put(Op.PAGE_LOAD, 0, ins(Op.SAMPLE)), "before a group of bus writes"),
    ("before the gate", "H2", "protect on", put(Op.GATE, 0, ins(Op.LINES, lines=lines(l22="L")), ins(Op.WAIT, ticks=99),
        ins(Op.BUS_WRITES, strobe=WE, setup=17, width=18, hold=19, cycles=ON)), "a bus write before the gate"),
    # words of a load
    ("stale address", "H7", "burn", both(opened(Op.PAGE_LOAD), drop(Op.ADDRESS_WORD)), "do not have here"),
    ("stale data", "H7", "burn", both(opened(Op.PAGE_LOAD), drop(Op.DRIVE_WORD)), "do not have here"),
    ("a constant", "H7", "burn", both(opened(Op.PAGE_LOAD), put_after(Op.DRIVE_WORD, 0, ins(Op.DRIVE, word=0))),
     "do not have here"),
    ("a word left out", "H7", "burn", both(opened(Op.PAGE_LOAD), drop(Op.PULSE)), "the next word out of its turn"),
    ("no load", "H7", "burn", drop(Op.PAGE_LOAD), "allows the op poll here; wanted the next word"),
    # times
    ("a short strobe", "H7", "burn", set_(Op.PAGE_LOAD, width=17), "strobe width outside tWP"),
    ("an endless strobe", "H7", "burn", set_(Op.PAGE_LOAD, width=60 * MS), "strobe width outside tWP"),
    ("no set-up", "H7", "burn", set_(Op.PAGE_LOAD, setup=15), "set-up before the strobe"),
    ("no set-up of control lines", "H7", "protect on", both(
        drop(Op.WAIT, -3), set_(Op.BUS_WRITES, setup=0)), "set-up of control lines before the strobe"),
    ("no hold", "H7", "burn", set_(Op.PAGE_LOAD, hold=17), "hold after the pulse"),
    ("data let go at once", "H7", "burn", both(opened(Op.PAGE_LOAD), put_after(Op.PULSE, 0, ins(Op.RELEASE))),
     "data hold after the pulse"),
    ("lines moved at once", "H7", "protect on", set_(Op.BUS_WRITES, hold=1), "hold after the pulse"),
    ("a slow load", "H7", "burn", set_(Op.PAGE_LOAD, hold=1300), "the load gap may be over"),
    ("a slow command", "H7", "protect on", set_(Op.BUS_WRITES, hold=1300), "the load gap may be over"),
    ("a pause behind the command", "H7", "burn protected", set_(Op.WAIT, -14, ticks=1400), "the load gap may be over"),
    # the chip at work
    ("polled in the gap", "H7", "burn", wait_after(Op.PAGE_LOAD, 0, 1500), "before its load gap is over"),
    ("read while it writes", "H7", "protect on", put_after(Op.BUS_WRITES, 0, *SAMPLE_AT_ONCE), "may still be writing"),
    ("VCC moved while it writes", "H7", "protect on", put_after(Op.BUS_WRITES, 0, ins(Op.RAIL, rail=0, step=3)),
     "VCC is moved while the chip may still be writing"),
    ("no wait behind the poll", "H7", "burn", both(set_(Op.POLL, gap=60), wait_after(Op.POLL, 0, 100)),
     "sooner than the steps want it"),
    # polls
    ("not polled", "H7", "burn", drop(Op.POLL), "while the chip may still be writing"),
    ("poll not heeded", "H7", "burn", set_(Op.BRANCH, -2, when=2), "out of its turn"),
    ("another poll", "H7", "burn", set_(Op.POLL, kind=2), "another poll than of DQ7"),
    ("an impatient poll", "H7", "burn", set_(Op.POLL, exponent=8), "limit of the poll"),
    ("an endless poll", "H7", "burn", set_(Op.POLL, exponent=13), "limit of the poll"),
    ("polled too quickly", "H7", "burn", set_(Op.POLL, access=20), "sampled too soon after the enabling edge"),
    ("outputs stay off", "H7", "burn", set_(Op.POLL, enable=b"", disable=b""), "polled in another mode"),
    ("outputs stay on", "H7", "burn", set_(Op.POLL, disable=b""), "the outputs stay on"),
    ("looks that differ", "H7", "burn", set_(Op.POLL, disable=lines(l22="H", l24="H")), "not alike"),
    ("WE low between looks", "H7", "burn",
     set_(Op.POLL, enable=lines(l24="L", l29="H"), disable=lines(l24="H", l29="L")), "stand outside a pulse"),
    ("no pause", "H7", "burn", set_(Op.POLL, gap=3), "pause between two looks"),
    ("polled elsewhere", "H7", "burn", put(Op.POLL, 0, ins(Op.ADDRESS, at=0), ins(Op.WAIT, ticks=1600)),
     "at another address than the word's"),
    ("D driven", "H6", "burn", both(opened(Op.PAGE_LOAD), drop(Op.RELEASE, 1)), "while the rig drives D"),
    ("polled for nothing", "H7", "protect on", put(Op.END, 0, ins(Op.POLL, kind=0, enable=b"", access=9, disable=b"",
        gap=9, mantissa=157, exponent=10)), "allows the op poll"),
    # read-back, and the end
    ("not read back", "H7", "burn", set_(Op.BRANCH, -1, when=2), "out of its turn"),
    ("compared with a constant", "H7", "burn", lambda items: [
        ins(Op.COMPARE, word=0, mask=255) if getattr(one, "op", None) is Op.COMPARE_WORD else one for one in items],
     "not compared with what it must be"),
    ("not protected in the end", "H7", "burn protected", drop(Op.BUS_WRITES, 1), "in the middle of the steps"),
    ("failed without protection", "H5", "burn protected", put(Op.FAILING, 1, ins(Op.FAIL, why=Fail.PROGRAM)),
     "leaves out steps that end a method"),
    ("failed, half protected", "H7", "burn protected", set_(Op.BUS_WRITES, -1, cycles=ON[:2]), "before a group of bus"),
    ("done though failed", "H7", "burn protected", put(Op.FAIL, -1, ins(Op.END)),
     "in the middle of the steps"),
    ("failed for nothing", "H7", "burn", put(Op.END, 0, ins(Op.FAILING, why=Fail.POLL)), "where nothing has failed"),
    ("a standing write", "H7", "protect on", put(Op.BUS_WRITES, 0, ins(Op.LINES, lines=lines(l29="L"))),
     "stand outside a pulse"),
    ("D driven in standby", "H6", "protect on", put(Op.END, 0, ins(Op.DRIVE, word=0)), "in no mode of the definition"),
]  # fmt: skip


@pytest.mark.parametrize(("rule", "kind", "bend", "text"), [one[1:] for one in BENT], ids=[one[0] for one in BENT])
def test_a_bent_sequence_is_refused(rule: str, kind: str, bend: Bend, text: str) -> None:
    """The rule that the change breaks finds it and says what it is."""
    found = bent(PAGES, kind, bend)
    assert told(found, rule, text), list(map(str, found))


SHEETS: list[tuple[str, dict[str, dict[str, int]], str]] = [
    ("burn", {"tBLC": {"min_ps": 10 * US_PS}}, "time from load to load"),
    ("burn", {"tBLC": {"max_ps": 20 * US_PS}}, "the load gap may be over"),
    ("burn protected", {"tWPH2": {"min_ps": 4 * US_PS}}, "pause between a command and its load"),
    ("burn", {"tWPH": {"min_ps": 4 * US_PS}}, "pause before the strobe"),
    ("burn", {"tWP": {"max_ps": US_PS}}, "strobe width outside tWP"),
    ("burn", {"tWC": {"max_ps": 20_000 * US_PS}}, "limit of the poll"),
    ("burn protected", {"tOEH": {"min_ps": 200 * US_PS}}, "control hold after the pulse"),
]


@pytest.mark.parametrize(("kind", "times", "text"), SHEETS)
def test_another_sheet_refuses_what_this_one_lets_pass(kind: str, times: dict[str, Any], text: str) -> None:
    """Each time of a bus write is held to the definition: had the sheet another, the same bytes are refused."""
    found = bent(PAGES, kind, judged_by=other_times(**times))
    assert told(found, "H7", text), list(map(str, found))


def with_on(*steps: WriteStep) -> Definition:
    """The part, had it another command to switch its protection on."""
    return replace(PAGES, protect=Protect(steps, steps))


def cycles(*words: int) -> WriteStep:
    """A command of these words, at addresses in turn."""
    return WriteStep(tuple(Cycle((0x5555, 0x2AAA)[at % 2], word) for at, word in enumerate(words)))


def test_the_permanent_lock_is_refused_whatever_the_definition_says() -> None:
    """AA 55 80 AA 55 40 is no bus write of any definition, in one command or in two; with 20 in the end it may pass."""
    lock = (0xAA, 0x55, 0x80, 0xAA, 0x55, 0x40)
    whole, split = with_on(cycles(*lock)), with_on(cycles(*lock[:3]), cycles(*lock[3:]))
    assert told(bent(whole, "protect on"), "H7", "a permanent lock")
    assert told(bent(split, "protect on"), "H7", "a permanent lock")
    assert bent(with_on(cycles(*lock[:5], 0x20)), "protect on") == ()


def test_a_command_right_behind_another_is_refused() -> None:
    """After a command the chip may be writing: the next one waits for its longest time."""
    found = bent(with_on(cycles(0xAA, 0x55, 0xA0), cycles(0xAA, 0x55, 0xA0)), "protect on")
    assert told(found, "H7", "a bus write begins while the chip may still be writing")


@pytest.mark.parametrize(
    ("bend", "rule", "text"),
    [
        ({"self_timed": 160_000}, "H5", "self-timed wait"),
        ({"self_timed": 16_000_000}, "H5", "self-timed wait"),
        ({"header": {"block_words": 32}}, "H7", "from blocks of another size"),
        ({"header": {"block_words": 128}}, "H7", "from blocks of another size"),
        ({"header": {"passes": 2}}, "H5", "once for each pass"),
    ],
)
def test_permit_and_header_fit_the_pages(bend: dict[str, Any], rule: str, text: str) -> None:
    """The wait for the chip's own work covers write and load gap and is no eternity; a block is a page."""
    assert told(bent(PAGES, "burn", **bend), rule, text)


def test_a_part_without_id_is_written_at_5_v_without_a_word() -> None:
    """Identity none raises nothing: pages may be written, and the permit of the compiler says just that."""
    permit = compiled(PAGES, "burn").permit
    assert permit.identity.name == "NONE"
    assert permit.raised == ()
