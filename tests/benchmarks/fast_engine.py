"""A stand-in for the field engine that costs next to nothing, for the benchmark of large runs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from simkit.runner.result import CaseResult
from simkit.store.layout import fill_value, numpy_dtype
from simkit.store.schema import MODES, PHI_DEG, POSITIONS, SAMPLES, THETA_DEG, VARIABLES, Status
from simkit.study.model import Antenna

SEGMENTS = 51
FILLED = 4
OF_THE_RUN = ("status", "reason", "case_key", "seconds", "solves", "worker")
OF_FEED_LINES = ("impedance_at_connector", "feedline")


@dataclass(frozen=True)
class Plan:
    def as_dict(self) -> dict[str, int]:
        return {"segments": SEGMENTS}


def mesh(antennas: Sequence[Antenna]) -> tuple[Plan, int]:
    return Plan(), SEGMENTS


def solve(antenna: Antenna, plan: Plan) -> CaseResult:
    """Every array of the schema, with numbers that follow the length and fill the usual slots.

    The time it reports is that of a real case, so that blocks are cut as for real ones.
    """
    length_m = antenna.strips[0].path_m[-1][0]
    sizes = {
        "frequency": antenna.frequency.points,
        "mode": MODES,
        "strip": 1,
        "position": POSITIONS,
        "theta": len(THETA_DEG),
        "phi": len(PHI_DEG),
        "sample": SAMPLES,
        "segment": SEGMENTS,
    }
    arrays = {}
    for name, variable in VARIABLES.items():
        if name in OF_THE_RUN + OF_FEED_LINES:
            continue
        dtype = numpy_dtype(name)
        array = np.full([sizes[dim] for dim in variable.dims[1:]], fill_value(name), dtype)
        used = array[:FILLED] if array.ndim and variable.dims[1] in ("mode", "sample") else array
        used[...] = (length_m * 1e3 + np.arange(used.size).reshape(used.shape) % 97).astype(dtype)
        arrays[name] = array
    return CaseResult(Status.SOLVED, seconds=0.05, solves=12, arrays=arrays)
