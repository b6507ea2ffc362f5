"""Where in a TOML text each key stands: tomllib gives values without lines, and a mistake wants its line.

A key's path is a tuple of names and array indices: `("program", "steps", 0, "mode")`, printed `program.steps[0].mode`.
The scanner trusts that the text is TOML (tomllib has read it before); on a text that is not, it stops early and keeps
the lines found so far, so that a lookup falls back to the nearest table around the key.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from contextlib import suppress
from dataclasses import dataclass

from pulsewright.errors import Where

KeyPath = tuple[str | int, ...]

_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_BASIC = re.compile(r'"(?:[^"\\\n]|\\.)*"')
_LITERAL = re.compile(r"'[^'\n]*'")
_LONG_BASIC = re.compile(r'"""(?:[^\\]|\\.)*?"""(?:"{0,2})(?!")', re.DOTALL)
_LONG_LITERAL = re.compile(r"'''.*?'''(?:'{0,2})(?!')", re.DOTALL)
_SCALAR = re.compile(r"[^,\]}#\n]+")
_BLANK = re.compile(r"[ \t]*")
_BLANK_LINES = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_PLACE = re.compile(r"\(at line (\d+), column \d+\)")


class _Lost(Exception):
    """The text is not what the scanner expects; what was found so far stays."""


def dotted(path: KeyPath) -> str:
    """A path as text: `program.steps[0].mode`; names that are not plain are quoted."""
    text = ""
    for part in path:
        if isinstance(part, int):
            text += f"[{part}]"
        else:
            name = part if _BARE_KEY.fullmatch(part) else f'"{part}"'
            text += f".{name}" if text else name
    return text


class _Scanner:
    def __init__(self, text: str) -> None:
        self.text = text.replace("\r\n", "\n")
        self.at = 0
        self.lines: dict[KeyPath, int] = {}
        self.rows: dict[KeyPath, int] = {}  # arrays of tables: how many so far
        self._counted_to, self._line = 0, 1

    def line(self) -> int:
        """The line of the current place, counted from 1."""
        self._line += self.text.count("\n", self._counted_to, self.at)
        self._counted_to = self.at
        return self._line

    def starts(self, text: str) -> bool:
        return self.text.startswith(text, self.at)

    def skip(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self.text, self.at)
        if match is None:
            raise _Lost
        self.at = match.end()
        return match[0]

    def take(self, text: str) -> None:
        if not self.starts(text):
            raise _Lost
        self.at += len(text)

    def mark(self, path: KeyPath, line: int) -> None:
        for length in range(1, len(path) + 1):
            self.lines.setdefault(path[:length], line)

    def document(self) -> None:
        base: KeyPath = ()
        self.skip(_BLANK_LINES)
        while self.at < len(self.text):
            if self.starts("["):
                base = self.header()
            else:
                self.pair(base)
            self.skip(_BLANK_LINES)

    def header(self) -> KeyPath:
        line, double = self.line(), self.starts("[[")
        self.take("[[" if double else "[")
        names = self.key()
        self.take("]]" if double else "]")
        path: KeyPath = ()
        for name in names[:-1]:
            path = self.into_row((*path, name))
        path = (*path, names[-1])
        if double:
            self.rows[path] = self.rows.get(path, 0) + 1
        self.mark(path, line)
        path = self.into_row(path)
        self.mark(path, line)
        return path

    def into_row(self, path: KeyPath) -> KeyPath:
        return (*path, self.rows[path] - 1) if path in self.rows else path

    def key(self) -> list[str]:
        names = []
        while True:
            self.skip(_BLANK)
            if self.starts('"') or self.starts("'"):
                quoted = self.skip(_BASIC if self.starts('"') else _LITERAL)
                names.append(str(tomllib.loads(f"key = {quoted}")["key"]))
            else:
                names.append(self.skip(_BARE_KEY))
            self.skip(_BLANK)
            if not self.starts("."):
                return names
            self.at += 1

    def pair(self, base: KeyPath) -> None:
        line = self.line()
        path = (*base, *self.key())
        self.mark(path, line)
        self.take("=")
        self.skip(_BLANK)
        self.value(path)

    def value(self, path: KeyPath) -> None:
        for opening, pattern in (('"""', _LONG_BASIC), ("'''", _LONG_LITERAL), ('"', _BASIC), ("'", _LITERAL)):
            if self.starts(opening):
                self.skip(pattern)
                return
        if self.starts("["):
            self.array(path)
        elif self.starts("{"):
            self.inline_table(path)
        else:
            self.skip(_SCALAR)

    def array(self, path: KeyPath) -> None:
        self.take("[")
        index = 0
        self.skip(_BLANK_LINES)
        while not self.starts("]"):
            self.mark((*path, index), self.line())
            self.value((*path, index))
            index += 1
            self.comma("]")
        self.take("]")

    def inline_table(self, path: KeyPath) -> None:
        self.take("{")
        self.skip(_BLANK_LINES)
        while not self.starts("}"):
            self.pair(path)
            self.comma("}")
        self.take("}")

    def comma(self, closing: str) -> None:
        self.skip(_BLANK_LINES)
        if not self.starts(closing):
            self.take(",")
            self.skip(_BLANK_LINES)


def scan(text: str) -> dict[KeyPath, int]:
    """The line (from 1) of every key, table and array element of a TOML text."""
    scanner = _Scanner(text)
    with suppress(_Lost, tomllib.TOMLDecodeError):  # not TOML: what was found so far is still right
        scanner.document()
    return scanner.lines


def syntax_line(mistake: tomllib.TOMLDecodeError, text: str) -> tuple[int, str]:
    """The line at which tomllib gave up, and its message without the place; at the end of a text: the last line."""
    match = _PLACE.search(str(mistake))
    message = re.sub(r"\s*\(at [^)]*\)$", "", str(mistake))
    return (int(match[1]) if match else max(1, text.rstrip("\n").count("\n") + 1)), message


@dataclass(frozen=True)
class SourceText:
    """A file and the lines of its keys."""

    file: str
    lines: Mapping[KeyPath, int]


@dataclass(frozen=True)
class _Mount:
    prefix: KeyPath  # where in the resolved tree
    source: SourceText
    target: KeyPath  # where in that file
    exact: bool  # only where the file really has the key


class Places:
    """From a path in a resolved tree to file, line and key, maker rows and method files included."""

    def __init__(self, main: SourceText) -> None:
        self.main = main
        self._mounts: list[_Mount] = []

    def mount(self, prefix: KeyPath, source: SourceText, target: KeyPath, *, exact: bool) -> None:
        """Keys below `prefix` come from `target` of `source`; with `exact`, only those that stand there."""
        self._mounts.append(_Mount(prefix, source, target, exact))

    def where(self, path: KeyPath) -> Where:
        """The place of a key; one that is missing gets the line of the nearest table around it (0: the whole file)."""
        for mount in reversed(self._mounts):
            if path[: len(mount.prefix)] == mount.prefix:
                inside = (*mount.target, *path[len(mount.prefix) :])
                if not mount.exact or inside in mount.source.lines:
                    return _nearest(mount.source, inside)
        return self.main_where(path)

    def main_where(self, path: KeyPath) -> Where:
        """The place of a key in the definition file itself."""
        return _nearest(self.main, path)


def _nearest(source: SourceText, path: KeyPath) -> Where:
    for length in range(len(path), 0, -1):
        line = source.lines.get(path[:length])
        if line is not None:
            return Where(source.file, line, dotted(path))
    return Where(source.file, 0, dotted(path))
