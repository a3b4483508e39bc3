"""Hold of a results folder at an address, where no file can be locked: a beating file."""

from __future__ import annotations

import json
import secrets
import threading
import time
from collections.abc import Mapping
from typing import Any

from simkit.errors import StoreError
from simkit.runner.lock import LOCK_NAME, held_text, new_holder
from simkit.store.remote import RemotePath

BEAT_S = 5.0
SILENT_BEATS = 4
"""A lock that does not change for so many beats belongs to a run that is dead."""


class RemoteLock:
    """Exclusive hold of a results folder at an address.

    The holder writes its file anew every few seconds, with a number that rises. Whoever finds one
    that does not change for some beats takes its run for dead. A run that finds somebody else's
    file in the place of its own, as after a long sleep of its machine, has lost the folder.

    Parameters
    ----------
    folder : RemotePath

    Raises
    ------
    StoreError
        Another run holds it, or nothing can be written there.
    """

    def __init__(self, folder: RemotePath) -> None:
        self.path = folder / LOCK_NAME
        self.token = secrets.token_hex(8)
        self._own = self.token
        self._said = new_holder() | {"beat": 0, "beat_s": BEAT_S}
        self._mutex = threading.Lock()
        self._ended = threading.Event()
        self._take(folder)
        self._thread = threading.Thread(target=self._beat, daemon=True, name="simkit-lock")
        self._thread.start()

    def note(self, tally: Mapping[str, float]) -> None:
        """Say how far the run is; it is written with the next beat.

        Raises
        ------
        StoreError
            Another run has taken the folder.
        """
        with self._mutex:
            self._said |= tally
        if self._ended.is_set():
            raise StoreError(
                f"{self.path.parent}: another run has taken over, because this one was silent too "
                "long; what is stored is kept"
            )

    def stop_starting(self) -> None:
        """Tell the workers to begin no further block; those begun are still written."""
        self._said["stopping"] = True
        self._write()

    def revoke(self) -> None:
        """Take from the workers the right to write; what they still do is dropped."""
        self.token = ""
        self._write()

    def release(self) -> None:
        """Give the folder free."""
        lost = self._ended.is_set()
        self._ended.set()
        self._thread.join()
        if not lost and _read(self.path).get("own") == self._own:
            self.path.unlink(missing_ok=True)

    def _take(self, folder: RemotePath) -> None:
        try:
            if self.path.create_text(self._text()):
                return
            holder = _read(self.path)
            if _beats(self.path, holder):
                raise StoreError(held_text(folder, holder))
            self.path.unlink(missing_ok=True)
            if not self.path.create_text(self._text()):
                raise StoreError(held_text(folder, _read(self.path)))
        except StoreError:
            raise
        except Exception as error:
            raise StoreError(
                f"{folder}: the results folder cannot be written: {error}; "
                "choose another with --results"
            ) from error

    def _text(self) -> str:
        return json.dumps(self._said | {"token": self.token, "own": self._own})

    def _write(self) -> None:
        with self._mutex:
            if self._ended.is_set():
                return
            if _read(self.path).get("own", self._own) != self._own:
                self._ended.set()
                return
            self._said["beat"] += 1
            self.path.write_text(self._text())

    def _beat(self) -> None:
        while not self._ended.wait(BEAT_S):
            try:
                self._write()
            except Exception:  # not reached now: the next beat may get through
                continue


def living_holder(folder: RemotePath) -> dict[str, object] | None:
    """Who runs in this folder now, None if nobody does; takes some beats to tell the dead."""
    path = folder / LOCK_NAME
    holder = _read(path)
    return holder if holder and _beats(path, holder) else None


def _beats(path: RemotePath, holder: Mapping[str, Any]) -> bool:
    """Watch whether the file of a holder changes."""
    beat_s = float(holder.get("beat_s", BEAT_S))
    for _ in range(SILENT_BEATS * 4):
        time.sleep(beat_s / 4)
        now = _read(path)
        if not now:
            return False  # given free just now
        if now != holder:
            return True
    return False


def _read(path: RemotePath) -> dict[str, Any]:
    try:
        content = json.loads(path.read_text())
    except (OSError, ValueError):
        return {}
    return content if isinstance(content, dict) else {}
