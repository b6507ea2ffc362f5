"""Mode table, supplies and algorithm of a part, as text."""

from __future__ import annotations

from pulsewright.chip.load import load
from pulsewright.report.algorithm import algorithm
from pulsewright.report.modes import maxima_table, mode_table, supply_table, table, timing_table


def test_the_mode_table_shows_levels_where_the_definition_puts_them() -> None:
    """The erase row has 14 V at OE and A9, all addresses low, and FF on the data pins."""
    rows = {line.split()[0]: line.split() for line in mode_table(load("27e512"))}
    assert rows["mode"] == ["mode", "A", "CE", "OE", "A9", "VCC", "D"]
    assert " ".join(rows["erase"]) == "erase L H 14.0 V VPP.erase 14.0 V VH.erase 5.0 V VCC.erase FF"
    assert rows["read"] == ["read", "address", "L", "L", "address", "5.0", "V", "VCC.read", "out"]


def test_a_supply_without_published_limits_says_so() -> None:
    """The ±5 % that are taken are named as such, a published window is not."""
    rows = {line.split()[0]: line for line in supply_table(load("27e512"))}
    assert "limits not published: typ ±5 % taken (common practice)" in rows["VCC.read"]
    assert "limits" not in rows["VPP.erase"]
    assert "14.0 V (13.75 V to 14.25 V)" in rows["VPP.erase"]
    assert "from memory" in rows["VPP.erase"]


def test_maxima_and_timing_show_their_limits_and_sources() -> None:
    """Each rating and window stands with its numbers, a limit that is not given as a dash."""
    assert "OE                14.5 V  from memory" in maxima_table(load("27e512"))
    rows = {line.split()[0]: line.split() for line in timing_table(load("27e512"))}
    assert rows["tEW"] == ["tEW", "95", "ms", "100", "ms", "105", "ms", "from", "memory"]
    assert rows["tACC"] == ["tACC", "-", "-", "150", "ns"]


def test_the_erase_algorithm_reads_as_numbered_steps() -> None:
    """The nesting of the flow chart shows in the numbers, the times and counts in the words."""
    definition = load("27e512")
    assert definition.erase is not None
    lines = [line.strip() for line in algorithm(definition, definition.erase)]
    assert lines[0] == "1  at most 20 times, until every word reads FF in mode erase_verify (VCC 3.75 V):"
    assert lines[1] == "1.1  mode erase (VCC 5.0 V, OE at 14.0 V, A9 at 14.0 V)"
    assert lines[3] == "1.3  pulse CE to L for 100 ms (tEW: at least 95 ms, at most 105 ms)"


def test_the_program_algorithm_says_when_a_word_is_done() -> None:
    """Word loop, tries, pulse and read-back each have their line."""
    definition = load("27e512")
    assert definition.program is not None
    lines = [line.strip() for line in algorithm(definition, definition.program)]
    assert lines[0] == "1  for each word to be written:"
    assert lines[1] == "1.1  at most 25 times, until it reads back:"
    assert lines[2] == "1.1.1  mode program (VCC 5.0 V, OE at 12.0 V), D = the image's word"
    assert "1.1.8  read D; done when it is the image's word" in lines


def test_a_table_keeps_columns_under_their_heads() -> None:
    """Columns are as wide as their widest cell; lines end bare."""
    assert table(["a", "long"], [["wide", "x"], ["y", ""]]) == ["a     long", "----  ----", "wide  x", "y"]


def test_the_algorithm_of_a_part_written_on_the_bus_is_told_cycle_by_cycle() -> None:
    """Loads, polls, cycles with their addresses, what must read back, and what comes in any case."""
    definition = load("28c256")
    assert definition.protected is not None
    text = "\n".join(algorithm(definition, definition.protected))
    assert "write AA at 5555, 55 at 2AAA, A0 at 5555 (protect_on)" in text
    assert "load the words of the page, from one to the next (tBLC: at least 1 us, at most 100 us)" in text
    assert "poll DQ7 in mode read until the part is done, within (tWC: at most 10 ms)" in text
    assert "read D; it must be the image's word" in text
    assert text.index("at the end, whatever happened:") < text.rindex("protect_on")


def test_a_look_that_decides_shows_both_ways() -> None:
    """A word that already reads right is left; else it gets its further pulses, numbered below the look."""
    definition = load("27c256", maker="Atmel")
    assert definition.program is not None
    lines = algorithm(definition, definition.program)
    at = next(index for index, line in enumerate(lines) if "where it is not the image's word" in line)
    assert "at most 10 times" in lines[at + 1]
