"""A bench: one modelled chip in the virtual rig's socket, the faults it was given, and what its pins have seen.

Kept as one JSON file (`format = 1`), written whole: the cells compressed and in base64 with their CRC-32, the model's
own state, and the history of the pins over all jobs since the bench was made.
"""

from __future__ import annotations

import base64
import binascii
import json
import zlib
from collections.abc import Iterable, Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

from pulsewright.errors import FileMistake, Problem, RigFileMistake, UsageMistake, Where
from pulsewright.files import read_whole, write_whole
from pulsewright.virtual.bad_contacts import AtPins, BadContacts
from pulsewright.virtual.board import Board
from pulsewright.virtual.faults import Faults, parse_faults
from pulsewright.virtual.interface import ChipModel, PinHistory, Violation
from pulsewright.virtual.judge import KEPT, Judge
from pulsewright.virtual.models import load_model, make_model
from pulsewright.virtual.rig import VirtualRig
from pulsewright.virtual.seat import EmptySeat, wiring
from pulsewright.virtual.socket import Socket

FORMAT = 1
_KIND = "pulsewright bench"


class Bench:
    """A chip, its faults and its history. Make one with `fresh`, `new` or `load`; `rig` puts it into a virtual rig."""

    def __init__(
        self, chip_name: str, *, faults: Iterable[str] = (), model: Path | None = None, maker: str = ""
    ) -> None:
        """A chip as its model makes it, of a maker where its makers' chips differ.

        UsageMistake or FileMistake for a chip, maker, fault or model that does not exist.
        """
        self.path: Path | None = None
        self.chip_name = chip_name
        self.maker = maker
        self.model = model
        self.jumper = False  # the board's jumper that a vouched part, or a level above 14.5 V, asks for
        self.faults: Faults = parse_faults(faults)
        self.chip = self._make()
        wiring(self.chip.limits.package, self.faults.seat)  # a package that cannot sit so is a mistake now
        self._check_pins()
        self.boots = 0
        self.judge: Judge | None = None
        self._pins: dict[int, PinHistory] = {}
        self._violations: list[Violation] = []
        self._count = 0

    @classmethod
    def fresh(
        cls,
        chip_name: str,
        contents: bytes | str = "noise",
        *,
        seed: int = 1,
        faults: Iterable[str] = (),
        maker: str = "",
    ) -> Bench:
        """A bench that is kept nowhere. `contents`: bytes, "blank", "noise" (of `seed`) or "noise:SEED"."""
        bench = cls(chip_name, faults=faults, maker=maker)
        bench._fill(contents, seed)
        bench._take_faults()
        return bench

    @classmethod
    def new(
        cls,
        path: Path | str,
        chip: str,
        *,
        contents: bytes | str = "blank",
        faults: Iterable[str] = (),
        model: Path | str | None = None,
        maker: str = "",
        jumper: bool = False,
    ) -> Bench:
        """A bench in a file, saved at once. A bench that is there already is replaced, any other file is not."""
        target = Path(path)
        if target.exists():
            _look_at_old(target)
        bench = cls(chip, faults=faults, model=None if model is None else Path(model).resolve(), maker=maker)
        bench.path, bench.jumper = target, jumper
        bench._fill(contents, 1)
        bench._take_faults()
        bench.save()
        return bench

    @classmethod
    def load(cls, path: Path | str) -> Bench:
        """A kept bench. FileMistake if there is none, RigFileMistake with every problem if it is damaged."""
        target = Path(path)
        kept = _parse(target)
        model = kept["model"]
        maker = kept.get("maker", "")
        bench = cls(kept["chip"], faults=kept["faults"], model=None if model is None else Path(model), maker=maker)
        bench.path, bench.jumper = target, bool(kept.get("jumper", False))
        bench._restore(target, kept)
        return bench

    def save(self) -> None:
        """Writes the file, whole or not at all; a bench that is kept nowhere has nothing to do."""
        if self.path is not None:
            text = json.dumps(self._kept(), indent=1, sort_keys=True)
            write_whole(self.path, text.encode("utf-8") + b"\n")

    def rig(self, boot: int | None = None) -> VirtualRig:
        """A virtual rig with this chip in its socket, the judge at its pins; `boot` counts by itself if not given.

        One rig at a time: from the second on `chip` is another object with the same cells, state and faults.
        """
        self._absorb()
        if self.judge is not None:
            self._seat_anew()
        self.boots = self.boots + 1 if boot is None else boot
        limits = self.chip.limits
        seat = self.faults.seat
        chip = EmptySeat(self.chip) if seat == "absent" else self.chip
        misplaced = bool(seat or self.faults.lifted or self.faults.touching)
        judge = self.judge = Judge(limits, misplaced=misplaced, busy=getattr(chip, "is_busy", None))
        board = replace(Board(button=self.jumper), **self.faults.board)
        positions = wiring(limits.package, seat)
        if not (self.faults.lifted or self.faults.touching):
            return VirtualRig(Socket(chip, positions, (judge,)), boot=self.boots, board=board)
        contacts = BadContacts(chip, self.faults.lifted, self.faults.touching)
        socket = Socket(contacts, positions, (AtPins(judge, contacts),))
        socket.touch(self.faults.touching)
        return VirtualRig(socket, boot=self.boots, board=board)

    def _check_pins(self) -> None:
        """UsageMistake for a fault of a pin that the chip does not have."""
        for pin in (*self.faults.lifted, *(pin for pair in self.faults.touching for pin in pair)):
            if pin > self.chip.pins:
                raise UsageMistake(
                    f"{self.chip_name} has no pin {pin}", wanted=f"1..{self.chip.pins}", got=str(pin),
                    hint="faults count the pins of the chip, not the socket's positions",
                )  # fmt: skip

    def _make(self) -> ChipModel:
        if self.model is None:
            named = make_model(self.chip_name, self.maker)
            return make_model(self.faults.other) if self.faults.other else named
        if self.faults.other:
            raise UsageMistake(
                "one chip sits in the socket",
                wanted="--fault other or --model",
                got=f"--fault other={self.faults.other} and --model {self.model}",
            )
        if self.maker:
            raise UsageMistake(
                "a model of your own is of no other maker",
                wanted="--maker or --model",
                got=f"--maker {self.maker} and --model {self.model}",
            )
        return load_model(self.model)

    def _seat_anew(self) -> None:
        """The same chip without what it knew of the last rig's clock: a new rig begins at tick 0."""
        before, self.chip = self.chip, self._make()
        self.chip.cells[:] = before.cells
        self._take_faults()
        self.chip.restore(before.state())

    def report(self) -> dict[str, Any]:
        """What `bench show --json` tells: chip, crc32, pins, violations, stressed, probe_wrote, damaged.

        Of the violations the first 200 are listed; `violation_count` counts all.
        """
        self._absorb()
        state = self.chip.state()
        return {
            "chip": self.chip_name,
            "crc32": f"{zlib.crc32(self.chip.cells):08x}",
            "pins": {str(pin): {"max_mv": self._pins[pin].max_mv} for pin in sorted(self._pins)},
            "violations": [vars(violation).copy() for violation in self._violations],
            "violation_count": self._count,
            "stressed": _texts(state.get("stressed")),
            "probe_wrote": _texts(state.get("probe_wrote")),
            "damaged": bool(state.get("damaged", False)),
        }

    def _absorb(self) -> None:
        """Takes over what the judge of the rig so far has seen; that judge goes on with a clean sheet."""
        judge = self.judge
        if judge is None:
            return
        for pin, seen in judge.pins.items():
            known = self._pins.setdefault(pin, PinHistory())
            known.max_mv = max(known.max_mv, seen.max_mv)
            known.min_mv = min(known.min_mv, seen.min_mv)
        self._violations += judge.violations[: KEPT - len(self._violations)]
        self._count += judge.count
        judge.violations.clear()
        judge.count = 0

    # ---- contents and faults ----

    def _fill(self, contents: bytes | str, seed: int) -> None:
        cells = self.chip.cells
        size = len(cells)
        width = len(self.chip.outputs) // 8
        erased = self.chip.erased_word.to_bytes(width, "little") * (size // width)
        if isinstance(contents, bytes | bytearray):
            if len(contents) > size:
                raise UsageMistake("more contents than the chip holds", wanted=f"{size} bytes", got=f"{len(contents)}")
            cells[:] = bytes(contents) + erased[len(contents) :]
            return
        word, colon, number = contents.partition(":")
        if word == "blank" and not colon:
            cells[:] = erased
        elif word == "noise" and (not colon or number.isdecimal()):
            import random

            cells[:] = random.Random(int(number) if colon else seed).randbytes(size)
        else:
            raise UsageMistake("no such contents", wanted="blank, noise or noise:SEED", got=contents)

    def _take_faults(self) -> None:
        """Hands the chip its own faults, if it can have them."""
        faults = self.faults.chip
        names = faults.names()
        if not names:
            return
        words = len(self.chip.cells) * 8 // len(self.chip.outputs)
        for what, at in (*(("stuck", at) for at, _, _ in faults.stuck), *(("dead", at) for at in faults.dead)):
            if at >= words:
                raise UsageMistake(f"a {what} address outside the chip", wanted=f"0..{words - 1:#x}", got=f"{at:#x}")
        take = getattr(self.chip, "take_faults", None)
        if take is None:
            raise UsageMistake(f"the model of {self.chip_name} cannot have the fault {names[0]}")
        take(faults)

    # ---- the file ----

    def _kept(self) -> dict[str, object]:
        report = self.report()
        cells = bytes(self.chip.cells)
        return {
            "what": _KIND,
            "format": FORMAT,
            "chip": self.chip_name,
            "maker": self.maker,
            "jumper": self.jumper,
            "model": None if self.model is None else str(self.model),
            "faults": list(self.faults.texts),
            "boots": self.boots,
            "crc32": report["crc32"],
            "cells": base64.b64encode(zlib.compress(cells, 9)).decode("ascii"),
            "state": self.chip.state(),
            "pins": {str(pin): [seen.max_mv, seen.min_mv] for pin, seen in sorted(self._pins.items())},
            "violations": report["violations"],
            "violation_count": self._count,
        }

    def _restore(self, path: Path, kept: Mapping[str, Any]) -> None:
        try:
            cells = zlib.decompress(base64.b64decode(kept["cells"], validate=True))
        except (binascii.Error, zlib.error, ValueError) as error:
            raise _damaged(path, [_problem(path, "cells", "are damaged", str(error))]) from error
        size = len(self.chip.cells)
        if len(cells) != size:
            raise _damaged(path, [_problem(path, "cells", "do not fit", f"{len(cells)} bytes", f"{size} bytes")])
        if f"{zlib.crc32(cells):08x}" != kept["crc32"]:
            raise _damaged(path, [_problem(path, "crc32", "is not that of the cells", kept["crc32"])])
        try:
            self._violations = [Violation(**violation) for violation in kept["violations"]]
            self._pins = {int(pin): PinHistory(int(high), int(low)) for pin, (high, low) in kept["pins"].items()}
        except (TypeError, ValueError) as error:
            raise _damaged(path, [_problem(path, "pins, violations", "are damaged", str(error))]) from error
        self._count = kept["violation_count"]
        self.boots = kept["boots"]
        self.chip.cells[:] = cells
        self._take_faults()
        try:
            self.chip.restore(kept["state"])
        except (TypeError, ValueError, KeyError, AttributeError, IndexError) as error:
            raise _damaged(
                path, [_problem(path, "state", "is not what this chip's model keeps", repr(error))]
            ) from error


_SHAPE: dict[str, type | tuple[type, ...]] = {
    "chip": str,
    "model": (str, type(None)),
    "faults": list,
    "boots": int,
    "crc32": str,
    "cells": str,
    "state": dict,
    "pins": dict,
    "violations": list,
    "violation_count": int,
}
_HINT = "`bench new` makes a fresh one"


def _parse(path: Path) -> dict[str, Any]:
    """The file's object with every key of the right kind; all problems in one error."""
    if not path.exists():
        raise FileMistake(
            f"there is no bench {path}",
            where=Where(str(path)),
            wanted="a file that `bench new` made",
            hint=f"pulsewright bench new {path} --chip CHIP",
        )
    try:
        kept = json.loads(read_whole(path))
    except UnicodeDecodeError as error:
        raise _damaged(path, [_problem(path, "", "is not a bench file", "bytes that are no text")]) from error
    except json.JSONDecodeError as error:
        where = Where(str(path), error.lineno, f"column {error.colno}")
        raise _damaged(path, [Problem(where, "is not JSON", error.msg)]) from error
    if not isinstance(kept, dict) or kept.get("what") != _KIND:
        raise _damaged(path, [_problem(path, "what", "is not a bench file", wanted=f'"{_KIND}"')])
    if kept.get("format") != FORMAT:
        raise _damaged(path, [_problem(path, "format", "is another format", repr(kept.get("format")), str(FORMAT))])
    problems = [
        _problem(path, key, "is missing" if key not in kept else "is of another kind")
        for key, kind in _SHAPE.items()
        if key not in kept or not isinstance(kept[key], kind)
    ]
    if not isinstance(kept.get("maker", ""), str):  # older benches have no such key
        problems.append(_problem(path, "maker", "is of another kind"))
    faults = kept.get("faults")
    if isinstance(faults, list) and not all(isinstance(text, str) for text in faults):
        problems.append(_problem(path, "faults", "are not all texts"))
    if problems:
        raise _damaged(path, problems)
    return kept


def _look_at_old(path: Path) -> None:
    """Raises unless the file that is about to be replaced is a bench, whatever state it is in."""
    if _KIND.encode() not in read_whole(path):
        what = f"{path} is there already and is no bench"
        raise FileMistake(what, where=Where(str(path)), hint="choose another name for the bench")


def _problem(path: Path, key: str, what: str, found: str = "", wanted: str = "") -> Problem:
    return Problem(Where(str(path), 0, key), what, found, wanted)


def _damaged(path: Path, problems: list[Problem]) -> RigFileMistake:
    return RigFileMistake(f"the bench file {path} cannot be used", problems, hint=_HINT)


def _texts(value: object) -> list[str]:
    return [str(text) for text in value] if isinstance(value, list | tuple) else []
