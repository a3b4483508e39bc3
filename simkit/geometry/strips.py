"""Rules for flat strips of constant width, and the checks a strip must pass before it is meshed."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from shapely.geometry import LineString, Polygon
from shapely.ops import nearest_points

from simkit.errors import GeometryError
from simkit.geometry.paths import leg_lengths
from simkit.study.model import Antenna, EndFeed, Strip

OPEN_END_WIDTHS = 0.075
"""A wire stands for a strip with an open end if it stops this many widths inside the end."""

FEED_GAP_WIDTHS = (0.24, 0.47, 0.71, 1.37, 2.3, 4.9, 9.2)
SOURCE_SEGMENT_WIDTHS = (0.40, 0.61, 0.80, 1.22, 1.63, 2.44, 3.22)
"""Gap, in strip widths, that a source on a segment of so many widths acts like.

Found by comparing the feed admittance with a full-wave solution of flat strips with gaps; good to
5 to 20 % beyond a segment of 1.7 widths, where the correction it enters is small.
"""


def equivalent_radius_m(width_m: float, thickness_m: float) -> float:
    """Radius of the round wire with the static charge distribution radius of a flat strip.

    Parameters
    ----------
    width_m, thickness_m : float
        Metres; a thickness of 0 is a perfect foil.

    Returns
    -------
    float
        ``(w/4) [1 + (t/(pi w)) (1 + ln(4 pi w / t))]``, metres.

    Notes
    -----
    w/4 is exact for a thin strip. Against a two-dimensional solution of a rectangular bar the
    formula is within 0.15 % for t/w up to 0.05 and 0.5 % at 0.1.
    """
    radius = width_m / 4
    if thickness_m > 0:
        ratio = thickness_m / width_m
        radius *= 1 + ratio / np.pi * (1 + np.log(4 * np.pi / ratio))
    return float(radius)


def model_gap_m(segment_m: float, width_m: float) -> float:
    """Gap in a strip that a source on one segment of the equivalent wire acts like, metres."""
    at = np.log(SOURCE_SEGMENT_WIDTHS)
    gaps = np.log(FEED_GAP_WIDTHS)
    wanted = np.log(segment_m / width_m)
    slope = (gaps[-1] - gaps[-2]) / (at[-1] - at[-2])
    first = (gaps[1] - gaps[0]) / (at[1] - at[0])
    if wanted > at[-1]:
        value = gaps[-1] + slope * (wanted - at[-1])
    elif wanted < at[0]:
        value = gaps[0] + first * (wanted - at[0])
    else:
        value = np.interp(wanted, at, gaps)
    return float(width_m * np.exp(value))


def outline(strip: Strip) -> Polygon:
    """Outline of a strip with square ends and mitred corners, metres."""
    shape = LineString(strip.path_m).buffer(
        strip.width_m / 2, cap_style="flat", join_style="mitre", mitre_limit=10.0
    )
    if isinstance(shape, Polygon):
        return shape
    raise GeometryError(f"strip {strip.name!r}: its outline falls into several pieces")


def check_strips(antenna: Antenna) -> tuple[str, ...]:
    """Refuse strips that cannot be cut from sheet or are not covered by the line model.

    Returns
    -------
    tuple of str
        Doubts: what may be a mistake but can be modelled.

    Raises
    ------
    GeometryError
        Naming the strip, the place in millimetres, the limit and the remedy.
    """
    for strip in antenna.strips:
        _check_strip(strip)
    widths = {strip.width_m for strip in antenna.strips}
    if max(widths) - min(widths) > 1e-6 * max(widths):
        listed = ", ".join(f"{s.name} {s.width_m * 1e3:.4g} mm" for s in antenna.strips)
        raise GeometryError(
            f"strips of different widths ({listed}): the line model holds for one width in a "
            "study; give all strips the same width"
        )
    return _check_neighbours(antenna)


def _check_strip(strip: Strip) -> None:
    points = np.asarray(strip.path_m, dtype=float)
    if not np.all(np.isfinite(points)) or not np.isfinite(strip.width_m):
        raise GeometryError(f"strip {strip.name!r}: its path or width is not finite")
    if strip.width_m <= 0:
        raise GeometryError(
            f"strip {strip.name!r}: width = {strip.width_m * 1e3:.4g} mm must be positive"
        )
    legs = leg_lengths(points)
    if np.any(legs < 1e-6):
        x, y = points[int(np.argmin(legs))] * 1e3
        raise GeometryError(
            f"strip {strip.name!r}: two path points coincide at ({x:.4g}, {y:.4g}) mm; drop one"
        )
    if legs.sum() < 2 * strip.width_m:
        raise GeometryError(
            f"strip {strip.name!r}: a path of {legs.sum() * 1e3:.4g} mm is shorter than twice the "
            f"width of {strip.width_m * 1e3:.4g} mm; that is a patch, not a strip"
        )
    _check_overlap(strip, points, legs)


def _check_overlap(strip: Strip, points: np.ndarray, legs: np.ndarray) -> None:
    """Legs that lie more than three widths apart along the path must be a width apart in space."""
    at = np.concatenate([[0.0], np.cumsum(legs)])
    closed = bool(np.linalg.norm(points[0] - points[-1]) < 1e-9)
    lines = [LineString(pair) for pair in pairwise(points)]
    for i, first in enumerate(lines):
        for j in range(i + 1, len(lines)):
            apart = at[j] - at[i + 1]
            if closed:
                apart = min(apart, at[-1] - at[j + 1] + at[i])
            distance = first.distance(lines[j])
            crosses = first.crosses(lines[j])
            if crosses or (apart > 3 * strip.width_m and distance < strip.width_m):
                x, y = np.asarray(nearest_points(first, lines[j])[0].coords[0]) * 1e3
                raise GeometryError(
                    f"strip {strip.name!r} crosses or overlaps itself near ({x:.4g}, {y:.4g}) mm: "
                    f"its legs {i + 1} and {j + 1} come within {distance * 1e3:.4g} mm, less than "
                    f"the width of {strip.width_m * 1e3:.4g} mm; spread the path or narrow the "
                    "strip"
                )


def _check_neighbours(antenna: Antenna) -> tuple[str, ...]:
    doubts = []
    shapes = [outline(strip) for strip in antenna.strips]
    fed = set()
    if isinstance(antenna.feed, EndFeed):
        fed = {antenna.feed.from_strip, antenna.feed.to_strip}
    for i, first in enumerate(antenna.strips):
        for j in range(i + 1, len(antenna.strips)):
            second = antenna.strips[j]
            distance = shapes[i].distance(shapes[j])
            x, y = np.asarray(nearest_points(shapes[i], shapes[j])[0].coords[0]) * 1e3
            pair = f"strips {first.name!r} and {second.name!r}"
            if {first.name, second.name} == fed:
                if distance <= 0:
                    raise GeometryError(
                        f"{pair} touch near ({x:.4g}, {y:.4g}) mm, which shorts the feed between "
                        "them (strip ends are square): widen the gap, or draw one strip through "
                        "the corner and feed it by a cut across it (strip = ..., at = ...)"
                    )
                continue
            if distance < 1e-6:
                raise GeometryError(
                    f"{pair} touch or overlap near ({x:.4g}, {y:.4g}) mm; joined strips are not "
                    "available in this version: draw them as one path, or move them apart"
                )
            if distance < first.width_m:
                doubts.append(
                    f"{pair} come within {distance * 1e3:.4g} mm near ({x:.4g}, {y:.4g}) mm, less "
                    f"than a width ({first.width_m * 1e3:.4g} mm): usually a mistake, and the line "
                    "model does not see how the current crowds towards the neighbour"
                )
    return tuple(doubts)
