"""Where the rows of a grid lie along a chain: ends, corners, feed, steps and junctions."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Literal

import numpy as np

from simkit.errors import GeometryError
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.paths import point_at, turns, unit
from simkit.geometry.rails import RailRule
from simkit.geometry.wires import FloatArray

CORNER_FROM_RAD = np.deg2rad(25.0)
"""Corners from here up get metal across; gentler bends are followed by the rails alone."""

BLOCK_FROM_RAD = np.deg2rad(65.0)
"""From here up the rails of both legs run on through the corner and cross in a block of nodes;
below they turn on the mitre line. Against flat metal the mitre line is within 0.1 % up to 60
degrees and 0.3 to 1 % off at 90, the block within 0.2 % at 70 to 90 and 0.7 % off at 120."""

FOLD_RAD = np.deg2rad(170.0)
"""Legs that turn back by more than this have no corner; rails of the two would never cross."""

CORNER_RUNGS_WIDTHS = (0.2, 0.8)
JUNCTION_RUNGS_WIDTHS = (0.6, 1.2)

STEP_JUMPS = 1.7
"""Half the length of a step in width over the farthest that a rail is moved: rails 2.1 radii apart
then keep two radii on the slant. Against flat metal steps of 1.5 and 2 are good to 0.33 and 0.38 %
in mode frequency."""

CornerKind = str
"""As the vertex kinds of a mesh plan: "smooth", "node" or "figure"."""

BLOCK_ROOM_RADII = 2.03
"""Least distance of crossing rails in a block, in radii."""

Widen = Callable[[float], float]
"""Effective width of a drawn width, metres: the carrier's doing; the identity without one."""


@dataclass(frozen=True)
class Station:
    """A place along a chain where the rails have nodes.

    Attributes
    ----------
    arc_m : float
    width_m : float
        Drawn width of the strip here.
    tied : bool
        The rails are joined across the strip.
    vertex : int
        Vertex of the chain whose mitre line the row follows, -1 for a row across one leg.
    slant : float
        Tangent of the angle between the row and the normal of the strip, for slanted junctions.
    """

    arc_m: float
    width_m: float
    tied: bool
    vertex: int = -1
    slant: float = 0.0


@dataclass(frozen=True)
class Interval:
    """Between two stations.

    Attributes
    ----------
    start, stop : Station
    fed : float
        Volts of the source on every rail; a fed interval has one segment.
    single : bool
        As few segments as its length allows: inside corners, steps and junctions.
    block : int
        Vertex of the corner whose block of crossing rails lies in this interval, -1 for none; the
        source of a fed corner sits half on the pieces before and half on those after the block.
    """

    start: Station
    stop: Station
    fed: float = 0.0
    single: bool = False
    block: int = -1

    @property
    def length_m(self) -> float:
        """Along the centre line."""
        return self.stop.arc_m - self.start.arc_m


@dataclass(frozen=True)
class Cut:
    """How an interval is divided: `segments` in all, `ties` rows of metal across on the way."""

    segments: int
    ties: int = 0


@dataclass(frozen=True)
class Block:
    """The rows of a host chain at one junction: where the rails of a branch begin."""

    vertex: int
    stations: tuple[Station, ...]
    side: int
    sine: float


def layout(
    lines: Sequence[ChainLine],
    index: int,
    rule: RailRule,
    widen: Widen,
    source_m: float,
    corners: Sequence[CornerKind],
) -> list[Interval]:
    """Stations of one chain in order, as the intervals between them.

    Parameters
    ----------
    lines : sequence of ChainLine
    index : int
        The chain.
    rule : RailRule
    widen : callable
    source_m : float
        Length of the source segment of a straight feed.
    corners : sequence of str
        For each inner vertex "smooth", "node" (a row on the mitre line, with rungs beside it) or
        "figure" (a block of crossing rails); the same in all cases of a study.

    Raises
    ------
    GeometryError
        A leg is too short for the rows its corners and junctions need.
    """
    return _Walk(lines, index, rule, widen, source_m, corners).intervals()


def corner_kind(
    line: ChainLine, vertex: int, rule: RailRule, widen: Widen
) -> Literal["smooth", "node", "figure"]:
    """How a vertex of one case would best be modelled.

    Crossing rails come closer than side by side by the sine of the turn, so bundles whose rails are
    as close as they may be turn on the mitre line unless the corner is all but square.
    """
    turn = float(turns(line.points)[vertex - 1])
    if turn < CORNER_FROM_RAD:
        return "smooth"
    widths = float(line.width_before_m[vertex]), float(line.width_after_m[vertex])
    closest = min(float(np.diff(rule.offsets_m(widen(width))).min()) for width in widths)
    room = closest * np.sin(turn) > BLOCK_ROOM_RADII * rule.radius_m
    return "figure" if turn >= BLOCK_FROM_RAD and room else "node"


class _Walk:
    """One pass along a chain."""

    def __init__(
        self,
        lines: Sequence[ChainLine],
        index: int,
        rule: RailRule,
        widen: Widen,
        source_m: float,
        corners: Sequence[CornerKind],
    ) -> None:
        self.lines, self.index = lines, index
        self.line = lines[index]
        self.rule, self.widen = rule, widen
        self.source_m = source_m
        self.corners = corners
        self.bends = turns(self.line.points)
        self.found: list[tuple[Station, float, bool]] = []  # station, volts to it, single to it
        self.blocks: dict[float, int] = {}

    def edge_m(self, width_m: float) -> float:
        return float(self.rule.offsets_m(self.widen(width_m))[-1])

    def width(self, arc_m: float) -> float:
        return float(self.line.width_at(np.array([arc_m]))[0])

    def put(
        self,
        arc_m: float,
        tied: bool,
        *,
        vertex: int = -1,
        slant: float = 0.0,
        volts: float = 0.0,
        single: bool = False,
        width_m: float | None = None,
    ) -> None:
        width = self.width(arc_m) if width_m is None else width_m
        self.found.append((Station(arc_m, width, tied, vertex, slant), volts, single))

    def intervals(self) -> list[Interval]:
        self._begin()
        for vertex in range(1, len(self.line.points) - 1):
            self._vertex(vertex)
        self._finish()
        made = []
        for (start, _, _), (stop, volts, single) in pairwise(self.found):
            block = self.blocks.get(stop.arc_m, -1)
            if stop.arc_m - start.arc_m < 2.05 * self.rule.radius_m:
                x, y = point_at(self.line.points, stop.arc_m) * 1e3
                raise GeometryError(
                    f"near ({x:.4g}, {y:.4g}) mm a leg is too short for its width of "
                    f"{stop.width_m * 1e3:.4g} mm between corners, junctions, feed or ends: "
                    "lengthen it, or narrow the strip"
                )
            made.append(Interval(start, stop, volts, single, block))
        return made

    def _begin(self) -> None:
        line = self.line
        if line.closed:
            self.put(0.0, tied=False, width_m=float(line.width_after_m[0]))
        elif line.start_on_plane:
            # Metal across would lie in the plane.
            self.put(0.0, tied=False, width_m=float(line.width_after_m[0]))
            if line.fed_foot == "start":
                # As long as any source, though the image makes it twice as long: between pieces
                # of unequal length the source's power is 3 % off.
                self.put(self.source_m, tied=True, volts=1.0)
        elif line.start is None:
            width = float(line.width_after_m[0])
            self.put(
                self.rule.tip_m(width, self.widen(width), self.source_m) + line.start_tip_m,
                tied=True,
            )
        else:
            away = host_reach_m(self.lines, self.index, "start", self.rule, self.widen)
            width = float(line.width_after_m[0])
            self.put(away, tied=True)
            for rung in JUNCTION_RUNGS_WIDTHS:
                self.put(away + rung * width, tied=True)

    def _finish(self) -> None:
        line, length = self.line, self.line.length_m
        width = float(line.width_before_m[-1])
        if line.closed:
            self.put(length, tied=False)
        elif line.end_on_plane:
            fed = line.fed_foot == "end"
            if fed:
                self.put(length - self.source_m, tied=True)
            self.put(length, tied=False, width_m=width, volts=1.0 if fed else 0.0)
        elif line.end is None:
            self.put(
                length - self.rule.tip_m(width, self.widen(width), self.source_m) - line.end_tip_m,
                tied=True,
            )
        else:
            away = host_reach_m(self.lines, self.index, "end", self.rule, self.widen)
            for rung in reversed(JUNCTION_RUNGS_WIDTHS):
                self.put(length - away - rung * width, tied=True)
            self.put(length - away, tied=True)

    def _vertex(self, vertex: int) -> None:
        line = self.line
        branches = [branch for at, branch in line.tees if at == vertex]
        fed = line.feed is not None and line.feed.vertex == vertex
        corner = self.corners[vertex - 1] != "smooth"
        if branches:
            if fed or corner or len(branches) > 1:
                x, y = line.points[vertex] * 1e3
                raise GeometryError(
                    f"at ({x:.4g}, {y:.4g}) mm a strip ends on another at its feed, at a corner or "
                    "together with a third one; move it at least a width away"
                )
            self._junction(vertex, branches[0])
        elif corner:
            self._corner(vertex, fed=fed)
        elif fed:
            if line.fed_foot is None:
                self._straight_feed(vertex)
        elif abs(line.width_before_m[vertex] - line.width_after_m[vertex]) > 1e-9:
            self._step(vertex)
        elif self._slope_changes(vertex):
            self.put(float(line.arcs_m[vertex]), tied=False, vertex=vertex)

    def _slope_changes(self, vertex: int) -> bool:
        line, arcs = self.line, self.line.arcs_m
        before = (line.width_before_m[vertex] - line.width_after_m[vertex - 1]) / (
            arcs[vertex] - arcs[vertex - 1]
        )
        after = (line.width_before_m[vertex + 1] - line.width_after_m[vertex]) / (
            arcs[vertex + 1] - arcs[vertex]
        )
        return bool(abs(before - after) > 1e-9)

    def _straight_feed(self, vertex: int) -> None:
        arc = float(self.line.arcs_m[vertex])
        self.put(arc - self.source_m / 2, tied=True)
        self.put(arc + self.source_m / 2, tied=True, volts=1.0)

    def _corner(self, vertex: int, *, fed: bool) -> None:
        line = self.line
        arc, turn = float(line.arcs_m[vertex]), float(self.bends[vertex - 1])
        width = float(line.width_before_m[vertex])
        if turn > FOLD_RAD:
            x, y = line.points[vertex] * 1e3
            raise GeometryError(
                f"the corner at ({x:.4g}, {y:.4g}) mm turns by {np.rad2deg(turn):.0f} degrees, so "
                "the metal lies on itself there: open the corner, or drop a strip drawn twice"
            )
        if self.corners[vertex - 1] == "figure":
            self._corner_block(vertex, fed=fed)
            return
        reach = self.edge_m(width) * np.tan(turn / 2)
        near, far = (reach + rung * width for rung in CORNER_RUNGS_WIDTHS)
        volts = 0.5 if fed else 0.0
        self.put(arc - far, tied=True)
        self.put(arc - near, tied=True)
        self.put(arc, tied=True, vertex=vertex, volts=volts, single=True, width_m=width)
        self.put(arc + near, tied=True, volts=volts, single=True)
        self.put(arc + far, tied=True)

    def _corner_block(self, vertex: int, *, fed: bool) -> None:
        line = self.line
        arc = float(line.arcs_m[vertex])
        _, before, after = corner_block(line, vertex, self.rule, self.widen)
        volts = 0.5 if fed else 0.0
        near, far = CORNER_RUNGS_WIDTHS
        widths = float(line.width_before_m[vertex]), float(line.width_after_m[vertex])
        first, last = arc + float(before.min()), arc + float(after.max())
        self.put(first - far * widths[0], tied=True)
        self.put(first - near * widths[0], tied=True)
        self.blocks[last + near * widths[1]] = vertex
        self.put(last + near * widths[1], tied=True, volts=volts, single=True)
        self.put(last + far * widths[1], tied=True)

    def _step(self, vertex: int) -> None:
        line = self.line
        arc = float(line.arcs_m[vertex])
        before, after = float(line.width_before_m[vertex]), float(line.width_after_m[vertex])
        sides = [self.rule.offsets_m(self.widen(width)) for width in (before, after)]
        jump = float(np.max(abs(sides[0] - sides[1])))
        half = max(1.1 * self.rule.radius_m, 0.05 * min(before, after), STEP_JUMPS * jump)
        self.put(arc - half, tied=before > after, width_m=before)
        self.put(arc + half, tied=after > before, single=True, width_m=after)

    def _junction(self, vertex: int, branch: int) -> None:
        line = self.line
        block = junction_block(self.lines, self.index, vertex, branch, self.rule, self.widen)
        arc = float(line.arcs_m[vertex])
        width = self.width(arc)
        spread = abs(block.stations[0].slant) * self.edge_m(width)
        first, last = block.stations[0].arc_m, block.stations[-1].arc_m
        for rung in reversed(JUNCTION_RUNGS_WIDTHS):
            self.put(first - spread - rung * width, tied=True)
        self.found += [(station, 0.0, number > 0) for number, station in enumerate(block.stations)]
        for rung in JUNCTION_RUNGS_WIDTHS:
            self.put(last + spread + rung * width, tied=True)


def corner_block(
    line: ChainLine, vertex: int, rule: RailRule, widen: Widen
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Crossings of the rails of the two legs at a corner.

    Returns
    -------
    nodes : (N, N, 2) float array
        Crossing of rail j of the leg before with rail k of the leg after, metres.
    before, after : (N, N) float arrays
        Place of each crossing along either leg from the vertex, metres.
    """
    at = line.points[vertex]
    along_a = unit(at - line.points[vertex - 1])
    along_b = unit(line.points[vertex + 1] - at)
    normal_a = np.array([-along_a[1], along_a[0]])
    normal_b = np.array([-along_b[1], along_b[0]])
    offset_a = rule.offsets_m(widen(float(line.width_before_m[vertex])))
    offset_b = rule.offsets_m(widen(float(line.width_after_m[vertex])))
    apart = offset_b[None, :, None] * normal_b - offset_a[:, None, None] * normal_a
    places = np.linalg.solve(np.column_stack([along_a, -along_b]), apart[..., None])[..., 0]
    nodes = at + offset_a[:, None, None] * normal_a + places[..., :1] * along_a
    return nodes, places[..., 0], places[..., 1]


def branch_direction(line: ChainLine, end: str) -> FloatArray:
    """Unit vector from the junction into a branch."""
    if end == "start":
        return unit(line.points[1] - line.points[0])
    return unit(line.points[-2] - line.points[-1])


def _joint_end(line: ChainLine, chain: int, vertex: int) -> str:
    if line.start is not None and (line.start.chain, line.start.vertex) == (chain, vertex):
        return "start"
    return "end"


def _across(lines: Sequence[ChainLine], host: int, vertex: int, branch: int) -> tuple[float, float]:
    """Cosine and signed sine of the angle from the host's direction to the branch's."""
    line, other = lines[host], lines[branch]
    along = unit(line.points[vertex + 1] - line.points[vertex])
    outwards = branch_direction(other, _joint_end(other, host, vertex))
    sine = float(along[0] * outwards[1] - along[1] * outwards[0])
    if abs(sine) < np.sin(np.deg2rad(40.0)):
        x, y = line.points[vertex] * 1e3
        raise GeometryError(
            f"at ({x:.4g}, {y:.4g}) mm a strip leaves another at less than 40 degrees; junctions "
            "are covered from 40 to 90 degrees"
        )
    return float(along @ outwards), sine


def junction_block(
    lines: Sequence[ChainLine],
    host: int,
    vertex: int,
    branch: int,
    rule: RailRule,
    widen: Widen,
) -> Block:
    """Rows of the host at a junction: the branch's rails carried on across it."""
    cosine, sine = _across(lines, host, vertex, branch)
    other = lines[branch]
    at_start = _joint_end(other, host, vertex) == "start"
    width = float(other.width_after_m[0] if at_start else other.width_before_m[-1])
    offsets = rule.offsets_m(widen(width))
    arc = float(lines[host].arcs_m[vertex])
    host_width = float(lines[host].width_at(np.array([arc]))[0])
    rows = tuple(
        Station(arc + float(y) / abs(sine), host_width, True, -1, cosine / sine) for y in offsets
    )
    return Block(vertex, rows, int(np.sign(sine)), abs(sine))


def host_reach_m(
    lines: Sequence[ChainLine], branch: int, end: str, rule: RailRule, widen: Widen
) -> float:
    """Distance along a branch from the host's centre line to its outer rail."""
    joint = lines[branch].start if end == "start" else lines[branch].end
    assert joint is not None  # only called for joined ends
    host = lines[joint.chain]
    _, sine = _across(lines, joint.chain, joint.vertex, branch)
    width = float(host.width_at(np.array([host.arcs_m[joint.vertex]]))[0])
    return float(rule.offsets_m(widen(width))[-1] / abs(sine))
