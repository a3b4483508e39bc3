"""Equivalent radius and feed gap of flat strips, and the checks strips must pass before meshing."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from shapely.geometry import LineString, Point

from simkit.errors import GeometryError
from simkit.geometry.outlines import nearest_place_mm, outline
from simkit.geometry.paths import leg_lengths
from simkit.geometry.wires import FloatArray
from simkit.study.model import Antenna, CutFeed, EndFeed, Strip

OPEN_END_WIDTHS = 0.075
"""A wire stands for a strip with an open end if it stops this many widths inside the end."""

FEED_GAP_WIDTHS = (0.24, 0.47, 0.71, 1.37, 2.3, 4.9, 9.2)
SOURCE_SEGMENT_WIDTHS = (0.40, 0.61, 0.80, 1.22, 1.63, 2.44, 3.22)
"""Gap, in strip widths, that a source on a segment of so many widths acts like.

Found by comparing the feed admittance with a full-wave solution of flat strips with gaps; good to
5 to 20 % beyond a segment of 1.7 widths, where the correction it enters is small.
"""


CARRIER_NEIGHBOUR_THICKNESSES = 4
"""Strips that are not joined must be so many thicknesses of their carrier apart."""

THICKEST_WIDTHS = 0.1
"""Thickness over width up to which the equivalent radius is right to 0.5 %."""


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
    """Gap in a strip that a source on one segment of the equivalent wire acts like, metres.

    Sources on one segment of each rail of a bundle act like the same gap: on strips of 1.5 to 20 mm
    by 150 mm the dips of both models agree to 0.15 %.
    """
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


def check_strips(antenna: Antenna) -> tuple[str, ...]:
    """Refuse strips that cannot be cut from sheet or that meet in ways the models do not cover.

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
    doubts: list[str] = []
    for i, first in enumerate(antenna.strips):
        for second in antenna.strips[i + 1 :]:
            doubts += _check_pair(antenna, first, second)
    _check_fed_loop(antenna)
    narrowest = min(width for strip in antenna.strips for width in strip.widths)
    if antenna.metal.thickness_m > THICKEST_WIDTHS * narrowest:
        doubts.append(
            f"metal of {antenna.metal.thickness_m * 1e3:.4g} mm is more than {THICKEST_WIDTHS} of "
            f"the narrowest width of {narrowest * 1e3:.4g} mm: the strip is a bar there, and mode "
            "frequencies may be off by 0.1 % and more"
        )
    return tuple(doubts)


def check_path(strip: Strip) -> None:
    """Refuse a path that has no direction somewhere.

    Raises
    ------
    GeometryError
        The path or the width is not finite, or two points in a row coincide.
    """
    points = np.asarray(strip.path_m, dtype=float)
    if not np.all(np.isfinite(points)) or not np.all(np.isfinite(strip.widths)):
        raise GeometryError(f"strip {strip.name!r}: its path or width is not finite")
    legs = leg_lengths(points)
    if np.any(legs < 1e-6):
        x, y = points[int(np.argmin(legs))] * 1e3
        raise GeometryError(
            f"strip {strip.name!r}: two path points coincide at ({x:.4g}, {y:.4g}) mm; drop one"
        )


def _check_strip(strip: Strip) -> None:
    check_path(strip)
    points = np.asarray(strip.path_m, dtype=float)
    widths = np.asarray(strip.widths, dtype=float)
    if widths.min() <= 0:
        raise GeometryError(
            f"strip {strip.name!r}: width = {widths.min() * 1e3:.4g} mm must be positive"
        )
    legs = leg_lengths(points)
    if legs.sum() < widths.max():
        raise GeometryError(
            f"strip {strip.name!r}: a path of {legs.sum() * 1e3:.4g} mm is shorter than its width "
            f"of {widths.max() * 1e3:.4g} mm; that is a patch, not a strip"
        )
    _check_overlap(strip, points, legs)


def _check_overlap(strip: Strip, points: FloatArray, legs: FloatArray) -> None:
    """Legs that lie more than three widths apart along the path must be a width apart in space."""
    at = np.concatenate([[0.0], np.cumsum(legs)])
    width = max(strip.widths)
    closed = bool(np.linalg.norm(points[0] - points[-1]) < 1e-9)
    lines = [LineString(pair) for pair in pairwise(points)]
    for i, j in _candidates(points, width):
        apart = at[j] - at[i + 1]
        if closed:
            apart = min(apart, at[-1] - at[j + 1] + at[i])
        distance = lines[i].distance(lines[j])
        crosses = lines[i].crosses(lines[j])
        if crosses or (apart > 3 * width and distance < width):
            x, y = nearest_place_mm(lines[i], lines[j])
            raise GeometryError(
                f"strip {strip.name!r} crosses or overlaps itself near ({x:.4g}, {y:.4g}) mm: "
                f"its legs {i + 1} and {j + 1} come within {distance * 1e3:.4g} mm, less than the "
                f"width of {width * 1e3:.4g} mm; spread the path or narrow the strip"
            )


def _candidates(points: FloatArray, width: float) -> list[tuple[int, int]]:
    """Pairs of legs whose bounding boxes come within a width of each other."""
    low = np.minimum(points[:-1], points[1:]) - width
    high = np.maximum(points[:-1], points[1:]) + width
    meet = np.all((low[:, None] <= high[None]) & (low[None] <= high[:, None]), axis=2)
    return [(int(i), int(j)) for i, j in np.argwhere(np.triu(meet, k=1))]


def _ends(strip: Strip) -> tuple[tuple[str, FloatArray], tuple[str, FloatArray]]:
    points = np.asarray(strip.path_m, dtype=float)
    return ("start", points[0]), ("end", points[-1])


def _fed_ends(antenna: Antenna) -> set[tuple[str, str]]:
    feed = antenna.feed
    if isinstance(feed, CutFeed):
        return set()
    return {(feed.from_strip, feed.from_end), (feed.to_strip, feed.to_end)}


def _check_pair(antenna: Antenna, first: Strip, second: Strip) -> list[str]:
    shapes = outline(first), outline(second)
    pair = f"strips {first.name!r} and {second.name!r}"
    distance = shapes[0].distance(shapes[1])
    x, y = nearest_place_mm(*shapes)
    fed = _fed_ends(antenna)
    bridged = {first.name, second.name} == {name for name, _ in fed}
    joints = _joints(antenna, first, second)
    if bridged and distance <= 0 and not joints:
        raise GeometryError(
            f"{pair} touch near ({x:.4g}, {y:.4g}) mm, which shorts the feed between them (strip "
            "ends are square): widen the gap, or draw one strip through the corner and feed it by "
            "a cut across it (strip = ..., at = ...)"
        )
    if joints or bridged:
        _check_joint_area(pair, shapes, joints, max(first.width_m, second.width_m))
        return []
    if distance < 1e-6:
        raise GeometryError(
            f"{pair} cross or overlap near ({x:.4g}, {y:.4g}) mm without an end of one on the "
            "other; crossings are not covered: end one strip on the other, or move them apart"
        )
    _check_shared_carrier(antenna, pair, distance, (x, y))
    _check_near_miss(first, second, fed)
    _check_near_miss(second, first, fed)
    if distance < min(first.width_m, second.width_m):
        return [
            f"{pair} come within {distance * 1e3:.4g} mm near ({x:.4g}, {y:.4g}) mm, less than a "
            f"width ({min(first.width_m, second.width_m) * 1e3:.4g} mm): the models do not see how "
            "the current crowds towards the neighbour, so mode frequencies may be off by 1 %"
        ]
    return []


def _joints(antenna: Antenna, first: Strip, second: Strip) -> list[FloatArray]:
    """Places where an unfed end of one strip lies on the metal of the other."""
    fed = _fed_ends(antenna)
    found = []
    for strip, other in ((first, second), (second, first)):
        metal = LineString(other.path_m)
        for end, point in _ends(strip):
            near = metal.distance(Point(point))
            at = metal.project(Point(point), normalized=False)
            arcs = np.concatenate([[0.0], np.cumsum(leg_lengths(np.asarray(other.path_m)))])
            width = float(np.interp(at, arcs, other.widths))
            if (strip.name, end) not in fed and near <= width / 2 + 1e-6:
                found.append(point)
    return found


def _check_joint_area(pair: str, shapes: tuple, joints: list[FloatArray], width: float) -> None:  # type: ignore[type-arg]
    """Joined strips may overlap at their joints only."""
    common = shapes[0].intersection(shapes[1])
    for point in joints:
        common = common.difference(Point(point).buffer(2.5 * width))
    if common.area > 1e-3 * width**2:
        x, y = common.representative_point().coords[0]
        raise GeometryError(
            f"{pair} overlap near ({x * 1e3:.4g}, {y * 1e3:.4g}) mm, away from where they are "
            "joined; spread them or change the angle between them"
        )


def _check_shared_carrier(
    antenna: Antenna, pair: str, distance_m: float, place_mm: tuple[float, float]
) -> None:
    """Each strip has a carrier of its own in the models; neighbours in one plastic couple in it."""
    carrier = antenna.carrier
    if carrier is None:
        return
    least_m = CARRIER_NEIGHBOUR_THICKNESSES * carrier.thickness_m
    if distance_m < least_m:
        raise GeometryError(
            f"{pair} on one carrier come within {distance_m * 1e3:.4g} mm near "
            f"({place_mm[0]:.4g}, {place_mm[1]:.4g}) mm; the plastic couples strips closer than "
            f"{CARRIER_NEIGHBOUR_THICKNESSES} of its thicknesses ({least_m * 1e3:.4g} mm), which "
            "the models do not see: move them apart, or leave [carrier] out"
        )


def _check_near_miss(strip: Strip, other: Strip, fed: set[tuple[str, str]]) -> None:
    """An end that stops just short of another strip is nearly always meant to touch it."""
    metal = outline(other)
    points = np.asarray(strip.path_m, dtype=float)
    if np.linalg.norm(points[0] - points[-1]) < 1e-9:
        return
    for (end, point), width in zip(_ends(strip), (strip.widths[0], strip.widths[-1]), strict=True):
        away = metal.distance(Point(point))
        if (strip.name, end) not in fed and 0 < away < width:
            raise GeometryError(
                f"the {end} of strip {strip.name!r} at ({point[0] * 1e3:.4g}, "
                f"{point[1] * 1e3:.4g}) mm stops {away * 1e3:.4g} mm short of strip "
                f"{other.name!r}, less than its own width of {width * 1e3:.4g} mm: let it touch, "
                "or leave more room"
            )


def _check_fed_loop(antenna: Antenna) -> None:
    """A strip fed between its own ends: the ends must leave a gap."""
    feed = antenna.feed
    if not isinstance(feed, EndFeed) or feed.from_strip != feed.to_strip:
        return
    strip = next(s for s in antenna.strips if s.name == feed.from_strip)
    points = np.asarray(strip.path_m, dtype=float)
    gap = float(np.linalg.norm(points[0] - points[-1]))
    if gap < 1e-6:
        x, y = points[0] * 1e3
        raise GeometryError(
            f"feed: start and end of strip {strip.name!r} meet at ({x:.4g}, {y:.4g}) mm, so the "
            "feed is shorted; leave the gap that the real feed has between them"
        )
