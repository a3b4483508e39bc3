from __future__ import annotations

import io

import pytest

from simkit.runner.progress import (
    BarProgress,
    LineProgress,
    Pace,
    Tally,
    choose_progress,
    duration_text,
    progress_text,
)


@pytest.mark.parametrize(
    ("seconds", "text"),
    [(0.4, "0 s"), (42.4, "42 s"), (59.6, "1 min 00 s"), (200, "3 min 20 s"), (7500, "2 h 05 min")],
)
def test_durations(seconds, text):
    assert duration_text(seconds) == text


def test_the_pace_counts_what_this_run_solved(monkeypatch):
    clock = iter([100.0, 110.0, 110.0, 110.0])
    monkeypatch.setattr("time.monotonic", lambda: next(clock))
    pace = Pace()
    tally = Tally(60, done=44, reused=40, to_solve=20, solved=5)
    assert pace.per_second(tally) == 0.5
    assert pace.left_s(tally) == 30.0
    assert pace.left_s(Tally(60, done=40, to_solve=20)) is None


def test_one_line():
    tally = Tally(60, done=12, reused=4, refused=2, failed=1, to_solve=50, solved=8)
    assert progress_text(tally, 2.345, 200.0) == (
        "12 of 60 cases, 4 reused, 2 refused, 1 failed, 2.35 cases a second, 3 min 20 s left"
    )
    assert progress_text(Tally(60, done=60), None, None) == "60 of 60 cases"


def test_plain_lines_come_now_and_then_and_at_the_end():
    stream = io.StringIO()
    lines = LineProgress(stream, interval_s=1e9)
    lines.say("5 cases")
    lines.start(Tally(5, done=1))
    for done in (2, 3, 4, 5):
        lines.update(Tally(5, done=done))
    lines.close()
    assert stream.getvalue().splitlines() == ["5 cases", "5 of 5 cases"]


def test_the_interval_is_kept():
    stream = io.StringIO()
    lines = LineProgress(stream, interval_s=0.0)
    lines.start(Tally(3))
    lines.update(Tally(3, done=1, failed=1))
    assert stream.getvalue().startswith("1 of 3 cases, 1 failed")


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
    bar.start(Tally(24, done=4, reused=4, to_solve=20))
    bar.update(Tally(24, done=24, reused=4, failed=2, to_solve=20, solved=20))
    bar.close()
    bar.update(Tally(24, done=24))
    text = stream.getvalue()
    assert "24 cases [in] blocks" in text
    assert "24 of 24 cases, 4 reused, 2 failed" in text
