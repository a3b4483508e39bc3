"""From strips and feed to chains: centre lines joined end to end, with branches and the feed.

A chain is one run of metal: strips whose ends meet are merged, the two strips of an end feed are
merged across the gap, and a strip that ends on the side of another becomes a branch. Everything
later in the model works on chains and does not care which strip a piece came from.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from simkit.errors import GeometryError
from simkit.geometry.chain_line import (
    TOUCH_M,
    ChainLine,
    End,
    FeedPlace,
    Joint,
    end_moved,
    join,
    meets_itself,
    nearest,
    reopened,
    reverse,
    shifted,
    with_vertex,
)
from simkit.geometry.dressing import dressing_of
from simkit.geometry.paths import (
    leg_lengths,
    same_point,
    turn_angle,
    unit,
)
from simkit.geometry.placement import stands_on_plane
from simkit.geometry.strips import check_path
from simkit.geometry.wires import FloatArray, StripSpan
from simkit.study.model import Antenna, CutFeed, EndFeed, Strip

FACING_RAD = np.deg2rad(30.0)
"""Ends of all but parallel strips face each other if the gap leads on by less than this; ends more
out of line than half the gap would be drawn together into strips that slant."""

STRAIGHT_FEED_RAD = np.deg2rad(2.0)
"""A feed whose strips turn by less than this counts as lying inside a straight leg."""


def chains_of(antenna: Antenna, *, tips: bool = True) -> tuple[ChainLine, ...]:
    """Chains of an antenna, the fed one first.

    Parameters
    ----------
    antenna : Antenna
    tips : bool
        Work out what the carrier takes off open ends; planning a mesh does without.

    Raises
    ------
    GeometryError
        A path has no direction somewhere, the feed cannot be placed, or strips meet in a way that
        is not covered.
    """
    for strip in antenna.strips:
        check_path(strip)
    pieces = [_piece(strip, index) for index, strip in enumerate(antenna.strips)]
    names = {strip.name: index for index, strip in enumerate(antenna.strips)}
    builder = _Builder(antenna, pieces)
    if isinstance(antenna.feed, EndFeed):
        builder.feed_between(antenna.feed, names)
    builder.merge_ends()
    builder.close_loops()
    if isinstance(antenna.feed, CutFeed):
        builder.feed_cut(antenna.feed, names[antenna.feed.strip])
    builder.order_fed_first()
    builder.turn_loops()
    builder.attach_branches()
    lines = [_standing(line, antenna) for line in builder.lines]
    if not tips:
        return tuple(lines)
    dressing = dressing_of(antenna)
    return tuple(dressing.with_tips(line) for line in lines)


def _standing(line: ChainLine, antenna: Antenna) -> ChainLine:
    """The chain with those of its open ends marked that stand on a ground plane."""
    free = not line.closed
    return replace(
        line,
        start_on_plane=free and line.start is None and stands_on_plane(line.points[0], antenna),
        end_on_plane=free and line.end is None and stands_on_plane(line.points[-1], antenna),
    )


def _piece(strip: Strip, index: int) -> ChainLine:
    points = np.asarray(strip.path_m, dtype=float)
    widths = np.asarray(strip.widths, dtype=float)
    length = float(leg_lengths(points).sum())
    return ChainLine(points, widths, widths, spans=(StripSpan(index, 0.0, length),))


def _place(point: FloatArray) -> str:
    return f"({point[0] * 1e3:.4g}, {point[1] * 1e3:.4g}) mm"


class _Builder:
    """Chains under construction."""

    def __init__(self, antenna: Antenna, pieces: list[ChainLine]) -> None:
        self.antenna = antenna
        self.lines = pieces
        self.fed_ends: list[FloatArray] = []

    # -- feed between two ends -----------------------------------------------------------------

    def feed_between(self, feed: EndFeed, names: dict[str, int]) -> None:
        """Merge the two fed strips (or the two ends of one) across the gap."""
        first, second = names[feed.from_strip], names[feed.to_strip]
        if first == second:
            self._feed_own_ends(first, feed)
            return
        left, right = self.lines[first], self.lines[second]
        left = left if feed.from_end == "end" else reverse(left)
        right = right if feed.to_end == "start" else reverse(right)
        merged = _across_gap(left, right)
        self.fed_ends = [left.points[-1], right.points[0]]
        self.lines = [merged] + [
            line for index, line in enumerate(self.lines) if index not in (first, second)
        ]

    def _feed_own_ends(self, index: int, feed: EndFeed) -> None:
        """A loop drawn as one strip whose ends face each other across the gap."""
        if feed.from_end == feed.to_end:
            raise GeometryError(
                f"feed: from and to both name the {feed.from_end} of strip {feed.from_strip!r}; a "
                "source bridges two different ends"
            )
        line = self.lines[index]
        start, end = line.points[0], line.points[-1]
        apex, gap = _apex(line.points[-2], end, start, line.points[1])
        shift = float(np.linalg.norm(start - apex))
        points = np.vstack([apex[None], line.points[1:-1], apex[None]])
        before = line.width_before_m.copy()
        after = line.width_after_m.copy()
        spans = tuple(StripSpan(s.strip, s.start_m + shift, s.end_m + shift) for s in line.spans)
        self.fed_ends = [start, end]
        loop = ChainLine(points, before, after, True, spans, FeedPlace(0, gap))
        self.lines[index] = reopened(loop)

    # -- ends that meet ------------------------------------------------------------------------

    def merge_ends(self) -> None:
        """Merge chains whose ends coincide; of three or more at a point the straightest pair."""
        while True:
            pair = self._straightest_pair()
            if pair is None:
                return
            (first, end_a), (second, end_b) = pair
            left, right = self.lines[first], self.lines[second]
            if first == second:
                self.lines[first] = replace(left, closed=True)
                continue
            left = left if end_a == "end" else reverse(left)
            right = right if end_b == "start" else reverse(right)
            merged = join(left, right)
            low, high = sorted((first, second))
            self.lines[low] = merged
            del self.lines[high]

    def _open_ends(self) -> list[tuple[int, End, FloatArray, FloatArray]]:
        """Chain, end, point and outward direction of every end that may join another."""
        found: list[tuple[int, End, FloatArray, FloatArray]] = []
        for index, line in enumerate(self.lines):
            if line.closed:
                continue
            for end, point, inner in (
                ("start", line.points[0], line.points[1]),
                ("end", line.points[-1], line.points[-2]),
            ):
                if not any(same_point(point, fed) for fed in self.fed_ends):
                    found.append((index, end, point, unit(point - inner)))  # type: ignore[arg-type]
        return found

    def _straightest_pair(self) -> tuple[tuple[int, End], tuple[int, End]] | None:
        best, pair = np.inf, None
        ends = self._open_ends()
        for k, (first, end_a, point_a, out_a) in enumerate(ends):
            for second, end_b, point_b, out_b in ends[k + 1 :]:
                width = min(self.lines[first].narrowest_m, self.lines[second].narrowest_m)
                if np.linalg.norm(point_a - point_b) > max(TOUCH_M, 1e-3 * width):
                    continue
                turn = turn_angle(out_a, -out_b)
                if turn < best:
                    best, pair = turn, ((first, end_a), (second, end_b))
        return pair

    def close_loops(self) -> None:
        """Turn closed strips so that they begin in the middle of a leg away from the feed."""
        for index, line in enumerate(self.lines):
            if line.closed or meets_itself(line):
                self.lines[index] = reopened(replace(line, closed=True))

    # -- feed in a cut -------------------------------------------------------------------------

    def feed_cut(self, feed: CutFeed, strip: int) -> None:
        """Put the feed at a cut across a strip."""
        for index, line in enumerate(self.lines):
            for span in line.spans:
                if span.strip == strip:
                    self.lines[index] = self._cut(line, span, feed)
                    return

    def _cut(self, line: ChainLine, span: StripSpan, feed: CutFeed) -> ChainLine:
        length = abs(span.end_m - span.start_m)
        if not 0.0 <= feed.at_m <= length:
            raise GeometryError(
                f"feed: at = {feed.at_m * 1e3:.4g} mm lies outside strip {feed.strip!r}, whose "
                f"path is {length * 1e3:.4g} mm long"
            )
        if feed.gap_m >= length / 4:
            raise GeometryError(
                f"feed: a cut of {feed.gap_m * 1e3:.4g} mm is too wide for a path of "
                f"{length * 1e3:.4g} mm"
            )
        arc = span.start_m + feed.at_m * (1 if span.end_m > span.start_m else -1)
        if line.closed:
            arc = arc % line.length_m
        line, vertex = with_vertex(line, self._above_plane(line, arc, feed.gap_m))
        if not line.closed and vertex in (0, len(line.points) - 1):
            raise GeometryError(
                f"feed: at = {feed.at_m * 1e3:.4g} mm is an end of the metal; a cut needs strip on "
                "both sides"
            )
        line = replace(line, feed=FeedPlace(vertex, feed.gap_m))
        return reopened(line) if line.closed else line

    def _above_plane(self, line: ChainLine, arc_m: float, gap_m: float) -> float:
        """A cut at the very foot of a strip on the plane begins at the plane: half a gap up."""
        if line.closed:
            return arc_m
        if arc_m < gap_m / 2 and stands_on_plane(line.points[0], self.antenna):
            return gap_m / 2
        top = line.length_m - gap_m / 2
        return top if arc_m > top and stands_on_plane(line.points[-1], self.antenna) else arc_m

    # -- order and branches --------------------------------------------------------------------

    def order_fed_first(self) -> None:
        """The chain with the feed is chain 0."""
        self.lines.sort(key=lambda line: line.feed is None)
        if self.lines[0].feed is None:
            raise GeometryError("feed: no strip carries the feed")

    def turn_loops(self) -> None:
        """Let no loop begin on a leg on which another strip ends."""
        for index, line in enumerate(self.lines):
            if not line.closed:
                continue
            ends = self._touching(index)
            first, last = line.arcs_m[1] + TOUCH_M, line.arcs_m[-2] - TOUCH_M
            if any(arc < first or arc > last for arc in ends):
                self.lines[index] = reopened(line, ends)

    def _touching(self, index: int) -> list[float]:
        """Arc lengths at which ends of other chains lie on a chain's metal."""
        host, found = self.lines[index], []
        for other, _, point, _ in self._open_ends():
            arc, distance = nearest(host, point)
            half_width = float(host.width_at(np.array([arc]))[0]) / 2
            if other != index and distance <= half_width + TOUCH_M:
                found.append(arc)
        return found

    def attach_branches(self) -> None:
        """Chains that end on the side of another become its branches."""
        for index in range(len(self.lines)):
            for end in ("start", "end"):
                self._attach(index, end)

    def _attach(self, index: int, end: End) -> None:
        line = self.lines[index]
        if line.closed:
            return
        point = line.points[0 if end == "start" else -1]
        if any(same_point(point, fed) for fed in self.fed_ends):
            return
        for other, host in enumerate(self.lines):
            if other == index or index in _hosts(host):
                continue
            arc, distance = nearest(host, point)
            half_width = float(host.width_at(np.array([arc]))[0]) / 2
            if distance > half_width + TOUCH_M:
                continue
            joined, vertex = with_vertex(host, arc)
            if vertex in (0, len(joined.points) - 1):
                raise GeometryError(
                    f"a strip ends at {_place(point)} on the very end of another: for a corner let "
                    "both end at one point, for a junction move it a width away from the end"
                )
            self._renumber(other, vertex, len(joined.points) - len(host.points))
            tees = tuple(
                (v + (v >= vertex and len(joined.points) > len(host.points)), b)
                for v, b in host.tees
            )
            self.lines[other] = replace(joined, tees=(*tees, (vertex, index)))
            inner = line.points[1 if end == "start" else -2]
            if (joined.points[vertex] - inner) @ (point - inner) < TOUCH_M**2:
                raise GeometryError(
                    f"the strip that ends on another at {_place(point)} does not reach out from "
                    "under its metal: lengthen its last leg"
                )
            # Not `line`: its other end may be on this host, and its joint have moved on just now.
            moved = end_moved(self.lines[index], end, joined.points[vertex])
            self.lines[index] = _with_joint(moved, end, Joint(other, vertex))
            return

    def _renumber(self, chain: int, vertex: int, added: int) -> None:
        """A vertex was added to a chain: joints that name later vertices move on."""
        if not added:
            return
        for index, line in enumerate(self.lines):
            for end in ("start", "end"):
                joint = getattr(line, end)
                if joint is not None and joint.chain == chain and joint.vertex >= vertex:
                    moved = Joint(chain, joint.vertex + 1)
                    self.lines[index] = _with_joint(self.lines[index], end, moved)


def _hosts(line: ChainLine) -> tuple[int, ...]:
    """Chains that a chain ends on."""
    return tuple(joint.chain for joint in (line.start, line.end) if joint is not None)


def _with_joint(line: ChainLine, end: str, joint: Joint) -> ChainLine:
    return replace(line, start=joint) if end == "start" else replace(line, end=joint)


def _across_gap(left: ChainLine, right: ChainLine) -> ChainLine:
    """Two chains in a row with the feed gap between them."""
    apex, gap = _apex(left.points[-2], left.points[-1], right.points[0], right.points[1])
    left_gap = float(np.linalg.norm(apex - left.points[-1]))
    right_gap = float(np.linalg.norm(apex - right.points[0]))
    points = np.vstack([left.points[:-1], apex[None], right.points[1:]])
    before = np.concatenate([left.width_before_m, right.width_before_m[1:]])
    after = np.concatenate([left.width_after_m[:-1], right.width_after_m])
    offset = left.length_m + left_gap + right_gap
    spans = left.spans + shifted(right.spans, offset)
    return ChainLine(points, before, after, False, spans, FeedPlace(len(left.points) - 1, gap))


def _apex(
    inner_a: FloatArray, end_a: FloatArray, end_b: FloatArray, inner_b: FloatArray
) -> tuple[FloatArray, float]:
    """Where two fed centre lines meet when carried on across the gap, and the gap's width."""
    gap = float(np.linalg.norm(end_b - end_a))
    if gap < TOUCH_M:
        raise GeometryError(
            f"feed: the two strip ends meet at {_place(end_a)}, so the feed is shorted; leave the "
            "gap that the real feed has between them"
        )
    before, after = unit(end_a - inner_a), unit(inner_b - end_b)
    facing = turn_angle(before, end_b - end_a) < FACING_RAD
    if facing and turn_angle(before, after) < np.deg2rad(10.0):
        return (end_a + end_b) / 2, gap
    problem = GeometryError(
        f"feed: the strip ends at {_place(end_a)} and {_place(end_b)} do not face each other "
        "across the gap; let the centre lines meet when carried on, or add a bend before the feed"
    )
    sides = np.column_stack([before, after])
    if abs(np.linalg.det(sides)) < 1e-6:
        raise problem
    along = np.linalg.solve(sides, end_b - end_a)
    if along.min() < 0 or along.max() > 3 * gap:
        raise problem
    return end_a + along[0] * before, gap
