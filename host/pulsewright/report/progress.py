"""How far a job is: a live line on a terminal, plain lines elsewhere. Words and time only; colour says nothing."""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import TYPE_CHECKING, TextIO

from pulsewright.link.results import LinkProgress

if TYPE_CHECKING:
    from rich.live import Live
    from rich.text import Text

_RULER = 10  # characters
_REFRESHES_A_SECOND = 8


def ruler(done: int, words: int) -> str:
    """A scale of fixed length, ruled as far as the work is."""
    ruled = _RULER * min(done, words) // words if words else 0
    return "├" + "─" * ruled + " " * (_RULER - ruled) + "┤"


def duration(seconds: float) -> str:
    """A time for a person: "48 s", "3 min 20 s"."""
    whole = max(0, round(seconds))
    return f"{whole // 60} min {whole % 60} s" if whole >= 60 else f"{whole} s"


def progress_text(title: str, done: int, words: int, seconds: float) -> str:
    """One line: what, how far, at what rate, how much longer; without words only what and since when."""
    if not words:
        return f"{title}  {duration(seconds)}"
    text = f"{title}  {ruler(done, words)}  {done} of {words} words"
    if done and seconds > 0:
        text += f"  {round(done / seconds)}/s  {duration((words - done) * seconds / done)} left"
    return text


class PlainProgress:
    """Lines on a stream that is no terminal: each stage as it begins, each fact as it is known."""

    def __init__(self, stream: TextIO) -> None:
        self._stream = stream

    def begin(self, title: str, words: int) -> None:
        """A stage begins."""
        self.fact(f"{title}, {words} words" if words else title)

    def link(self, progress: LinkProgress) -> None:
        """Plain lines do not follow every block."""

    def fact(self, text: str) -> None:
        """A line."""
        print(text, file=self._stream, flush=True)

    def end(self) -> None:
        """Nothing is pending on plain lines."""


class LiveProgress:
    """One live line on a terminal, by rich; facts scroll past above it."""

    def __init__(self, stream: TextIO, clock_s: Callable[[], float] = time.monotonic) -> None:
        from rich.console import Console

        self._console = Console(file=stream, highlight=False)
        self._clock_s = clock_s
        self._live: Live | None = None
        self._title, self._words, self._done, self._began_s = "", 0, 0, 0.0

    def begin(self, title: str, words: int) -> None:
        """A stage begins: the live line turns to it."""
        from rich.live import Live

        self.end()
        self._title, self._words, self._done, self._began_s = title, words, 0, self._clock_s()
        self._live = Live(
            get_renderable=self._line,
            console=self._console,
            refresh_per_second=_REFRESHES_A_SECOND,
            transient=True,
            redirect_stdout=False,
            redirect_stderr=False,
        )
        self._live.start()

    def _line(self) -> Text:
        from rich.text import Text

        return Text(self.text(), no_wrap=True, overflow="ellipsis")

    def text(self) -> str:
        """The live line as it is now."""
        return progress_text(self._title, self._done, self._words, self._clock_s() - self._began_s)

    def link(self, progress: LinkProgress) -> None:
        """The next refresh shows it."""
        if progress.stage == "run":
            self._done = min(progress.words, self._words)  # blocks count words that are skipped in them, too

    def fact(self, text: str) -> None:
        """A line above the live one."""
        self._console.print(text, markup=False, soft_wrap=True)

    def end(self) -> None:
        """The live line goes; how long the stage took stays."""
        if self._live is None:
            return
        self._live.stop()
        self._live = None
        count = f", {self._words} words" if self._words else ""
        self.fact(f"{self._title}{count}: {duration(self._clock_s() - self._began_s)}")
