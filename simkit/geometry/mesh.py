"""One mesh topology for a whole study, so that swept quantities see lengths stretch, not jump."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import asdict, dataclass
from itertools import pairwise
from typing import Any, Literal

import numpy as np
from scipy.constants import c as light_speed

from simkit.errors import GeometryError
from simkit.geometry.paths import leg_lengths, point_at, turns
from simkit.geometry.skeleton import FeedKind, Skeleton, skeletons
from simkit.geometry.strips import OPEN_END_WIDTHS, equivalent_radius_m
from simkit.study.model import Antenna

VertexKind = Literal["smooth", "node", "figure"]

FIGURE_FROM_RAD = np.deg2rad(50.0)
"""Corners from here up are modelled by a chamfer and a whisker, gentler ones by nothing."""

APEX_FIGURE_FROM_RAD = np.deg2rad(20.0)
"""A fed corner gets its figure earlier: the source then sits on the chamfer, half on each of its
two segments. On the legs beside a plain bend the power balance is off by 1 % at 30 degrees, 3 % at
60, 7 % at 90; on the chamfer it stays within 2 %. The figure agrees with the plain bend to 0.02 %
in frequency at 20 degrees, so nothing jumps where one takes over from the other."""

FIGURE_UP_TO_RAD = np.deg2rad(120.0)
"""Fold-backs beyond this are outside the rules."""

NODE_FROM_RAD = np.deg2rad(5.0)
"""A bend from here up, between legs of some segments, gets a node of its own."""

SHORTEST_RADII = 2.06
"""The engine refuses wires of one segment, and meeting wires, of segments under two radii."""

SHORTEST_STRAIGHT_RADII = 1.31
"""Inside one straight wire shorter segments pass; a narrow case of a sweep may then ask for more
segments than a wide one would choose. Mode frequencies move by 0.06 % over 1.31 to 1.8 radii."""

TARGET_WIDTHS = 0.4
TARGET_WAVELENGTHS = 1 / 40
MOVING_SHARE = 0.1
"""A feed that divides its leg less unevenly than this over a study keeps its counts on both sides:
lengths then stretch, and nothing jumps."""

LONGEST_WAVELENGTHS = 1 / 18
"""Longer segments make a case doubtful. Against flat metal, mode frequencies of a strip of 1/100 of
its length are off by 0.07 % with segments of 1/23 wavelength, 0.10 % at 1/20, 0.13 % at 1/17; wider
strips err less."""

FINE_WAVELENGTHS = 1 / 21
"""Up to here the length of the segments adds nothing to the stated error."""


@dataclass(frozen=True)
class ChainPlan:
    """How one current path is cut: a kind for each inner vertex, a count for each run."""

    vertices: tuple[VertexKind, ...]
    counts: tuple[int, ...]


@dataclass(frozen=True)
class MeshPlan:
    """Mesh topology of a study.

    Attributes
    ----------
    feed_kind : {"straight", "apex"}
    centred : bool
        The feed sits in the middle of its run in every case: one wire, fed on its middle segment.
    chains : tuple of ChainPlan
        The fed one first.
    moving : bool
        The feed moves along its leg from case to case: the leg keeps its number of segments, which
        each case shares out to both sides of the feed (`split_counts`).
    """

    feed_kind: FeedKind
    centred: bool
    chains: tuple[ChainPlan, ...]
    moving: bool = False

    def as_dict(self) -> dict[str, Any]:
        """Plain lists and text, fit for JSON."""
        return asdict(self)


@dataclass(frozen=True)
class Run:
    """A stretch of a chain, between arc lengths, that is cut into equal pieces."""

    start_m: float
    stop_m: float
    fed: bool = False


def plan_mesh(antennas: Iterable[Antenna]) -> MeshPlan:
    """Choose corners and segment counts that serve every case of a study.

    Parameters
    ----------
    antennas : iterable of Antenna
        At least one. Cases that cannot be laid out, or whose paths have another number of points,
        are passed over here and refused when they are built.

    Raises
    ------
    GeometryError
        No case can be laid out; the text is that of the first one.
    """
    several = list(antennas)
    feed_kind = _common_feed_kind(several)
    laid_out = _laid_out(several, feed_kind)
    vertices = [
        _vertex_kinds([case[1][chain] for case in laid_out]) for chain in range(len(laid_out[0][1]))
    ]
    laid_out = _with_room_for_the_feed(laid_out, vertices[0])
    centred = all(_is_centred(lines[0], vertices[0]) for _, lines in laid_out)
    moving = not centred and _feed_moves([lines[0] for _, lines in laid_out], vertices[0])
    chains = []
    for chain, kinds in enumerate(vertices):
        cases = [(antenna, lines[chain]) for antenna, lines in laid_out]
        fed = chain == 0
        chains.append(ChainPlan(kinds, _counts(cases, kinds, centred and fed, moving and fed)))
    return MeshPlan(feed_kind, centred, tuple(chains), moving)


def _common_feed_kind(antennas: Sequence[Antenna]) -> FeedKind:
    kinds, first_error = set(), None
    for antenna in antennas:
        try:
            feed = skeletons(antenna)[0].feed
        except GeometryError as error:
            first_error = first_error or error
            continue
        kinds.add(feed.kind if feed else "straight")
    if not kinds:
        raise first_error or GeometryError("the study has no case that can be laid out")
    return "apex" if "apex" in kinds else "straight"


def _laid_out(
    antennas: Sequence[Antenna], feed_kind: FeedKind
) -> list[tuple[Antenna, tuple[Skeleton, ...]]]:
    """Cases with their skeletons, those of the commonest shape of path only."""
    found: dict[tuple[int, ...], list[tuple[Antenna, tuple[Skeleton, ...]]]] = {}
    error: GeometryError | None = None
    for antenna in antennas:
        try:
            lines = skeletons(antenna, feed_kind)
        except GeometryError as problem:
            error = error or problem
            continue
        if all(line.width_m > 0 for line in lines):
            found.setdefault(signature(lines), []).append((antenna, lines))
    if not found:
        raise error or GeometryError("the study has no case with strips of positive width")
    return max(found.values(), key=len)


def _with_room_for_the_feed(
    laid_out: list[tuple[Antenna, tuple[Skeleton, ...]]], kinds: Sequence[VertexKind]
) -> list[tuple[Antenna, tuple[Skeleton, ...]]]:
    """Cases whose feed lies inside a run; the others are refused when they are built."""
    found = []
    error: GeometryError | None = None
    for case in laid_out:
        try:
            runs(case[1][0], kinds, centred=True)
        except GeometryError as problem:
            error = error or problem
            continue
        found.append(case)
    if error and not found:
        raise error
    return found


def signature(lines: Sequence[Skeleton]) -> tuple[int, ...]:
    """What must agree for two antennas to share a mesh: points of each path."""
    return tuple(len(line.points) * (-1 if line.closed else 1) for line in lines)


def _vertex_kinds(lines: Sequence[Skeleton]) -> tuple[VertexKind, ...]:
    sharpest = np.max([turns(line.points) for line in lines], axis=0, initial=0.0)
    shortest = np.min([leg_lengths(line.points) / line.width_m for line in lines], axis=0)
    kinds: list[VertexKind] = []
    for vertex, turn in enumerate(sharpest):
        roomy = min(shortest[vertex], shortest[vertex + 1]) > 1.5
        apex = lines[0].feed is not None and lines[0].feed.vertex == vertex + 1
        if turn >= (APEX_FIGURE_FROM_RAD if apex else FIGURE_FROM_RAD):
            kinds.append("figure")
        elif apex:
            kinds.append("node")
        else:
            kinds.append("node" if roomy and turn >= NODE_FROM_RAD else "smooth")
    return tuple(kinds)


def corner_offset_m(turn_rad: float, width_m: float) -> float:
    """Half diagonal h of a mitred corner: from the vertex to the outer tip, metres."""
    return float(width_m / (2 * np.cos(turn_rad / 2)))


def chamfer_m(turn_rad: float, width_m: float) -> float:
    """How much of each leg the chamfer of a corner figure takes, metres."""
    return 1.12 * corner_offset_m(turn_rad, width_m)


def whisker_m(turn_rad: float, width_m: float) -> float:
    """Length of the whisker of a corner figure, metres."""
    return max(2.6 * corner_offset_m(turn_rad, width_m) - 0.89 * width_m, 0.52 * width_m)


def runs(line: Skeleton, kinds: Sequence[VertexKind], *, centred: bool) -> tuple[Run, ...]:
    """Cut a skeleton at its corners (and at an off-centre feed) into runs.

    An off-centre feed inside a straight leg splits its run in two that meet at the feed point; the
    source segment is taken out of both when the wires are built.

    Raises
    ------
    GeometryError
        A feed inside a leg lies in no run, but within a corner or beyond the wire's end.
    """
    arcs = np.concatenate([[0.0], np.cumsum(leg_lengths(line.points))])
    bends = turns(line.points)
    end = 0.0 if line.closed else OPEN_END_WIDTHS * line.width_m
    edges = [(end, end)]
    for vertex, kind in enumerate(kinds, start=1):
        at = float(arcs[vertex])
        if kind == "node":
            edges.append((at, at))
        elif kind == "figure":
            cut = chamfer_m(min(bends[vertex - 1], FIGURE_UP_TO_RAD), line.width_m)
            edges.append((at - cut, at + cut))
    edges.append((arcs[-1] - end, arcs[-1] - end))
    found = []
    for (_, start), (stop, _) in pairwise(edges):
        feed = line.feed
        inside = feed is not None and feed.kind == "straight" and start < feed.arc_m < stop
        if inside and not centred:
            assert feed is not None
            found += [Run(start, feed.arc_m, fed=True), Run(feed.arc_m, stop, fed=True)]
        else:
            found.append(Run(start, stop, fed=inside))
    if line.feed is not None and line.feed.kind == "straight" and not any(r.fed for r in found):
        x, y = point_at(line.points, line.feed.arc_m) * 1e3
        raise GeometryError(
            f"feed: the source at ({x:.4g}, {y:.4g}) mm sits in a corner or at the very end of a "
            f"strip {line.width_m * 1e3:.4g} mm wide, where it cannot be modelled; move it about a "
            "width away, or put it exactly on the corner of an open path"
        )
    return tuple(found)


def _is_centred(line: Skeleton, kinds: Sequence[VertexKind]) -> bool:
    if line.feed is None or line.feed.kind != "straight":
        return False
    fed = [run for run in runs(line, kinds, centred=True) if run.fed]
    if len(fed) != 1:
        return False
    middle = (fed[0].start_m + fed[0].stop_m) / 2
    return abs(middle - line.feed.arc_m) < 1e-9 + 1e-7 * line.length_m


def _fed_pair(stretches: Sequence[Run]) -> tuple[int, int] | None:
    """The two runs on either side of an off-centre feed inside a leg."""
    fed = [index for index, run in enumerate(stretches) if run.fed]
    return (fed[0], fed[1]) if len(fed) == 2 else None


def _left_share(stretches: Sequence[Run], pair: tuple[int, int]) -> float:
    left, right = (stretches[index] for index in pair)
    return (left.stop_m - left.start_m) / (right.stop_m - left.start_m)


def _feed_moves(lines: Sequence[Skeleton], kinds: Sequence[VertexKind]) -> bool:
    """True if the feed takes places on one leg that no fixed counts on both sides would serve."""
    several = [runs(line, kinds, centred=False) for line in lines]
    pairs = {_fed_pair(stretches) for stretches in several}
    pair = pairs.pop()
    if pair is None or pairs:
        return False
    shares = [_left_share(stretches, pair) for stretches in several]
    return max(shares) - min(shares) > MOVING_SHARE


def split_counts(stretches: Sequence[Run], counts: Sequence[int]) -> tuple[int, ...]:
    """Share the segments of the fed leg out to both sides of a moving feed, by length.

    The source takes one segment more. The shorter side is rounded down rather than up, because the
    engine refuses segments that are too short and bears those that are a little long.
    """
    pair = _fed_pair(stretches)
    if pair is None:
        return tuple(counts)
    total = counts[pair[0]] + counts[pair[1]]
    share = _left_share(stretches, pair)
    short = int(np.floor(min(share, 1 - share) * (total + 1) - 0.5 + 0.35))
    short = min(max(short, 1), total - 1)
    found = list(counts)
    found[pair[0]], found[pair[1]] = (
        (short, total - short) if share <= 0.5 else (total - short, short)
    )
    return tuple(found)


def _counts(
    cases: Sequence[tuple[Antenna, Skeleton]],
    kinds: Sequence[VertexKind],
    centred: bool,
    moving: bool = False,
) -> tuple[int, ...]:
    """Segments of each run: the finest wish of any case, as far as the fattest case allows."""
    wishes, limits = [], []
    for antenna, line in cases:
        stretches = runs(line, kinds, centred=centred)
        lengths = np.array([run.stop_m - run.start_m for run in stretches])
        radius = equivalent_radius_m(line.width_m, antenna.metal.thickness_m)
        single = len(stretches) == 1 and not line.closed
        shortest = (SHORTEST_STRAIGHT_RADII if single else SHORTEST_RADII) * radius
        wavelength = light_speed / antenna.frequency.stop_hz
        target = max(shortest, TARGET_WIDTHS * line.width_m, TARGET_WAVELENGTHS * wavelength)
        # An off-centre source segment takes about half a segment from the run on either side.
        spare = np.array([0.5 if run.fed and not centred else 0.0 for run in stretches])
        pair = _fed_pair(stretches) if moving else None
        if pair is not None:
            # Both sides alike: their sum is what counts. The allowance is for uneven sharing.
            lengths[list(pair)] = lengths[list(pair)].mean()
            shortest, target = 1.15 * shortest, max(target, 1.15 * shortest)
        wishes.append(lengths / target - spare)
        limits.append(lengths / shortest - spare)
    # The small allowance keeps a count that is exact on paper from falling to the next lower one.
    wanted = np.minimum(np.max(wishes, axis=0), np.min(limits, axis=0)) + 1e-6
    counts = np.maximum(np.floor(wanted).astype(int), 1)
    if centred:
        fed = [run.fed for run in runs(cases[0][1], kinds, centred=True)]
        counts = np.array(
            [max(n - (n % 2 == 0), 3) if f else n for n, f in zip(counts, fed, strict=True)]
        )
    return tuple(int(n) for n in counts)
