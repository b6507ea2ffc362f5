"""Progress on a terminal and on plain streams."""

from __future__ import annotations

import io

import pytest

from pulsewright.link.results import LinkProgress
from pulsewright.report.progress import LiveProgress, PlainProgress, duration, progress_text, ruler


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_the_line_tells_words_rate_and_time_left() -> None:
    """A quarter done in 10 s leaves 30 s."""
    text = progress_text("burn", 1000, 4000, 10.0)
    assert text == "burn  ├──        ┤  1000 of 4000 words  100/s  30 s left"


def test_a_stage_without_words_tells_its_time() -> None:
    """An erase is not counted in words."""
    assert progress_text("erase", 0, 0, 75.2) == "erase  1 min 15 s"


@pytest.mark.parametrize(("done", "ruled"), [(0, 0), (9, 0), (50, 5), (100, 10), (200, 10)])
def test_the_ruler_follows_the_work(done: int, ruled: int) -> None:
    """The ruled part is proportional, and never longer than the scale."""
    text = ruler(done, 100)
    assert len(text) == 12
    assert text.count("─") == ruled


def test_durations_are_whole_seconds() -> None:
    """Below a minute seconds alone, above both; never negative."""
    assert [duration(value) for value in (-1, 0.4, 59, 60, 200.4)] == ["0 s", "0 s", "59 s", "1 min 0 s", "3 min 20 s"]


def test_plain_progress_writes_lines_only() -> None:
    """Stages and facts are lines; blocks are not."""
    stream = io.StringIO()
    progress = PlainProgress(stream)
    progress.begin("burn", 256)
    progress.link(LinkProgress("run", 1, 256, 10))
    progress.fact("256 words burnt")
    progress.end()
    assert stream.getvalue() == "burn, 256 words\n256 words burnt\n"


def test_the_live_line_shows_the_words_and_leaves_the_facts(monkeypatch: pytest.MonkeyPatch) -> None:
    """While it runs the line tells how far the job is; afterwards the stage and its time stay."""
    monkeypatch.setenv("TERM", "xterm")
    monkeypatch.setenv("COLUMNS", "120")
    times = iter([0.0] + [4.0] * 1000)
    stream = Terminal()
    progress = LiveProgress(stream, lambda: next(times))
    progress.begin("read", 1000)
    progress.link(LinkProgress("run", 2, 500, 10))
    assert progress.text() == "read  ├─────     ┤  500 of 1000 words  125/s  4 s left"
    progress.end()
    assert "read, 1000 words: 4 s" in stream.getvalue()


def test_no_color_leaves_no_colour(monkeypatch: pytest.MonkeyPatch) -> None:
    """With NO_COLOR no escape sequence sets a colour."""
    monkeypatch.setenv("TERM", "xterm-256color")
    monkeypatch.setenv("NO_COLOR", "1")
    stream = Terminal()
    progress = LiveProgress(stream)
    progress.begin("erase", 0)
    progress.fact("erased in 3 of 20 pulses")
    progress.end()
    assert "\x1b[3" not in stream.getvalue()
    assert "erased in 3 of 20 pulses" in stream.getvalue()


def test_words_that_a_block_skips_do_not_lead_past_the_end() -> None:
    """The rig answers for whole blocks; the line never tells more words than the stage has."""
    progress = LiveProgress(Terminal(), lambda: 0.0)
    progress.begin("burn", 100)
    progress.link(LinkProgress("run", 1, 256, 10))
    assert "100 of 100 words" in progress.text()
    progress.end()
