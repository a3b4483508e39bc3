"""What lies in folders of results: studies, how far each is, and what cannot be read."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import datetime
from os import PathLike
from pathlib import Path

from simkit.errors import StoreError
from simkit.runner.folder import LEFT_PATTERN, OLD_NAME
from simkit.runner.lock import LOCK_NAME, holder_of
from simkit.runner.log import last_line
from simkit.runner.overview import StoreCounts, counts_of
from simkit.store.files import store_exists
from simkit.store.read import STORE_NAME, UNFINISHED_NAME
from simkit.store.remote import Place, place
from simkit.store.write import TORN, StoreFile

_STAMP_LENGTH = 25
"""Characters of ``2026-06-01 07:00:00+02:00``, with which every line of a log begins."""


@dataclass(frozen=True)
class StoreEntry:
    """One store of a results folder.

    Attributes
    ----------
    role : str
        ``results``; ``unfinished``: a changed or fresh study that will replace them; ``set aside``:
        begun for an earlier text of the study, kept for its cases; ``replaced``: about to go.
    counts : StoreCounts or None
        None if the store cannot be read.
    problem : str
        What is wrong, empty if nothing is.
    """

    role: str
    counts: StoreCounts | None
    problem: str = ""


@dataclass(frozen=True)
class FolderEntry:
    """One folder of a listing.

    Attributes
    ----------
    folder : Path or RemotePath
    stores : tuple of StoreEntry
        None, or the results first.
    written : datetime or None
        When results were last written there.
    running : str
        Who writes now, empty if nobody does.
    problem : str
        Why this is no results folder, empty if it is one.
    """

    folder: Place
    stores: tuple[StoreEntry, ...] = ()
    written: datetime | None = None
    running: str = ""
    problem: str = ""


def list_results(folders: list[str | PathLike[str]]) -> Iterator[FolderEntry]:
    """Look into folders of results, and yield what is in each of their folders, by name.

    A folder that is a results folder itself is taken as such. What cannot be read is part of the
    listing, with the reason.

    Parameters
    ----------
    folders : list of path or address

    Raises
    ------
    StoreError
        One of `folders` does not exist or cannot be listed.
    """
    for name in folders:
        folder = place(name)
        if not folder.is_dir():
            raise StoreError(
                f"{folder}: there is no such folder; `simkit run STUDY` makes results/"
            )
        if _is_results(folder):
            yield entry(folder)
            continue
        try:
            below: list[Place] = sorted(folder.glob("*"))
        except OSError as error:
            raise StoreError(f"{folder}: cannot be listed: {error.strerror}") from error
        for path in below:
            if not path.name.startswith(".") and _is_dir(path):
                yield entry(path)


def _is_dir(path: Place) -> bool:
    try:
        return path.is_dir()
    except OSError:
        return False


def _is_results(folder: Place) -> bool:
    return any(store_exists(folder / name) for name in (STORE_NAME, UNFINISHED_NAME))


def entry(folder: Place) -> FolderEntry:
    """Look at one folder."""
    try:
        holder = holder_of(folder) if (folder / LOCK_NAME).exists() else None
        stores = tuple(_look(path, role) for path, role in _stores(folder))
        problem = ""
        if not stores:
            preparing = holder is not None
            problem = "" if preparing else "no results: not written by simkit run, or removed"
        running = f"process {holder.get('pid', '?')} on {holder.get('host', '?')}" if holder else ""
        return FolderEntry(folder, stores, _written(folder), running, problem)
    except OSError as error:
        return FolderEntry(folder, problem=f"cannot be read: {error.strerror or error}")


def _stores(folder: Place) -> Iterator[tuple[Place, str]]:
    for name, role in (
        (STORE_NAME, "results"),
        (UNFINISHED_NAME, "unfinished"),
        (OLD_NAME, "replaced"),
    ):
        if store_exists(folder / name):
            yield folder / name, role
    left: list[Place] = sorted(folder.glob(LEFT_PATTERN))
    for path in left:
        yield path, "set aside"


def _look(path: Place, role: str) -> StoreEntry:
    # What a damaged or foreign store makes the library below raise is not one kind of error.
    try:
        store = StoreFile(path)
        counts = counts_of(store)
        torn = sum(1 for block in range(store.blocks) if not store.status_is_whole(block))
    except StoreError as error:
        return StoreEntry(role, None, str(error).removeprefix(f"{path}: "))
    except (*TORN, KeyError, TypeError, AttributeError) as error:
        return StoreEntry(role, None, f"damaged: {error}")
    blocks = "1 block is" if torn == 1 else f"{torn} blocks are"
    problem = f"{blocks} damaged; the next run solves them anew" if torn else ""
    return StoreEntry(role, counts, problem)


def _written(folder: Place) -> datetime | None:
    """Time of the newest status file; at an address that of the last event in the log."""
    if isinstance(folder, Path):
        files = folder.glob("store*.zarr/status/*")
        times = [path.stat().st_mtime for path in files if path.name.startswith("c.")]
        if times:
            return datetime.fromtimestamp(max(times)).astimezone()
    with contextlib.suppress(ValueError):
        return datetime.fromisoformat(last_line(folder / "log.txt")[:_STAMP_LENGTH])
    return None
