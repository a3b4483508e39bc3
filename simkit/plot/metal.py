"""Metal, feed, ends and joints of an antenna as shapes in the plane of the strips, metres."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.path import Path
from numpy.typing import ArrayLike, NDArray
from shapely import LineString, Point, Polygon
from shapely.geometry.base import BaseGeometry
from shapely.ops import substring

from simkit.geometry.outlines import outline
from simkit.geometry.placement import stands_on_plane
from simkit.study.model import Antenna, CutFeed, EndFeed, Placement, Strip

TOUCH_M = 1e-6
"""Metal closer than a micrometre is joined."""

FloatArray = NDArray[np.float64]
Place = tuple[float, float]


@dataclass(frozen=True)
class FeedPlace:
    """Both sides of the feed in the plane, metres."""

    sides_m: tuple[Place, Place]

    @property
    def middle_m(self) -> Place:
        """The point between both sides."""
        (x1, y1), (x2, y2) = self.sides_m
        return (x1 + x2) / 2, (y1 + y2) / 2

    @property
    def gap_m(self) -> float:
        """Distance between both sides."""
        (x1, y1), (x2, y2) = self.sides_m
        return float(np.hypot(x2 - x1, y2 - y1))


@dataclass(frozen=True)
class StripEnds:
    """Places of strip ends: open ones, those on another strip, those on the ground plane."""

    open_m: tuple[Place, ...]
    joined_m: tuple[Place, ...]
    grounded_m: tuple[Place, ...] = ()


def is_closed(strip: Strip) -> bool:
    """Return whether the strip's path comes back to its beginning."""
    return len(strip.path_m) > 3 and bool(np.allclose(strip.path_m[0], strip.path_m[-1], atol=1e-9))


def metal_of(antenna: Antenna) -> dict[str, BaseGeometry]:
    """Return the metal per strip name, metres, with the feed's cut taken out."""
    shapes: dict[str, BaseGeometry] = {strip.name: outline(strip) for strip in antenna.strips}
    feed = antenna.feed
    if isinstance(feed, CutFeed):
        strip = _strip(antenna, feed.strip)
        line = LineString(strip.path_m)
        cut = substring(line, feed.at_m - feed.gap_m / 2, feed.at_m + feed.gap_m / 2)
        if isinstance(cut, LineString):
            # Somewhat wider than the strip: a taper's edges lean.
            saw = cut.buffer(0.55 * strip.width_m, cap_style="flat", join_style="mitre")
            shapes[feed.strip] = shapes[feed.strip].difference(saw)
    return shapes


def feed_place(antenna: Antenna) -> FeedPlace:
    """Return where the source sits."""
    feed = antenna.feed
    if isinstance(feed, EndFeed):
        return FeedPlace(
            (
                _end(_strip(antenna, feed.from_strip), feed.from_end),
                _end(_strip(antenna, feed.to_strip), feed.to_end),
            )
        )
    line = LineString(_strip(antenna, feed.strip).path_m)
    sides = [line.interpolate(feed.at_m + side * feed.gap_m / 2) for side in (-1, 1)]
    return FeedPlace(((sides[0].x, sides[0].y), (sides[1].x, sides[1].y)))


def strip_ends(antenna: Antenna) -> StripEnds:
    """Return where strips end, but for the ends named in the feed.

    A place where two strips end on each other is named once.
    """
    feed = antenna.feed
    fed = (
        {(feed.from_strip, feed.from_end), (feed.to_strip, feed.to_end)}
        if isinstance(feed, EndFeed)
        else set()
    )
    shapes = {strip.name: outline(strip) for strip in antenna.strips}
    open_ends: list[Place] = []
    joined: list[Place] = []
    grounded: list[Place] = []
    for strip in antenna.strips:
        for end in ("start", "end"):
            if (strip.name, end) in fed or is_closed(strip):
                continue
            place = _end(strip, end)
            others = [shape for name, shape in shapes.items() if name != strip.name]
            face = _end_face(strip, end)
            if stands_on_plane(place, antenna):
                grounded.append(place)
            elif all(face.distance(shape) > TOUCH_M for shape in others):
                open_ends.append(place)
            elif all(Point(place).distance(Point(known)) > TOUCH_M for known in joined):
                joined.append(place)
    return StripEnds(tuple(open_ends), tuple(joined), tuple(grounded))


def _strip(antenna: Antenna, name: str) -> Strip:
    return next(strip for strip in antenna.strips if strip.name == name)


def _end(strip: Strip, end: str) -> Place:
    return strip.path_m[0] if end == "start" else strip.path_m[-1]


def _end_face(strip: Strip, end: str) -> LineString:
    """The cut edge of the metal at one end of a strip."""
    first, second = strip.path_m[:2] if end == "start" else strip.path_m[:-3:-1]
    width = strip.widths[0 if end == "start" else -1]
    along = np.subtract(second, first)
    across = np.array([-along[1], along[0]]) / np.hypot(*along) * width / 2
    return LineString([np.subtract(first, across), np.add(first, across)])


def as_path(polygon: Polygon, factor: float) -> Path:
    """Return a polygon as a matplotlib path, holes included, coordinates times a factor."""
    rings = [polygon.exterior, *polygon.interiors]
    return Path.make_compound_path(
        *(Path(np.asarray(ring.coords) * factor, closed=True) for ring in rings)
    )


def in_plane(points_m: ArrayLike, placement: Placement) -> FloatArray:
    """Take points in space, (N, 3), back to the plane in which the strips are described, (N, 2)."""
    away = np.asarray(points_m, dtype=float) - np.asarray(placement.shift_m)
    return np.asarray((away @ np.asarray(placement.rotation))[:, :2])


def widths_text(widths_m: Sequence[float]) -> str:
    """Return the width of a strip in millimetres: ``8 mm``, or ``3 to 14 mm`` of a taper."""
    low, high = min(widths_m) * 1e3, max(widths_m) * 1e3
    if high - low < 1e-4:
        return f"{high:.3g} mm"
    first, last = widths_m[0] * 1e3, widths_m[-1] * 1e3
    if {first, last} == {low, high}:
        return f"{first:.3g} to {last:.3g} mm"
    return f"{low:.3g} to {high:.3g} mm"
