"""Compute what a feed sees on flat strips and keep it in feeds.toml; run as a script.

    python tests/reference/make_feeds.py [--only NAME ...]

The gap carries a uniform field along the strip across its whole width, volt over gap: metal runs
through underneath, as in the wire models' applied voltage. Values of two meshes are extrapolated
with the square of the level.
"""

from __future__ import annotations

import argparse
import time
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
from make_shapes import write_table
from shapes_wanted import WANTED
from sheet_meshes import path
from sheet_moments import Sheet

from simkit.response.features import find_dips, reflection
from simkit.response.rational import adaptive_sweep

FILE = Path(__file__).parent / "feeds.toml"
HEAD = """\
# What a feed sees on shapes of shapes.toml; see make_feeds.py for how this file is made.
#
# at_mm: from the start of the path to the middle of the gap; gap_mm: length of the gap, over which
# the field is uniform. impedance: GHz, R, X in ohm. peaks: maxima of the conductance, GHz and
# 1/G in ohm (hardly depend on the gap). dips: of the reflection at 50 ohm, GHz and dB.
# crossings: GHz and R in ohm where X = 0, rising. *_error_percent: half of what extrapolation
# from two meshes changed, the worst of the list, frequencies only (impedance: relative to |Z|).
"""

GAP = 0.1
"""Of the width at the feed."""

FEEDS: list[tuple[str, float]] = [
    ("straight-150x6", 75),
    ("straight-150x6", 37.5),
    ("straight-150x20", 75),
    ("straight-150x1.5", 75),
    ("taper-3-30", 75),
    ("straight-150x30", 75),
    ("straight-120x10", 40),
    ("straight-100x3", 35),
    ("taper-3-9", 75),
    ("taper-5-25", 75),
    ("taper-5-25", 50),
    ("taper-12-4", 75),
    ("vee-90-w8", 37.5),
    ("zigzag-70-w6", 75),
]
LEVELS = (2, 3)
IMPEDANCE_GHZ = (0.5, 0.7, 0.9, 1.1, 1.4, 1.7, 2.0, 2.3, 2.6, 2.9, 3.2, 3.5)


def fed_mesh(shape: dict[str, Any], at: float, gap: float, level: int) -> tuple[Sheet, np.ndarray]:
    """Sheet with mesh lines at both ends of the gap, and the source vector of 1 V."""
    strip = shape["strip"][0]
    line = np.array(strip["path"], dtype=float)
    width = strip["width"]
    widths = np.array(width if isinstance(width, list) else [width] * len(line), dtype=float)
    arc = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(line, axis=0), axis=1))])
    ends = (at - gap / 2, at + gap / 2)
    turn = np.zeros(len(arc), dtype=bool)
    legs = np.diff(line, axis=0)
    turn[1:-1] = abs(legs[:-1, 0] * legs[1:, 1] - legs[:-1, 1] * legs[1:, 0]) > 1e-9
    # A straight-on point within the gap would need a mesh line there: the width has a kink in it.
    inside = (arc > ends[0]) & (arc < ends[1])
    keep = turn | (~inside) | (np.ptp(widths) > 0)
    places = np.sort(np.concatenate([arc[keep], ends]))
    corners = [
        tuple(np.array([np.interp(p, arc, line[:, c]) for c in range(2)]) * 1e-3) for p in places
    ]
    marked = [int(k) for k in np.flatnonzero(np.isin(places, ends))]
    local = [float(np.interp(p, arc, widths)) * 1e-3 for p in places]
    sheet = Sheet(path(corners, local, level, marked=marked))
    start, stop = (np.array(corners[k]) for k in marked)
    along = (stop - start) / np.linalg.norm(stop - start)
    across = np.array([-along[1], along[0]])
    offset = sheet.centres - start
    reach = np.linalg.norm(stop - start)
    under = (offset @ along > 0) & (offset @ along < reach)
    under &= abs(offset @ across) < max(local)
    field = np.where(under[:, None], along / reach, 0.0) * sheet.area[:, None]
    vector = sheet.unit @ np.sum(field * sheet.centres, axis=1)
    return sheet, vector - sheet.unit_x @ field[:, 0] - sheet.unit_y @ field[:, 1]


def features(sheet: Sheet, source: np.ndarray) -> dict[str, np.ndarray]:
    """Lists of (K, 2) or (K, 3) values of one mesh."""
    rng = np.random.default_rng(2)
    others = rng.standard_normal((sheet.unknowns, 4)) * np.linalg.norm(source) / 5
    probe = np.concatenate([source[:, None], others], axis=1)

    def response(frequency_hz: float) -> np.ndarray:
        return np.asarray(100 * probe.T @ sheet.currents(frequency_hz, source))

    sweep = adaptive_sweep(response, 0.4e9, 3.7e9, tolerance=3e-4, most_samples=30)
    frequency = np.linspace(0.5e9, 3.6e9, 31001)
    admittance = sweep.model(frequency)[:, 0] / 100
    impedance = 1 / admittance
    top = _turning(admittance.real)
    rise = np.flatnonzero((impedance.imag[:-1] < 0) & (impedance.imag[1:] >= 0))
    dips = find_dips(frequency, reflection(impedance, 50.0))
    chosen = np.array(IMPEDANCE_GHZ) * 1e9
    z = 100 / sweep.model(chosen)[:, 0]
    return {
        "impedance": np.stack([chosen / 1e9, z.real, z.imag], axis=1),
        "peaks": np.stack([frequency[top] / 1e9, 1 / admittance.real[top]], axis=1),
        "dips": np.array([[d.frequency_hz / 1e9, -d.return_loss_db] for d in dips]).reshape(-1, 2),
        "crossings": np.stack([frequency[rise] / 1e9, impedance.real[rise]], axis=1),
    }


def _turning(value: np.ndarray) -> np.ndarray:
    inner = (value[1:-1] > value[:-2]) & (value[1:-1] >= value[2:])
    return np.flatnonzero(inner) + 1


def compute(name: str, at: float) -> dict[str, Any]:
    """Entry for feeds.toml."""
    shape = next(s for s in WANTED if s["name"] == name)
    strip = shape["strip"][0]
    line, width = np.array(strip["path"]), strip["width"]
    arc = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(line, axis=0), axis=1))])
    gap = GAP * (float(np.interp(at, arc, width)) if isinstance(width, list) else width)
    coarse, fine = (features(*fed_mesh(shape, at, gap, level)) for level in LEVELS)
    entry: dict[str, Any] = {"shape": name, "at_mm": at, "gap_mm": round(gap, 6)}
    share = LEVELS[0] ** 2 / (LEVELS[1] ** 2 - LEVELS[0] ** 2)
    for key, rows in fine.items():
        if len(rows) != len(coarse[key]):
            entry[key] = np.round(rows, 4).tolist()
            entry[f"{key}_error_percent"] = -1.0  # one mesh only
            continue
        change = (rows - coarse[key]) * share
        entry[key] = np.round(rows + change, 4).tolist()
        if key == "impedance":
            size = np.hypot(change[:, 1], change[:, 2]) / np.hypot(rows[:, 1], rows[:, 2])
        else:
            size = abs(change[:, 0]) / rows[:, 0] if len(rows) else np.zeros(1)
        entry[f"{key}_error_percent"] = round(50 * float(size.max()), 3)
    return entry


def main() -> None:
    """Compute what is missing."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--only", nargs="*")
    options = parser.parse_args()
    for name, at in FEEDS:
        known = tomllib.loads(FILE.read_text())["feed"] if FILE.exists() else []
        if any(k["shape"] == name and k["at_mm"] == at for k in known):
            continue
        if options.only and name not in options.only:
            continue
        started = time.perf_counter()
        entry = compute(name, at)
        write_table(FILE, HEAD, "feed", [*known, entry])
        print(f"{name} at {at} [{time.perf_counter() - started:.0f} s]", flush=True)
        for key in ("peaks", "dips", "crossings"):
            print("  ", key, entry[key], entry[f"{key}_error_percent"], flush=True)


if __name__ == "__main__":
    main()
