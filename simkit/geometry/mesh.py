"""One model kind and one mesh topology for a whole study.

Swept quantities then see lengths stretch; nothing jumps because a corner gained a figure or a run
gained a segment.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import asdict, dataclass, replace
from typing import Any, Literal

import numpy as np
from scipy.constants import c as light_speed

from simkit.errors import GeometryError
from simkit.geometry import line_rules
from simkit.geometry.cable import CableCut, cable_side, plan_cable
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.dressing import dressing_of
from simkit.geometry.grid_layout import Cut, Interval, Widen, corner_kind, layout
from simkit.geometry.grid_model import is_straight, outer_detour_m
from simkit.geometry.line_rules import Run, VertexKind, runs
from simkit.geometry.network import chains_of
from simkit.geometry.paths import leg_lengths, turns
from simkit.geometry.rails import RailRule, rail_rule
from simkit.study.model import Antenna, Carrier, ModelKind

Kind = Literal["line", "grid"]
Case = tuple[Antenna, tuple[ChainLine, ...]]

GRID_TARGET_WAVELENGTHS = {3: 1 / 36, 5: 1 / 28, 7: 1 / 28, 9: 1 / 24}
"""Length of segments aimed at, by the number of rails: more rails leave room for fewer along."""

GRID_TARGET_PLAIN = 1 / 28
"""Of three rails without corners or junctions: shorter segments have wide straight strips lower."""

GRID_TARGET_CURVED = 1 / 25
"""On curves: at 1/20 tight ones come out 0.3 % high, at 1/28 wide ones 0.3 % low."""

GRID_SINGLE_WAVELENGTHS = 1 / 6.5
"""Pieces inside corners and junctions are divided only from here up."""

GRID_SHORTEST_RADII = 2.1
GRID_SOURCE_WAVELENGTHS = 1 / 30

MOVING_SHARE = 0.1
"""A feed that divides its leg less unevenly than this over a study keeps its counts on both sides:
lengths then stretch, and nothing jumps."""

MOST_CARRIERS = 12
"""Different carriers a mesh is planned for."""

TIE_WAVELENGTHS = 0.4
TIE_WAVELENGTHS_ON_CARRIER = 0.28
TIE_WAVELENGTHS_CURVED = 0.17
"""Rails are tied at least this often, at the top of the band, so that they cannot resonate against
each other in the band; a bare straight strip of one width does not excite that and goes without.
On a carrier the rails carry series inductance, which slows such waves. On a curve the current keeps
moving over to the inner edge: with ties 0.4 wavelengths apart the third mode of a 6 mm strip on a
radius of 25 mm was 0.9 % low and its Q 4 % high, with 0.2 to 0.1 both are within 0.1 and 0.5 %."""


@dataclass(frozen=True)
class ChainPlan:
    """How one chain is cut: a kind for each inner vertex; segments and ties of each run."""

    vertices: tuple[VertexKind, ...]
    counts: tuple[int, ...]
    ties: tuple[int, ...] = ()


@dataclass(frozen=True)
class MeshPlan:
    """Model kind and mesh topology of a study.

    Attributes
    ----------
    kind : {"line", "grid"}
    why : str
        Why this kind, one sentence for the user.
    rails : int
        Wires side by side along each strip; 1 in the line model.
    centred : bool
        Line model: the feed sits in the middle of its run in every case, on the middle segment.
    chains : tuple of ChainPlan
        The fed one first.
    moving : bool
        The feed moves along its leg from case to case: the leg keeps its number of segments, which
        each case shares out to both sides of the feed (`split_counts`).
    cable : CableCut or None
        The feed cable, whose wires come last.
    """

    kind: Kind
    why: str
    rails: int
    centred: bool
    chains: tuple[ChainPlan, ...]
    moving: bool = False
    cable: CableCut | None = None

    def as_dict(self) -> dict[str, Any]:
        """Plain lists and text, fit for JSON."""
        found = asdict(self)
        if self.cable is None:
            del found["cable"]  # studies without a cable keep their keys
        return found


def plan_mesh(antennas: Iterable[Antenna]) -> MeshPlan:
    """Choose model kind, corners and segment counts that serve every case of a study.

    Parameters
    ----------
    antennas : iterable of Antenna
        At least one. Cases that cannot be laid out, or whose strips meet otherwise than in most,
        are passed over here and refused when they are built.

    Raises
    ------
    GeometryError
        No case can be laid out; the text is that of the first one.
    """
    cases = _laid_out(_with_few_carriers(list(antennas)))
    kind, why = _kind(cases)
    if kind == "line":
        return _line_plan(cases, why)
    return _grid_plan(cases, why)


def _with_few_carriers(antennas: Sequence[Antenna]) -> list[Antenna]:
    """The antennas with at most a handful of different carriers, for planning only.

    Each new cross-section costs as much as a whole case. Where a sweep has many, a carrier is
    replaced by the next heavier one (thickness times excess permittivity) of an even choice, which
    widens the wires at least as much.
    """
    carriers = {a.carrier for a in antennas if a.carrier is not None}
    if len(carriers) <= MOST_CARRIERS:
        return list(antennas)

    def weight(carrier: Carrier) -> float:
        return carrier.thickness_m * (carrier.relative_permittivity - 1) * carrier.infill

    ordered = sorted(carriers, key=weight)
    step = -(-len(ordered) // MOST_CARRIERS)
    stand_in = {
        carrier: ordered[min((k // step + 1) * step, len(ordered)) - 1]
        for k, carrier in enumerate(ordered)
    }
    return [a if a.carrier is None else replace(a, carrier=stand_in[a.carrier]) for a in antennas]


def _laid_out(antennas: Sequence[Antenna]) -> list[Case]:
    """Cases with their chains, those of the commonest way of meeting only."""
    found: dict[tuple[Any, ...], list[Case]] = {}
    error: GeometryError | None = None
    for antenna in antennas:
        if any(strip.width_m <= 0 for strip in antenna.strips):
            continue
        try:
            lines = chains_of(antenna, tips=False)
        except GeometryError as problem:
            error = error or problem
            continue
        found.setdefault(signature(lines), []).append((antenna, lines))
    if not found:
        raise error or GeometryError("the study has no case with strips of positive width")
    return max(found.values(), key=len)


def signature(lines: Sequence[ChainLine]) -> tuple[Any, ...]:
    """What must agree for two antennas to share a mesh: vertices, loops, feed and junctions."""
    return tuple(
        (
            len(line.points),
            line.closed,
            line.feed.vertex if line.feed else None,
            line.start,
            line.end,
            line.tees,
            line.start_on_plane,
            line.end_on_plane,
            line.fed_foot,
        )
        for line in lines
    )


def _kind(cases: Sequence[Case]) -> tuple[Kind, str]:
    wanted = {antenna.model for antenna, _ in cases}
    reasons = [line_rules.excuse(antenna, lines) for antenna, lines in cases]
    against = next((reason for reason in reasons if reason), "")
    if cases[0][0].cable is not None:
        return "line", _line_for_cable(wanted, against)
    if "grid" in wanted:
        return "grid", "the study asks for the grid model"
    if "line" in wanted:
        return "line", "the study asks for the line model"
    if against:
        return "grid", f"grid model, since {against}"
    return "line", "line model: every strip, corner and junction is within its limits"


def _line_for_cable(wanted: set[ModelKind], against: str) -> str:
    """Why the line model is taken for a study with a cable.

    Raises
    ------
    GeometryError
        Only the grid model would do.
    """
    takes = "which only the line model takes"
    if "grid" in wanted:
        raise GeometryError(
            f"the study asks for the grid model and has a [cable], {takes}: let [model] choose, or "
            "leave the cable out"
        )
    if against and "line" not in wanted:
        raise GeometryError(
            f"the study has a [cable], {takes}, but {against}: leave the cable out, change the "
            'strips, or accept a larger error with kind = "line" in [model]'
        )
    return f"line model: the study has a cable, {takes}"


# -- line model ------------------------------------------------------------------------------------


def _line_plan(cases: Sequence[Case], why: str) -> MeshPlan:
    side = "" if cases[0][0].cable is None else cable_side(cases[0][0], cases[0][1][0])
    kinds = [
        _line_vertices([lines[chain] for _, lines in cases], side if chain == 0 else "")
        for chain in range(len(cases[0][1]))
    ]
    cases = _with_room_for_the_feed(cases, kinds[0])
    centred = all(_is_centred(lines[0], kinds[0]) for _, lines in cases)
    shares = [_share(runs(lines[0], kinds[0], centred=False)) for _, lines in cases]
    moving = not centred and _feed_moves(shares)
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


def _share(stretches: Sequence[Run]) -> float | None:
    pair = fed_pair(stretches)
    return None if pair is None else left_share(stretches, pair)


def _feed_moves(shares: Sequence[float | None]) -> bool:
    """True if the feed takes places on one leg that no fixed counts on both sides would serve."""
    known = [share for share in shares if share is not None]
    return len(known) == len(shares) and max(known) - min(known) > MOVING_SHARE


def left_share(stretches: Sequence[Run] | Sequence[Interval], pair: tuple[int, int]) -> float:
    """Part of the fed leg that lies before the feed."""
    left, right = (stretches[index].length_m for index in pair)
    return left / (left + right)


def split_counts(counts: Sequence[int], pair: tuple[int, int], share: float) -> tuple[int, ...]:
    """Share the segments of the fed leg out to both sides of a moving feed, by length.

    Parameters
    ----------
    counts : sequence of int
        Segments of all runs.
    pair : (int, int)
        The runs before and after the feed.
    share : float
        Part of the leg before the feed.

    Notes
    -----
    The source takes one segment more. The shorter side is rounded down rather than up, because the
    engine refuses segments that are too short and bears those that are a little long.
    """
    total = counts[pair[0]] + counts[pair[1]]
    short = int(np.floor(min(share, 1 - share) * (total + 1) - 0.5 + 0.35))
    short = min(max(short, 1), total - 1)
    found = list(counts)
    split = (short, total - short) if share <= 0.5 else (total - short, short)
    found[pair[0]], found[pair[1]] = split
    return tuple(found)


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
    counts = _settled(wishes, limits)
    if centred:
        fed = [run.fed for run in runs(cases[0][2], kinds, centred=True)]
        counts = np.array(
            [max(n - (n % 2 == 0), 3) if f else n for n, f in zip(counts, fed, strict=True)]
        )
    return tuple(int(n) for n in counts)


def _settled(wishes: Sequence[Any], limits: Sequence[Any]) -> Any:
    # The small allowance keeps a count that is exact on paper from falling to the next lower one.
    wanted = np.minimum(np.max(wishes, axis=0), np.min(limits, axis=0)) + 1e-6
    return np.maximum(np.floor(wanted).astype(int), 1)


# -- grid model ------------------------------------------------------------------------------------


def _grid_plan(cases: Sequence[Case], why: str) -> MeshPlan:
    rules = [
        grid_rule(lines, None, dressing_of(antenna).effective_width_m) for antenna, lines in cases
    ]
    rails = max(rule.count for rule in rules)
    rules = [
        grid_rule(lines, rails, dressing_of(antenna).effective_width_m) for antenna, lines in cases
    ]
    corners = [
        _grid_corners([(antenna, lines[chain]) for antenna, lines in cases], rules)
        for chain in range(len(cases[0][1]))
    ]
    laid: list[list[tuple[Antenna, ChainLine, RailRule, list[Interval]]]] = [[] for _ in corners]
    error: GeometryError | None = None
    for antenna, lines in cases:
        widen = dressing_of(antenna).effective_width_m
        rule = grid_rule(lines, rails, widen)
        try:
            rows = [
                layout(lines, chain, rule, widen, source_m(antenna, rule), corners[chain])
                for chain in range(len(lines))
            ]
        except GeometryError as problem:
            error = error or problem
            continue
        for chain, row in enumerate(rows):
            laid[chain].append((antenna, lines[chain], rule, row))
    if not laid[0]:
        raise error or GeometryError("the study has no case that can be laid out as a grid")
    chains = []
    for chain, several in enumerate(laid):
        cuts = _grid_cuts(several)
        chains.append(
            ChainPlan(corners[chain], tuple(c.segments for c in cuts), tuple(c.ties for c in cuts))
        )
    shares = [
        None if pair is None else left_share(rows, pair)
        for _, _, _, rows in laid[0]
        for pair in [gap_pair(rows)]
    ]
    return MeshPlan("grid", why, rails, False, tuple(chains), _feed_moves(shares))


def gap_pair(intervals: Sequence[Interval]) -> tuple[int, int] | None:
    """The plain intervals on either side of the source of a straight feed, None without them."""
    for index, interval in enumerate(intervals):
        if interval.fed == 1.0:
            sides = (index - 1, index + 1)
            if sides[0] < 0 or sides[1] == len(intervals):
                return None  # at the foot of a strip on a plane
            return None if any(intervals[side].single for side in sides) else sides
    return None


def grid_rule(lines: Sequence[ChainLine], rails: int | None, widen: Widen) -> RailRule:
    """Rails for the widths of one case, with the number the study has settled on."""
    narrowest = widen(min(line.narrowest_m for line in lines))
    widest = widen(max(line.widest_m for line in lines))
    return rail_rule(narrowest, widest, rails)


def source_m(antenna: Antenna, rule: RailRule) -> float:
    """Length of the source segments of a straight feed in the grid model, metres."""
    wavelength = light_speed / antenna.frequency.stop_hz
    return float(max(2.2 * rule.radius_m, GRID_SOURCE_WAVELENGTHS * wavelength))


def _grid_corners(
    cases: Sequence[tuple[Antenna, ChainLine]], rules: Sequence[RailRule]
) -> tuple[VertexKind, ...]:
    """A block only where it serves all cases; metal across where any case has a corner."""
    kinds: list[VertexKind] = []
    for vertex in range(1, len(cases[0][1].points) - 1):
        wished = {
            corner_kind(line, vertex, rule, dressing_of(antenna).effective_width_m)
            for (antenna, line), rule in zip(cases, rules, strict=True)
        }
        kinds.append(wished.pop() if len(wished) == 1 else "node")
    return tuple(kinds)


def _grid_cuts(
    cases: Sequence[tuple[Antenna, ChainLine, RailRule, list[Interval]]],
) -> list[Cut]:
    plain = cases[0][2].constant and not any(
        antenna.carrier is not None
        or any(interval.single for interval in intervals)
        or np.any(turns(line.points) > 1e-6)
        for antenna, line, _, intervals in cases
    )
    return [
        _grid_cut([(a, line, rule, rows[number]) for a, line, rule, rows in cases], plain=plain)
        for number in range(len(cases[0][3]))
    ]


def _grid_cut(
    cases: Sequence[tuple[Antenna, ChainLine, RailRule, Interval]], *, plain: bool
) -> Cut:
    """Segments and ties of one interval; a plain strip (straight, one width) needs no ties."""
    first = cases[0][3]
    if first.fed or first.block >= 0:
        return Cut(1)
    wishes, limits, ties = [], [], [0]
    for antenna, line, rule, interval in cases:
        wavelength = light_speed / antenna.frequency.stop_hz
        share = GRID_TARGET_PLAIN if plain else GRID_TARGET_WAVELENGTHS[rule.count]
        if not is_straight(line, interval):
            share = GRID_TARGET_CURVED
        shortest = GRID_SHORTEST_RADII * rule.radius_m
        length = interval.length_m
        if interval.single:
            share = GRID_SINGLE_WAVELENGTHS
            length += outer_detour_m(line, interval, rule)
        wishes.append(length / max(share * wavelength, shortest))
        limits.append(interval.length_m / shortest)
        apart = TIE_WAVELENGTHS if antenna.carrier is None else TIE_WAVELENGTHS_ON_CARRIER
        if not is_straight(line, interval):
            apart = TIE_WAVELENGTHS_CURVED
        ties.append(int(interval.length_m / (apart * wavelength)))
    segments = max(min(round(max(wishes)), int(min(limits) + 1e-6)), 1)
    most = 0 if plain or first.single else max(ties)
    return Cut(max(segments, most + 1), most)
