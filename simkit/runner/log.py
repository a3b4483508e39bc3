"""``log.txt``: one line per event."""

from __future__ import annotations

import contextlib
from datetime import datetime
from pathlib import Path


class EventLog:
    """Append lines with date, time and zone to a file.

    Parameters
    ----------
    path : Path
        Need not exist.
    """

    def __init__(self, path: Path) -> None:
        self.path = path

    def write(self, text: str) -> None:
        """Add one event; further lines of `text`, as of a traceback, are indented."""
        stamp = datetime.now().astimezone().isoformat(" ", "seconds")
        body = text.rstrip().replace("\n", "\n    ")
        # A log that cannot be written must not end a run: the store says what counts.
        with contextlib.suppress(OSError), self.path.open("a", encoding="utf-8") as file:
            file.write(f"{stamp} {body}\n")
