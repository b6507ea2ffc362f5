"""What a part written over the bus looks like once it is loaded: pages, commands, writes, polls, protection."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.chip.check import check_file
from pulsewright.chip.load import load
from pulsewright.chip.model import (
    BusWrite,
    Cycle,
    Definition,
    EachStep,
    ExpectStep,
    LoadStep,
    ModeStep,
    PollStep,
    RepeatStep,
    WriteStep,
)
from pulsewright.errors import Where
from tests.chip.test_load import bare

GOOD = Path(__file__).parent / "good" / "peal32.toml"
TEXT = GOOD.read_text(encoding="utf-8")
UNLOCK = ((0x5555, 0xAA), (0x2AAA, 0x55))


def part(tmp_path: Path, *changes: tuple[str, str]) -> Definition:
    """The sound flash with texts replaced, loaded."""
    text = TEXT
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    path = tmp_path / "changed.toml"
    path.write_text(text, encoding="utf-8")
    return load(str(path))


def pairs(cycles: tuple[Cycle, ...]) -> tuple[tuple[int | None, int | None], ...]:
    """Cycles as (address, word)."""
    return tuple((cycle.at, cycle.word) for cycle in cycles)


def test_a_command_is_its_cycles() -> None:
    """Before the @ stands the word, behind it the address, both hex; each cycle knows its line."""
    loaded = load(str(GOOD))
    assert pairs(loaded.commands["protect_on"]) == (*UNLOCK, (0x5555, 0xA0))
    where = loaded.commands["chip_erase"][5].where
    assert where.key == "commands.chip_erase[5]"
    assert TEXT.splitlines()[where.line - 1].startswith("chip_erase")


def test_page_and_way_of_writing_are_the_tables() -> None:
    """[geometry] page and [write] arrive as they stand."""
    loaded = load(str(GOOD))
    assert loaded.page == 64
    assert loaded.write is not None
    assert loaded.write == BusWrite("write", "WE", "L", "tWP", "tBLC", "tSCE", loaded.write.where, begin_ps=120_000_000)


def test_identify_by_command_has_both_commands_and_waits_for_the_chip() -> None:
    """Enter, leave, the mode it reads in; a settling time that is the chip's own counts by its maximum."""
    loaded = load(str(GOOD))
    assert (loaded.identify, loaded.identify_mode) == ("command", "")
    command = loaded.identify_command
    assert command is not None
    assert pairs(command.enter) == (*UNLOCK, (0x5555, 0x90))
    assert pairs(command.leave) == (*UNLOCK, (0x5555, 0xF0))
    assert (command.mode, command.settle_ps) == ("read", 9_000_000)


def test_identify_may_write_its_cycles_out(tmp_path: Path) -> None:
    """A list stands where a command's name may stand, and a time where a parameter may."""
    loaded = part(tmp_path, ('"id_leave"', '["F0@0000"]'), ('settle  = "tIDA"', 'settle  = "3 us"'), ("tIDA =", "#"))
    assert loaded.identify_command is not None
    assert pairs(loaded.identify_command.leave) == ((0, 0xF0),)
    assert loaded.identify_command.settle_ps == 3_000_000


def test_steps_of_a_page() -> None:
    """Load, poll, read back word by word."""
    program = load(str(GOOD)).program
    assert program is not None
    assert (program.bits, program.unit, program.unloaded) == ("both", "page", "blank")
    [page] = program.steps
    assert isinstance(page, EachStep)
    load_step, poll, read, words, rest = page.steps
    assert isinstance(load_step, LoadStep)
    assert isinstance(poll, PollStep)
    assert (poll.bit, poll.mode, poll.timing) == ("DQ7", "read", "tWC")
    assert isinstance(words, EachStep)
    assert (page.unit, words.unit) == ("page", "word")
    assert isinstance(read, ModeStep)
    assert isinstance(rest, ModeStep)


def test_the_protected_way_takes_what_it_does_not_say_of_program() -> None:
    """[program.protected] inherits bits, unit and unloaded; its method's name becomes cycles, its end stays its own."""
    protected = load(str(GOOD)).protected
    assert protected is not None
    assert (protected.bits, protected.unit, protected.unloaded) == ("both", "page", "blank")
    [page] = protected.steps
    assert isinstance(page, EachStep)
    write = page.steps[0]
    assert isinstance(write, WriteStep)
    assert (write.command, pairs(write.cycles)) == ("protect_on", (*UNLOCK, (0x5555, 0xA0)))
    assert isinstance(protected.finally_[0], WriteStep)


def test_protection_on_and_off() -> None:
    """[protect] has two step lists."""
    protect = load(str(GOOD)).protect
    assert protect is not None
    first_on, first_off = protect.on[0], protect.off[0]
    assert isinstance(first_on, WriteStep)
    assert isinstance(first_off, WriteStep)
    assert (first_on.command, first_off.command) == ("protect_on", "protect_off")


def test_a_list_of_cycles_ends_with_the_image(tmp_path: Path) -> None:
    """The image's word has neither address nor word of its own."""
    new = (
        '{ each = "word", steps = [{ write = ["AA@5555", "image"] }, { mode = "standby" }] },\n]\n\n[program.protected]'
    )
    loaded = part(tmp_path, ("]\n\n[program.protected]", new))
    assert loaded.program is not None
    each = loaded.program.steps[1]
    assert isinstance(each, EachStep)
    write = each.steps[0]
    assert isinstance(write, WriteStep)
    assert (write.command, pairs(write.cycles)) == ("", ((0x5555, 0xAA), (None, None)))


def test_else_has_steps_of_its_own(tmp_path: Path) -> None:
    """Unequal runs the steps of `else`; an expect without it has none."""
    expect = '{ expect = "image", else = [{ wait = "2 us" }] }'
    loaded = part(tmp_path, ('{ expect = "image" }', expect))
    assert loaded.program is not None
    [page] = loaded.program.steps
    assert isinstance(page, EachStep)
    words = page.steps[3]
    assert isinstance(words, EachStep)
    look = words.steps[0]
    assert isinstance(look, ExpectStep)
    assert len(look.else_) == 1
    assert look.else_[0].where.key == "program.steps[0].steps[3].steps[0].else[0].wait"


def test_a_part_without_any_of_it_has_none_of_it() -> None:
    """The 27E512 has no page, no command, no way of writing on the bus and no protection."""
    loaded = load("27e512")
    assert (loaded.page, loaded.write, dict(loaded.commands)) == (0, None, {})
    assert (loaded.identify_command, loaded.protect, loaded.protected) == (None, None, None)


# ---- methods ----


def with_program(tmp_path: Path, call: str) -> Definition:
    """The flash programmed as `call` says, without a protected way."""
    start, end = TEXT.index("[program]"), TEXT.index("[erase]")
    path = tmp_path / "method.toml"
    path.write_text(f"{TEXT[:start]}[program]\nbits = 'both'\n{call}\n\n{TEXT[end:]}", encoding="utf-8")
    assert check_file(path) == []
    return load(str(path))


def test_page_write_is_the_steps_of_the_flash_and_a_wait(tmp_path: Path) -> None:
    """The shipped method gives the steps that are written out in the flash's own file, with its wait between."""
    call = 'unloaded = "blank"\nmethod = "page_write"\nparameters = { within = "tWC", recover = "2 us" }'
    by_method, written = with_program(tmp_path, call).program, load(str(GOOD)).program
    assert by_method is not None
    assert written is not None
    assert by_method.unit == "page"
    [page], [page_written] = by_method.steps, written.steps
    assert isinstance(page, EachStep)
    assert isinstance(page_written, EachStep)
    steps = bare(page.steps)
    assert "ps=2000000" in steps.pop(2)
    assert steps == bare(page_written.steps)


def test_byte_write_takes_the_cycles_of_the_part(tmp_path: Path) -> None:
    """Its cycles are a list with the image's word last; without any, that word alone is written."""
    call = 'method = "byte_write"\nparameters = { within = "tWC", recover = "0 ns"'
    unlocked = with_program(tmp_path, call + ', cycles = ["AA@5555", "55@2AAA", "A0@5555", "image"] }').program
    plain = with_program(tmp_path, call + " }").program
    for program, count in ((unlocked, 4), (plain, 1)):
        assert program is not None
        assert program.unit == "word"
        [each] = program.steps
        assert isinstance(each, EachStep)
        write, poll = each.steps[:2]
        assert isinstance(write, WriteStep)
        assert isinstance(poll, PollStep)
        assert len(write.cycles) == count
        assert pairs(write.cycles)[-1] == (None, None)


def test_the_maker_of_a_27c256_chooses_the_algorithm() -> None:
    """One row pulses and verifies word by word, another takes the blind first pass with the base's pin and pulse."""
    one, blind = load("27c256", maker="ST").program, load("27c256", maker="Atmel").program
    assert one is not None
    assert blind is not None
    loops = [step for step in one.steps if isinstance(step, EachStep)]
    blind_loops = [step for step in blind.steps if isinstance(step, EachStep)]
    assert (len(loops), len(blind_loops)) == (1, 2)
    [repeat] = loops[0].steps
    assert isinstance(repeat, RepeatStep)
    look = blind_loops[1].steps[1]
    assert isinstance(look, ExpectStep)
    [again] = look.else_
    assert isinstance(again, RepeatStep)
    assert (repeat.max, again.max) == (25, 10)
    assert any("pin='CE'" in text for text in bare(blind_loops[0].steps))


@pytest.mark.parametrize("key", ["raised", "to"])
def test_a_method_of_a_row_tells_parameters_it_does_not_know(tmp_path: Path, key: str) -> None:
    """What a row itself gives its method must be known; what it inherits from the base's method may be unknown."""
    base = 'method = "pulse_verify_separate"\nparameters = { pin = "CE", time = "tWP", max = 3, release = "tDH" }'
    own = 'program.method = "pulse_verify_shared"\nprogram.parameters = { max = 2, ' + f'{key} = "L" }}'
    start, end = TEXT.index("[program]"), TEXT.index("[erase]")
    row = '[[makers]]\nmaker = "Belfry"\nid = [{ at = 0x0000, is = 0x20 }]\n'
    path = tmp_path / "row.toml"
    path.write_text(f"{TEXT[:start]}{row}{own}\n\n[program]\n{base}\n\n{TEXT[end:]}", encoding="utf-8")
    unknown = [problem for problem in check_file(path) if problem.what == "unknown parameter"]
    assert [problem.found for problem in unknown] == [key]
    assert unknown[0].where == Where(str(path), unknown[0].where.line, f"makers[1].program.parameters.{key}")
