"""How far a run has come, from its folder alone."""

from __future__ import annotations

from dataclasses import dataclass
from os import PathLike

import numpy as np

from simkit.errors import StoreError
from simkit.runner.lock import holder_of
from simkit.runner.log import last_line
from simkit.runner.progress import duration_text
from simkit.store.files import store_exists
from simkit.store.read import STORE_NAME, UNFINISHED_NAME, store_path
from simkit.store.remote import Place, place
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
    results_dir : Path or RemotePath
    current : StoreCounts or None
        What `simkit.open_results` opens; None while a first run is still preparing.
    unfinished : StoreCounts or None
        A changed or fresh study being computed beside it.
    running : str
        Who is writing now, empty if nobody is.
    pace : str
        Cases a second and time left of the run that is going on, as far as known.
    last_event : str
        Last line of the log.
    """

    results_dir: Place
    current: StoreCounts | None
    unfinished: StoreCounts | None
    running: str
    pace: str = ""
    last_event: str = ""


def status(path: str | PathLike[str]) -> RunStatus:
    """Count the cases of a results folder; safe at any time, also while a run is writing there.

    Raises
    ------
    StoreError
        The folder is missing, empty, damaged or written by another version.
    """
    folder = place(path)
    if folder.suffix == ".zarr":
        folder = folder.parent
    holder = holder_of(folder)
    preparing = holder is not None and not store_exists(folder / STORE_NAME)
    current = None if preparing else _counts(store_path(folder))
    return RunStatus(
        results_dir=folder,
        current=current,
        unfinished=_counts_or_none(folder / UNFINISHED_NAME),
        running=_who(holder) if holder is not None else "",
        pace=_pace(holder) if holder is not None else "",
        last_event=last_line(folder / "log.txt"),
    )


def _who(holder: dict[str, object]) -> str:
    since = f", since {holder['since']}" if "since" in holder else ""
    stopping = ", stopping" if holder.get("stopping") else ""
    return f"process {holder.get('pid', '?')} on {holder.get('host', '?')}{since}{stopping}"


def _pace(holder: dict[str, object]) -> str:
    rate, left = holder.get("per_second"), holder.get("left_s")
    if not isinstance(rate, float) or not isinstance(left, float):
        return ""
    return f"{rate:.3g} cases a second, about {duration_text(left)} left"


def status_lines(state: RunStatus) -> list[str]:
    """The same for people, one fact a line."""
    lines = ["the first run is preparing; nothing is stored yet"]
    if state.current is not None:
        lines = [f"{state.current.title}: {_counts_text(state.current)}"]
    if state.unfinished is not None:
        lines.append(f"being computed beside it: {_counts_text(state.unfinished)}")
    if state.running:
        lines.append(f"running now: {state.running}")
        lines += [state.pace] if state.pace else []
    elif done := state.unfinished or _if_waiting(state.current):
        lines.append(
            "not running; `simkit run` with the same study continues and reuses "
            f"{done.cases - done.waiting} cases"
        )
    if not state.running and (unlucky := _unlucky(state.current)):
        lines.append(f"`simkit run` with --retry solves {unlucky} failed or timed-out again")
    if state.last_event:
        lines.append(f"last event: {state.last_event}")
    return lines


def _unlucky(store: StoreCounts | None) -> int:
    return store.counts[Status.FAILED] + store.counts[Status.TIMED_OUT] if store else 0


def _if_waiting(store: StoreCounts | None) -> StoreCounts | None:
    return store if store is not None and store.waiting else None


def _counts_text(store: StoreCounts) -> str:
    parts = [f"{count} {status.label}" for status, count in store.counts.items() if count]
    return f"{store.cases} cases: {', '.join(parts)}"


def _counts_or_none(path: Place) -> StoreCounts | None:
    try:
        return _counts(path) if store_exists(path) else None
    except StoreError:
        return None  # it was swapped in just now, or is damaged: then the next run says so


def _counts(path: Place) -> StoreCounts:
    return counts_of(StoreFile(path))


def counts_of(store: StoreFile) -> StoreCounts:
    """Title of a store and its cases per status."""
    return StoreCounts(
        title=str(store.attrs.get("title", "")),
        cases=store.cases,
        counts=count_statuses(store.read_statuses()),
    )


def count_statuses(codes: np.ndarray[tuple[int], np.dtype[np.int8]]) -> dict[Status, int]:
    """Cases per status, all statuses present."""
    return {code: int(np.count_nonzero(codes == code)) for code in Status}
