"""Several maker rows: what is tightened until one is chosen, what no limit settles, and what needs --maker."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.chip.check import check_file
from pulsewright.chip.load import load, maker_needed
from pulsewright.chip.model import Definition, EachStep, Step, WaitStep
from pulsewright.chip.steps import all_steps, steps_of

GOOD = Path(__file__).parent / "good" / "peal32.toml"
TEXT = GOOD.read_text(encoding="utf-8")
WITH_ID = '[[makers]]\nmaker = "Belfry"\nid = [{ at = 0x0000, is = 0x20 }, { at = 0x0001, is = 0x5C }]\n'
NO_ID = '[[makers]]\nmaker = "Belfry"\n'
FIRST = TEXT[TEXT.index("[[makers]]") : TEXT.index("[program]")]
IDENTIFY = TEXT[TEXT.index("[identify]") : TEXT.index("[[makers]]")]
NOTHING_TO_READ = '[identify]\nkind = "none"\n\n[[makers]]\nmaker = "Tower"\n\n'


def saved(folder: Path, text: str) -> Path:
    """A file of its own."""
    path = folder / "rows.toml"
    path.write_text(text, encoding="utf-8")
    return path


def with_id(folder: Path, row: str) -> Path:
    """The flash with a second row that has an ID."""
    return saved(folder, TEXT.replace("[program]", f"{WITH_ID}{row}\n\n[program]", 1))


def without_id(folder: Path, row: str, first: str = "") -> Path:
    """The same part as one that cannot be identified, with two rows."""
    text = TEXT.replace(IDENTIFY + FIRST, f"{NOTHING_TO_READ}{first}\n\n{NO_ID}{row}\n\n")
    return saved(folder, text.replace('"flash"', '"eeprom"').replace("tIDA =", "tDV ="))


def waits(steps: tuple[Step, ...], name: str) -> list[int]:
    """How long the waits for a parameter are, in picoseconds."""
    return [step.ps for step in all_steps(steps) if isinstance(step, WaitStep) and step.timing == name]


def program_of(part: Definition) -> tuple[Step, ...]:
    """The program steps."""
    assert part.program is not None
    return part.program.steps


# ---- tightened ----


def test_the_load_window_is_what_all_rows_allow(tmp_path: Path) -> None:
    """Of a load gap the largest minimum and the smallest maximum; of the part's own work the slowest."""
    path = without_id(tmp_path, 'timing.tBLC = { min = "1 us", max = "150 us" }\ntiming.tWC.max = "10 ms"')
    part = load(str(path))
    gap, busy = part.timing["tBLC"], part.timing["tWC"]
    assert (gap.min_ps, gap.max_ps) == (1_000_000, 120_000_000)
    assert busy.max_ps == 10_000_000_000
    assert maker_needed(part) == []


def test_waits_are_as_long_as_the_slowest_row_wants(tmp_path: Path) -> None:
    """Steps that wait for a parameter wait for its tightest form, in every list, though the first row is quick."""
    path = without_id(tmp_path, 'timing.tWC.max = "10 ms"')
    part, quick = load(str(path)), load(str(path), maker="Tower")
    assert part.protect is not None
    assert part.protected is not None
    assert waits(part.protect.on, "tWC") == waits(part.protect.off, "tWC") == [10_000_000_000]
    assert waits(part.protected.finally_, "tWC") == [10_000_000_000]
    assert [waits((step,), "tWC") for step in steps_of(quick) if waits((step,), "tWC")] == [[8_000_000_000]] * 3


def test_a_parameter_that_only_has_a_maximum_is_the_chips_own_where_steps_wait_for_it(tmp_path: Path) -> None:
    """A wait for `max` alone waits for the slowest row, whatever the parameter is called."""
    text = TEXT.replace("tSCE = ", 'tXX  = { max = "5 us" }\ntSCE = ').replace(
        '{ mode = "read" },', '{ wait = "tXX" },\n        { mode = "read" },', 1
    )
    row = WITH_ID + 'timing.tXX.max = "9 us"'
    part = load(str(saved(tmp_path, text.replace("[program]", f"{row}\n\n[program]", 1))))
    assert waits(program_of(part), "tXX") == [9_000_000]


def test_a_poll_gives_the_slowest_row_its_time(tmp_path: Path) -> None:
    """The maximum of a poll is the chip's own, whatever it is called: the slowest row counts."""
    path = with_id(tmp_path, 'timing.tSCE.max = "30 ms"')
    assert load(str(path)).timing["tSCE"].max_ps == 30_000_000_000
    text = TEXT.replace('within = "tWC" },', 'within = "tPP" },', 1).replace(
        "tSCE = ", 'tPP  = { max = "5 ms" }\ntSCE = ', 1
    )
    other = saved(tmp_path, text.replace("[program]", f'{WITH_ID}timing.tPP.max = "9 ms"\n\n[program]', 1))
    assert load(str(other)).timing["tPP"].max_ps == 9_000_000_000


def test_both_commands_are_given_the_slowest_time_to_settle(tmp_path: Path) -> None:
    """Into and out of the ID the rig waits for the slowest row."""
    part = load(str(with_id(tmp_path, 'timing.tIDA.max = "20 us"')))
    assert part.identify_command is not None
    assert part.identify_command.settle_ps == 20_000_000


def test_waits_in_else_are_tightened_too(tmp_path: Path) -> None:
    """A chip's own time that only an `else` waits for is the slowest row's."""
    text = TEXT.replace('{ expect = "image" }', '{ expect = "image", else = [{ wait = "tXX" }] }', 1)
    text = text.replace("tSCE = ", 'tXX  = { max = "5 us" }\ntSCE = ', 1)
    row = WITH_ID + 'timing.tXX.max = "9 us"'
    part = load(str(saved(tmp_path, text.replace("[program]", f"{row}\n\n[program]", 1))))
    assert waits(program_of(part), "tXX") == [9_000_000]


def test_busy_is_the_slowest_rows(tmp_path: Path) -> None:
    """The longest time the part works by itself is not shortened by a quick row, whatever it is called."""
    text = TEXT.replace('busy = "tSCE"', 'busy = "tBSY"').replace("tSCE = ", 'tBSY = { max = "20 ms" }\ntSCE = ')
    row = WITH_ID + 'timing.tBSY.max = "30 ms"'
    part = load(str(saved(tmp_path, text.replace("[program]", f"{row}\n\n[program]", 1))))
    assert part.timing["tBSY"].max_ps == 30_000_000_000


def test_a_row_without_identification_drops_the_command(tmp_path: Path) -> None:
    """`identify.kind` of a row takes the place of every key that identifies."""
    path = saved(tmp_path, TEXT.replace("[program]", f'{NO_ID}identify.kind = "none"\n\n[program]', 1))
    assert check_file(path) == []
    part = load(str(path), maker="Belfry")
    assert (part.identify, part.identify_command, part.identify_mode) == ("none", None, "")
    assert load(str(path), maker="Tower").identify == "command"
    assert maker_needed(load(str(path))) == ["Tower", "Belfry"]


# ---- not tightened ----


@pytest.mark.parametrize(
    ("row", "key"),
    [
        ("geometry.page = 128", "geometry.page"),
        ('commands.protect_on = ["AA@1555", "55@0AAA", "A0@1555"]', "commands"),
        ('write.gap = "tWC"', "write"),
        ('modes.write.OE = "VCC"', "modes.write"),
        ('supplies.VCC.read.max = "5.25 V"', "supplies.VCC.read"),
        ('program.unloaded = "kept"', "program"),
        ('program.protected.parameters.recover = "10 us"', "program.protected"),
        ('protect.off = [{ write = "protect_off" }, { mode = "standby" }]', "protect"),
        ('verify.passes = [{ mode = "read" }]', "verify"),
        ("pins.A = [10, 9, 8, 7, 6, 5, 4, 3, 25, 24, 21, 23, 2, 1, 26]", "pins"),
        ("chip.blank = 0x00", "chip.blank"),
    ],
)
def test_a_row_without_id_that_differs_in_more_than_times_needs_a_maker(tmp_path: Path, row: str, key: str) -> None:
    """Pages, commands, modes, levels, steps: no common limit settles them, so the maker is named."""
    part = load(str(without_id(tmp_path, row)))
    assert key in part.apart
    assert maker_needed(part) == ["Tower", "Belfry"]
    assert maker_needed(load(str(tmp_path / "rows.toml"), maker="Belfry")) == []


@pytest.mark.parametrize(
    "row",
    [
        'timing.tWP.min = "100 ns"',
        'maxima.other = "6.0 V"',
        'supplies.VCC.read = { typ = "5.0 V", current = "40 mA", from = "page 3" }',
        'chip.about = "the same"\nchip.notes = ["a note"]',
        "geometry.page = 64",
    ],
)
def test_a_row_that_differs_in_times_maxima_and_words_needs_none(tmp_path: Path, row: str) -> None:
    """What has a tightest form, or says the same again, is no reason to ask."""
    part = load(str(without_id(tmp_path, row)))
    assert (part.apart, maker_needed(part)) == ((), [])


def test_rows_with_ids_may_differ_in_levels_and_steps(tmp_path: Path) -> None:
    """Such a part loads without a maker for the look that tells which it is, with the steps of the file itself."""
    row = 'program.steps = [{ each = "page", steps = [{ load = "page" }, { mode = "standby" }] }]'
    rows = f'{WITH_ID}{row}\nsupplies.VCC.read.max = "5.25 V"\n\n{FIRST}'
    path = saved(tmp_path, TEXT.replace(FIRST, rows))
    part, belfry = load(str(path)), load(str(path), maker="Belfry")
    assert (part.row, maker_needed(part)) == (None, [])
    assert part.supplies["VCC.read"].max_mv == 5_250
    assert set(part.apart) == {"program", "supplies.VCC.read"}
    [page], [other] = program_of(part), program_of(belfry)
    assert isinstance(page, EachStep)
    assert isinstance(other, EachStep)
    assert (len(page.steps), len(other.steps)) == (5, 2)
    assert page.where.key == "program.steps[0]"


def test_steps_that_only_rows_have_are_the_first_rows(tmp_path: Path) -> None:
    """Where the file itself has no program, the first row's is shown."""
    start, end = TEXT.index("[program]"), TEXT.index("[erase]")
    steps = 'program = { bits = "both", unit = "page", unloaded = "kept", steps = [{ each = "page", steps = [%s] }] }'
    own = '{ load = "page" }, { mode = "standby" }'
    first = FIRST.rstrip() + "\n" + steps % own + "\n\n"
    second = WITH_ID + steps % ('{ wait = "tWC" }, ' + own) + "\n\n"
    path = saved(tmp_path, TEXT[:start].replace(FIRST, first + second) + TEXT[end:])
    part = load(str(path))
    [page] = program_of(part)
    assert isinstance(page, EachStep)
    assert len(page.steps) == 2


def test_the_27c256_loads_without_a_maker() -> None:
    """Its makers differ in voltages and algorithm; until the ID is read, levels are those that suit all."""
    part = load("27c256")
    assert part.row is None
    assert {"program", "supplies.VPP.program"} <= set(part.apart)
    assert maker_needed(part) == []
    rows = [load("27c256", maker=row.maker).supplies["VPP.program"] for row in part.makers]
    step = part.supplies["VPP.program"]
    assert step.min_mv == max(row.min_mv for row in rows)
    assert step.max_mv == min(row.max_mv for row in rows)


def test_a_row_changes_how_the_whole_is_verified() -> None:
    """`verify.passes` of a row takes the place of the whole list."""
    assert [one.mode for one in load("27c256", maker="ST").verify] == ["check_high", "check_low"]
    assert [one.mode for one in load("27c256", maker="Atmel").verify] == ["read"]


def test_a_code_of_even_parity_that_was_read_is_no_warning(tmp_path: Path) -> None:
    """A cell that names its sheet answers the doubt; one that was recalled does not."""
    even = 'is = 0x88, what = "manufacturer"'
    plain = TEXT.replace('is = 0x89, what = "manufacturer"', even)
    assert [problem.warning for problem in check_file(saved(tmp_path, plain))] == [True]
    for source, warnings in (("rev. C, page 7", 0), ("from memory", 1)):
        path = saved(tmp_path, plain.replace(even, f'{even}, from = "{source}"'))
        assert len(check_file(path)) == warnings
