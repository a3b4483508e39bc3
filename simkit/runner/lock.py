"""One run at a time in a results folder, and no write by a worker of a run that is over."""

from __future__ import annotations

import errno
import fcntl
import json
import os
import secrets
import socket
import time
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from datetime import datetime
from pathlib import Path
from typing import Any, Protocol

from simkit.errors import StoreError
from simkit.store.remote import Place, RemotePath

LOCK_NAME = ".lock"
WRITERS_NAME = ".writers"

_LOOKERS_S = 0.5
_STRAGGLERS_S = 60.0
"""Longest wait for workers of a killed run to finish the block they are writing."""


class Lock(Protocol):
    """Hold of a results folder."""

    token: str
    """What workers must show to write; empty once the hold is revoked."""

    @property
    def path(self) -> Place:
        """Where workers look whether the run still holds the folder."""

    def note(self, tally: Mapping[str, float]) -> None:
        """Say how far the run is, for whoever asks who is running."""

    def stop_starting(self) -> None:
        """Tell the workers to begin no further block; those begun are still written."""

    def revoke(self) -> None:
        """Take from the workers the right to write; what they still do is dropped."""

    def release(self) -> None:
        """Give the folder free."""


def take_lock(folder: Place) -> Lock:
    """Hold a results folder, here or at an address.

    Raises
    ------
    StoreError
        Another run holds it, or the folder cannot be written.
    """
    if isinstance(folder, RemotePath):
        from simkit.runner.remote_lock import RemoteLock

        return RemoteLock(folder)
    return RunLock(folder)


class RunLock:
    """Exclusive hold of a results folder; the system frees it when this process ends in any way.

    Parameters
    ----------
    folder : Path
        Existing results folder.

    Raises
    ------
    StoreError
        Another run holds it, or the folder cannot be written.
    """

    def __init__(self, folder: Path) -> None:
        self.path = folder / LOCK_NAME
        self.token = secrets.token_hex(8)
        self._said = new_holder()
        self._handle = _open(self.path)
        try:
            # Long enough to outlast somebody who merely looks whether the folder is in use.
            _wait_for_lock(self._handle, _LOOKERS_S)
        except OSError as error:
            holder = _read(self.path)
            os.close(self._handle)
            if error.errno not in (errno.EAGAIN, errno.EACCES):
                raise StoreError(f"{folder}: cannot be locked: {error.strerror}") from error
            raise StoreError(held_text(folder, holder)) from error
        try:
            self._shut_out_stragglers()
        except BaseException:
            os.close(self._handle)
            raise

    def note(self, tally: Mapping[str, float]) -> None:
        """Say how far the run is, for whoever asks who is running."""
        self._said |= tally
        self._write()

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
        os.ftruncate(self._handle, 0)
        os.close(self._handle)

    def _shut_out_stragglers(self) -> None:
        """Take over as the only run whose workers may write, after those now writing are done."""
        writers = _open(self.path.with_name(WRITERS_NAME))
        try:
            _wait_for_lock(writers, _STRAGGLERS_S)
            self._write()
        except BlockingIOError as error:
            raise StoreError(
                f"{self.path.parent}: an earlier run still has a worker writing here; end it"
            ) from error
        finally:
            os.close(writers)

    def _write(self) -> None:
        text = json.dumps(self._said | {"token": self.token})
        # One write of fixed length: a reader sees the old or the new text.
        try:
            os.pwrite(self._handle, text.ljust(512).encode(), 0)
        except OSError as error:
            raise StoreError(f"{self.path.parent}: cannot be written: {error.strerror}") from error


def new_holder() -> dict[str, Any]:
    """What a run says of itself in its lock."""
    return {
        "pid": os.getpid(),
        "host": socket.gethostname(),
        "since": datetime.now().astimezone().isoformat(" ", "seconds"),
        "stopping": False,
    }


def held_text(folder: Place, holder: Mapping[str, object]) -> str:
    """Why a second run is refused."""
    return (
        f"{folder}: another run is writing here: process {holder.get('pid', '?')} on "
        f"{holder.get('host', '?')}, since {holder.get('since', '?')}. "
        "Wait for it or end it; `simkit status` shows how far it is"
    )


def may_start(lock: Place, token: str) -> bool:
    """Whether the run with this token is alive and still starts blocks."""
    holder = _read(lock)
    return _holds(holder, token) and not holder.get("stopping")


@contextmanager
def writing(lock: Place, token: str) -> Iterator[bool]:
    """Hold the right to write while inside; yields False if another run has taken over.

    At an address nothing can be held: a run that took over in this very moment is then written to
    by both, which is harmless, since both write the same numbers, each file in one step.
    """
    if isinstance(lock, RemotePath):
        yield _holds(_read(lock), token)
        return
    handle = _open(lock.with_name(WRITERS_NAME))
    try:
        fcntl.flock(handle, fcntl.LOCK_SH)
        yield _holds(_read(lock), token)
    finally:
        os.close(handle)


def holder_of(folder: Place) -> dict[str, object] | None:
    """Who runs in this folder now (pid, host, since), None if nobody does."""
    if isinstance(folder, RemotePath):
        from simkit.runner.remote_lock import living_holder

        return living_holder(folder)
    try:
        handle = os.open(folder / LOCK_NAME, os.O_RDONLY | os.O_CLOEXEC)
    except OSError:
        return None
    try:
        fcntl.flock(handle, fcntl.LOCK_SH | fcntl.LOCK_NB)
    except OSError:
        return _read(folder / LOCK_NAME)
    finally:
        os.close(handle)
    return None


def _holds(holder: Mapping[str, object], token: str) -> bool:
    return token != "" and holder.get("token") == token


def _open(path: Path) -> int:
    try:
        return os.open(path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o666)
    except OSError as error:
        raise StoreError(
            f"{path.parent}: the results folder cannot be written: {error.strerror}; "
            "choose another with --results"
        ) from error


def _read(path: Place) -> dict[str, object]:
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return {}
    return content if isinstance(content, dict) else {}


def _wait_for_lock(handle: int, patience_s: float) -> None:
    """Raises BlockingIOError after `patience_s`."""
    end = time.monotonic() + patience_s
    while True:
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            if time.monotonic() > end:
                raise
            time.sleep(0.05)
        else:
            return
