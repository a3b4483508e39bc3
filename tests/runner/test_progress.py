from __future__ import annotations

import io

import pytest

from simkit.runner.progress import (
    BarProgress,
    LineProgress,
    choose_progress,
    duration_text,
    progress_text,
    time_left_s,
)


@pytest.mark.parametrize(
    ("seconds", "text"),
    [(0.4, "0 s"), (42.4, "42 s"), (59.6, "1 min 00 s"), (200, "3 min 20 s"), (7500, "2 h 05 min")],
)
def test_durations(seconds, text):
    assert duration_text(seconds) == text


def test_time_left():
    assert time_left_s(10.0, 4, 6) == 15.0
    assert time_left_s(10.0, 0, 6) is None


def test_one_line():
    assert progress_text(12, 60, 1, 200.0) == (
        "12 of 60 cases, 1 without solution, 3 min 20 s left"
    )
    assert progress_text(60, 60, 0, 0.0) == "60 of 60 cases"


def test_plain_lines_come_now_and_then_and_at_the_end():
    stream = io.StringIO()
    lines = LineProgress(stream, interval_s=1e9)
    lines.say("5 cases")
    lines.start(5, 1)
    for done in (2, 3, 4, 5):
        lines.update(done, 0)
    lines.close()
    assert stream.getvalue().splitlines() == ["5 cases", "5 of 5 cases"]


def test_the_interval_is_kept():
    stream = io.StringIO()
    lines = LineProgress(stream, interval_s=0.0)
    lines.start(3, 0)
    lines.update(1, 1)
    assert stream.getvalue().startswith("1 of 3 cases, 1 without solution")


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_a_terminal_gets_a_bar_and_a_pipe_gets_lines():
    assert isinstance(choose_progress(Terminal()), BarProgress)
    assert isinstance(choose_progress(io.StringIO()), LineProgress)


def test_the_bar_counts_and_ends(monkeypatch):
    monkeypatch.setenv("TERM", "xterm")
    stream = Terminal()
    bar = BarProgress(stream)
    bar.say("24 cases [in] blocks")
    bar.start(24, 4)
    bar.update(24, 2)
    bar.close()
    bar.update(24, 2)
    text = stream.getvalue()
    assert "24 cases [in] blocks" in text
    assert "24/24" in text
    assert "2 without solution" in text
