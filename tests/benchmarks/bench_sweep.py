"""How much the adaptive sweep saves: direct engine loop over sweep, in one run on the same wires.

    python tests/benchmarks/bench_sweep.py

A strip of 150 mm x 6 mm as one wire of 51 segments, 2801 frequencies from 0.1 to 2.9 GHz. The
direct loop does what a script around the engine would: one solution, one source, a frequency. The
sweep is what simkit does for a case, its second source included, and ends with the feed current at
all 2801 frequencies. Processor times are the best of several runs; nothing is asserted.
Linear algebra runs on one thread, as in the workers of a run.
"""

# ruff: noqa: E402  the number of threads is read when numpy is loaded

from __future__ import annotations

import os
import time
from collections.abc import Callable

for _library in ("OMP", "OPENBLAS", "MKL"):
    os.environ[f"{_library}_NUM_THREADS"] = "1"

import numpy as np

from simkit.engine.pynec import solve_wires
from simkit.geometry.wires import Wire
from simkit.response.features import reflection
from simkit.response.rational import Sweep, adaptive_sweep

FREQUENCY_HZ = np.linspace(0.1e9, 2.9e9, 2801)
WIRES = (Wire((0.00045, 0.0, 0.0), (0.14955, 0.0, 0.0), 51),)
RADIUS_M = 0.0015
FEED = ((25, 1.0),)
PROBE = ((6, 1.0),)
ROUNDS = 3
SWEEPS_A_ROUND = 30


def direct() -> np.ndarray:
    """Feed current at every frequency, each solved for."""
    return np.array([solve_wires(WIRES, RADIUS_M, f, [FEED])[0, 25] for f in FREQUENCY_HZ])


def swept() -> tuple[np.ndarray, Sweep]:
    """Feed current at every frequency from the adaptive sweep."""

    def solve(frequency_hz: float) -> np.ndarray:
        return solve_wires(WIRES, RADIUS_M, frequency_hz, [FEED, PROBE]).ravel()

    sweep = adaptive_sweep(solve, FREQUENCY_HZ[0], FREQUENCY_HZ[-1])
    return sweep.model.combined(FREQUENCY_HZ, sweep.model.values[:, 25]), sweep


def seconds(work: Callable[[], object]) -> float:
    """Processor time of one run: other work on the machine does not count."""
    begin = time.process_time()
    work()
    return time.process_time() - begin


def main() -> None:
    """Print the ratio with what went into it."""
    current, sweep = swept()
    error = np.max(abs(reflection(1 / current, 50.0) - reflection(1 / direct(), 50.0)))
    # In turns, so that whatever else the machine does falls on both.
    direct_s = swept_s = np.inf
    for _ in range(ROUNDS):
        direct_s = min(direct_s, seconds(direct))
        swept_s = min(swept_s, *(seconds(swept) for _ in range(SWEEPS_A_ROUND)))
    samples = len(sweep.model.frequency_hz)
    print(f"direct loop     {len(FREQUENCY_HZ):5d} solutions  {direct_s * 1e3:9.1f} ms")
    print(f"adaptive sweep  {samples:5d} solutions  {swept_s * 1e3:9.1f} ms")
    print(f"largest difference in reflection  {error:.1e}")
    print(f"direct loop over adaptive sweep   {direct_s / swept_s:.0f}")


if __name__ == "__main__":
    main()
