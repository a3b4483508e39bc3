"""The centre line of one chain of strips, and what can be done with it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np

from simkit.geometry.paths import arc_lengths, leg_lengths, point_at, same_point
from simkit.geometry.wires import FloatArray, StripSpan

TOUCH_M = 1e-6
"""Metal closer than a micrometre is joined."""

End = Literal["start", "end"]


@dataclass(frozen=True)
class FeedPlace:
    """The feed on a chain: its vertex, and the gap of the study in metres."""

    vertex: int
    gap_m: float


@dataclass(frozen=True)
class Joint:
    """Where a branch ends on the side of another chain, at a vertex of that chain."""

    chain: int
    vertex: int


@dataclass(frozen=True)
class ChainLine:
    """Centre line of one chain.

    Attributes
    ----------
    points : (V, 2) float array
        Vertices, metres; a closed chain begins and ends at the same point. The feed and every place
        where a branch ends are vertices.
    width_before_m, width_after_m : (V,) float arrays
        Width on the leg before and after each vertex; they differ at a step. Along a leg the width
        changes linearly.
    closed : bool
    spans : tuple of StripSpan
    feed : FeedPlace or None
    start, end : Joint or None
        None for an open end.
    start_tip_m, end_tip_m : float
        Length the carrier takes off an open end beyond a bare strip's share, metres.
    start_on_plane, end_on_plane : bool
        The end stands on a perfect ground plane, so that the metal goes on into its image.
    tees : tuple of (int, int)
        Vertex and branch chain for every branch that ends on this chain.
    """

    points: FloatArray
    width_before_m: FloatArray
    width_after_m: FloatArray
    closed: bool = False
    spans: tuple[StripSpan, ...] = ()
    feed: FeedPlace | None = None
    start: Joint | None = None
    end: Joint | None = None
    tees: tuple[tuple[int, int], ...] = field(default=())
    start_tip_m: float = 0.0
    end_tip_m: float = 0.0
    start_on_plane: bool = False
    end_on_plane: bool = False

    @property
    def length_m(self) -> float:
        """Arc length from end to end, metres."""
        return float(leg_lengths(self.points).sum())

    @property
    def arcs_m(self) -> FloatArray:
        """Arc length at each vertex."""
        return arc_lengths(self.points)

    @property
    def widest_m(self) -> float:
        """Largest width."""
        return float(max(self.width_before_m.max(), self.width_after_m.max()))

    @property
    def narrowest_m(self) -> float:
        """Smallest width."""
        return float(min(self.width_before_m.min(), self.width_after_m.min()))

    @property
    def fed_foot(self) -> End | None:
        """The end on a ground plane whose own gap to the plane holds the feed."""
        if self.feed is None:
            return None
        at, reach = float(self.arcs_m[self.feed.vertex]), self.feed.gap_m / 2 + TOUCH_M
        if self.start_on_plane and at <= reach:
            return "start"
        return "end" if self.end_on_plane and at >= self.length_m - reach else None

    def width_at(self, arc_m: FloatArray) -> FloatArray:
        """Width at arc lengths; on a step the width of the leg before it."""
        arcs = self.arcs_m
        leg = np.clip(np.searchsorted(arcs, arc_m, side="left") - 1, 0, len(arcs) - 2)
        part = (arc_m - arcs[leg]) / (arcs[leg + 1] - arcs[leg])
        start, stop = self.width_after_m[leg], self.width_before_m[leg + 1]
        return np.asarray(start + part * (stop - start))


def reverse(line: ChainLine) -> ChainLine:
    """The same chain walked from its end."""
    length, last = line.length_m, len(line.points) - 1
    spans = tuple(
        StripSpan(s.strip, length - s.start_m, length - s.end_m) for s in reversed(line.spans)
    )
    feed = replace(line.feed, vertex=last - line.feed.vertex) if line.feed else None
    return replace(
        line,
        points=line.points[::-1],
        width_before_m=line.width_after_m[::-1],
        width_after_m=line.width_before_m[::-1],
        spans=spans,
        feed=feed,
        start=line.end,
        end=line.start,
    )


def shifted(spans: tuple[StripSpan, ...], by_m: float) -> tuple[StripSpan, ...]:
    return tuple(StripSpan(s.strip, s.start_m + by_m, s.end_m + by_m) for s in spans)


def join(left: ChainLine, right: ChainLine) -> ChainLine:
    """Two chains in a row, the end of the first being the start of the second."""
    return ChainLine(
        points=np.vstack([left.points, right.points[1:]]),
        width_before_m=np.concatenate([left.width_before_m, right.width_before_m[1:]]),
        width_after_m=np.concatenate([left.width_after_m[:-1], right.width_after_m]),
        spans=left.spans + shifted(right.spans, left.length_m),
        feed=left.feed
        or (
            replace(right.feed, vertex=right.feed.vertex + len(left.points) - 1)
            if right.feed
            else None
        ),
    )


def with_vertex(line: ChainLine, arc_m: float) -> tuple[ChainLine, int]:
    """The chain with a vertex at an arc length, and the number of that vertex."""
    arcs = line.arcs_m
    near = int(np.argmin(abs(arcs - arc_m)))
    if abs(arcs[near] - arc_m) < TOUCH_M:
        return line, near
    leg = int(np.searchsorted(arcs, arc_m)) - 1
    width = float(line.width_at(np.array([arc_m]))[0])
    at = leg + 1
    feed = line.feed
    if feed is not None and feed.vertex >= at:
        feed = replace(feed, vertex=feed.vertex + 1)
    added = replace(
        line,
        points=np.insert(line.points, at, point_at(line.points, arc_m), axis=0),
        width_before_m=np.insert(line.width_before_m, at, width),
        width_after_m=np.insert(line.width_after_m, at, width),
        feed=feed,
    )
    return added, at


def reopened(line: ChainLine, avoid_m: Sequence[float] = ()) -> ChainLine:
    """A closed chain, begun in the middle of the leg that lies half way round from its feed.

    If other strips end on the chain, at arc lengths `avoid_m`: in the middle of the longest leg
    without such an end.
    """
    legs = len(line.points) - 1
    fed = line.feed.vertex if line.feed is not None else 0
    leg = (fed + legs // 2) % legs
    if avoid_m:
        ends, taken = line.arcs_m, np.asarray(avoid_m)
        lengths = leg_lengths(line.points)
        inside = (taken > ends[:-1, None] - TOUCH_M) & (taken < ends[1:, None] + TOUCH_M)
        leg = int(np.argmax(np.where(inside.any(axis=1), 0.0, lengths)))
    arcs = line.arcs_m
    middle = float(arcs[leg] + arcs[leg + 1]) / 2
    line, vertex = with_vertex(line, middle)
    legs = len(line.points) - 1
    order = np.concatenate([np.arange(vertex, legs), np.arange(0, vertex + 1)])
    # The seam of the loop as drawn: its end is its start, whose width after the vertex counts.
    before, after = line.width_before_m.copy(), line.width_after_m.copy()
    before[0] = before[-1]
    feed = line.feed
    if feed is not None:
        feed = replace(feed, vertex=(feed.vertex % legs - vertex) % legs)
    seam = float(line.arcs_m[vertex])
    return replace(
        line,
        points=line.points[order],
        width_before_m=before[order],
        width_after_m=after[order],
        closed=True,
        spans=shifted(line.spans, -seam),
        feed=feed,
    )


def nearest(line: ChainLine, point: FloatArray) -> tuple[float, float]:
    """Arc length of the nearest place on a chain, and its distance."""
    starts, along = line.points[:-1], np.diff(line.points, axis=0)
    t = np.clip(np.sum((point - starts) * along, axis=1) / np.sum(along**2, axis=1), 0.0, 1.0)
    distance = np.linalg.norm(point - starts - t[:, None] * along, axis=1)
    leg = int(np.argmin(distance))
    lengths = leg_lengths(line.points)
    return float(line.arcs_m[leg] + t[leg] * lengths[leg]), float(distance[leg])


def end_moved(line: ChainLine, end: End, to: FloatArray) -> ChainLine:
    """A branch carried on to (or cut back to) the centre line it ends on."""
    index = 0 if end == "start" else -1
    inner = line.points[1 if end == "start" else -2]
    points = line.points.copy()
    old = float(np.linalg.norm(points[index] - inner))
    points[index] = to
    shift = float(np.linalg.norm(to - inner)) - old
    spans = shifted(line.spans, shift) if end == "start" else line.spans
    return replace(line, points=points, spans=spans)


def meets_itself(line: ChainLine) -> bool:
    return len(line.points) > 3 and same_point(line.points[0], line.points[-1])
