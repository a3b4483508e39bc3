"""Stand-in for the field engine: quick, repeatable, and bad on demand.

Imported by name in child processes, so it must not need anything of pytest.
"""

from __future__ import annotations

import os
import signal
import time
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from simkit.errors import EngineError, GeometryError
from simkit.runner.result import CaseResult
from simkit.store.layout import fill_value, numpy_dtype
from simkit.store.schema import MODES, PHI_DEG, POSITIONS, SAMPLES, THETA_DEG, VARIABLES, Status
from simkit.study.model import Antenna

SEGMENTS = 7
OF_THE_RUN = ("status", "reason", "case_key", "seconds", "solves", "worker")
OF_FEED_LINES = ("impedance_at_connector", "feedline")
CRASH_MM, SEGFAULT_MM, HANG_MM, ERROR_MM, KILLED_ONCE_MM, BUG_MM, MISFIT_MM = 3, 5, 7, 9, 11, 13, 15
"""Strip widths at which the stand-in misbehaves."""


@dataclass(frozen=True)
class Plan:
    segments: int = SEGMENTS

    def as_dict(self) -> dict[str, int]:
        return {"segments": self.segments}


def mesh(antennas: Sequence[Antenna]) -> tuple[Plan, int]:
    return Plan(), SEGMENTS


def no_mesh(antennas: Sequence[Antenna]) -> tuple[Plan, int]:
    raise GeometryError("nothing can be laid out")


def solve(antenna: Antenna, plan: Plan) -> CaseResult:
    strip = antenna.strips[0]
    length_m, width_mm = strip.path_m[-1][0], round(strip.width_m * 1e3)
    leave_mark(length_m)
    time.sleep(float(os.environ.get("FAKE_SECONDS", "0")))
    wait_at_the_gate()
    misbehave(width_mm)
    arrays = numbers(length_m, antenna.frequency.points)
    if width_mm == MISFIT_MM:
        arrays["x"] = np.zeros(SEGMENTS + 1)
    return CaseResult(Status.SOLVED, seconds=0.5, solves=12, arrays=arrays)


def leave_mark(length_m: float) -> None:
    """One file per attempt, named after the case; in it what malloc was told."""
    if folder := os.environ.get("FAKE_MARKS"):
        malloc = sorted(name for name in os.environ if name.startswith("MALLOC_"))
        mark = Path(folder, f"{length_m:.6f}-{time.time_ns()}-{os.getpid()}")
        mark.write_text(" ".join(malloc))


def wait_at_the_gate() -> None:
    """With FAKE_GATE set, go on after nine attempts only when there is a file of that name."""
    if gate := os.environ.get("FAKE_GATE"):
        while len(list(Path(os.environ["FAKE_MARKS"]).iterdir())) > 9 and not Path(gate).exists():
            time.sleep(0.05)


def misbehave(width_mm: int) -> None:
    if width_mm == CRASH_MM:
        os._exit(3)
    if width_mm == SEGFAULT_MM:
        os.kill(os.getpid(), signal.SIGSEGV)
    if width_mm == KILLED_ONCE_MM and len(list(Path(os.environ["FAKE_MARKS"]).iterdir())) == 1:
        os.kill(os.getpid(), signal.SIGKILL)
    if width_mm == HANG_MM:
        time.sleep(600)
    if width_mm == ERROR_MM and "FAKE_MENDED" not in os.environ:
        raise EngineError("the matrix is singular")
    if width_mm == BUG_MM:
        raise KeyError("a name that is not there")


def numbers(length_m: float, points: int) -> dict[str, np.ndarray]:
    """Every array of the schema, of odd values that depend on the length alone."""
    rng = np.random.default_rng(round(length_m * 1e6))
    sizes = {
        "frequency": points,
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
        values = rng.uniform(1, 100, [sizes[dim] for dim in variable.dims[1:]])
        if dtype.kind == "c":
            values = values + 1j * rng.uniform(size=values.shape)
        array = values.astype(dtype)
        if "mode" in variable.dims:
            array[..., 4:] = fill_value(name) if variable.dims[-1] == "mode" else array[..., 4:]
        arrays[name] = array
    return arrays
