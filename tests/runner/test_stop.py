from __future__ import annotations

import os
import time
from datetime import datetime

import pytest

from simkit.errors import SimkitError
from simkit.runner import stop
from simkit.runner.stop import Deadline, StopRequest


@pytest.fixture
def clock(monkeypatch):
    """A steady clock that is moved by hand."""
    now = {"s": 5000.0}
    monkeypatch.setattr(stop, "steady_s", lambda: now["s"])
    return now


@pytest.mark.parametrize(
    ("now", "text", "hours"),
    [
        (datetime(2026, 3, 5, 22, 30), "07:00", 8.5),
        (datetime(2026, 3, 5, 6, 0), "7:00", 1.0),
        (datetime(2026, 3, 5, 7, 0), "07:00", 24.0),
    ],
)
def test_the_next_time_the_clock_shows_the_hour(clock, now, text, hours):
    deadline = Deadline.at(text, now)
    clock["s"] += hours * 3600 - 1
    assert not deadline.passed()
    clock["s"] += 1
    assert deadline.passed()


@pytest.fixture
def berlin(monkeypatch):
    monkeypatch.setenv("TZ", "CET-1CEST,M3.5.0,M10.5.0/3")
    time.tzset()
    yield
    monkeypatch.undo()
    time.tzset()


@pytest.mark.parametrize(("day", "hours"), [(29, 8.0), (28, 9.0)])
def test_a_night_with_a_change_to_summer_time_is_an_hour_shorter(berlin, clock, day, hours):
    """In 2026 the clocks go forward in the night to 29 March."""
    deadline = Deadline.at("07:00", datetime(2026, 3, day - 1, 22, 0))
    assert deadline.steady_s == 5000 + hours * 3600


@pytest.mark.parametrize("text", ["", "7", "24:00", "07:60", "7 am", "-1:00"])
def test_what_is_no_hour_is_said(text):
    with pytest.raises(SimkitError, match="an hour and a minute of the day, as in 07:00"):
        Deadline.at(text)


def test_the_steady_clock_runs():
    first = stop.steady_s()
    assert 0 <= stop.steady_s() - first < 60


def test_reasons(clock):
    deadline = Deadline("07:00", 6000.0)
    with StopRequest(deadline) as request:
        assert request.reason() == ""
        clock["s"] = 6000.0
        assert request.reason() == "at 07:00, as asked"
        os.kill(os.getpid(), 15)
        time.sleep(0)
        assert request.reason() == "on request"
        with pytest.raises(KeyboardInterrupt):  # noqa: PT012
            os.kill(os.getpid(), 2)
            time.sleep(1)
