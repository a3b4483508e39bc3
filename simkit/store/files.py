"""Files that survive a power cut: flushed to the disk, replaced in one step."""

from __future__ import annotations

import os
import shutil
from collections.abc import Iterable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

from simkit.store.remote import Place, RemotePath

_THREADS = 8
"""Flushes asked for together share a commit of the file system: some twenty times faster."""


def flush(paths: Iterable[Place]) -> None:
    """Force files and folders onto the disk; those that do not exist are passed over.

    What lies at an address is durable once it is written.

    Raises
    ------
    OSError
        The disk is full or failed.
    """
    several = [path for path in paths if isinstance(path, Path)]
    if len(several) < 2:
        for path in several:
            _flush_one(path)
        return
    with ThreadPoolExecutor(_THREADS) as threads:
        for _ in threads.map(_flush_one, several):
            pass


def _flush_one(path: Path) -> None:
    try:
        handle = os.open(path, os.O_RDONLY)
    except FileNotFoundError:
        return
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def flush_tree(root: Path, *, files: bool = True) -> None:
    """Force a folder onto the disk, with everything in it if `files`."""
    flush(root.rglob("*") if files else ())
    flush([root])


def replace_text(path: Place, text: str) -> None:
    """Write `text` to `path` so that a reader, or a power cut, sees the old or the new text."""
    if isinstance(path, RemotePath):
        path.write_text(text)
        return
    aside = path.with_name(path.name + ".part")
    aside.write_text(text, encoding="utf-8")
    flush([aside])
    os.replace(aside, path)
    flush([path.parent])


def store_exists(path: Place) -> bool:
    """Whether there is a store: a folder here, its root file at an address."""
    return path.exists() if isinstance(path, Path) else (path / "zarr.json").is_file()


def move(source: Place, target: Place) -> None:
    """Give a store another name; at an address it is copied, and whole in one place at least."""
    if isinstance(source, Path):
        os.rename(source, str(target))
        return
    assert isinstance(target, RemotePath)
    target.remove_tree()
    source.copy_tree(target)
    source.remove_tree()


def remove(path: Place) -> None:
    """Remove a file or a whole folder, if it is there."""
    if isinstance(path, RemotePath):
        path.remove_tree() if path.suffix == ".zarr" else path.unlink(missing_ok=True)
    elif path.is_dir():
        shutil.rmtree(path)
    else:
        path.unlink(missing_ok=True)
