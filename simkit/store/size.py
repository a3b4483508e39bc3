"""How much disk a study will take."""

from __future__ import annotations

import math

import numpy as np

from simkit.store.schema import MODES, PHI_DEG, POSITIONS, SAMPLES, THETA_DEG, VARIABLES

_USED = {"mode": 0.5, "sample": 0.4, "theta": 1.0}
"""Share of the slots a usual case fills; the rest is NaN and packs to almost nothing."""

_BLOCK_OVERHEAD = 4096
"""Bytes a file takes at least on most disks."""


def estimate_bytes(
    *, cases: int, frequencies: int, strips: int, segments: int, block_size: int = 8
) -> int:
    """Disk a results store is expected to take, to within about a factor of two.

    Parameters
    ----------
    cases, frequencies, strips, segments : int
        Sizes of the study.
    block_size : int
        Cases per block.

    Returns
    -------
    int
        Bytes.
    """
    sizes = _sizes(frequencies, strips, segments)
    per_case = 0.0
    for variable in VARIABLES.values():
        width = 64 if variable.dtype == "str" else np.dtype(variable.dtype).itemsize
        used = [sizes[dim] * _USED.get(dim, 1.0) for dim in variable.dims[1:]]
        per_case += width * float(np.prod(used))
    files = len(VARIABLES) * -(-cases // block_size)
    return int(cases * per_case) + files * _BLOCK_OVERHEAD


def case_bytes(*, frequencies: int, strips: int, segments: int) -> int:
    """Memory one case takes in a block that is being filled."""
    sizes = _sizes(frequencies, strips, segments)
    return sum(
        (64 if variable.dtype == "str" else np.dtype(variable.dtype).itemsize)
        * math.prod(sizes[dim] for dim in variable.dims[1:])
        for variable in VARIABLES.values()
    )


def _sizes(frequencies: int, strips: int, segments: int) -> dict[str, int]:
    return {
        "frequency": frequencies,
        "mode": MODES,
        "strip": strips,
        "position": POSITIONS,
        "theta": len(THETA_DEG),
        "phi": len(PHI_DEG),
        "sample": SAMPLES,
        "segment": segments,
    }
