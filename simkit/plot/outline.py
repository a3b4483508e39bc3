"""Metal, feed and open ends of an antenna as shapes in the plane, metres."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from shapely import LinearRing, LineString, union_all
from shapely.geometry.base import BaseGeometry
from shapely.ops import substring

from simkit.study.model import Antenna, CutFeed, EndFeed, Strip

MITRE_LIMIT = 10.0


@dataclass(frozen=True)
class FeedPlace:
    """Both sides of the feed in the plane, metres."""

    sides_m: tuple[tuple[float, float], tuple[float, float]]

    @property
    def middle_m(self) -> tuple[float, float]:
        """The point between both sides."""
        (x1, y1), (x2, y2) = self.sides_m
        return (x1 + x2) / 2, (y1 + y2) / 2


def strip_outline(strip: Strip) -> BaseGeometry:
    """Return the metal of a strip, metres: flat ends, mitred corners."""
    if is_closed(strip):
        ring = LinearRing(strip.path_m)
        return ring.buffer(strip.width_m / 2, join_style="mitre", mitre_limit=MITRE_LIMIT)
    return _outline(LineString(strip.path_m), strip.width_m)


def is_closed(strip: Strip) -> bool:
    """Return whether the strip's path comes back to its beginning."""
    return len(strip.path_m) > 3 and bool(np.allclose(strip.path_m[0], strip.path_m[-1], atol=1e-9))


def _outline(line: LineString, width_m: float) -> BaseGeometry:
    return line.buffer(width_m / 2, cap_style="flat", join_style="mitre", mitre_limit=MITRE_LIMIT)


def metal_of(antenna: Antenna) -> dict[str, BaseGeometry]:
    """Return the metal per strip name, metres, with the feed's cut taken out."""
    outlines = {strip.name: strip_outline(strip) for strip in antenna.strips}
    feed = antenna.feed
    if isinstance(feed, CutFeed):
        strip = _strip(antenna, feed.strip)
        line = LineString(strip.path_m)
        cut = substring(line, feed.at_m - feed.gap_m / 2, feed.at_m + feed.gap_m / 2)
        if isinstance(cut, LineString):
            outlines[feed.strip] = outlines[feed.strip].difference(_outline(cut, strip.width_m))
    return outlines


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


def open_ends(antenna: Antenna) -> list[tuple[float, float]]:
    """Return the strip ends that touch no other strip and are not named in the feed, metres."""
    feed = antenna.feed
    fed = (
        {(feed.from_strip, feed.from_end), (feed.to_strip, feed.to_end)}
        if isinstance(feed, EndFeed)
        else set()
    )
    found = []
    for strip in antenna.strips:
        if is_closed(strip):
            continue
        others = union_all([strip_outline(s) for s in antenna.strips if s.name != strip.name])
        for end in ("start", "end"):
            face = _end_face(strip, end)
            if (strip.name, end) not in fed and not face.intersects(others):
                found.append(_end(strip, end))
    return found


def _strip(antenna: Antenna, name: str) -> Strip:
    return next(strip for strip in antenna.strips if strip.name == name)


def _end(strip: Strip, end: str) -> tuple[float, float]:
    return strip.path_m[0] if end == "start" else strip.path_m[-1]


def _end_face(strip: Strip, end: str) -> LineString:
    """The cut edge of the metal at one end of a strip."""
    first, second = strip.path_m[:2] if end == "start" else strip.path_m[:-3:-1]
    along = np.subtract(second, first)
    across = np.array([-along[1], along[0]]) / np.hypot(*along) * strip.width_m / 2
    return LineString([np.subtract(first, across), np.add(first, across)])
