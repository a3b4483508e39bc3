"""Plane curves as points: splines, arcs, turns, shifts and mirrors. Metres and radians."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from itertools import accumulate, pairwise
from typing import Literal

Axis = Literal["x", "y"]
Point = tuple[float, float]
PathPoints = tuple[Point, ...]

SAME_PLACE_M = 1e-9
"""Points nearer to each other than this are the same point."""

SPLINE_POINTS = 12
"""Points by which a spline is drawn from each given point to the next one."""


def path_length(path_m: Sequence[Point]) -> float:
    """Return the length of a path in metres."""
    return sum(math.dist(a, b) for a, b in pairwise(path_m))


def is_closed(path_m: Sequence[Point]) -> bool:
    """Whether a path ends where it starts."""
    return math.dist(path_m[0], path_m[-1]) < SAME_PLACE_M


def cos_sin(angle_rad: float) -> tuple[float, float]:
    """Return cosine and sine, exact at quarter turns: what was level must not end up askew."""
    quarters = angle_rad / (math.pi / 2)
    if abs(quarters - round(quarters)) < 1e-14 * max(1.0, abs(quarters)):
        return ((1.0, 0.0), (0.0, 1.0), (-1.0, 0.0), (0.0, -1.0))[round(quarters) % 4]
    return math.cos(angle_rad), math.sin(angle_rad)


def rotated(path_m: Iterable[Point], angle_rad: float) -> PathPoints:
    """Turn points about the origin, counterclockwise for positive angles."""
    cos, sin = cos_sin(angle_rad)
    return tuple((cos * x - sin * y, sin * x + cos * y) for x, y in path_m)


def shifted(path_m: Iterable[Point], x_m: float, y_m: float) -> PathPoints:
    """Move points."""
    return tuple((x + x_m, y + y_m) for x, y in path_m)


def mirrored(path_m: Iterable[Point], axis: Axis) -> PathPoints:
    """Mirror points at the x or the y axis."""
    if axis == "y":
        return tuple((0.0 - x, y) for x, y in path_m)
    return tuple((x, 0.0 - y) for x, y in path_m)


def arc(
    centre_m: Point, radius_m: float, start_rad: float, stop_rad: float, count: int
) -> PathPoints:
    """Return `count` equally spaced points of an arc, both ends included."""
    step = (stop_rad - start_rad) / (count - 1)
    places = (cos_sin(start_rad + step * i) for i in range(count))
    return tuple((centre_m[0] + radius_m * c, centre_m[1] + radius_m * s) for c, s in places)


def smoothed(path_m: PathPoints, widths_m: Sequence[float]) -> tuple[PathPoints, tuple[float, ...]]:
    """Draw a cubic spline through points.

    Parameters
    ----------
    path_m : tuple of (float, float)
        At least three points. The spline of a closed path has no kink where it closes; that of an
        open one is straight at its ends, as a thin lath bent round pins.
    widths_m : sequence of float
        One width per point, or none.

    Returns
    -------
    path_m : tuple of (float, float)
        `SPLINE_POINTS` per leg and the last point; the given ones are among them.
    widths_m : tuple of float
        A width per point, linear from one given point to the next.

    Notes
    -----
    The parameter is the length along the chords, which keeps legs of unequal length from bulging.
    """
    from scipy.interpolate import CubicSpline

    chords = accumulate((math.dist(a, b) for a, b in pairwise(path_m)), initial=0.0)
    knots = list(chords)
    parts = [i / SPLINE_POINTS for i in range(SPLINE_POINTS)]
    where = [a + (b - a) * part for a, b in pairwise(knots) for part in parts]
    spline = CubicSpline(knots, path_m, bc_type="periodic" if is_closed(path_m) else "natural")
    # At the knots the spline is exact: there its polynomials are their constant terms.
    drawn: list[Point] = [(x, y) for x, y in spline(where).tolist()]
    if not widths_m:
        return (*drawn, path_m[-1]), ()
    widths = [a + (b - a) * part for a, b in pairwise(widths_m) for part in parts]
    return (*drawn, path_m[-1]), (*widths, widths_m[-1])


def width_at(path_m: Sequence[Point], widths_m: Sequence[float], at_m: float) -> float:
    """Return the width at a length along a path with one width per point."""
    start = 0.0
    for (a, b), (first, last) in zip(pairwise(path_m), pairwise(widths_m), strict=True):
        leg = math.dist(a, b)
        if at_m <= start + leg:
            return first + (last - first) * max(at_m - start, 0.0) / leg
        start += leg
    return widths_m[-1]


def point_on(path_m: Sequence[Point], at_m: float) -> Point:
    """Return the point at a length along a path; beyond its end the last point."""
    start = 0.0
    for a, b in pairwise(path_m):
        leg = math.dist(a, b)
        if at_m <= start + leg:
            part = max(at_m - start, 0.0) / leg
            return a[0] + part * (b[0] - a[0]), a[1] + part * (b[1] - a[1])
        start += leg
    return path_m[-1]


def spread_evenly(widths_m: Sequence[float], count: int) -> tuple[float, ...]:
    """Return `count` widths along a curve from some at equal steps of it, linear in between."""
    last = len(widths_m) - 1
    places = (i * last / (count - 1) for i in range(count))
    lower = ((place, min(int(place), last - 1)) for place in places)
    return tuple(widths_m[k] + (widths_m[k + 1] - widths_m[k]) * (place - k) for place, k in lower)
