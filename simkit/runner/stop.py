"""Why a run ends early: Ctrl-C (once finishes what is in hand, twice stops at once), an hour."""

from __future__ import annotations

import re
import signal
import threading
import time
from dataclasses import dataclass
from datetime import datetime, timedelta
from types import FrameType, TracebackType
from typing import Any

from simkit.errors import SimkitError

_SIGNALS = (signal.SIGINT, signal.SIGTERM)


def steady_s() -> float:
    """Seconds of a clock that nobody can set and that goes on while the machine is suspended."""
    if hasattr(time, "CLOCK_BOOTTIME"):
        return time.clock_gettime(time.CLOCK_BOOTTIME)
    return time.monotonic()


@dataclass(frozen=True)
class Deadline:
    """An hour at which no further block is started.

    The wall clock is read once, when the run begins; what is done to it later, by hand or by
    summer time, moves nothing. A machine that was suspended past the hour stops when it wakes.

    Attributes
    ----------
    text : str
        As given, ``07:00``.
    steady_s : float
        The hour on the clock of `steady_s`.
    """

    text: str
    steady_s: float

    @classmethod
    def at(cls, text: str, now: datetime | None = None) -> Deadline:
        """The next time the clock shows `text`.

        Raises
        ------
        SimkitError
            It is no time of day.
        """
        match = re.fullmatch(r"([01]?\d|2[0-3]):([0-5]\d)", text.strip())
        if match is None:
            raise SimkitError(
                f"until {text!r}: write an hour and a minute of the day, as in 07:00 or 23:30"
            )
        now = now or datetime.now()
        hour = now.replace(hour=int(match[1]), minute=int(match[2]), second=0, microsecond=0)
        if hour <= now:
            hour += timedelta(days=1)
        # Local times with their own zones, so that a change to summer time is counted.
        left = hour.astimezone() - now.astimezone()
        return cls(text.strip(), steady_s() + left.total_seconds())

    def passed(self) -> bool:
        """Whether the hour has come."""
        return steady_s() >= self.steady_s


class StopRequest:
    """Listen for Ctrl-C and for the polite signal to end, inside a ``with`` block.

    Attributes
    ----------
    asked : bool
        A first signal came. It does no more than set this, since it may come in the middle of
        anything; the second one raises `KeyboardInterrupt`.

    Notes
    -----
    Outside the main thread signals cannot be heard and nothing is changed.
    """

    def __init__(self, deadline: Deadline | None = None) -> None:
        self.asked = False
        self._deadline = deadline
        self._before: dict[signal.Signals, Any] = {}

    def reason(self) -> str:
        """Why no further block may be started, empty if one may."""
        if self.asked:
            return "on request"
        if self._deadline is not None and self._deadline.passed():
            return f"at {self._deadline.text}, as asked"
        return ""

    def __enter__(self) -> StopRequest:
        if threading.current_thread() is threading.main_thread():
            for number in _SIGNALS:
                self._before[number] = signal.signal(number, self._hear)
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        for number, handler in self._before.items():
            signal.signal(number, handler)

    def _hear(self, number: int, frame: FrameType | None) -> None:
        if self.asked:
            raise KeyboardInterrupt
        self.asked = True
