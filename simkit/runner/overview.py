"""How far a run has come, from its folder alone."""

from __future__ import annotations

from dataclasses import dataclass
from os import PathLike
from pathlib import Path

import numpy as np

from simkit.errors import StoreError
from simkit.runner.lock import holder_of
from simkit.store.read import UNFINISHED_NAME, store_path
from simkit.store.schema import Status
from simkit.store.write import StoreFile


@dataclass(frozen=True)
class StoreCounts:
    """Cases of one store per status, all statuses present."""

    title: str
    cases: int
    counts: dict[Status, int]

    @property
    def waiting(self) -> int:
        """Cases that the next run would settle."""
        return self.counts[Status.WAITING]


@dataclass(frozen=True)
class RunStatus:
    """State of a results folder.

    Attributes
    ----------
    results_dir : Path
    current : StoreCounts
        What `simkit.open_results` opens.
    unfinished : StoreCounts or None
        A changed or fresh study being computed beside it.
    running : str
        Who is writing now, empty if nobody is.
    """

    results_dir: Path
    current: StoreCounts
    unfinished: StoreCounts | None
    running: str


def status(path: str | PathLike[str]) -> RunStatus:
    """Count the cases of a results folder; safe while a run is writing there.

    Raises
    ------
    StoreError
        The folder is missing, empty, damaged or written by another version.
    """
    store = store_path(path)
    folder = store.parent
    unfinished = folder / UNFINISHED_NAME
    holder = holder_of(folder)
    return RunStatus(
        results_dir=folder,
        current=_counts(store),
        unfinished=_counts_or_none(unfinished),
        running=f"process {holder.get('pid', '?')} on {holder.get('host', '?')}" if holder else "",
    )


def status_lines(state: RunStatus) -> list[str]:
    """The same for people, one fact a line."""
    lines = [f"{state.current.title}: {_counts_text(state.current)}"]
    if state.unfinished is not None:
        lines.append(f"being computed beside it: {_counts_text(state.unfinished)}")
    if state.running:
        lines.append(f"running now: {state.running}")
    elif state.current.waiting or state.unfinished is not None:
        done = state.unfinished or state.current
        lines.append(
            "not running; `simkit run` with the same study continues and reuses "
            f"{done.cases - done.waiting} cases"
        )
    return lines


def _counts_text(store: StoreCounts) -> str:
    parts = [f"{count} {status.label}" for status, count in store.counts.items() if count]
    return f"{store.cases} cases: {', '.join(parts)}"


def _counts_or_none(path: Path) -> StoreCounts | None:
    try:
        return _counts(path) if path.exists() else None
    except StoreError:
        return None  # it was swapped in just now, or is damaged: then the next run says so


def _counts(path: Path) -> StoreCounts:
    store = StoreFile(path)
    codes = store.read_statuses()
    return StoreCounts(
        title=str(store.attrs.get("title", "")),
        cases=store.cases,
        counts={code: int(np.count_nonzero(codes == code)) for code in Status},
    )
