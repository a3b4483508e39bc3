"""What an export reports."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

Seen = Callable[[int], None]
"""Told how many cases are done."""


@dataclass(frozen=True)
class Exported:
    """What an export wrote.

    Attributes
    ----------
    path : Path
        The file, or for Touchstone the folder.
    cases : int
        Cases in it.
    left_out : int
        Cases that were chosen but have no solution to hand on.
    """

    path: Path
    cases: int
    left_out: int = 0
