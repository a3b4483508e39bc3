"""The line model: each strip becomes one chain of wire segments on its centre line.

The wires have the equivalent radius of the strip, stop short of open ends, and carry small figures
at sharp corners: a chamfer of two segments with a whisker pointing outwards, which together give a
mitred corner the inductance and the capacitance that a plain bend lacks.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
from scipy.constants import c as light_speed

from simkit.errors import GeometryError
from simkit.geometry.checks import check_wires
from simkit.geometry.mesh import (
    FIGURE_FROM_RAD,
    FIGURE_UP_TO_RAD,
    FINE_WAVELENGTHS,
    LONGEST_WAVELENGTHS,
    MeshPlan,
    Run,
    VertexKind,
    chamfer_m,
    runs,
    signature,
    split_counts,
    whisker_m,
)
from simkit.geometry.paths import leg_lengths, point_at, sub_path, turns, unit
from simkit.geometry.skeleton import Skeleton, skeletons
from simkit.geometry.strips import check_strips, equivalent_radius_m, model_gap_m
from simkit.geometry.wires import Chain, FloatArray, Wire, WireGrid
from simkit.study.model import Antenna

PROBE_PLACE = 0.13
"""Second source, as a fraction of the fed path: at no node of any of the first seven modes."""

STRAIGHT_LIMIT = 0.2
"""Width over length up to which the line model of straight strips is checked."""


def build_wires(antenna: Antenna, plan: MeshPlan) -> WireGrid:
    """Turn an antenna into the wire grid of the line model.

    Parameters
    ----------
    antenna : Antenna
    plan : MeshPlan
        From `plan_mesh` over all cases of the study.

    Raises
    ------
    GeometryError
        The strips cannot be built, or the wires would be outside what the engine can solve.
    """
    doubts = list(check_strips(antenna))
    lines = skeletons(antenna, plan.feed_kind)
    if [len(line.points) - 2 for line in lines] != [len(c.vertices) for c in plan.chains]:
        raise GeometryError(
            "the path has another number of points than in the other cases of the study "
            f"({signature(lines)}), so they cannot share one mesh; split the study"
        )
    radius = equivalent_radius_m(lines[0].width_m, antenna.metal.thickness_m)
    maker = _Maker()
    chains = []
    for index, (line, chain_plan) in enumerate(zip(lines, plan.chains, strict=True)):
        centred = plan.centred and index == 0
        doubts += _corner_doubts(line, chain_plan.vertices)
        counts = chain_plan.counts
        if plan.moving and index == 0:
            counts = split_counts(runs(line, chain_plan.vertices, centred=False), counts)
        chains.append(maker.chain(line, chain_plan.vertices, counts, centred=centred))
    source, source_length = maker.source(lines[0], chains[0])
    # Corner figures were found with these very wires, up to 12 mm wide and 3.6 GHz: not a doubt.
    plain = [wire for k, wire in enumerate(maker.wires) if k not in maker.figure_wires]
    doubts += _length_doubts(antenna, lines, plain)
    feed = lines[0].feed
    assert feed is not None  # the first skeleton is the fed one by construction
    check_wires(maker.wires, radius, antenna.frequency.stop_hz)
    strip_index, strip_position = _strip_places(chains, sum(w.segments for w in maker.wires))
    return WireGrid(
        wires=tuple(maker.wires),
        radius_m=radius,
        chains=tuple(chains),
        strip_index=strip_index,
        strip_position=strip_position,
        source=source,
        probe=_probe(chains[0], source),
        model_gap_m=model_gap_m(source_length, lines[0].width_m),
        study_gap_m=feed.gap_m,
        feed_width_m=lines[0].width_m,
        relative_error=_relative_error(
            lines,
            plan,
            max(wire.segment_m for wire in maker.wires),
            light_speed / antenna.frequency.stop_hz,
        ),
        doubts=tuple(doubts),
    )


@dataclass
class _Maker:
    """Collects wires and the chain bookkeeping while walking along skeletons."""

    wires: list[Wire] = field(default_factory=list)
    segments: int = 0
    figure_wires: set[int] = field(default_factory=set)

    def add(self, start: FloatArray, end: FloatArray, count: int) -> list[int]:
        self.wires.append(
            Wire(
                (float(start[0]), float(start[1]), 0.0), (float(end[0]), float(end[1]), 0.0), count
            )
        )
        first = self.segments
        self.segments += count
        return list(range(first, self.segments))

    def stretch(
        self, points: FloatArray, start_m: float, stop_m: float, count: int
    ) -> tuple[list[int], list[float]]:
        """`count` segments along the part of a path between two arc lengths."""
        nodes = np.linspace(start_m, stop_m, count + 1)
        middles = list((nodes[:-1] + nodes[1:]) / 2)
        part = sub_path(points, start_m, stop_m)
        if np.linalg.norm(part[-1] - part[0]) > (stop_m - start_m) * (1 - 1e-9):
            return self.add(part[0], part[-1], count), middles
        places = point_at(points, nodes)
        made: list[int] = []
        for a, b in pairwise(places):
            made += self.add(a, b, 1)
        return made, middles

    def chain(
        self,
        line: Skeleton,
        kinds: Sequence[VertexKind],
        counts: Sequence[int],
        *,
        centred: bool,
    ) -> Chain:
        stretches = runs(line, kinds, centred=centred)
        _check_room(line, stretches)
        made: list[int] = []
        middles: list[float] = []
        bounds = _without_source(stretches, counts, centred=centred)
        figures = _figures(line, kinds)
        for index, ((start, stop), count) in enumerate(zip(bounds, counts, strict=True)):
            segments, at = self.stretch(line.points, start, stop, count)
            made += segments
            middles += at
            # Only between the two fed runs: behind the second one a corner figure may follow.
            pair = stretches[index : index + 2]
            if not centred and len(pair) == 2 and pair[0].fed and pair[1].fed:
                segments, at = self.stretch(line.points, stop, bounds[index + 1][0], 1)
                made += segments
                middles += at
            for vertex in figures:
                if abs(vertex.arc_m - vertex.cut_m - stretches[index].stop_m) < 1e-12:
                    segments, at = self.figure(vertex)
                    made += segments
                    middles += at
        return Chain(
            segments=np.array(made),
            signs=np.ones(len(made), dtype=int),
            arc_m=np.array(middles),
            length_m=line.length_m,
            closed=line.closed,
            spans=line.spans,
        )

    def figure(self, corner: _Corner) -> tuple[list[int], list[float]]:
        middle = (corner.before + corner.after) / 2
        made = self.add(corner.before, middle, 1) + self.add(middle, corner.after, 1)
        self.add(middle, middle + corner.outwards * corner.whisker_m, 1)
        self.figure_wires |= set(range(len(self.wires) - 3, len(self.wires)))
        return made, [corner.arc_m - corner.cut_m / 2, corner.arc_m + corner.cut_m / 2]

    def source(self, line: Skeleton, chain: Chain) -> tuple[tuple[tuple[int, float], ...], float]:
        """Source segments with their volts, and the segment length that sets the model's gap.

        At an apex the source sits half and half on the two segments beside the node (those of the
        chamfer, if the corner has a figure), so that it neither crosses a corner nor breaks the
        symmetry of the two arms.
        """
        feed = line.feed
        assert feed is not None
        lengths = [wire.segment_m for wire in self.wires for _ in range(wire.segments)]
        if feed.kind == "straight":
            segment = int(chain.segments[np.argmin(abs(chain.arc_m - feed.arc_m))])
            return ((segment, 1.0),), lengths[segment]
        after = int(np.searchsorted(chain.arc_m, feed.arc_m))
        pair = [int(chain.segments[after - 1]), int(chain.segments[after])]
        return tuple((s, 0.5) for s in pair), float(np.mean([lengths[s] for s in pair]))


@dataclass(frozen=True)
class _Corner:
    arc_m: float
    cut_m: float
    whisker_m: float
    before: FloatArray
    after: FloatArray
    outwards: FloatArray


def _figures(line: Skeleton, kinds: Sequence[VertexKind]) -> list[_Corner]:
    found = []
    arcs = np.concatenate([[0.0], np.cumsum(leg_lengths(line.points))])
    for vertex, (kind, turn) in enumerate(zip(kinds, turns(line.points), strict=True), start=1):
        if kind != "figure":
            continue
        if turn > FIGURE_UP_TO_RAD + 1e-9:
            x, y = line.points[vertex] * 1e3
            raise GeometryError(
                f"the corner at ({x:.4g}, {y:.4g}) mm turns by {np.rad2deg(turn):.0f} degrees; the "
                "line model holds up to 120: open the corner or split it in two bends"
            )
        at = line.points[vertex]
        before, after = unit(at - line.points[vertex - 1]), unit(line.points[vertex + 1] - at)
        cut = chamfer_m(turn, line.width_m)
        found.append(
            _Corner(
                arc_m=float(arcs[vertex]),
                cut_m=cut,
                whisker_m=whisker_m(turn, line.width_m),
                before=at - cut * before,
                after=at + cut * after,
                outwards=unit(before - after),
            )
        )
    return found


def _check_room(line: Skeleton, stretches: Sequence[Run]) -> None:
    for run in stretches:
        if run.stop_m - run.start_m < 0.5 * line.width_m:
            x, y = point_at(line.points, (run.start_m + run.stop_m) / 2) * 1e3
            raise GeometryError(
                f"near ({x:.4g}, {y:.4g}) mm the straight part of a leg is "
                f"{max(run.stop_m - run.start_m, 0) * 1e3:.3g} mm long between corners, ends or "
                f"feed; a strip {line.width_m * 1e3:.4g} mm wide needs half a width there: "
                "lengthen the leg, move the feed, or narrow the strip"
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


def _probe(chain: Chain, source: tuple[tuple[int, float], ...]) -> tuple[tuple[int, float], ...]:
    places = abs(chain.arc_m - PROBE_PLACE * chain.length_m)
    taken = {segment for segment, _ in source}
    order = [int(chain.segments[k]) for k in np.argsort(places, kind="stable")]
    free = [segment for segment in order if segment not in taken]
    if not free:
        raise GeometryError(
            f"a fed path of {chain.length_m * 1e3:.4g} mm has {len(order)} segments, all taken by "
            "the source: it is too short for its width and band; lengthen or narrow the strip, or "
            "raise frequency.stop"
        )
    return ((free[0], 1.0),)


def _strip_places(chains: Sequence[Chain], segments: int) -> tuple[np.ndarray, FloatArray]:
    index = np.full(segments, -1, dtype=int)
    position = np.full(segments, np.nan)
    for chain in chains:
        for span in chain.spans:
            at = (chain.arc_m - span.start_m) / (span.end_m - span.start_m)
            if chain.closed:
                at = at % 1.0
            on = (at >= 0) & (at <= 1)
            index[chain.segments[on]] = span.strip
            position[chain.segments[on]] = at[on]
        figures = set(range(int(chain.segments.min()), int(chain.segments.max()) + 1))
        for whisker in figures - set(chain.segments.tolist()):
            index[whisker] = index[whisker - 1]
    return index, position


def _corner_doubts(line: Skeleton, kinds: Sequence[VertexKind]) -> list[str]:
    found = []
    legs = leg_lengths(line.points)
    for vertex, (kind, turn) in enumerate(zip(kinds, turns(line.points), strict=True), start=1):
        x, y = line.points[vertex] * 1e3
        shortest = min(legs[vertex - 1], legs[vertex])
        if kind == "figure" and shortest < 2.5 * line.width_m:
            found.append(
                f"a leg of {shortest * 1e3:.4g} mm at the corner ({x:.4g}, {y:.4g}) mm is shorter "
                f"than 2.5 widths ({2.5 * line.width_m * 1e3:.4g} mm): mode frequencies may be off "
                "by 1.3 % and Q by 12 %"
            )
        apex = line.feed is not None and line.feed.vertex == vertex
        if kind == "figure" and not apex and turn < FIGURE_FROM_RAD - 1e-9:
            found.append(
                f"the corner at ({x:.4g}, {y:.4g}) mm turns by {np.rad2deg(turn):.0f} degrees here "
                "and by 50 or more in other cases, so it keeps the figure of a sharp corner: mode "
                "frequencies may be off by 0.4 %"
            )
    return found


def _length_doubts(antenna: Antenna, lines: Sequence[Skeleton], wires: Sequence[Wire]) -> list[str]:
    found = []
    wavelength = light_speed / antenna.frequency.stop_hz
    longest = max(wire.segment_m for wire in wires)
    # A wide strip's segments may not be shorter than its width allows; the error is then the
    # width's own, which the next rule covers.
    if longest > LONGEST_WAVELENGTHS * wavelength and longest > 0.8 * lines[0].width_m:
        found.append(
            f"segments of {longest * 1e3:.3g} mm are longer than 1/18 of the wavelength "
            f"({wavelength * LONGEST_WAVELENGTHS * 1e3:.3g} mm) at the top of the band: mode "
            "frequencies may be off by more than 0.13 %; lower frequency.stop or split the sweep"
        )
    ratio = max(line.width_m / line.length_m for line in lines)
    if ratio > STRAIGHT_LIMIT:
        found.append(
            f"the strip is {ratio:.2f} of its length wide; the line model is checked up to "
            f"{STRAIGHT_LIMIT}: mode frequencies may be off by more than 0.3 %"
        )
    return found


def _relative_error(
    lines: Sequence[Skeleton], plan: MeshPlan, longest_m: float, wavelength_m: float
) -> float:
    """Standard error of mode frequencies, from the evidence behind the rules."""
    ratio = max(line.width_m / line.length_m for line in lines)
    error = 0.0005 if ratio <= 0.08 else 0.001 if ratio <= 0.13 else 0.002
    if longest_m > FINE_WAVELENGTHS * wavelength_m:
        error = max(error, 0.0012)
    kinds = {kind for chain in plan.chains for kind in chain.vertices}
    bent = any(np.any(turns(line.points) > 1e-3) for line in lines)
    if "figure" in kinds or any(line.closed for line in lines):
        return max(error, 0.002)
    return max(error, 0.0015) if bent else error
