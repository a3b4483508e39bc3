"""Accuracy against unknowns, for both models: mode frequencies and Q against the sheet solutions.

    python tests/benchmarks/bench_accuracy.py

A few shapes of tests/reference, their bands ending 10 % above the third mode, with segments aimed
at several parts of the shortest wavelength. The models' own limits (wires of at least two radii, a
fraction of the width) stay in force, so a wide strip stops growing finer. Errors are the largest of
the first three modes; the references are good to 0.02 to 0.1 %. Nothing is asserted.
"""

# ruff: noqa: E402  the number of threads is read when numpy is loaded

from __future__ import annotations

import os
import sys
from pathlib import Path

for _library in ("OMP", "OPENBLAS", "MKL"):
    os.environ[f"{_library}_NUM_THREADS"] = "1"
sys.path.insert(0, str(Path(__file__).parent.parent / "reference"))

import shape_antennas

from simkit.geometry import line_rules, mesh

PARTS = (12, 16, 20, 28, 40, 56)
"""Segments a shortest wavelength."""

SHAPES = {
    "line": ("straight-150x1.5", "straight-150x6", "bend-90-75-75-w4", "u-60-30-60-w4"),
    "grid": ("straight-150x6", "bend-90-75-75-w8", "arc-r50-w6", "taper-3-18", "tee-off-w6"),
}


def aim(parts: int) -> None:
    """Set the segments aimed at, in both models."""
    line_rules.TARGET_WAVELENGTHS = 1 / parts
    line_rules.TARGET_WIDTHS = 0.4 * 40 / parts
    mesh.GRID_TARGET_WAVELENGTHS = 1 / parts
    mesh.GRID_TARGET_MANY_RAILS = 1 / parts
    shape_antennas.check.cache_clear()


def row(name: str, kind: str) -> str:
    """Unknowns, worst errors and seconds of one shape."""
    done = shape_antennas.check(name, kind)
    if not done.errors:
        return f"refused: {done.result.reason}"
    frequency = max(abs(e.frequency_percent) for e in done.errors)
    q = max(abs(e.q_percent) for e in done.errors)
    return (
        f"{done.unknowns:4d} unknowns  frequency {frequency:6.3f} %  Q {q:5.1f} %  "
        f"{done.result.solves:2d} solutions  {done.result.seconds:5.2f} s"
    )


def main() -> None:
    """Print one line for each shape and segment length."""
    for kind, names in SHAPES.items():
        for name in names:
            if name not in shape_antennas.SHAPES:
                continue
            print(f"{kind}, {name}")
            for parts in PARTS:
                aim(parts)
                print(f"  1/{parts:<3d} wavelength  {row(name, kind)}", flush=True)


if __name__ == "__main__":
    main()
