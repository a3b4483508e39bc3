"""Natural modes of flat strips with a branch beside the feed, kept in cables.toml; run as a script.

    python tests/reference/make_cables.py

A straight strip 150 mm long with a branch of the same width, at right angles, whose middle lies
half a width beside that of the strip: what the cable of a study comes to if it lies in the plane of
the strips and its braid is as thick as suits a strip of that width (half the width). Values of two
meshes are extrapolated with the square of the level.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from make_shapes import write_table
from sheet_meshes import rectangles
from sheet_moments import Sheet

FILE = Path(__file__).parent / "cables.toml"
HEAD = """\
# Natural modes of straight strips with a branch beside the middle; see make_cables.py.
#
# length_mm, width_mm: of the strip, in the middle of whose length nothing is; branch_mm: from the
# strip's centre line to the branch's end; offset_mm: from the strip's middle to that of the branch.
# modes: GHz and Q; error_percent: half of what extrapolation changed the frequencies, the worst.
"""
LENGTH = 150.0
WANTED = {
    (1.5, 75.0): (0.928, 0.989, 2.034, 2.891),
    (6.0, 75.0): (0.892, 0.987, 2.022, 2.822),
    (6.0, 150.0): (0.592, 0.896, 1.405, 2.033, 2.557, 2.847),
}
"""Width and branch, mm, with guesses of the modes in GHz."""
LEVELS = (2, 3)


def branched(width: float, branch: float, level: int) -> Sheet:
    """Sheet of a strip along x with its branch along +y; millimetres."""
    half = width / 2
    boxes = [(-LENGTH / 2, -half, LENGTH / 2, half), (-width, -half, 0.0, branch)]
    return Sheet(rectangles([tuple(v * 1e-3 for v in box) for box in boxes], level))


def modes(sheet: Sheet, guesses_ghz: tuple[float, ...]) -> np.ndarray:
    """(M, 2) frequencies in GHz and Q near some guesses."""
    found = [sheet.mode(complex(f, f / 16) * 1e9) for f in guesses_ghz]
    return np.array([[mode.frequency_hz / 1e9, mode.q] for mode in found])


def compute(width: float, branch: float) -> dict[str, Any]:
    """Entry for cables.toml."""
    guesses = WANTED[width, branch]
    coarse, fine = (modes(branched(width, branch, level), guesses) for level in LEVELS)
    change = (fine - coarse) * LEVELS[0] ** 2 / (LEVELS[1] ** 2 - LEVELS[0] ** 2)
    return {
        "length_mm": LENGTH,
        "width_mm": width,
        "branch_mm": branch,
        "offset_mm": width / 2,
        "modes": np.round(fine + change, 4).tolist(),
        "error_percent": round(50 * float(np.max(abs(change[:, 0]) / fine[:, 0])), 3),
    }


if __name__ == "__main__":
    rows = []
    for key in WANTED:
        rows.append(compute(*key))
        write_table(FILE, HEAD, "cable", rows)
        print(rows[-1], flush=True)
