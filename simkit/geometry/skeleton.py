"""From strips and feed to current paths: centre lines in a row, tip to tip through the feed."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from simkit.errors import GeometryError
from simkit.geometry.paths import (
    arc_lengths,
    leg_lengths,
    point_at,
    same_point,
    sub_path,
    turn_angle,
    unit,
)
from simkit.geometry.wires import FloatArray, StripSpan
from simkit.study.model import Antenna, CutFeed, EndFeed, Strip

FeedKind = Literal["straight", "apex"]

STRAIGHT_FEED_RAD = np.deg2rad(2.0)
"""A feed whose strips turn by less than this counts as lying inside a straight leg."""


@dataclass(frozen=True)
class FeedPlace:
    """Feed on a skeleton: `arc_m` of the gap's middle; `vertex` is its index if it is an apex."""

    kind: FeedKind
    arc_m: float
    gap_m: float
    vertex: int = -1


@dataclass(frozen=True)
class Skeleton:
    """One current path: a (V, 2) polyline in metres, with the strips that lie on it.

    A closed path begins and ends at the same point, in the middle of a leg.
    """

    points: FloatArray
    closed: bool
    width_m: float
    spans: tuple[StripSpan, ...]
    feed: FeedPlace | None

    @property
    def length_m(self) -> float:
        """Arc length from tip to tip, metres."""
        return float(leg_lengths(self.points).sum())


def skeletons(antenna: Antenna, feed_kind: FeedKind | None = None) -> tuple[Skeleton, ...]:
    """Current paths of an antenna, the fed one first.

    Parameters
    ----------
    antenna : Antenna
    feed_kind : {"straight", "apex"}, optional
        Forces how the feed is modelled, so that all cases of a study are meshed alike.

    Raises
    ------
    GeometryError
        The feed cannot be placed.
    """
    names = [strip.name for strip in antenna.strips]
    if isinstance(antenna.feed, EndFeed):
        fed = [names.index(antenna.feed.from_strip), names.index(antenna.feed.to_strip)]
        first = _joined_by_feed(antenna, antenna.feed, fed, feed_kind)
    else:
        fed = [names.index(antenna.feed.strip)]
        first = _cut_by_feed(antenna.strips[fed[0]], fed[0], antenna.feed, feed_kind)
    others = [
        _unfed(strip, index) for index, strip in enumerate(antenna.strips) if index not in fed
    ]
    return (first, *others)


def _points(strip: Strip) -> FloatArray:
    return np.asarray(strip.path_m, dtype=float)


def _is_loop(points: FloatArray) -> bool:
    return len(points) > 3 and same_point(points[0], points[-1])


def _joined_by_feed(
    antenna: Antenna, feed: EndFeed, fed: list[int], feed_kind: FeedKind | None
) -> Skeleton:
    if fed[0] == fed[1]:
        raise GeometryError(
            f"feed: from and to both name strip {feed.from_strip!r}; a source bridges the ends of "
            "two strips, a source in one strip is a cut (strip = ..., at = ...)"
        )
    left, right = (_points(antenna.strips[index]) for index in fed)
    if feed.from_end == "start":
        left = left[::-1]
    if feed.to_end == "end":
        right = right[::-1]
    bridge = right[0] - left[-1]
    gap = float(np.linalg.norm(bridge))
    if gap < 1e-6:
        raise GeometryError(
            f"feed: the two strip ends meet at ({left[-1][0] * 1e3:.4g}, {left[-1][1] * 1e3:.4g}) "
            "mm, so the feed is shorted; leave the gap that the real feed has between them"
        )
    kind = feed_kind or _natural_kind(left, right, bridge)
    if kind == "straight":
        points = np.vstack([left[:-1], right[1:]])
        arc_a = float(leg_lengths(left).sum())
        place = FeedPlace("straight", arc_a + gap / 2, gap)
        arc_b = arc_a + gap
    else:
        apex = _apex(left, right, gap)
        points = np.vstack([left[:-1], apex[None], right[1:]])
        at = float(arc_lengths(points)[len(left) - 1])
        place = FeedPlace("apex", at, gap, vertex=len(left) - 1)
        arc_a = at - float(np.linalg.norm(apex - left[-1]))
        arc_b = at + float(np.linalg.norm(apex - right[0]))
    length = float(leg_lengths(points).sum())
    spans = (
        _span(fed[0], 0.0, arc_a, reverse=feed.from_end == "start"),
        _span(fed[1], arc_b, length, reverse=feed.to_end == "end"),
    )
    width = antenna.strips[fed[0]].width_m
    return Skeleton(points, False, width, spans, place)


def _span(strip: int, start: float, end: float, *, reverse: bool) -> StripSpan:
    return StripSpan(strip, end, start) if reverse else StripSpan(strip, start, end)


def _natural_kind(left: FloatArray, right: FloatArray, bridge: FloatArray) -> FeedKind:
    before, after = left[-1] - left[-2], right[1] - right[0]
    worst = max(turn_angle(before, bridge), turn_angle(bridge, after))
    return "straight" if worst < STRAIGHT_FEED_RAD else "apex"


def _apex(left: FloatArray, right: FloatArray, gap: float) -> FloatArray:
    """Where the centre lines of the two fed strips meet when carried on across the gap."""
    before, after = unit(left[-1] - left[-2]), unit(right[1] - right[0])
    middle: FloatArray = (left[-1] + right[0]) / 2
    if turn_angle(before, after) < np.deg2rad(10.0):
        return middle
    along = np.linalg.solve(np.column_stack([before, after]), right[0] - left[-1])
    if along[0] < 0 or along[1] < 0 or max(along) > 3 * gap:
        raise GeometryError(
            f"feed: the strip ends at ({left[-1][0] * 1e3:.4g}, {left[-1][1] * 1e3:.4g}) and "
            f"({right[0][0] * 1e3:.4g}, {right[0][1] * 1e3:.4g}) mm do not face each other across "
            "the gap; let the centre lines meet when carried on, or add a bend before the feed"
        )
    apex: FloatArray = left[-1] + along[0] * before
    return apex


def _cut_by_feed(strip: Strip, index: int, feed: CutFeed, feed_kind: FeedKind | None) -> Skeleton:
    points = _points(strip)
    length = float(leg_lengths(points).sum())
    closed = _is_loop(points)
    if not (0.0 <= feed.at_m <= length) or (not closed and feed.at_m in (0.0, length)):
        raise GeometryError(
            f"feed: at = {feed.at_m * 1e3:.4g} mm lies outside strip {strip.name!r}, whose path is "
            f"{length * 1e3:.4g} mm long"
        )
    if feed.gap_m >= length / 4:
        raise GeometryError(
            f"feed: a cut of {feed.gap_m * 1e3:.4g} mm is too wide for a path of "
            f"{length * 1e3:.4g} mm"
        )
    if closed:
        return _loop(points, index, strip.width_m, feed)
    arcs = arc_lengths(points)
    near = int(np.argmin(abs(arcs - feed.at_m)))
    at_vertex = 0 < near < len(points) - 1 and abs(arcs[near] - feed.at_m) < 1e-6
    kind = feed_kind or ("apex" if at_vertex else "straight")
    if kind == "apex" and not at_vertex:
        raise GeometryError(
            "feed: the cut moves off the corner it sits on in other cases of the study; keep it on "
            "the corner, or split the study"
        )
    place = FeedPlace(kind, feed.at_m, feed.gap_m, vertex=near if kind == "apex" else -1)
    return Skeleton(points, False, strip.width_m, (StripSpan(index, 0.0, length),), place)


def _loop(points: FloatArray, index: int, width_m: float, feed: CutFeed) -> Skeleton:
    """A loop, opened in the middle of the leg that lies half way round from the feed."""
    legs = len(points) - 1
    arcs = arc_lengths(points)
    length = float(arcs[-1])
    feed_leg = min(int(np.searchsorted(arcs, feed.at_m, side="right")) - 1, legs - 1)
    leg = (feed_leg + legs // 2) % legs
    start = float(arcs[leg] + arcs[leg + 1]) / 2
    turned = np.vstack([sub_path(points, start, length), sub_path(points, 0.0, start)[1:]])
    place = FeedPlace("straight", (feed.at_m - start) % length, feed.gap_m)
    return Skeleton(turned, True, width_m, (StripSpan(index, -start, length - start),), place)


def _unfed(strip: Strip, index: int) -> Skeleton:
    points = _points(strip)
    length = float(leg_lengths(points).sum())
    if not _is_loop(points):
        return Skeleton(points, False, strip.width_m, (StripSpan(index, 0.0, length),), None)
    start = float(leg_lengths(points)[0]) / 2
    turned = np.vstack([sub_path(points, start, length), sub_path(points, 0.0, start)[1:]])
    return Skeleton(turned, True, strip.width_m, (StripSpan(index, -start, length - start),), None)


def feed_point(antenna: Antenna) -> FloatArray:
    """Middle of the feed in the strips' plane, (x, y) in metres."""
    fed = skeletons(antenna)[0]
    assert fed.feed is not None  # the first skeleton is the fed one by construction
    return point_at(fed.points, fed.feed.arc_m)
