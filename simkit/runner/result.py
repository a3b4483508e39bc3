"""What solving one case and running a whole study hand back."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from simkit.store.remote import Place
from simkit.store.schema import Status


@dataclass(frozen=True)
class CaseResult:
    """Outcome of one case.

    Attributes
    ----------
    status : Status
        Any but `Status.WAITING`.
    reason : str
        Why the case is not simply solved; for `Status.SOLVED` empty, or what was not checked.
    seconds : float
        Time the case took.
    solves : int
        Frequencies solved by the engine.
    arrays : dict of str to ndarray
        Named as in `simkit.store.schema.VARIABLES` and shaped as there without the leading
        ``case`` dimension. Names left out stay at their fill value. `status`, `reason`,
        `case_key`, `seconds`, `solves` and `worker` are not repeated here.
    """

    status: Status
    reason: str = ""
    seconds: float = 0.0
    solves: int = 0
    arrays: dict[str, NDArray[np.generic] | float | int] = field(default_factory=dict)


@dataclass(frozen=True)
class RunSummary:
    """Outcome of a run.

    Attributes
    ----------
    counts : dict of Status to int
        Cases per status, all statuses present.
    reused : int
        Cases settled before this run: by an earlier run of the study or of a changed one.
    solved : int
        Cases settled by this run, with or without a solution.
    results_dir : Path or RemotePath
    seconds : float
        Wall time.
    stopped : str
        Why the run ended before its last case, empty if it did not.
    """

    counts: dict[Status, int]
    reused: int
    solved: int
    results_dir: Place
    seconds: float
    stopped: str = ""

    @property
    def complete(self) -> bool:
        """No case is waiting."""
        return self.counts[Status.WAITING] == 0

    @property
    def ok(self) -> bool:
        """Every case has a solution, doubtful ones included."""
        good = self.counts[Status.SOLVED] + self.counts[Status.DOUBTFUL]
        return good == sum(self.counts.values())


class InternalError(RuntimeError):
    """The run met an error in simkit itself, not in the study; the traceback is in log.txt."""
