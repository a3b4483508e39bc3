"""Rails, ties and segment counts of the grid model that serve every case of a study."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.constants import c as light_speed

from simkit.errors import GeometryError
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.dressing import dressing_of
from simkit.geometry.grid_layout import Cut, Interval, Widen, corner_kind, layout
from simkit.geometry.grid_model import is_straight, outer_detour_m
from simkit.geometry.line_rules import VertexKind
from simkit.geometry.mesh_plan import Case, ChainPlan, MeshPlan, feed_moves, left_share
from simkit.geometry.paths import turns
from simkit.geometry.rails import RailRule, rail_rule
from simkit.study.model import Antenna

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

TIE_WAVELENGTHS = 0.4

TIE_WAVELENGTHS_ON_CARRIER = 0.28

TIE_WAVELENGTHS_CURVED = 0.17
"""Rails are tied at least this often, at the top of the band, so that they cannot resonate against
each other in the band; a bare straight strip of one width does not excite that and goes without.
On a carrier the rails carry series inductance, which slows such waves, so that they fall between
the modes: of 42 straight strips on carriers without ties two showed one in a band to 6.5 half waves
and the sweeps took half as many samples again; with ties 0.35 wavelengths apart one had its sixth
mode 1.5 % off, with 0.28 none. A tie costs 0.01 to 0.02 % of frequency. On a curve the current
keeps moving over to the inner edge: with ties 0.4 wavelengths apart the third mode of a 6 mm strip
on a radius of 25 mm was 0.9 % low and its Q 4 % high, with 0.2 to 0.1 both are within 0.1 and
0.5 %."""


def grid_plan(cases: Sequence[Case], why: str) -> MeshPlan:
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
    return MeshPlan("grid", why, rails, False, tuple(chains), feed_moves(shares))


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
        any(interval.single for interval in intervals) or np.any(turns(line.points) > 1e-6)
        for _, line, _, intervals in cases
    )
    return [
        _grid_cut([(a, line, rule, rows[number]) for a, line, rule, rows in cases], plain=plain)
        for number in range(len(cases[0][3]))
    ]


def _grid_cut(
    cases: Sequence[tuple[Antenna, ChainLine, RailRule, Interval]], *, plain: bool
) -> Cut:
    """Segments and ties of one interval; a plain bare strip (straight, one width) needs no ties."""
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
        if plain and antenna.carrier is None:
            continue
        apart = TIE_WAVELENGTHS if antenna.carrier is None else TIE_WAVELENGTHS_ON_CARRIER
        if not is_straight(line, interval):
            apart = TIE_WAVELENGTHS_CURVED
        ties.append(int(interval.length_m / (apart * wavelength)))
    segments = max(min(round(max(wishes)), int(min(limits) + 1e-6)), 1)
    most = 0 if first.single else max(ties)
    return Cut(max(segments, most + 1), most)
