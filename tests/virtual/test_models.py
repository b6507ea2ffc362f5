"""Chip models by name, and the seat for strangers: a model loaded from a file."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.errors import FileMistake, UsageMistake
from pulsewright.virtual import models

GUIDE = Path(models.__file__).with_name("README.md")


def example() -> str:
    """The model that the guide shows."""
    return GUIDE.read_text("utf-8").partition("```python\n")[2].partition("```")[0]


def saved(folder: Path, source: str) -> Path:
    """A model file."""
    path = folder / "my_part.py"
    path.write_text(source, "utf-8")
    return path


def test_each_name_makes_a_fresh_chip_of_that_name() -> None:
    """The registry's names are the chips' own, and each call makes another chip."""
    for name in models.MODELS:
        chip = models.make_model(name)
        assert chip.name == name
        assert models.make_model(name.upper()).cells is not chip.cells


def test_an_unknown_name_gets_the_nearest() -> None:
    """A slip of the keyboard is answered with the right word."""
    with pytest.raises(UsageMistake) as caught:
        models.make_model("27e521")
    assert caught.value.hint.startswith("did you mean 27e512?")
    assert "--model FILE" in caught.value.hint


def test_the_guides_example_loads_and_reads(tmp_path: Path) -> None:
    """The model shown in the guide is whole: it loads, and its cells stand at its pins after the access time."""
    chip = models.load_model(saved(tmp_path, example()))
    levels: list[int | None] = [0] * 25
    levels[24] = 5000
    levels[8] = levels[5] = 5000  # A0 and A3
    chip.pins_changed(100, levels)
    assert chip.drive(107) == (0xFF, 9 ^ 0xFF)
    assert chip.drive(108) == (0xFF, 9)
    levels[20] = 5000
    chip.pins_changed(200, levels)
    assert chip.drive(300) == (0, 0)


@pytest.mark.parametrize(
    ("source", "line", "what"),
    [
        ("def make_chip(:\n", 1, "not Python"),
        ("x = 1\ny = 1 / 0\n", 2, "ZeroDivisionError"),
        ("import nothing_of_this_name\n", 1, "nothing_of_this_name"),
        ("x = 1\n", 0, "make_chip()"),
        ("def make_chip():\n    x = 1\n    return x.cells\n", 3, "AttributeError"),
    ],
)
def test_a_broken_model_file_is_one_clear_error(tmp_path: Path, source: str, line: int, what: str) -> None:
    """Whatever is wrong with the file, the error names it, with the line where there is one."""
    path = saved(tmp_path, source)
    with pytest.raises(FileMistake) as caught:
        models.load_model(path)
    assert what in caught.value.what
    assert caught.value.where is not None
    assert (caught.value.where.file, caught.value.where.line) == (str(path), line)


def test_a_missing_file_is_a_file_mistake(tmp_path: Path) -> None:
    """A path that leads nowhere is said plainly."""
    with pytest.raises(FileMistake, match="cannot read"):
        models.load_model(tmp_path / "none.py")


@pytest.mark.parametrize(
    ("old", "new", "fact"),
    [
        ("def draw_ua", "def draws", "no method draw_ua()"),
        ("self.pins = 24", "self.pins = 28", "pins is not 24"),
        ('package="DIP-24"', 'package="DIP-40"', "limits.package is 'DIP-40'"),
        ("self.limits = LIMITS", "self.limits = None", "limits is not a Limits"),
        ("bytearray(range(16))", "bytes(16)", "cells is not a bytearray"),
        ("self.outputs = D", "self.outputs = D[:7]", "outputs is not"),
        ("self.erased_word = 0xFF", "self.erased_word = None", "erased_word"),
        ('self.name = "tiny"', "self.name = None", "name is not a text"),
    ],
)
def test_what_is_no_chip_model_is_refused(tmp_path: Path, old: str, new: str, fact: str) -> None:
    """Each thing that the rig relies on is asked for, and named when it is not there."""
    assert old in example()
    with pytest.raises(UsageMistake) as caught:
        models.load_model(saved(tmp_path, example().replace(old, new)))
    assert any(text.startswith(fact) for text in caught.value.facts)
