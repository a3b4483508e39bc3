"""The line model: each strip becomes one chain of wire segments on its centre line.

The wires have the equivalent radius of the strip, stop short of open ends, and carry small figures
at sharp corners and at junctions. A corner's chamfer of two segments with a whisker pointing
outwards gives it the inductance and the capacitance that a plain bend lacks; a junction is a
rhombus of four segments with nothing at its centre.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np

from simkit.errors import GeometryError
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.line_rules import (
    FIGURE_UP_TO_RAD,
    TEE_BRANCH_WIDTHS,
    TEE_FAR_WIDTHS,
    TEE_HOST_WIDTHS,
    Run,
    VertexKind,
    cable_arc_m,
    chamfer_m,
    runs,
    whisker_m,
)
from simkit.geometry.paths import point_at, sub_path, turns, unit
from simkit.geometry.wires import Chain, FloatArray, Wire

Source = tuple[tuple[int, float], ...]

FED_OTHERWISE = (
    "its feed sits at the foot of a strip on the plane and that of other cases of the study does "
    "not, or the other way round, so they cannot share one mesh; split the study"
)


@dataclass
class LineDrawing:
    """Collects wires and the chain bookkeeping while walking along chains."""

    wires: list[Wire] = field(default_factory=list)
    segments: int = 0
    longest_run_m: float = 0.0
    branch_nodes: dict[tuple[int, int], FloatArray] = field(default_factory=dict)

    def add(self, start: FloatArray, end: FloatArray, count: int) -> list[int]:
        """A straight wire; returns its segments."""
        self.wires.append(
            Wire(
                (float(start[0]), float(start[1]), 0.0), (float(end[0]), float(end[1]), 0.0), count
            )
        )
        first = self.segments
        self.segments += count
        return list(range(first, self.segments))

    def draw(
        self,
        lines: Sequence[ChainLine],
        index: int,
        kinds: Sequence[VertexKind],
        counts: Sequence[int],
        *,
        centred: bool,
    ) -> Chain:
        """Draw one chain; hosts must be drawn before their branches."""
        line = lines[index]
        stretches = runs(line, kinds, centred=centred)
        if len(stretches) != len(counts):
            raise GeometryError(FED_OTHERWISE)
        _check_room(line, stretches)
        walk = _Walk(self, line)
        bounds = _without_source(stretches, counts, centred=centred)
        figures: list[_Corner | _Tee] = [*_corners(line, kinds), *_tees(lines, index, kinds)]
        for number, ((start, stop), count) in enumerate(zip(bounds, counts, strict=True)):
            ends = self._ends(line, first=number == 0, last=number == len(bounds) - 1)
            walk.stretch(start, stop, count, *ends)
            if number + 1 < len(bounds):
                following = bounds[number + 1][0]
                fed = stretches[number].fed and stretches[number + 1].fed and not centred
                if fed and following > stop:
                    walk.stretch(stop, following, 1)
            for figure in figures:
                if abs(figure.arc_m - figure.cut_m - stretches[number].stop_m) < 1e-12:
                    figure.draw(walk)
        return walk.chain()

    def _ends(
        self, line: ChainLine, *, first: bool, last: bool
    ) -> tuple[FloatArray | None, FloatArray | None]:
        """Exact nodes of the host's figure where a branch begins or ends."""
        start = end = None
        if first and line.start is not None:
            start = self.branch_nodes[line.start.chain, line.start.vertex]
        if last and line.end is not None:
            end = self.branch_nodes[line.end.chain, line.end.vertex]
        return start, end

    def source(self, line: ChainLine, kinds: Sequence[VertexKind], chain: Chain) -> Source:
        """Source segments with their volts.

        At an apex the source sits half and half on the two segments beside the node (those of the
        chamfer, if the corner has a figure), so that it neither crosses a corner nor breaks the
        symmetry of the two arms. Beside a cable it takes the two segments that follow the place
        where the cable is joined.
        """
        feed = line.feed
        assert feed is not None  # only called for the fed chain
        arc = float(line.arcs_m[feed.vertex])
        if kinds[feed.vertex - 1] == "feed":
            return ((int(chain.segments[np.argmin(abs(chain.arc_m - arc))]), 1.0),)
        kind = kinds[feed.vertex - 1]
        if kind in ("cable-before", "cable-after"):
            arc = cable_arc_m(line, kind)
        after = int(np.searchsorted(chain.arc_m, arc))
        after += {"cable-before": 1, "cable-after": -1}.get(kind, 0)
        if not 0 < after < len(chain.segments):
            raise GeometryError(
                "feed: beside a cable the source takes two segments of the strip; the arm is too "
                "short for its width and band: lengthen or narrow it, or raise frequency.stop"
            )
        pair = (int(chain.segments[after - 1]), int(chain.segments[after]))
        return tuple((segment, 0.5) for segment in pair)


@dataclass
class _Walk:
    """Segments of one chain, in the order they are drawn."""

    drawing: LineDrawing
    line: ChainLine
    made: list[tuple[float, int]] = field(default_factory=list)

    def note(self, segments: Sequence[int], middles_m: Sequence[float]) -> None:
        self.made += [(float(arc), s) for arc, s in zip(middles_m, segments, strict=True)]

    def stretch(
        self,
        start_m: float,
        stop_m: float,
        count: int,
        first: FloatArray | None = None,
        last: FloatArray | None = None,
    ) -> None:
        """`count` segments along the part of the chain between two arc lengths."""
        points = self.line.points
        # The figures of corners and junctions are checked with the segments they have; only the
        # runs between them answer to the wavelength.
        self.drawing.longest_run_m = max(self.drawing.longest_run_m, (stop_m - start_m) / count)
        nodes = np.linspace(start_m, stop_m, count + 1)
        middles = [float(m) for m in (nodes[:-1] + nodes[1:]) / 2]
        places = point_at(points, nodes)
        places[0] = places[0] if first is None else first
        places[-1] = places[-1] if last is None else last
        part = sub_path(points, start_m, stop_m)
        if np.linalg.norm(part[-1] - part[0]) > (stop_m - start_m) * (1 - 1e-9):
            self.note(self.drawing.add(places[0], places[-1], count), middles)
            return
        for middle, (a, b) in zip(middles, pairwise(places), strict=True):
            self.note(self.drawing.add(a, b, 1), [middle])

    def chain(self) -> Chain:
        self.made.sort()
        return Chain(
            segments=np.array([segment for _, segment in self.made]),
            signs=np.ones(len(self.made), dtype=int),
            arc_m=np.array([arc for arc, _ in self.made]),
            length_m=self.line.length_m,
            closed=self.line.closed,
            spans=self.line.spans,
            open_start=self.line.start is None and not self.line.start_on_plane,
            open_end=self.line.end is None and not self.line.end_on_plane,
        )


@dataclass(frozen=True)
class _Corner:
    """Chamfer with whisker."""

    arc_m: float
    cut_m: float
    whisker_m: float
    before: FloatArray
    after: FloatArray
    outwards: FloatArray

    def draw(self, walk: _Walk) -> None:
        middle = (self.before + self.after) / 2
        add = walk.drawing.add
        chamfer = add(self.before, middle, 1) + add(middle, self.after, 1)
        walk.note(chamfer, [self.arc_m - self.cut_m / 2, self.arc_m + self.cut_m / 2])
        add(middle, middle + self.outwards * self.whisker_m, 1)


@dataclass(frozen=True)
class _Tee:
    """Rhombus of a junction: two ways round, the far side's and the branch's."""

    arc_m: float
    cut_m: float
    before: FloatArray
    after: FloatArray
    far: FloatArray
    branch: FloatArray
    key: tuple[int, int]

    def draw(self, walk: _Walk) -> None:
        add = walk.drawing.add
        arcs = [self.arc_m - self.cut_m / 2, self.arc_m + self.cut_m / 2]
        for corner in (self.far, self.branch):
            walk.note(add(self.before, corner, 1) + add(corner, self.after, 1), arcs)
        walk.drawing.branch_nodes[self.key] = self.branch


def _corners(line: ChainLine, kinds: Sequence[VertexKind]) -> list[_Corner]:
    found = []
    arcs = line.arcs_m
    for vertex, (kind, turn) in enumerate(zip(kinds, turns(line.points), strict=True), start=1):
        if kind != "figure":
            continue
        at = line.points[vertex]
        if turn > FIGURE_UP_TO_RAD:
            raise GeometryError(
                f"the corner at ({at[0] * 1e3:.4g}, {at[1] * 1e3:.4g}) mm turns by "
                f"{np.rad2deg(turn):.0f} degrees; the line model holds up to 120: open the corner "
                "or split it in two bends"
            )
        before, after = unit(at - line.points[vertex - 1]), unit(line.points[vertex + 1] - at)
        cut = chamfer_m(turn, line.widest_m)
        # In a case whose corner happens to be straight the whisker still needs a direction.
        away = before - after if turn > 1e-6 else np.array([before[1], -before[0]])
        found.append(
            _Corner(
                arc_m=float(arcs[vertex]),
                cut_m=cut,
                whisker_m=whisker_m(turn, line.widest_m),
                before=at - cut * before,
                after=at + cut * after,
                outwards=unit(away),
            )
        )
    return found


def _tees(lines: Sequence[ChainLine], index: int, kinds: Sequence[VertexKind]) -> list[_Tee]:
    line = lines[index]
    found = []
    for vertex, branch in line.tees:
        if kinds[vertex - 1] != "tee":
            continue
        other = lines[branch]
        at_start = other.start is not None and other.start.chain == index
        at_start = at_start and other.start is not None and other.start.vertex == vertex
        outwards = unit(
            other.points[1] - other.points[0] if at_start else other.points[-2] - other.points[-1]
        )
        at, width = line.points[vertex], line.widest_m
        back, ahead = unit(at - line.points[vertex - 1]), unit(line.points[vertex + 1] - at)
        found.append(
            _Tee(
                arc_m=float(line.arcs_m[vertex]),
                cut_m=TEE_HOST_WIDTHS * width,
                before=at - TEE_HOST_WIDTHS * width * back,
                after=at + TEE_HOST_WIDTHS * width * ahead,
                far=at - TEE_FAR_WIDTHS * width * outwards,
                branch=at + TEE_BRANCH_WIDTHS * width * outwards,
                key=(index, vertex),
            )
        )
    return found


def _check_room(line: ChainLine, stretches: Sequence[Run]) -> None:
    for run in stretches:
        if run.stop_m - run.start_m < 0.5 * line.widest_m:
            x, y = point_at(line.points, (run.start_m + run.stop_m) / 2) * 1e3
            raise GeometryError(
                f"near ({x:.4g}, {y:.4g}) mm the straight part of a leg is "
                f"{max(run.stop_m - run.start_m, 0) * 1e3:.3g} mm long between corners, junctions, "
                f"ends or feed; a strip {line.widest_m * 1e3:.4g} mm wide needs half a width "
                "there: lengthen the leg, move the feed, or narrow the strip"
            )


def _without_source(
    stretches: Sequence[Run], counts: Sequence[int], *, centred: bool
) -> list[tuple[float, float]]:
    """Run limits after an off-centre source segment is taken out of the runs on either side."""
    bounds = [(run.start_m, run.stop_m) for run in stretches]
    fed = [index for index, run in enumerate(stretches) if run.fed]
    if centred or len(fed) != 2:
        return bounds
    left, right = fed
    whole = stretches[right].stop_m - stretches[left].start_m
    half = whole / (counts[left] + counts[right] + 1) / 2
    bounds[left] = (bounds[left][0], bounds[left][1] - half)
    bounds[right] = (bounds[right][0] + half, bounds[right][1])
    return bounds
