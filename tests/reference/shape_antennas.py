"""Antennas from the shapes of shapes.toml, and how far simkit's modes are from the kept ones.

Run as a script it prints a table of the errors, of all shapes or of those named:

    python tests/reference/shape_antennas.py [auto|line|grid] [part of a name ...]
"""

from __future__ import annotations

import sys
import tomllib
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np

from simkit.geometry import plan_mesh
from simkit.runner.result import CaseResult
from simkit.runner.solve import solve_case
from simkit.study.model import Antenna, CutFeed, FrequencyBand, Metal, Strip

SHAPES: dict[str, dict[str, Any]] = {
    shape["name"]: shape
    for shape in tomllib.loads((Path(__file__).parent / "shapes.toml").read_text())["shape"]
}

ARC_STEP_MM = 1.0
"""Chords along true arcs: at a radius of 25 mm they are 7e-5 shorter than the arc."""

MODES_CHECKED = 3
"""Half waves of the highest mode looked at; of loops and branched shapes, the first three modes."""


def strips_of(shape: dict[str, Any]) -> tuple[Strip, ...]:
    """Strips of a shape; a step in the middle of a path makes two strips that meet end to end."""
    strips: list[Strip] = []
    for number, kept in enumerate(shape["strip"]):
        path = _arc(kept) if "radius" in kept else [(float(x), float(y)) for x, y in kept["path"]]
        width = kept["width"]
        widths = list(width) if isinstance(width, list) else [width] * len(path)
        for part, rows in enumerate(_between_steps(path)):
            some = tuple(widths[k] * 1e-3 for k in rows)
            strips.append(
                Strip(
                    f"strip{number}-{part}",
                    tuple((path[k][0] * 1e-3, path[k][1] * 1e-3) for k in rows),
                    max(some),
                    () if len(set(some)) == 1 else some,
                )
            )
    return tuple(strips)


def _arc(kept: dict[str, Any]) -> list[tuple[float, float]]:
    radius, length = kept["radius"], kept["length"]
    half = length / radius / 2
    angles = np.linspace(-half, half, round(length / ARC_STEP_MM) + 1)
    return [(float(radius * np.sin(a)), float(radius * np.cos(a))) for a in angles]


def _between_steps(path: list[tuple[float, float]]) -> list[list[int]]:
    rows = [[0]]
    for k in range(1, len(path)):
        if path[k] == path[k - 1]:
            rows.append([])
        rows[-1].append(k)
    return rows


def feed_of(shape: dict[str, Any], strips: tuple[Strip, ...]) -> CutFeed:
    """A cut in the middle of the first stretch without corner, junction or step."""
    first = strips[0]
    points = np.array(first.path_m)
    if "radius" in shape["strip"][0]:
        # Anywhere on a curve is as good; this is near no node of the first three modes.
        at = 0.22 * shape["strip"][0]["length"] * 1e-3
    else:
        at = float(np.linalg.norm(points[1] - points[0])) / 2
        along = (points[1] - points[0]) / np.linalg.norm(points[1] - points[0])
        for other in strips[1:]:
            for end in np.array([other.path_m[0], other.path_m[-1]]):
                place = float((end - points[0]) @ along)
                off = float(np.linalg.norm(points[0] + place * along - end))
                if off < 1e-9 and 1e-9 < place < 2 * at - 1e-9:
                    at = min(at, place / 2)
    arcs = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(points, axis=0), axis=1))])
    return CutFeed(first.name, at, float(np.interp(at, arcs, first.widths)) / 10)


def checked_modes(shape: dict[str, Any]) -> list[dict[str, Any]]:
    """The kept modes that are looked at, ascending in frequency."""
    told = [m for m in shape["mode"] if m["half_waves"] >= 0]
    told.sort(key=lambda m: float(m["frequency_ghz"]))
    plain = len(shape["strip"]) == 1 and not is_loop(shape)
    if plain:
        return [m for m in told if 0 < m["half_waves"] <= MODES_CHECKED]
    return told[:MODES_CHECKED]


def is_loop(shape: dict[str, Any]) -> bool:
    path = shape["strip"][0]["path"]
    return bool(path[0] == path[-1])


def antenna_of(shape: dict[str, Any], kind: str = "auto") -> Antenna:
    """The shape as bare perfect metal with a cut feed, its band ending 10 % above the last mode."""
    strips = strips_of(shape)
    modes = [m["frequency_ghz"] * 1e9 for m in checked_modes(shape)]
    return Antenna(
        strips=strips,
        metal=Metal("perfect", None, 0.0),
        feed=feed_of(shape, strips),
        reference_ohm=50.0,
        frequency=FrequencyBand(0.3 * modes[0], 1.1 * modes[-1], 201),
        model=kind,  # type: ignore[arg-type]
    )


@dataclass(frozen=True)
class Error:
    """One mode of a shape: what was found against what is kept, in per cent."""

    half_waves: int
    frequency_percent: float
    q_percent: float
    kept_percent: float
    found_half_waves: int


@dataclass(frozen=True)
class Checked:
    """A shape through the whole of simkit."""

    kind: str
    unknowns: int
    result: CaseResult
    errors: tuple[Error, ...]


@cache
def check(name: str, kind: str = "auto") -> Checked:
    """Plan, solve and compare one shape."""
    shape = SHAPES[name]
    antenna = antenna_of(shape, kind)
    plan = plan_mesh([antenna])
    result = solve_case(antenna, plan)
    if not result.arrays:
        return Checked(plan.kind, 0, result, ())
    count = int(np.isfinite(result.arrays["mode_frequency"]).sum())
    found = result.arrays["mode_frequency"][:count] * 1e-9
    q = result.arrays["mode_q"][:count]
    errors = []
    for mode in checked_modes(shape):
        # By the complex frequency: two modes of different damping may lie side by side.
        wanted = mode["frequency_ghz"] * (1 + 0.5j / mode["q"])
        slot = int(np.argmin(abs(found * (1 + 0.5j / q) - wanted)))
        errors.append(
            Error(
                mode["half_waves"],
                100 * float(found[slot] / mode["frequency_ghz"] - 1),
                100 * float(q[slot] / mode["q"] - 1),
                mode["frequency_error_percent"],
                int(result.arrays["mode_half_waves"][slot]),
            )
        )
    return Checked(plan.kind, len(result.arrays["x"]), result, tuple(errors))


def main(words: list[str]) -> None:
    """Print errors of the shapes whose names contain one of the words."""
    kinds = [w for w in words if w in ("auto", "line", "grid")] or ["auto"]
    parts = [w for w in words if w not in kinds]
    for name in SHAPES:
        if parts and not any(part in name for part in parts):
            continue
        for kind in kinds:
            try:
                done = check(name, kind)
            except Exception as error:
                print(f"{name:24s} {kind}: {type(error).__name__}: {error}", flush=True)
                continue
            modes = "  ".join(
                f"{e.half_waves}/2{'' if e.half_waves == e.found_half_waves else '!'} "
                f"{e.frequency_percent:+.3f} (kept {e.kept_percent:.3f}) Q {e.q_percent:+.1f}"
                for e in done.errors
            )
            print(
                f"{name:24s} {done.kind} {done.unknowns:3d} {done.result.status.label} {modes} "
                f"{done.result.reason}",
                flush=True,
            )


if __name__ == "__main__":
    main(sys.argv[1:])
