"""Show how far a run is: a bar on a terminal, plain lines elsewhere, nothing in tests."""

from __future__ import annotations

import sys
import time
from typing import IO, Any, Protocol


class Progress(Protocol):
    """What a run tells while it goes on."""

    def say(self, text: str) -> None:
        """Show one line."""

    def start(self, total: int, done: int) -> None:
        """Begin to count: `total` cases, of which `done` need no work."""

    def update(self, done: int, failed: int) -> None:
        """`done` cases are settled now, `failed` of them without a solution."""

    def close(self) -> None:
        """End the display."""


class QuietProgress:
    """Says nothing."""

    def say(self, text: str) -> None:
        """Show nothing."""

    def start(self, total: int, done: int) -> None:
        """Count nothing."""

    def update(self, done: int, failed: int) -> None:
        """Show nothing."""

    def close(self) -> None:
        """Do nothing."""


class LineProgress:
    """A plain line now and then, for logs and pipes.

    Parameters
    ----------
    stream : text file
    interval_s : float
        Least time between two lines.
    """

    def __init__(self, stream: IO[str], interval_s: float = 10.0) -> None:
        self._stream = stream
        self._interval_s = interval_s
        self._begin = self._last = time.monotonic()
        self._total = self._reused = 0

    def say(self, text: str) -> None:
        """Show one line."""
        print(text, file=self._stream, flush=True)

    def start(self, total: int, done: int) -> None:
        """Begin to count."""
        self._total, self._reused = total, done
        self._begin = self._last = time.monotonic()

    def update(self, done: int, failed: int) -> None:
        """Show a line if the last one is old enough, and at the end."""
        now = time.monotonic()
        if done < self._total and now - self._last < self._interval_s:
            return
        self._last = now
        left = time_left_s(now - self._begin, done - self._reused, self._total - done)
        self.say(progress_text(done, self._total, failed, left))

    def close(self) -> None:
        """Do nothing."""


class BarProgress:
    """A bar with time left, on a terminal.

    Parameters
    ----------
    stream : text file
    """

    def __init__(self, stream: IO[str]) -> None:
        from rich.console import Console

        self._console = Console(file=stream, highlight=False)
        self._bar: Any = None
        self._task: Any = None

    def say(self, text: str) -> None:
        """Show one line above the bar."""
        self._console.print(text, markup=False, soft_wrap=True)

    def start(self, total: int, done: int) -> None:
        """Begin to count."""
        from rich.progress import (
            BarColumn,
            MofNCompleteColumn,
            TextColumn,
            TimeElapsedColumn,
            TimeRemainingColumn,
        )
        from rich.progress import Progress as RichProgress

        self._bar = RichProgress(
            TextColumn("cases"),
            BarColumn(),
            MofNCompleteColumn(),
            TextColumn("{task.fields[note]}"),
            TimeElapsedColumn(),
            TextColumn("left"),
            TimeRemainingColumn(),
            console=self._console,
        )
        self._task = self._bar.add_task("cases", total=total, completed=done, note="")
        self._bar.start()

    def update(self, done: int, failed: int) -> None:
        """Move the bar."""
        if self._bar is not None:
            note = f"{failed} without solution" if failed else ""
            self._bar.update(self._task, completed=done, note=note)

    def close(self) -> None:
        """Leave the bar as it stands."""
        if self._bar is not None:
            self._bar.stop()
            self._bar = None


def choose_progress(stream: IO[str] | None = None) -> Progress:
    """A bar if `stream` (standard error by default) is a terminal, else plain lines."""
    stream = stream or sys.stderr
    return BarProgress(stream) if stream.isatty() else LineProgress(stream)


def time_left_s(elapsed_s: float, done: int, left: int) -> float | None:
    """Time for `left` cases at the pace so far, None before the first is done."""
    return elapsed_s / done * left if done > 0 else None


def duration_text(seconds: float) -> str:
    """Such as "42 s", "3 min 20 s", "2 h 05 min"."""
    whole = round(seconds)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60:02d} s"
    return f"{whole // 3600} h {whole % 3600 // 60:02d} min"


def progress_text(done: int, total: int, failed: int, left_s: float | None) -> str:
    """One line: "12 of 60 cases, 1 without solution, 3 min 20 s left"."""
    parts = [f"{done} of {total} cases"]
    if failed:
        parts.append(f"{failed} without solution")
    if left_s is not None and done < total:
        parts.append(f"{duration_text(left_s)} left")
    return ", ".join(parts)
