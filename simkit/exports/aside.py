"""Files and folders that appear whole or not at all, and never in place of others."""

from __future__ import annotations

import contextlib
import errno
import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from simkit.errors import ExportError
from simkit.store.files import flush


@contextmanager
def new_file(path: Path, *, overwrite: bool) -> Iterator[Path]:
    """Give a place beside `path` to write to; it takes its name when the block ends well.

    Raises
    ------
    ExportError
        There is something at `path` already, or it cannot be written.
    """
    _require_free(path, overwrite=overwrite)
    aside = _aside(path)
    try:
        with in_words(path):
            path.parent.mkdir(parents=True, exist_ok=True)
            yield aside
            flush([aside])
            _require_free(path, overwrite=overwrite)
            os.replace(aside, path)
            flush([path.parent])
    finally:
        with contextlib.suppress(OSError):  # the error that brought us here says more
            aside.unlink(missing_ok=True)


@contextmanager
def new_files(folder: Path, names: list[str], *, overwrite: bool) -> Iterator[Path]:
    """Give a folder beside `folder` to write files to; they are moved when the block ends well.

    Raises
    ------
    ExportError
        One of the files is there already, or they cannot be written.
    """
    if folder.exists() and not folder.is_dir():
        raise ExportError(f"{folder}: this is a file; name a folder for one file a case")
    for name in names:
        _require_free(folder / name, overwrite=overwrite)
    # Inside a folder that is there: the one around it may be closed, or on another disk.
    aside = folder / f".{os.getpid()}.part" if folder.exists() else _aside(folder)
    try:
        with in_words(folder):
            aside.mkdir(parents=True)
            yield aside
            flush(aside / name for name in names)
            folder.mkdir(exist_ok=True)
            for name in names:
                os.replace(aside / name, folder / name)
            flush([folder])
    finally:
        shutil.rmtree(aside, ignore_errors=True)


def _aside(path: Path) -> Path:
    # Of this process alone, so that two exports to one place do not write into each other.
    return path.with_name(f".{path.name}.{os.getpid()}.part")


def _require_free(path: Path, *, overwrite: bool) -> None:
    if path.is_dir():
        raise ExportError(f"{path}: this is a folder; name a file")
    if path.exists() and not overwrite:
        raise ExportError(
            f"{path}: is there already and is left as it is; choose another name, or --overwrite"
        )


@contextmanager
def in_words(path: Path) -> Iterator[None]:
    """Turn what the system says of a full or closed disk into one sentence."""
    try:
        yield
    except ExportError:
        raise
    except OSError as error:
        remedies = {
            errno.ENOSPC: "the disk is full; make room, choose fewer cases or another disk",
            errno.EDQUOT: "your share of the disk is used up; make room or choose another disk",
            errno.EROFS: "this disk can only be read; choose another place",
            errno.EACCES: "you may not write here; choose another place",
        }
        if error.errno not in remedies and error.filename is None:
            raise
        what = remedies.get(error.errno or 0, f"cannot be written: {error.strerror}")
        raise ExportError(f"{path}: {what}. Nothing was left behind") from error
