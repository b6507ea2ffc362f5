"""Finding, loading and resolving definitions."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pulsewright.chip.build import five_percent_mv, parse_maximum
from pulsewright.chip.check import check_file
from pulsewright.chip.load import find, is_shipped, load, maker_needed, memory_marked, shipped
from pulsewright.chip.model import Definition, EachStep, RepeatStep, Step
from pulsewright.chip.shipped import shipped_folder
from pulsewright.errors import DefinitionMistake, FileMistake, UsageMistake, Where
from pulsewright.units import UnitMistake

GOOD = Path(__file__).parent / "good" / "chime24.toml"
TEXT = GOOD.read_text(encoding="utf-8")
SECOND_ROW = """
[[makers]]
maker = "Belfry"
id    = [{ at = 0x0000, is = 0x20 }, { at = 0x0001, is = 0x8D }]
"""


def with_row(tmp_path: Path, row: str, text: str = TEXT) -> Path:
    """The sound file with a second maker row."""
    path = tmp_path / "two.toml"
    path.write_text(text.replace("[program]", SECOND_ROW + row + "\n[program]"), encoding="utf-8")
    return path


# ---- finding ----


@pytest.mark.parametrize("name", ["27e512", "27E512"])
def test_a_shipped_part_is_found_in_any_letter_case(name: str) -> None:
    """A name finds the shipped file."""
    assert find(name) == shipped_folder() / "27e512.toml"


def test_a_path_is_found() -> None:
    """What is no name is a path."""
    assert find(str(GOOD)) == GOOD


def test_an_unknown_name_is_answered_with_the_nearest() -> None:
    """A misspelt name ends with exit 2 and the nearest right one."""
    with pytest.raises(DefinitionMistake) as caught:
        find("27e521")
    assert caught.value.exit_code == 2
    assert caught.value.problems[0].nearest == "27e512"


def test_a_path_to_nothing_is_a_file_mistake(tmp_path: Path) -> None:
    """A file that is not there is named."""
    with pytest.raises(FileMistake, match="no such definition file") as caught:
        find(str(tmp_path / "none.toml"))
    assert "none.toml" in str(caught.value.where)


def test_a_file_that_is_no_text_says_where(tmp_path: Path) -> None:
    """A dump given for a definition is told apart at the byte that is no text."""
    path = tmp_path / "dump.toml"
    path.write_bytes(b"format = 1\n\x00\xff\xfe")
    [problem] = check_file(path)
    assert (problem.what, problem.where.line, problem.found) == ("not a text file", 2, "byte 12: invalid start byte")


def test_a_folder_is_a_file_mistake(tmp_path: Path) -> None:
    """A folder cannot be read as a definition."""
    with pytest.raises(FileMistake, match="cannot read the definition"):
        check_file(tmp_path)


def test_the_list_of_parts_has_every_shipped_file() -> None:
    """Each file in the folder is listed with the name and the line about it that its own table has."""
    listed = shipped()
    assert [one.path for one in listed] == sorted(shipped_folder().glob("*.toml"))
    for one in listed:
        part = load(one.name)
        assert (one.name, one.about) == (part.name, part.about)


@pytest.mark.parametrize("path", sorted(shipped_folder().glob("*.toml")), ids=lambda path: path.stem)
def test_every_shipped_definition_is_sound(path: Path) -> None:
    """The checker has nothing to say about what we ship, warnings included."""
    assert check_file(path) == []


# ---- loading ----


def test_load_refuses_with_every_problem(tmp_path: Path) -> None:
    """A file with two mistakes is refused with both."""
    path = tmp_path / "bad.toml"
    path.write_text(TEXT.replace("CE  = 18", "CE  = 20").replace('"105 us"', '"105 V"'), encoding="utf-8")
    with pytest.raises(DefinitionMistake) as caught:
        load(str(path))
    assert {problem.what for problem in caught.value.problems} == {"a pin used twice", "not a value for this key"}
    assert "2 mistakes" in caught.value.what


def test_a_warning_does_not_hinder_loading(tmp_path: Path) -> None:
    """A manufacturer's code of even parity loads."""
    path = tmp_path / "even.toml"
    path.write_text(TEXT.replace("is = 0x89", "is = 0x88"), encoding="utf-8")
    assert [problem.warning for problem in check_file(path)] == [True]
    assert load(str(path)).row is not None


def test_every_piece_knows_its_line() -> None:
    """Steps, supplies, modes, times and ID cells carry file and line."""
    part = load(str(GOOD))
    rows = TEXT.splitlines()

    def text_at(where: Where) -> str:
        assert where.file == str(GOOD)
        return rows[where.line - 1]

    assert "VPP.program =" in text_at(part.supplies["VPP.program"].where)
    assert text_at(part.modes["verify"].where).startswith("verify ")
    assert text_at(part.timing["tDF"].where).startswith("tDF")
    assert part.row is not None
    assert "0x8C" in text_at(part.row.ids[0][1].where)
    assert part.erase is not None
    repeat = part.erase.steps[0]
    assert isinstance(repeat, RepeatStep)
    assert 'pulse = "CE"' in text_at(repeat.steps[2].where)
    assert repeat.steps[2].where.key == "erase.steps[0].repeat[2]"


def test_a_value_may_bring_its_source(tmp_path: Path) -> None:
    """`{ value, from }` reads as the value; recalled limits and recalled tables are listed for consent."""
    text = TEXT.replace('min = "12.5 V"', 'min = { value = "12.5 V", from = "from memory (low)" }')
    text = text.replace("words   = 2048", 'words   = { value = 2048, from = "page 1" }')
    text = text.replace("[timing]\n", '[timing]\nfrom = "from memory"\ntOE = { max = "1 us", from = "page 3" }\n')
    path = tmp_path / "sourced.toml"
    path.write_text(text, encoding="utf-8")
    part, plain = load(str(path)), load(str(GOOD))
    assert part.words == 2048
    assert replace(part.supplies["VPP.program"], source="", where=Where()) == replace(
        plain.supplies["VPP.program"], where=Where()
    )
    marked = memory_marked(part)
    assert "supplies.VPP.program: from memory" in marked
    assert "timing.tAS: from memory" in marked
    assert "timing.tOE: from memory" not in marked
    assert part.digest != plain.digest


def test_a_source_of_the_whole_chip_from_memory_marks_what_has_none(tmp_path: Path) -> None:
    """A definition recalled as a whole is recalled in every level, window and maximum."""
    path = tmp_path / "recalled.toml"
    path.write_text(TEXT.replace('source  = "invented"', 'source  = "from memory"'), encoding="utf-8")
    assert len(memory_marked(load(str(path)))) == 4 + 4 + 6


def test_only_files_of_the_shipped_folder_are_shipped(tmp_path: Path) -> None:
    """A copy elsewhere is from outside, even with equal contents and digest."""
    copy = tmp_path / "27e512.toml"
    copy.write_bytes(find("27e512").read_bytes())
    outside = load(str(copy))
    assert not is_shipped(outside)
    assert outside.digest == load("27e512").digest


def test_the_digest_is_of_what_is_said_not_of_how_it_is_laid_out(tmp_path: Path) -> None:
    """Comments, spaces and the order of keys do not change it."""
    path = tmp_path / "other.toml"
    rows = ["# another head", *TEXT.splitlines()]
    swapped = "\n".join(rows).replace('VH.identify = { typ = "12.0 V", min', 'VH.identify = { typ =   "12.0 V",  min')
    swapped = swapped.replace("VCC = 24\nGND = 12", "GND = 12\nVCC = 24 # corner")
    path.write_text(swapped, encoding="utf-8")
    assert load(str(path)).digest == load(str(GOOD)).digest


# ---- maker rows ----


def test_the_only_row_is_the_row() -> None:
    """With one row and no maker named, that row is in force."""
    part = load(str(GOOD))
    assert part.row is not None
    assert part.row.maker == "Tower"


def test_a_row_overrides_leaf_by_leaf(tmp_path: Path) -> None:
    """A row changes the leaves it names and no others; its place is the row's own line."""
    path = with_row(
        tmp_path, 'supplies.VPP.program.max = "12.9 V"\ntiming.tPW = { typ = "98 us" }\nmaxima.A9.max = "13 V"'
    )
    base, row = load(str(GOOD)), load(str(path), maker="belfry")
    assert row.row is not None
    assert row.row.maker == "Belfry"
    step = row.supplies["VPP.program"]
    assert (step.min_mv, step.typ_mv, step.max_mv) == (12_500, 12_750, 12_900)
    assert row.timing["tPW"].typ_ps == 98_000_000
    assert row.timing["tPW"].max_ps == base.timing["tPW"].max_ps
    assert row.maxima["A9"].mv == 13_000
    assert row.maxima["A9"].source == "from memory"
    assert row.row.overrides["timing.tPW.typ"] == "98 us"
    assert load(str(path), maker="Tower").supplies["VPP.program"].max_mv == 13_000


def test_a_row_with_limits_takes_the_place_of_unknown_ones(tmp_path: Path) -> None:
    """Where the base says unknown and a row gives the window, the row's window holds; and the other way round."""
    unknown = TEXT.replace(
        'VH.identify = { typ = "12.0 V", min = "11.5 V", max = "12.5 V" }',
        'VH.identify = { typ = "12.0 V", limits = "unknown" }',
    )
    path = with_row(tmp_path, 'supplies.VH.identify = { min = "11.9 V", max = "12.1 V" }', unknown)
    assert load(str(path), maker="Belfry").supplies["VH.identify"].max_mv == 12_100
    assert load(str(path), maker="Tower").supplies["VH.identify"].max_mv == 12_600
    path = with_row(tmp_path, 'supplies.VH.identify.limits = "unknown"')
    assert load(str(path), maker="Belfry").supplies["VH.identify"].limits_known is False


def test_an_unknown_maker_is_answered_with_the_nearest(tmp_path: Path) -> None:
    """A maker that has no row ends with exit 2 and names those that have one."""
    with pytest.raises(UsageMistake) as caught:
        load(str(with_row(tmp_path, "")), maker="Belfrie")
    assert (caught.value.exit_code, caught.value.hint) == (2, "--maker Belfry")
    assert "Tower, Belfry" in caught.value.wanted


def test_without_a_maker_the_tightest_holds(tmp_path: Path) -> None:
    """Each limit is the smaller maximum and the larger minimum; of the chip's own delays, the slowest."""
    row = """supplies.VPP.program = { typ = "12.5 V", min = "12.2 V", max = "12.8 V", current = "40 mA" }
timing.tPW = { min = "90 us", typ = "100 us", max = "100 us" }
timing.tAS.min = "3 us"
timing.tACC.max = "300 ns"
maxima.A9 = "13.0 V"
maxima.other = "7.5 V"
supplies.VCC.program.settle = "2 ms\""""
    part = load(str(with_row(tmp_path, row)))
    assert part.row is None
    step = part.supplies["VPP.program"]
    assert (step.min_mv, step.typ_mv, step.max_mv, step.current_ua) == (12_500, 12_750, 12_800, 40_000)
    window = part.timing["tPW"]
    assert (window.min_ps, window.typ_ps, window.max_ps) == (95_000_000, 100_000_000, 100_000_000)
    assert part.timing["tAS"].min_ps == 3_000_000
    assert part.timing["tACC"].max_ps == 300_000
    assert part.maxima["A9"].mv == 13_000
    assert (part.maxima["other"].mv, part.maxima["other"].above_vcc) == (500, True)
    assert part.supplies["VCC.program"].settle_ps == 2_000_000_000


def test_rows_and_no_row_have_digests_of_their_own(tmp_path: Path) -> None:
    """Consent for one maker's voltages is not consent for another's."""
    path = str(with_row(tmp_path, 'supplies.VPP.program.max = "12.9 V"'))
    assert len({load(path).digest, load(path, maker="Tower").digest, load(path, maker="Belfry").digest}) == 3


def test_a_recalled_row_marks_what_it_overrides(tmp_path: Path) -> None:
    """`from` of a row is the source of each leaf it brings, and of no other."""
    path = with_row(tmp_path, 'from = "from memory"\nsupplies.VPP.program.max = "12.9 V"')
    assert memory_marked(load(str(path), maker="Belfry")) == [
        "supplies.VPP.program: from memory",
        "maxima.A9: from memory",
    ]
    assert memory_marked(load(str(path), maker="Tower")) == ["maxima.A9: from memory"]


def test_a_maker_must_be_named_where_no_id_tells_rows_apart(tmp_path: Path) -> None:
    """A row without ID that differs in a voltage asks for --maker; rows with IDs, or equal ones, do not."""
    bare = 'identify.kind = "none"\nsupplies.VPP.program.max = "12.9 V"'
    path = with_row(tmp_path, bare)
    text = path.read_text(encoding="utf-8").replace(SECOND_ROW.splitlines()[3] + "\n", "")
    path.write_text(text, encoding="utf-8")
    assert maker_needed(load(str(path))) == ["Tower", "Belfry"]
    assert load(str(path), maker="Belfry").identify == "none"
    assert load(str(path), maker="Tower").identify == "mode"
    assert maker_needed(load(str(path), maker="Belfry")) == []
    assert maker_needed(load(str(with_row(tmp_path, 'timing.tAS.min = "3 us"')))) == []


# ---- exact arithmetic ----


@given(st.integers(1, 30_000))
def test_five_percent_is_never_more_than_five_percent(typ_mv: int) -> None:
    """The window of unknown limits is the largest in whole millivolts inside typ ±5 %."""
    low, high = five_percent_mv(typ_mv)
    assert 100 * low >= 95 * typ_mv > 100 * (low - 1)
    assert 100 * high <= 105 * typ_mv < 100 * (high + 1)


@given(st.integers(0, 30_000), st.booleans(), st.booleans())
def test_a_maximum_is_read_exactly(mv: int, above: bool, in_mv: bool) -> None:
    """A maximum and one above VCC read back to the millivolt, in either unit."""
    text = f"{mv} mV" if in_mv else f"{mv / 1000:.3f} V"
    assert parse_maximum(f"VCC + {text}" if above else text) == (mv, above)


def test_maxima_in_words() -> None:
    """VCC alone and a maximum below VCC are understood; a bare number is not."""
    assert parse_maximum("VCC") == (0, True)
    assert parse_maximum("VCC - 0.3 V") == (-300, True)
    for text in ("", "7", "VCC + 7", "VDD + 1 V"):
        with pytest.raises(UnitMistake):
            parse_maximum(text)


@given(
    st.lists(st.tuples(st.integers(11_000, 12_700), st.integers(0, 50), st.integers(0, 300)), min_size=2, max_size=2)
)
def test_the_tightest_window_lies_inside_each(
    tmp_path_factory: pytest.TempPathFactory, rows: list[tuple[int, int, int]]
) -> None:
    """The result for two drawn windows is inside both and as wide as can be, or the checker says nothing fits."""
    windows = [(low, low + up, low + up + more) for low, up, more in rows]
    (low, typ, high), (low2, typ2, high2) = windows
    text = TEXT.replace(
        'typ = "12.75 V", min = "12.5 V", max = "13.0 V"', f'typ = "{typ} mV", min = "{low} mV", max = "{high} mV"'
    )
    row = f'supplies.VPP.program = {{ typ = "{typ2} mV", min = "{low2} mV", max = "{high2} mV" }}'
    path = with_row(tmp_path_factory.mktemp("drawn"), row, text)
    if max(low, low2) > min(high, high2):
        assert [problem.wanted for problem in check_file(path)] == ["make two definitions"]
        return
    step = load(str(path)).supplies["VPP.program"]
    assert (step.min_mv, step.max_mv) == (max(low, low2), min(high, high2))
    assert step.min_mv <= step.typ_mv <= step.max_mv


# ---- methods ----


def bare(steps: tuple[Step, ...]) -> list[str]:
    """Steps without their places."""
    return [re.sub(r"where=Where\([^)]*\)", "", repr(step)) for step in steps]


def method_text(text: str) -> str:
    """The 27E512 with its program steps taken from the shipped method."""
    start, end = text.index("steps = [", text.index("[program]")), text.index("[erase]")
    call = 'method = "pulse_verify_shared"\nparameters = { pin = "CE", time = "tPW", max = 25 }\n\n'
    return text[:start] + call + text[end:]


def test_a_method_is_its_steps(tmp_path: Path) -> None:
    """The shipped method gives the 27E512 the very steps that are written out in its own file."""
    path = tmp_path / "27e512m.toml"
    path.write_text(method_text(find("27e512").read_text(encoding="utf-8")), encoding="utf-8")
    assert check_file(path) == []
    by_method, written = load(str(path)), load("27e512")
    assert by_method.program is not None
    assert written.program is not None
    assert bare(by_method.program.steps) == bare(written.program.steps)
    assert by_method.program.steps[0].where.file.endswith("methods/pulse_verify_shared.toml")


def test_a_method_beside_the_definition_comes_first(tmp_path: Path) -> None:
    """A folder methods/ beside the file hides the shipped method of that name, and changes the digest."""
    path = tmp_path / "27e512m.toml"
    path.write_text(method_text(find("27e512").read_text(encoding="utf-8")), encoding="utf-8")
    before = load(str(path))
    own = tmp_path / "methods" / "pulse_verify_shared.toml"
    own.parent.mkdir()
    shipped_text = (shipped_folder() / "methods" / own.name).read_text(encoding="utf-8")
    own.write_text(shipped_text.replace('{ wait = "$hold" },', '{ wait = "5 us" },'), encoding="utf-8")
    after = load(str(path))
    assert after.digest != before.digest
    assert after.program is not None
    assert after.program.steps[0].where.file == str(own)


def test_a_parameter_of_a_row_reaches_the_method(tmp_path: Path) -> None:
    """A maker row may change one parameter of a method."""
    text = method_text(find("27e512").read_text(encoding="utf-8"))
    text = text.replace("[program]", SECOND_ROW + "program.parameters.max = 10\n\n[program]", 1)
    path = tmp_path / "27e512m.toml"
    path.write_text(text, encoding="utf-8")

    def tries(part: Definition) -> int:
        assert part.program is not None
        [each] = part.program.steps
        assert isinstance(each, EachStep)
        [repeat] = each.steps
        assert isinstance(repeat, RepeatStep)
        return repeat.max

    assert (tries(load(str(path), maker="DA")), tries(load(str(path), maker="Belfry"))) == (25, 10)
