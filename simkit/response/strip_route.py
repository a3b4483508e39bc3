"""Ways along the strips: the tip-to-tip path through the feed, and what branches off it.

Half waves are counted along that path when a case is solved; the same path, found again from the
antenna, is the axis on which currents and charges are shown and their maxima are looked for.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from scipy.constants import c as light_speed

from simkit.geometry.chain_line import ChainLine
from simkit.geometry.line_rules import CABLED_WAVELENGTHS
from simkit.geometry.network import chains_of
from simkit.geometry.paths import point_at
from simkit.geometry.route import longest_path
from simkit.geometry.wires import FloatArray, IntArray, PathPiece, StripSpan
from simkit.response.rational import ComplexArray
from simkit.study.model import Antenna, CutFeed, Strip

REACH_WIDTHS = 0.625
"""How far around a joint, in widths of the wider strip, the current is that of neither side: half a
width of metal, and what a segment of the model more takes."""

CABLE_REACH_SEGMENTS = 0.9
SHORTEST_SEGMENT_WIDTHS = 0.6
"""Beside a cable the current is that of neither side for half a segment either way, and known again
one and a half away; segments of wide strips are about so much of their width long."""

SHORTEST_M = 1e-6
"""A micrometre of metal is an overlap of rounding, not a part of a strip."""


@dataclass(frozen=True)
class Leg:
    """Part of a route on one strip.

    Attributes
    ----------
    strip : int
    strip_length_m : float
        Length of the whole strip along its path.
    start_m, end_m : float
        Places along the strip, from its own start, at which the route enters and leaves it;
        `start_m` > `end_m` where the route runs against the strip.
    begin_m : float
        Distance along the route at which the leg begins.
    """

    strip: int
    strip_length_m: float
    start_m: float
    end_m: float
    begin_m: float

    @property
    def length_m(self) -> float:
        """Length of the part."""
        return abs(self.end_m - self.start_m)

    @property
    def sign(self) -> int:
        """+1 if the route runs along the strip, -1 if against it."""
        return 1 if self.end_m >= self.start_m else -1

    def distance_m(self, along_m: FloatArray) -> FloatArray:
        """Distance along the route of places along the strip."""
        return np.asarray(self.begin_m + self.sign * (along_m - self.start_m))

    def clipped(self, along_m: FloatArray) -> FloatArray:
        """Those of some places along the strip that lie inside the leg, in the route's order."""
        low, high = sorted((self.start_m, self.end_m))
        inside = np.sort(along_m[(along_m > low) & (along_m < high)])
        return inside if self.sign > 0 else inside[::-1]


@dataclass(frozen=True)
class Joining:
    """Where strips are joined: current enters or leaves the route within `reach_m` of it."""

    distance_m: float
    reach_m: float


@dataclass(frozen=True)
class Route:
    """Legs in a row; what lies between two of them is a gap (the feed's) or a strip's half width.

    Attributes
    ----------
    legs : tuple of Leg
    length_m : float
    closed : bool
        Once round a loop.
    start : {"tip", "joint", "apart"}
        How it begins: at an open end, at another strip (a branch), or "apart", on metal that
        touches no other and has no feed.
    open_end : bool
        The current ends with the route.
    feed_m : float
        Distance of the feed, NaN if the route does not pass it.
    joinings : tuple of Joining
    """

    legs: tuple[Leg, ...]
    length_m: float
    closed: bool = False
    start: str = "tip"
    open_end: bool = True
    feed_m: float = float("nan")
    joinings: tuple[Joining, ...] = ()

    def current(
        self, current: ComplexArray, position: FloatArray
    ) -> tuple[FloatArray, ComplexArray]:
        """Current along the route, positive along it.

        Parameters
        ----------
        current : (strip, P) complex array
            Positive from the start to the end of each strip.
        position : (P,) float array
            Places along each strip, 0..1.

        Returns
        -------
        distance_m : (K,) float array
            Not falling.
        current : (K,) complex array
            It jumps at a joint, where two values stand at one distance: within the reach of a
            joint, where current passes from strip to strip, the values from its two sides are
            carried on.
        """
        distances: list[FloatArray] = []
        currents: list[ComplexArray] = []
        for leg in self.legs:
            along = leg.clipped(position * leg.strip_length_m)
            along = np.concatenate([[leg.start_m], along, [leg.end_m]])
            row = np.interp(along / leg.strip_length_m, position, current[leg.strip])
            distances.append(leg.distance_m(along))
            currents.append(np.asarray(leg.sign * row, dtype=np.complex128))
        at, flow = np.concatenate(distances), np.concatenate(currents)
        for joining in self.joinings:
            at, flow = _settled(at, flow, joining)
        return at, flow

    def knots_m(self, strip_index: IntArray, strip_position: FloatArray) -> FloatArray:
        """Distances of the model's segments, and of open ends: where the current is really known.

        Parameters
        ----------
        strip_index, strip_position : (S,) arrays
            As in the store.
        """
        found = [np.zeros(1)] if self.start != "joint" and not self.closed else []
        for leg in self.legs:
            own = strip_position[(strip_index == leg.strip) & np.isfinite(strip_position)]
            along = leg.clipped(np.unique(np.round(own, 9)) * leg.strip_length_m)
            found.append(leg.distance_m(along))
        if self.open_end and not self.closed:
            found.append(np.array([self.length_m]))
        return np.unique(np.concatenate(found))

    def locate(self, distance_m: float) -> tuple[int, float]:
        """Strip and place along it at a distance; -1 and NaN in a gap."""
        for leg in self.legs:
            if -1e-9 <= distance_m - leg.begin_m <= leg.length_m + 1e-9:
                return leg.strip, float(leg.start_m + leg.sign * (distance_m - leg.begin_m))
        return -1, float("nan")

    def point_m(self, distance_m: float, strips: Sequence[Strip]) -> tuple[float, float]:
        """x and y at a distance, in the plane in which the strips are drawn."""
        strip, along = self.locate(distance_m)
        if strip >= 0:
            x, y = _point(strips[strip], along)
            return x, y
        ends, places = [], []
        for leg in self.legs:
            ends += [leg.begin_m, leg.begin_m + leg.length_m]
            places += [_point(strips[leg.strip], leg.start_m), _point(strips[leg.strip], leg.end_m)]
        columns = np.array(places)
        x, y = (float(np.interp(distance_m, ends, columns[:, axis])) for axis in (0, 1))
        return x, y


def _settled(
    distance_m: FloatArray, current: ComplexArray, joining: Joining
) -> tuple[FloatArray, ComplexArray]:
    before = distance_m < joining.distance_m - joining.reach_m
    after = distance_m > joining.distance_m + joining.reach_m
    carried = np.array([*current[before][-1:], *current[after][:1]], dtype=np.complex128)
    if not carried.size:
        return distance_m, current
    place = np.full(carried.size, joining.distance_m)
    return (
        np.concatenate([distance_m[before], place, distance_m[after]]),
        np.concatenate([current[before], carried, current[after]]),
    )


def _point(strip: Strip, along_m: float) -> tuple[float, float]:
    x, y = point_at(np.asarray(strip.path_m, dtype=float), along_m)
    return float(x), float(y)


def routes_of(antenna: Antenna) -> tuple[Route, ...]:
    """The tip-to-tip path through the feed, then branches and strips apart.

    Parameters
    ----------
    antenna : Antenna

    Returns
    -------
    tuple of Route
        The path begins at its tip with the smaller x; branches begin at their joint.

    Raises
    ------
    GeometryError
        The strips meet in a way that is not covered.
    """
    lines = chains_of(antenna)
    path = longest_path(lines)
    first = _route(lines, path)
    if not first.closed and _runs_backwards(first, antenna.strips):
        path = tuple(PathPiece(p.chain, p.end_m, p.start_m) for p in reversed(path))
        first = _route(lines, path)
    if antenna.cable is not None:
        first = replace(first, joinings=(*first.joinings, _cable_joining(antenna, first)))
    rest = [
        _route(lines, (piece,), start)
        for chain in range(len(lines))
        for piece, start in _left_over(lines, chain, path)
    ]
    return (first, *rest)


def _cable_joining(antenna: Antenna, path: Route) -> Joining:
    """Where the cable takes its part of the current: at the end of the feed it is joined to."""
    cable, feed = antenna.cable, antenna.feed
    assert cable is not None  # only asked for with one
    number = next(k for k, strip in enumerate(antenna.strips) if strip.name == cable.strip)
    legs = [leg for leg in path.legs if leg.strip == number]
    along = 0.0 if cable.end == "start" else legs[0].strip_length_m
    if isinstance(feed, CutFeed):
        along = feed.at_m + (-feed.gap_m if cable.end == "start" else feed.gap_m) / 2
    leg = min(
        legs, key=lambda leg: max(abs(along - (leg.start_m + leg.end_m) / 2), leg.length_m / 2)
    )
    width = max(strip.width_m for strip in antenna.strips)
    wave = CABLED_WAVELENGTHS * light_speed / antenna.frequency.stop_hz
    reach = CABLE_REACH_SEGMENTS * max(SHORTEST_SEGMENT_WIDTHS * width, wave)
    return Joining(float(leg.distance_m(np.array(along))), reach)


def _runs_backwards(route: Route, strips: Sequence[Strip]) -> bool:
    (x1, y1), (x2, y2) = (route.point_m(at, strips) for at in (0.0, route.length_m))
    return (x1, y1) > (x2, y2) if abs(x1 - x2) > SHORTEST_M else y1 > y2


def _left_over(
    lines: Sequence[ChainLine], chain: int, path: Sequence[PathPiece]
) -> list[tuple[PathPiece, str]]:
    """Parts of a chain beside the path, each run away from its joint, and how it begins."""
    line = lines[chain]
    used = [sorted((p.start_m, p.end_m)) for p in path if p.chain == chain]
    if not used:
        if line.start is None and line.end is not None:
            return [(PathPiece(chain, line.length_m, 0.0), "joint")]
        start = "joint" if line.start is not None else "apart"
        return [(PathPiece(chain, 0.0, line.length_m), start)]
    (low, high), *_ = used
    parts = [PathPiece(chain, low, 0.0), PathPiece(chain, high, line.length_m)]
    return [(p, "joint") for p in parts if abs(p.end_m - p.start_m) > SHORTEST_M]


def _route(lines: Sequence[ChainLine], pieces: Sequence[PathPiece], start: str = "tip") -> Route:
    legs: list[Leg] = []
    joinings: list[Joining] = []
    feed, begin = float("nan"), 0.0
    for piece in pieces:
        line = lines[piece.chain]
        low, high = sorted((piece.start_m, piece.end_m))
        legs += _legs(line, piece, begin)
        for vertex, branch in line.tees:
            arc = float(line.arcs_m[vertex])
            if low - SHORTEST_M <= arc <= high + SHORTEST_M:
                host = float(line.width_at(np.array([arc]))[0])
                reach = REACH_WIDTHS * max(_width_at_joint(lines[branch], piece.chain), host)
                joinings.append(Joining(begin + abs(arc - piece.start_m), reach))
        if line.feed is not None:
            arc = float(line.arcs_m[line.feed.vertex])
            feed = begin + abs(arc - piece.start_m) if low <= arc <= high else feed
        begin += high - low
    closed = len(pieces) == 1 and lines[pieces[0].chain].closed
    last = lines[pieces[-1].chain]
    beyond = last.end if pieces[-1].end_m >= pieces[-1].start_m else last.start
    if start == "joint" and not any(j.distance_m < SHORTEST_M for j in joinings):
        joinings.append(_own_joint(lines, pieces[0]))
    return Route(tuple(legs), begin, closed, start, beyond is None, feed, tuple(joinings))


def _own_joint(lines: Sequence[ChainLine], piece: PathPiece) -> Joining:
    """Where a branch leaves its host."""
    line = lines[piece.chain]
    joint = line.start if piece.end_m >= piece.start_m else line.end
    width = line.width_at(np.array([piece.start_m]))[0]
    if joint is not None:
        host = lines[joint.chain]
        width = max(width, host.width_before_m[joint.vertex], host.width_after_m[joint.vertex])
    return Joining(0.0, REACH_WIDTHS * float(width))


def _width_at_joint(branch: ChainLine, host: int) -> float:
    at_start = branch.start is not None and branch.start.chain == host
    return float(branch.width_after_m[0] if at_start else branch.width_before_m[-1])


def _legs(line: ChainLine, piece: PathPiece, begin_m: float) -> list[Leg]:
    low, high = sorted((piece.start_m, piece.end_m))
    shifts = (-line.length_m, 0.0, line.length_m) if line.closed else (0.0,)
    found = []
    for span in line.spans:
        for shift in shifts:
            moved = StripSpan(span.strip, span.start_m + shift, span.end_m + shift)
            a, b = sorted((moved.start_m, moved.end_m))
            a, b = max(a, low), min(b, high)
            if b - a > SHORTEST_M:
                first, last = (a, b) if piece.end_m >= piece.start_m else (b, a)
                found.append(
                    Leg(
                        strip=span.strip,
                        strip_length_m=abs(span.end_m - span.start_m),
                        start_m=abs(first - moved.start_m),
                        end_m=abs(last - moved.start_m),
                        begin_m=begin_m + abs(first - piece.start_m),
                    )
                )
    return sorted(found, key=lambda leg: leg.begin_m)


def turns_m(route: Route) -> list[float]:
    """Distances at which the route turns from one strip straight into another."""
    return [
        after.begin_m
        for before, after in pairwise(route.legs)
        if before.strip != after.strip
        and abs(before.begin_m + before.length_m - after.begin_m) < SHORTEST_M
    ]
