"""From an antenna to the wires the engine solves, by the study's mesh plan."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from simkit.errors import GeometryError
from simkit.geometry import line_rules
from simkit.geometry.cable import (
    JOINT_ERROR,
    ON_CABLE,
    CableCut,
    check_cable,
    joined_cable,
    level_error,
    thickness_doubts,
)
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.checks import check_wires
from simkit.geometry.dressing import dressing_of
from simkit.geometry.grid_layout import CORNER_FROM_RAD, Cut, layout
from simkit.geometry.grid_mesh import gap_pair, grid_rule, source_m
from simkit.geometry.grid_model import Rails
from simkit.geometry.line_mesh import fed_pair
from simkit.geometry.line_model import LineDrawing
from simkit.geometry.mesh_plan import MeshPlan, left_share, split_counts
from simkit.geometry.network import chains_of
from simkit.geometry.paths import turns
from simkit.geometry.placement import placed
from simkit.geometry.route import ends_on_plane, longest_path
from simkit.geometry.strips import (
    check_strips,
    model_gap_m,
)
from simkit.geometry.wires import Chain, FloatArray, IntArray, WireGrid, segment_lengths_m
from simkit.study.model import Antenna

PROBE_PLACE = 0.08
"""Second source, as a fraction of the fed chain: near no node of the ten modes kept."""

FOOT_GAP = 1.2
"""A source spread evenly over two segments acts like a gap so much wider than one on a single
segment of their length: by comparing strips on a plane with dipoles of twice the length, whose feed
is one segment. 1.05 to 1.25 in the line model and with three rails, for segments of 0.2 to 1 width;
more for narrower strips, whose gap matters little."""


def build_wires(antenna: Antenna, plan: MeshPlan) -> WireGrid:
    """Turn an antenna into the wire grid of the study's model.

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
    doubts = (*check_strips(antenna), *check_cable(antenna))
    lines = chains_of(antenna)
    if [len(line.points) - 2 for line in lines] != [len(c.vertices) for c in plan.chains]:
        raise GeometryError(
            "its strips meet otherwise, or have another number of path points, than in the other "
            "cases of the study, so they cannot share one mesh; split the study"
        )
    grid = _line_grid(antenna, lines, plan) if plan.kind == "line" else _grid(antenna, lines, plan)
    check_wires(grid.wires, grid.radius_m, antenna.frequency.stop_hz)
    error, carrier_doubts = dressing_of(antenna).error_and_doubts(lines)
    grid = replace(
        _fed_at_foot(grid) if lines[0].fed_foot else grid,
        relative_error=float(np.hypot(grid.relative_error, error)),
        doubts=(*doubts, *grid.doubts, *carrier_doubts),
        path_on_plane=ends_on_plane(lines, grid.path),
    )
    return placed(grid, antenna)


def _fed_at_foot(grid: WireGrid) -> WireGrid:
    """The gap of a source between a strip and the plane, from that between strip and image.

    Source and image make one source of two segments in a strip twice as long; half that strip's gap
    lies above the plane, and a gap of half the width in length holds twice the charge per volt.
    """
    lengths = grid.per_segment(np.array([wire.segment_m for wire in grid.wires]))
    both = 2 * float(np.mean([lengths[segment] for segment, _ in grid.source]))
    return replace(
        grid,
        model_gap_m=FOOT_GAP * model_gap_m(both, grid.feed_width_m) / 2,
        feed_width_m=2 * grid.feed_width_m,
    )


def _host_order(lines: Sequence[ChainLine]) -> list[int]:
    """Chains in an order in which hosts come before their branches."""
    order: list[int] = []
    rest = list(range(len(lines)))
    while rest:
        for index in rest:
            hosts = {j.chain for j in (lines[index].start, lines[index].end) if j is not None}
            if hosts <= set(order):
                order.append(index)
                rest.remove(index)
                break
        else:
            raise GeometryError(
                "strips end on each other in a ring; draw the ring as one closed strip"
            )
    return order


def _line_grid(antenna: Antenna, lines: Sequence[ChainLine], plan: MeshPlan) -> WireGrid:
    width = lines[0].widest_m
    if max(line.widest_m for line in lines) > min(line.narrowest_m for line in lines) * (1 + 1e-6):
        raise GeometryError(
            'the line model holds for one width in a study; use kind = "auto" or "grid"'
        )
    drawing = LineDrawing()
    drawn: dict[int, Chain] = {}
    for index in _host_order(lines):
        chain = plan.chains[index]
        centred = plan.centred and index == 0
        counts = chain.counts
        if plan.moving and index == 0:
            stretches = line_rules.runs(lines[0], chain.vertices, centred=False)
            pair = fed_pair(stretches)
            if pair is not None:
                counts = split_counts(counts, pair, left_share(stretches, pair))
        drawn[index] = drawing.draw(lines, index, chain.vertices, counts, centred=centred)
    chains = tuple(drawn[index] for index in range(len(lines)))
    feed = lines[0].feed
    assert feed is not None  # the first chain is the fed one by construction
    source = drawing.source(lines[0], plan.chains[0].vertices, chains[0])
    lengths = segment_lengths_m(drawing.wires)
    length = float(np.mean([lengths[segment] for segment, _ in source]))
    longest = drawing.longest_run_m
    strip_index, position = _strip_places(chains, drawing.segments)
    dressing = dressing_of(antenna)
    count = len(drawing.wires)
    factor, inductance, loss = dressing.wire_loads(np.full(count, width), np.ones(count))
    grid = WireGrid(
        wires=tuple(drawing.wires),
        radius_m=dressing.radius_m(width),
        conductor_factor_per_m=factor,
        series_inductance_h_per_m=inductance,
        loss_inductance_h_per_m=loss,
        chains=chains,
        path=longest_path(lines),
        strip_index=strip_index,
        strip_position=position,
        source=source,
        probe=_probe(chains[0], source),
        model_gap_m=model_gap_m(length, width),
        study_gap_m=feed.gap_m,
        feed_width_m=width,
        relative_error=line_rules.relative_error(antenna, lines, plan.chains, longest),
        doubts=line_rules.doubts(antenna, lines, plan.chains, longest),
    )
    return grid if plan.cable is None else _with_cable(grid, antenna, lines[0], plan.cable)


def _with_cable(grid: WireGrid, antenna: Antenna, line: ChainLine, cut: CableCut) -> WireGrid:
    """The line model with the feed cable as the last of its chains."""
    assert antenna.cable is not None  # all cases of a study have one or none has
    wires, chain = joined_cable(antenna, line, grid.wires, grid.source, cut, grid.radius_m)
    bare = np.zeros(len(chain.segments))
    dressing = dressing_of(antenna)
    # The cable lies in air and its braid is taken to conduct perfectly: no loads on its wires.
    starts = np.cumsum([0, *(wire.segments for wire in wires[:-1])])
    width = np.where(starts < chain.segments[0], line.widest_m, 0.0)
    factor, inductance, loss = dressing.wire_loads(width, np.ones(len(wires)))
    lengths = grid.per_segment(np.array([wire.segment_m for wire in grid.wires]))
    both = sum(lengths[segment] for segment, _ in grid.source)
    return replace(
        grid,
        wires=tuple(wires),
        model_gap_m=FOOT_GAP * model_gap_m(both, grid.feed_width_m),
        conductor_factor_per_m=factor,
        series_inductance_h_per_m=inductance,
        loss_inductance_h_per_m=loss,
        chains=(*grid.chains, chain),
        strip_index=np.concatenate([grid.strip_index, bare.astype(int) + ON_CABLE]),
        strip_position=np.concatenate([grid.strip_position, bare + np.nan]),
        relative_error=float(np.hypot(grid.relative_error, JOINT_ERROR)),
        doubts=(*grid.doubts, *thickness_doubts(antenna.cable, grid.radius_m)),
        cable=len(grid.chains),
        cable_level_error=level_error(antenna.cable, grid.radius_m),
    )


def _grid(antenna: Antenna, lines: Sequence[ChainLine], plan: MeshPlan) -> WireGrid:
    dressing = dressing_of(antenna)
    widen = dressing.effective_width_m
    rule = grid_rule(lines, plan.rails, widen)
    rails = Rails(rule, widen)
    drawn: dict[int, Chain] = {}
    for index in _host_order(lines):
        chain = plan.chains[index]
        intervals = layout(lines, index, rule, widen, source_m(antenna, rule), chain.vertices)
        counts = chain.counts
        pair = gap_pair(intervals) if plan.moving and index == 0 else None
        if pair is not None:
            counts = split_counts(counts, pair, left_share(intervals, pair))
        cuts = [Cut(max(n, t + 1), t) for n, t in zip(counts, chain.ties, strict=True)]
        drawn[index] = rails.draw(lines, index, intervals, cuts)
    chains = tuple(drawn[index] for index in range(len(lines)))
    feed = lines[0].feed
    assert feed is not None  # the first chain is the fed one by construction
    source = tuple(rails.source)
    lengths = segment_lengths_m(rails.wires)
    length = float(np.mean([lengths[segment] for segment, _ in source]))
    width = float(lines[0].width_before_m[feed.vertex])
    strip_index, position = _strip_places(chains, rails.segments)
    factor, inductance, loss = dressing.wire_loads(
        np.array(rails.wire_width_m), np.array(rails.wire_part)
    )
    return WireGrid(
        wires=tuple(rails.wires),
        radius_m=rule.radius_m,
        conductor_factor_per_m=factor,
        series_inductance_h_per_m=inductance,
        loss_inductance_h_per_m=loss,
        chains=chains,
        path=longest_path(lines),
        strip_index=strip_index,
        strip_position=position,
        source=source,
        probe=_probe(chains[0], source),
        model_gap_m=model_gap_m(length, width),
        study_gap_m=feed.gap_m,
        feed_width_m=width,
        relative_error=grid_error(lines),
        doubts=grid_doubts(lines),
    )


def _probe(chain: Chain, source: Sequence[tuple[int, float]]) -> tuple[tuple[int, float], ...]:
    """The second source: all segments side by side nearest to its place and not fed."""
    arcs, number = chain.places()
    fed = {int(number[np.flatnonzero(chain.segments == s)[0]]) for s, _ in source}
    order = np.argsort(abs(arcs - PROBE_PLACE * chain.length_m), kind="stable")
    free = [int(k) for k in order if int(k) not in fed]
    if not free:
        raise GeometryError(
            f"a fed path of {chain.length_m * 1e3:.4g} mm has {len(order)} segments, all taken by "
            "the source: it is too short for its width and band; lengthen or narrow the strip, or "
            "raise frequency.stop"
        )
    place = free[0]
    return tuple((int(s), 1.0) for s in chain.segments[number == place])


def _strip_places(chains: Sequence[Chain], segments: int) -> tuple[IntArray, FloatArray]:
    """Strip and position of every segment; metal off the line takes its neighbour's strip."""
    index = np.full(segments, -2, dtype=int)
    position = np.full(segments, np.nan)
    for chain in chains:
        index[chain.segments] = -1
        for span in chain.spans:
            at = (chain.arc_m - span.start_m) / (span.end_m - span.start_m)
            if chain.closed:
                at = at % (chain.length_m / abs(span.end_m - span.start_m))
            on = (at >= 0) & (at <= 1)
            index[chain.segments[on]] = span.strip
            position[chain.segments[on]] = at[on]
    for segment in np.flatnonzero(index == -2):
        index[segment] = index[segment - 1] if segment else chains[0].spans[0].strip
    return index, position


def grid_doubts(lines: Sequence[ChainLine]) -> tuple[str, ...]:
    """Limits of the grid model that an antenna exceeds."""
    found = []
    for line in lines:
        ratio = line.widest_m / line.narrowest_m
        if ratio > 10.5:
            found.append(
                f"a strip widens {ratio:.1f} times; the grid model is checked up to 10: mode "
                "frequencies may be off by more than 0.8 %"
            )
        for vertex, turn in enumerate(turns(line.points), start=1):
            x, y = line.points[vertex] * 1e3
            if turn > np.deg2rad(121.0):
                found.append(
                    f"the corner at ({x:.4g}, {y:.4g}) mm turns by {np.rad2deg(turn):.0f} degrees; "
                    "folds over 120 degrees are not covered: mode frequencies may be off by "
                    "several per cent"
                )
            elif turn > np.deg2rad(100.0):
                found.append(
                    f"the corner at ({x:.4g}, {y:.4g}) mm turns by {np.rad2deg(turn):.0f} degrees; "
                    "rails hold up to 100: mode frequencies may be off by 0.7 %"
                )
        if line.closed and np.any(turns(line.points) > CORNER_FROM_RAD):
            found.append(
                "a loop with corners: rails have its modes up to 0.5 % low, the line model, where "
                "it holds, within 0.15 %"
            )
        jump = float(
            np.max(
                np.maximum(line.width_before_m, line.width_after_m)
                / np.minimum(line.width_before_m, line.width_after_m)
            )
        )
        if jump > 2.05:
            found.append(
                f"the width steps by a factor {jump:.2g}; steps are checked up to 2: mode "
                "frequencies may be off by more than 0.6 %"
            )
    return tuple(found)


def grid_error(lines: Sequence[ChainLine]) -> float:
    """Standard error of mode frequencies of the grid model, from the evidence behind its rules."""
    ratio = max(line.widest_m for line in lines) / min(line.narrowest_m for line in lines)
    error = 0.001
    for line in lines:
        if line.tees or line.closed or np.any(turns(line.points) > CORNER_FROM_RAD):
            error = max(error, 0.003)
    if ratio > 1.01:
        error = max(error, 0.002 if ratio < 4 else 0.004)
    return error
