"""The permanent lock: no order in which a definition's writes can come holds its six words in a row."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from pulsewright.chip.findings import Findings
from pulsewright.chip.lines import KeyPath
from pulsewright.chip.model import Cycle, EachStep, ExpectStep, LoadStep, RepeatStep, Step, WriteStep
from pulsewright.errors import Where

LOCK = (0xAA, 0x55, 0x80, 0xAA, 0x55, 0x40)  # boot-block lock of page-write flash: it can never be undone
_TEXT = " ".join(f"{value:02X}" for value in LOCK)
_WANTED = "no such sequence: it can never be undone"


def check(found: Findings) -> None:
    """No command, step list or identification holds the lock, over any path; nor does any list of plain numbers."""
    for cycles in found.defn.commands.values():
        _Paths(found).writes(cycles)
    defn = found.defn
    for method in (defn.program, defn.protected, defn.erase):
        if method is not None:
            # `finally` may follow each step, as any may fail
            paths = _Paths(found)
            paths.steps(method.steps)
            paths.tails |= paths.seen
            paths.steps(method.finally_)
    for steps in (defn.protect.on, defn.protect.off) if defn.protect is not None else ():
        _Paths(found).steps(steps)
    if defn.identify_command is not None:
        _Paths(found).writes((*defn.identify_command.enter, *defn.identify_command.leave))
    for name in found.tree.names():
        _numbers(found, name)


class _Paths:
    """What may have been written last, over all paths: each tail is up to five words of a beginning of the lock."""

    def __init__(self, found: Findings) -> None:
        self.found = found
        self.tails: set[tuple[int, ...]] = {()}
        self.seen: set[tuple[int, ...]] = {()}

    def steps(self, steps: Iterable[Step]) -> None:
        for step in steps:
            if isinstance(step, WriteStep):
                self.writes(step.cycles, step.where)
            elif isinstance(step, LoadStep):
                self.image(step.where)
            elif isinstance(step, RepeatStep | EachStep):
                self.loop(step.steps)
            elif isinstance(step, ExpectStep):
                before = set(self.tails)
                self.steps(step.else_)
                self.tails |= before

    def loop(self, steps: tuple[Step, ...]) -> None:
        """Turn after turn, until no turn brings a new tail."""
        before: set[tuple[int, ...]] = set()
        while not self.tails <= before:
            before |= self.tails
            self.steps(steps)
        self.tails |= before

    def writes(self, cycles: Iterable[Cycle], step: Where | None = None) -> None:
        for cycle in cycles:
            if cycle.word is None:
                self.image(cycle.where)
                continue
            word = cycle.word & 0xFF  # word-wide parts take the code in the low byte
            longer = {(*tail, word) for tail in self.tails}
            if LOCK in longer:
                self.tell(step or cycle.where)
            self.tails = {_tail(one) for one in longer}
            self.seen |= self.tails

    def image(self, where: Where) -> None:
        """A word of the image may be any, the last of the lock too."""
        if LOCK[:-1] in self.tails:
            self.tell(where)
        self.tails = {()}

    def tell(self, where: Where) -> None:
        self.found.at(where, "a permanent lock in a step list", found=_TEXT, wanted=_WANTED)


def _tail(words: tuple[int, ...]) -> tuple[int, ...]:
    """The longest end that is a beginning of the lock, short of the whole."""
    return next(words[start:] for start in range(len(words) + 1) if words[start:] in _BEGINNINGS)


_BEGINNINGS = {LOCK[:length] for length in range(len(LOCK))}


# ---- plain numbers, whatever the keys that carry them are called ----


def _numbers(found: Findings, table: str) -> None:
    values: list[tuple[int, KeyPath]] = []
    _data_values(found, found.tree.written.get(table), (table,), values)
    flat = [value for value, _ in values]
    for start in range(len(flat) - len(LOCK) + 1):
        if tuple(flat[start : start + len(LOCK)]) == LOCK:
            what = "a permanent lock in a step list"
            found.at(values[start][1], what, found=_TEXT, wanted=_WANTED)


def _data_values(found: Findings, node: object, path: KeyPath, values: list[tuple[int, KeyPath]]) -> None:
    """Data in the order it would be written: D of steps, data of cycles, pairs of address and data, plain lists."""
    if isinstance(node, list):
        numbers = all(isinstance(one, int) for one in node)
        pair = numbers and len(node) == 2 and node[0] > 0xFF
        for index, one in enumerate(node):
            if isinstance(one, int):
                if not pair or index:
                    _data(found, values, one, (*path, index))
            else:
                _data_values(found, one, (*path, index), values)
    elif isinstance(node, Mapping):
        for key, one in node.items():
            if isinstance(one, int):
                if key in ("D", "data", "value", "byte"):
                    _data(found, values, one, (*path, key))
            elif key == "mode" and isinstance(one, str) and "D" not in node:
                mode = found.defn.modes.get(one)
                if mode is not None and isinstance(mode.data, int):
                    _data(found, values, mode.data, (*path, key))
            else:
                _data_values(found, one, (*path, key), values)


def _data(found: Findings, values: list[tuple[int, KeyPath]], value: int, path: KeyPath) -> None:
    """The same value held over several steps counts once; what is wider than a word is an address."""
    if value >= 1 << found.defn.width:
        return
    value &= 0xFF  # word-wide parts take the code in the low byte
    if not values or values[-1][0] != value:
        values.append((value, path))
