"""Models of chips: which part names have one, and how a stranger's model is loaded from a file (see README.md here)."""

from __future__ import annotations

import difflib
import sys
import traceback
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from types import ModuleType

from pulsewright.errors import FileMistake, UsageMistake, Where
from pulsewright.files import read_whole
from pulsewright.virtual.interface import ChipModel, Limits

_PACKAGE_PINS = {"DIP-24": 24, "DIP-28": 28, "DIP-32": 32}  # what fits the byte-wide site
_METHODS = ("pins_changed", "drive", "draw_ua", "state", "restore")


def _e512() -> ChipModel:
    from pulsewright.virtual.models import e512

    return e512.make_chip()


def _c256(maker: str = "st") -> ChipModel:
    from pulsewright.virtual.models import c256

    return c256.make_chip(maker)


def _ee256(maker: str = "atmel") -> ChipModel:
    from pulsewright.virtual.models import ee256

    return ee256.make_chip(maker)


@dataclass(frozen=True)
class Makers:
    """Makers whose chips of one part differ; `names[0]` is the one that is made when none is named."""

    make: Callable[[str], ChipModel]
    names: tuple[str, ...]


# part name -> what makes a fresh chip
MODELS: dict[str, Callable[[], ChipModel]] = {"27e512": _e512, "27c256": _c256, "28c256": _ee256}
MAKERS: dict[str, Makers] = {
    "27c256": Makers(_c256, ("st", "atmel", "ti", "national", "amd")),
    "28c256": Makers(_ee256, ("atmel", "xicor", "catalyst")),
}


def make_model(name: str, maker: str = "") -> ChipModel:
    """A fresh chip of a part that has a model here, of a maker where its makers' chips differ.

    UsageMistake with the nearest name for any other part or maker.
    """
    make = MODELS.get(name.lower())
    if make is None:
        near = difflib.get_close_matches(name.lower(), MODELS, n=1)
        own = f"`bench new BENCH --chip {name} --model FILE` with a model of your own"
        raise UsageMistake(
            f"the virtual rig has no model of the chip {name}",
            wanted=f"{', '.join(MODELS)}, or a bench with a model of your own",
            got=name,
            hint=f"did you mean {near[0]}? else {own}" if near else own,
        )
    return _of_maker(name, maker) if maker else make()


def _of_maker(name: str, maker: str) -> ChipModel:
    makers = MAKERS.get(name.lower())
    if makers is None:
        raise UsageMistake(f"the virtual rig's model of the chip {name} is of one maker only", got=f"--maker {maker}")
    if maker.lower() not in makers.names:
        near = difflib.get_close_matches(maker.lower(), makers.names, n=1)
        raise UsageMistake(
            f"the virtual rig has no {name} of the maker {maker}",
            wanted=", ".join(makers.names),
            got=maker,
            hint=f"did you mean {near[0]}?" if near else "",
        )
    return makers.make(maker.lower())


def load_model(path: Path | str) -> ChipModel:
    """A fresh chip from a Python file with `make_chip() -> ChipModel`.

    FileMistake if the file cannot be read or run, or `make_chip` fails; UsageMistake if what it makes is no chip model.
    """
    module = _run(Path(path))
    make = getattr(module, "make_chip", None)
    if not callable(make):
        raise FileMistake("a chip model has a function make_chip()", where=Where(str(path)), hint=_HINT)
    try:
        chip = make()
    except Exception as error:  # a stranger's code may raise anything; it becomes one clear error
        raise _failed(path, error) from error
    _check(chip, path)
    made: ChipModel = chip
    return made


_HINT = "virtual/models/README.md shows a whole model"


def _run(path: Path) -> ModuleType:
    source = read_whole(path)
    module = ModuleType(f"chip_model_{path.stem}")
    module.__file__ = str(path)
    sys.modules[module.__name__] = module  # dataclasses look their module up there
    try:
        exec(compile(source, str(path), "exec"), module.__dict__)  # running the user's own file is what --model is for
    except SyntaxError as error:
        raise FileMistake(f"not Python: {error.msg}", where=Where(str(path), error.lineno or 0), hint=_HINT) from error
    except Exception as error:  # as above
        raise _failed(path, error) from error
    return module


def _failed(path: Path | str, error: Exception) -> FileMistake:
    """The error with the last line of the user's own file in which it happened."""
    lines = [frame.lineno or 0 for frame in traceback.extract_tb(error.__traceback__) if frame.filename == str(path)]
    where = Where(str(path), lines[-1] if lines else 0)
    return FileMistake(f"the chip model failed: {type(error).__name__}: {error}", where=where, hint=_HINT)


def _check(chip: object, path: Path | str) -> None:
    """What the rest relies on; each complaint names the attribute."""
    problems: list[str] = [f"no method {name}()" for name in _METHODS if not callable(getattr(chip, name, None))]
    limits, cells = getattr(chip, "limits", None), getattr(chip, "cells", None)
    outputs = getattr(chip, "outputs", None)
    if not isinstance(getattr(chip, "name", None), str):
        problems.append("name is not a text")
    if not isinstance(limits, Limits):
        problems.append("limits is not a Limits")
    elif limits.package not in _PACKAGE_PINS:
        problems.append(f"limits.package is {limits.package!r}, wanted one of {', '.join(_PACKAGE_PINS)}")
    elif getattr(chip, "pins", None) != _PACKAGE_PINS[limits.package]:
        problems.append(f"pins is not {_PACKAGE_PINS[limits.package]}, as {limits.package} has them")
    if not isinstance(cells, bytearray) or not cells:
        problems.append("cells is not a bytearray with at least one byte")
    if (
        not isinstance(outputs, tuple)
        or len(outputs) not in {8, 16}
        or not all(isinstance(pin, int) for pin in outputs)
    ):
        problems.append("outputs is not a tuple of 8 or 16 pins")
    if not isinstance(getattr(chip, "erased_word", None), int):
        problems.append("erased_word is not a number")
    if problems:
        raise UsageMistake("what make_chip() made is no chip model", where=Where(str(path)), facts=problems, hint=_HINT)
