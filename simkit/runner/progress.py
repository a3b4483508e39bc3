"""Show how far a run is: a bar on a terminal, plain lines elsewhere, nothing in tests."""

from __future__ import annotations

import sys
import time
from dataclasses import dataclass
from typing import IO, Any, Protocol


@dataclass(frozen=True)
class Tally:
    """How far a run is, in cases.

    Attributes
    ----------
    total, done : int
        Of the study, and settled so far.
    reused : int
        Settled by earlier runs.
    refused, failed : int
        Without a solution, now or before; timed-out ones count as failed.
    to_solve, solved : int
        That this run has to settle itself, and has settled.
    """

    total: int
    done: int = 0
    reused: int = 0
    refused: int = 0
    failed: int = 0
    to_solve: int = 0
    solved: int = 0


class Pace:
    """Cases a second and time left, by a clock nobody can set."""

    def __init__(self) -> None:
        self._begin = time.monotonic()

    def per_second(self, tally: Tally) -> float | None:
        """Cases this run settles in a second, None before the first."""
        elapsed = time.monotonic() - self._begin
        return tally.solved / elapsed if tally.solved and elapsed > 0 else None

    def left_s(self, tally: Tally) -> float | None:
        """Time for the rest at the pace so far, None before the first case."""
        rate = self.per_second(tally)
        return max(0, tally.to_solve - tally.solved) / rate if rate else None


class Progress(Protocol):
    """What a run tells while it goes on."""

    def say(self, text: str) -> None:
        """Show one line."""

    def start(self, tally: Tally) -> None:
        """Begin to count."""

    def update(self, tally: Tally) -> None:
        """Show how far the run is now."""

    def close(self) -> None:
        """End the display."""


class QuietProgress:
    """Says nothing."""

    def say(self, text: str) -> None:
        """Show nothing."""

    def start(self, tally: Tally) -> None:
        """Count nothing."""

    def update(self, tally: Tally) -> None:
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
        self._last = time.monotonic()
        self._pace = Pace()

    def say(self, text: str) -> None:
        """Show one line."""
        print(text, file=self._stream, flush=True)

    def start(self, tally: Tally) -> None:
        """Begin to count."""
        self._last = time.monotonic()
        self._pace = Pace()

    def update(self, tally: Tally) -> None:
        """Show a line if the last one is old enough, and at the end."""
        now = time.monotonic()
        if tally.done < tally.total and now - self._last < self._interval_s:
            return
        self._last = now
        self.say(progress_text(tally, self._pace.per_second(tally), self._pace.left_s(tally)))

    def close(self) -> None:
        """Do nothing."""


class BarProgress:
    """A bar with counts, pace and time left, on a terminal.

    Parameters
    ----------
    stream : text file
    """

    def __init__(self, stream: IO[str]) -> None:
        from rich.console import Console

        self._console = Console(file=stream, highlight=False)
        self._bar: Any = None
        self._task: Any = None
        self._pace = Pace()

    def say(self, text: str) -> None:
        """Show one line above the bar."""
        self._console.print(text, markup=False, soft_wrap=True)

    def start(self, tally: Tally) -> None:
        """Begin to count."""
        from rich.progress import BarColumn, TextColumn
        from rich.progress import Progress as RichProgress

        self._pace = Pace()
        self._bar = RichProgress(
            BarColumn(bar_width=None),
            TextColumn("{task.fields[note]}", markup=False),
            console=self._console,
            expand=True,
        )
        note = progress_text(tally, None, None)
        self._task = self._bar.add_task("", total=tally.total, completed=tally.done, note=note)
        self._bar.start()

    def update(self, tally: Tally) -> None:
        """Move the bar."""
        if self._bar is not None:
            note = progress_text(tally, self._pace.per_second(tally), self._pace.left_s(tally))
            self._bar.update(self._task, completed=tally.done, note=note)

    def close(self) -> None:
        """Leave the bar as it stands."""
        if self._bar is not None:
            self._bar.stop()
            self._bar = None


def choose_progress(stream: IO[str] | None = None) -> Progress:
    """A bar if `stream` (standard error by default) is a terminal, else plain lines."""
    stream = stream or sys.stderr
    return BarProgress(stream) if stream.isatty() else LineProgress(stream)


def duration_text(seconds: float) -> str:
    """Such as "42 s", "3 min 20 s", "2 h 05 min"."""
    whole = round(seconds)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60:02d} s"
    return f"{whole // 3600} h {whole % 3600 // 60:02d} min"


def progress_text(tally: Tally, per_second: float | None, left_s: float | None) -> str:
    """One line: "12 of 60 cases, 4 reused, 1 failed, 2.4 cases a second, 3 min 20 s left"."""
    parts = [f"{tally.done} of {tally.total} cases"]
    counts = {"reused": tally.reused, "refused": tally.refused, "failed": tally.failed}
    parts += [f"{count} {word}" for word, count in counts.items() if count]
    if per_second is not None:
        parts.append(f"{per_second:.3g} cases a second")
    if left_s is not None and tally.done < tally.total:
        parts.append(f"{duration_text(left_s)} left")
    return ", ".join(parts)
