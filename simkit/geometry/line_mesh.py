"""Corners and segment counts of the line model that serve every case of a study."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np

from simkit.errors import GeometryError
from simkit.geometry import line_rules
from simkit.geometry.cable import cable_side, plan_cable
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.dressing import dressing_of
from simkit.geometry.line_rules import Run, VertexKind, runs
from simkit.geometry.mesh_plan import Case, ChainPlan, MeshPlan, feed_moves, left_share, settled
from simkit.geometry.paths import leg_lengths, turns
from simkit.study.model import Antenna


def line_plan(cases: Sequence[Case], why: str) -> MeshPlan:
    side = "" if cases[0][0].cable is None else cable_side(cases[0][0], cases[0][1][0])
    kinds = [
        _line_vertices([lines[chain] for _, lines in cases], side if chain == 0 else "")
        for chain in range(len(cases[0][1]))
    ]
    cases = _with_room_for_the_feed(cases, kinds[0])
    centred = all(_is_centred(lines[0], kinds[0]) for _, lines in cases)
    shares = [_fed_share(runs(lines[0], kinds[0], centred=False)) for _, lines in cases]
    moving = not centred and feed_moves(shares)
    chains = []
    for chain, vertices in enumerate(kinds):
        of_chain = [(antenna, lines, lines[chain]) for antenna, lines in cases]
        fed = chain == 0
        counts = _line_counts(of_chain, vertices, centred=centred and fed, moving=moving and fed)
        chains.append(ChainPlan(vertices, counts))
    antennas = [antenna for antenna, _ in cases]
    radii = [dressing_of(antenna).radius_m(lines[0].widest_m) for antenna, lines in cases]
    cable = plan_cable(antennas, radii)
    return MeshPlan("line", why, 1, centred, tuple(chains), moving, cable)


def fed_pair(stretches: Sequence[Run]) -> tuple[int, int] | None:
    """The two runs on either side of an off-centre feed inside a leg, None without one."""
    fed = [index for index, run in enumerate(stretches) if run.fed]
    return (fed[0], fed[1]) if len(fed) == 2 else None


def _with_room_for_the_feed(cases: Sequence[Case], kinds: Sequence[VertexKind]) -> list[Case]:
    """Cases whose feed lies inside a run; the others are refused when they are built."""
    found = []
    error: GeometryError | None = None
    for case in cases:
        try:
            runs(case[1][0], kinds, centred=True)
        except GeometryError as problem:
            error = error or problem
            continue
        found.append(case)
    if error and not found:
        raise error
    return found


def _line_vertices(
    lines: Sequence[ChainLine], cable: Literal["", "before", "after"]
) -> tuple[VertexKind, ...]:
    sharpest = np.max([turns(line.points) for line in lines], axis=0, initial=0.0)
    shortest = np.min([leg_lengths(line.points) / line.widest_m for line in lines], axis=0)
    branches = {vertex for vertex, _ in lines[0].tees}
    kinds: list[VertexKind] = []
    for vertex, turn in enumerate(sharpest, start=1):
        fed = lines[0].feed is not None and lines[0].feed.vertex == vertex
        roomy = min(shortest[vertex - 1], shortest[vertex]) > 1.5
        kinds.append(line_rules.vertex_kind(float(turn), fed=fed, roomy=roomy, cable=cable))
        if vertex in branches:
            kinds[-1] = "tee"
    return tuple(kinds)


def _is_centred(line: ChainLine, kinds: Sequence[VertexKind]) -> bool:
    if line.feed is None or kinds[line.feed.vertex - 1] != "feed":
        return False
    fed = [run for run in runs(line, kinds, centred=True) if run.fed]
    if len(fed) != 1:
        return False
    middle = (fed[0].start_m + fed[0].stop_m) / 2
    return bool(abs(middle - line.arcs_m[line.feed.vertex]) < 1e-9 + 1e-7 * line.length_m)


def _line_counts(
    cases: Sequence[tuple[Antenna, Sequence[ChainLine], ChainLine]],
    kinds: Sequence[VertexKind],
    *,
    centred: bool,
    moving: bool,
) -> tuple[int, ...]:
    """Segments of each run: the finest wish of any case, as far as the fattest case allows."""
    wishes, limits = [], []
    for antenna, lines, line in cases:
        stretches = runs(line, kinds, centred=centred)
        shortest, target = line_rules.segment_limits_m(antenna, lines, stretches)
        lengths = np.array([run.stop_m - run.start_m for run in stretches])
        # An off-centre source segment takes about half a segment from the run on either side.
        spare = np.array([0.5 if run.fed and not centred else 0.0 for run in stretches])
        pair = fed_pair(stretches) if moving else None
        if pair is not None:
            # Both sides alike: their sum is what counts. The allowance is for uneven sharing.
            lengths[list(pair)] = lengths[list(pair)].mean()
            shortest, target = 1.15 * shortest, max(target, 1.15 * shortest)
        wishes.append(lengths / target - spare)
        limits.append(lengths / shortest - spare)
    counts = settled(wishes, limits)
    if centred:
        fed = [run.fed for run in runs(cases[0][2], kinds, centred=True)]
        counts = np.array(
            [max(n - (n % 2 == 0), 3) if f else n for n, f in zip(counts, fed, strict=True)]
        )
    return tuple(int(n) for n in counts)


def _fed_share(stretches: Sequence[Run]) -> float | None:
    pair = fed_pair(stretches)
    return None if pair is None else left_share(stretches, pair)
