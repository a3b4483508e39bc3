"""``log.txt``: one line per event."""

from __future__ import annotations

import contextlib
import time
from datetime import datetime
from pathlib import Path

from simkit.store.remote import Place

_FLUSH_S = 10.0
"""At an address nothing can be appended: the whole text is written anew, not more often."""


class EventLog:
    """Append lines with date, time and zone to a file.

    Parameters
    ----------
    path : Path or RemotePath
        Need not exist.
    """

    def __init__(self, path: Place) -> None:
        self.path = path
        self._text = ""
        self._written = -_FLUSH_S
        if not isinstance(path, Path):
            with contextlib.suppress(OSError):
                self._text = path.read_text()

    def write(self, text: str) -> None:
        """Add one event; further lines of `text`, as of a traceback, are indented."""
        stamp = datetime.now().astimezone().isoformat(" ", "seconds")
        body = text.rstrip().replace("\n", "\n    ")
        line = f"{stamp} {body}\n"
        if not isinstance(self.path, Path):
            self._text += line
            if time.monotonic() - self._written > _FLUSH_S:
                self.flush()
            return
        # A log that cannot be written must not end a run: the store says what counts.
        with contextlib.suppress(OSError), self.path.open("a", encoding="utf-8") as file:
            file.write(line)

    def flush(self) -> None:
        """Write what is still held back."""
        if isinstance(self.path, Path):
            return
        self._written = time.monotonic()
        with contextlib.suppress(Exception):
            self.path.write_text(self._text)


def last_line(path: Place) -> str:
    """The last event, empty if there is none."""
    with contextlib.suppress(OSError):
        if not isinstance(path, Path):
            return path.read_text().rstrip().rpartition("\n")[2]
        with path.open("rb") as file:
            file.seek(max(0, path.stat().st_size - 4096))
            return file.read().decode("utf-8", "replace").rstrip().rpartition("\n")[2]
    return ""
