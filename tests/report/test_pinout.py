"""The connection diagram, against the pin-out that a data sheet draws."""

from __future__ import annotations

from pulsewright.chip.load import load
from pulsewright.report.pinout import connection_diagram, pin_name
from pulsewright.rig.file import load_rig

# DIP-28 64K x 8, shared OE/VPP, from pin 1 down the left and from pin 28 down the right [S38, page 1].
LEFT = ["A15", "A12", "A7", "A6", "A5", "A4", "A3", "A2", "A1", "A0", "D0", "D1", "D2", "GND"]
RIGHT = ["VCC", "A14", "A13", "A8", "A9", "A11", "OE/VPP", "A10", "CE", "D7", "D6", "D5", "D4", "D3"]


def test_the_diagram_names_each_pin_as_the_data_sheet_does() -> None:
    """Left and right rows hold the data sheet's names in its order, the shared pin as OE/VPP."""
    rows = [line.split() for line in connection_diagram(load("27e512"), load_rig()) if line.count("|") == 2]
    assert [row[0] for row in rows] == LEFT
    assert [row[-1] for row in rows] == RIGHT


def test_the_diagram_gives_the_rig_positions() -> None:
    """A DIP-28 sits two positions lower than its pin numbers on the 32-position site."""
    rows = [line.split() for line in connection_diagram(load("27e512"), load_rig()) if line.count("|") == 2]
    assert [row[1] for row in rows] == [str(pin + 2) for pin in range(1, 15)]
    assert [row[-2] for row in rows] == [str(pin + 2) for pin in range(28, 14, -1)]


def test_every_line_is_as_wide_as_its_edge() -> None:
    """The package's two edges stand straight under each other."""
    lines = connection_diagram(load("27e512"), load_rig())
    edges = {(line.index("|"), line.rindex("|")) for line in lines if line.count("|") == 2}
    rules = {(line.index("+"), line.rindex("+")) for line in lines if line.count("+") == 2}
    assert len(edges) == 1
    assert rules == edges


def test_a_pin_without_a_role_is_not_connected() -> None:
    """A pin number that no role names is shown as NC."""
    assert pin_name(load("27e512"), 99) == "NC"
