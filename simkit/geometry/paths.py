"""Plane polylines: leg lengths, turn angles, places along them."""

from __future__ import annotations

from itertools import pairwise
from typing import cast

import numpy as np

from simkit.geometry.wires import FloatArray


def leg_lengths(points: FloatArray) -> FloatArray:
    """Lengths of the (V - 1) legs of a (V, 2) polyline."""
    return cast(FloatArray, np.hypot(*(points[1:] - points[:-1]).T))


def arc_lengths(points: FloatArray) -> FloatArray:
    """Arc length at each of the V vertices, from 0."""
    return np.concatenate([[0.0], np.cumsum(leg_lengths(points))])


def turn_angle(before: FloatArray, after: FloatArray) -> float:
    """Unsigned angle in radians by which the direction changes, 0..pi."""
    cross = before[0] * after[1] - before[1] * after[0]
    return float(abs(np.arctan2(cross, before @ after)))


def turns(points: FloatArray) -> FloatArray:
    """Turn angles in radians at the (V - 2) inner vertices."""
    steps = np.diff(points, axis=0)
    return np.array([turn_angle(a, b) for a, b in pairwise(steps)], dtype=float)


def point_at(points: FloatArray, arc_m: float | FloatArray) -> FloatArray:
    """Point(s) at an arc length; beyond the ends the end points."""
    at = arc_lengths(points)
    return np.stack([np.interp(arc_m, at, points[:, k]) for k in range(2)], axis=-1)


def sub_path(points: FloatArray, start_m: float, stop_m: float) -> FloatArray:
    """The part of a polyline between two arc lengths, inner vertices kept."""
    at = arc_lengths(points)
    inner = points[(at > start_m) & (at < stop_m)]
    return np.vstack([point_at(points, start_m)[None], inner, point_at(points, stop_m)[None]])


def unit(vector: FloatArray) -> FloatArray:
    """The vector scaled to length 1."""
    return cast(FloatArray, vector / np.linalg.norm(vector))


def same_point(a: FloatArray, b: FloatArray, tolerance_m: float = 1e-9) -> bool:
    """True if two points coincide to within a nanometre."""
    return bool(np.linalg.norm(a - b) <= tolerance_m)
