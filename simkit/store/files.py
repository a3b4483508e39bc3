"""Files that survive a power cut: flushed to the disk, replaced in one step."""

from __future__ import annotations

import os
from collections.abc import Iterable
from pathlib import Path


def flush(paths: Iterable[Path]) -> None:
    """Force files and folders onto the disk; those that do not exist are passed over."""
    for path in paths:
        try:
            handle = os.open(path, os.O_RDONLY)
        except FileNotFoundError:
            continue
        try:
            os.fsync(handle)
        finally:
            os.close(handle)


def flush_tree(root: Path, *, files: bool = True) -> None:
    """Force a folder onto the disk, with everything in it if `files`."""
    flush(root.rglob("*") if files else ())
    flush([root])


def replace_text(path: Path, text: str) -> None:
    """Write `text` to `path` so that a reader, or a power cut, sees the old or the new text."""
    aside = path.with_name(path.name + ".part")
    aside.write_text(text, encoding="utf-8")
    flush([aside])
    os.replace(aside, path)
    flush([path.parent])
