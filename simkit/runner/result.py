"""What solving one case hands back."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from simkit.store.schema import Status


@dataclass(frozen=True)
class CaseResult:
    """Outcome of one case.

    Attributes
    ----------
    status : Status
        Any but `Status.WAITING`.
    reason : str
        Why the case is not simply solved; empty for `Status.SOLVED`.
    seconds : float
        Time the case took.
    solves : int
        Frequencies solved by the engine.
    arrays : dict of str to ndarray
        Named as in `simkit.store.schema.VARIABLES` and shaped as there without the leading
        ``case`` dimension. Names left out stay at their fill value. `status`, `reason`,
        `case_key`, `seconds` and `solves` are not repeated here.
    """

    status: Status
    reason: str = ""
    seconds: float = 0.0
    solves: int = 0
    arrays: dict[str, NDArray[np.generic] | float | int] = field(default_factory=dict)
