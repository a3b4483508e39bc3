"""Rules and limits of the line model: one wire of equivalent radius on the centre line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Literal, Protocol

import numpy as np
from scipy.constants import c as light_speed

from simkit.errors import GeometryError
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.dressing import dressing_of
from simkit.geometry.network import STRAIGHT_FEED_RAD
from simkit.geometry.paths import leg_lengths, point_at, turn_angle, turns, unit
from simkit.geometry.strips import OPEN_END_WIDTHS
from simkit.geometry.wires import FloatArray
from simkit.study.model import Antenna

VertexKind = Literal["smooth", "node", "figure", "feed", "tee", "cable-before", "cable-after"]

FIGURE_FROM_RAD = np.deg2rad(50.0)
"""Corners from here up are modelled by a chamfer and a whisker, gentler ones by nothing."""

APEX_FIGURE_FROM_RAD = np.deg2rad(20.0)
"""A fed corner gets its figure earlier: the source then sits on the chamfer, half on each of its
two segments. On the legs beside a plain bend the power balance is off by 1 % at 30 degrees, 3 % at
60, 7 % at 90; on the chamfer it stays within 2 %. The figure agrees with the plain bend to 0.02 %
in frequency at 20 degrees, so nothing jumps where one takes over from the other."""

FIGURE_UP_TO_RAD = np.deg2rad(120.01)
"""Fold-backs beyond 120 degrees are outside the rules; the rest is for rounded path points."""

NODE_FROM_RAD = np.deg2rad(5.0)
"""A bend from here up, between legs of some segments, gets a node of its own."""

SHORTEST_RADII = 2.12
"""The engine refuses wires of one segment, and meeting wires, of segments under two radii; the rest
is room for runs that give part of their length to the source segment."""

UNEVEN_RUNS = 1.4
"""Segments of a short run may come out longer than the shortest by this, for they must be equal."""

SHORTEST_STRAIGHT_RADII = 1.31
"""Inside one straight wire shorter segments pass; a narrow case of a sweep may then ask for more
segments than a wide one would choose. Mode frequencies move by 0.06 % over 1.31 to 1.8 radii."""

TARGET_WIDTHS = 0.4
TARGET_WAVELENGTHS = 1 / 40

CABLED_WAVELENGTHS = 1 / 80
"""Beside a cable, which is joined to the strip a segment away from the middle of the feed: on
narrow strips it would else lie several widths away from the end it is soldered to."""

LONGEST_WAVELENGTHS = 1 / 18
"""Longer segments make a case doubtful. Against flat metal, mode frequencies of a strip of 1/100 of
its length are off by 0.07 % with segments of 1/23 wavelength, 0.10 % at 1/20, 0.13 % at 1/17; wider
strips err less."""

FINE_WAVELENGTHS = 1 / 21
"""Up to here the length of the segments adds nothing to the stated error."""

WIDEST = 0.2
"""Width over length up to which the line model of straight strips is checked."""

SHORTEST_LEG_WIDTHS = 2.5
"""Legs at sharp corners shorter than this are the grid model's."""

MOST_CURVED = 0.1
"""Width over radius of a curve up to which the line model holds: the current moves over to the
inner edge, which the wire does not know. At 0.12 modes are 0.23 to 0.37 % high and Q 2.6 %, at 0.24
0.7 and 5 %; the grid model has both within 0.2 and 1 %."""

WIDEST_CORNER_WAVELENGTHS = 0.1
"""Width up to which the figure of a sharp corner holds. A 12 mm strip with legs of 100 and 50 mm,
0.12 wavelengths wide at its third mode, has that mode 0.4 % low and its Q 5 % high."""

TEE_HOST_WIDTHS = 0.5
TEE_BRANCH_WIDTHS = 0.9
TEE_FAR_WIDTHS = 0.25
"""Figure of a T: nodes this far along the host, up the branch and out on the far side."""

TEE_ANGLE_RAD = np.deg2rad(3.0)
"""The figure of a T holds for branches square to the host, to within this."""


@dataclass(frozen=True)
class Run:
    """A stretch of a chain, between arc lengths, that is cut into equal pieces."""

    start_m: float
    stop_m: float
    fed: bool = False

    @property
    def length_m(self) -> float:
        """Along the centre line."""
        return self.stop_m - self.start_m


def excuse(antenna: Antenna, lines: Sequence[ChainLine]) -> str:
    """Why the line model does not hold for an antenna; empty if it does."""
    widest = max(line.widest_m for line in lines)
    narrowest = min(line.narrowest_m for line in lines)
    if widest > narrowest * (1 + 1e-6):
        return (
            f"widths run from {narrowest * 1e3:.4g} to {widest * 1e3:.4g} mm and the line model "
            "holds for one width"
        )
    for line in lines:
        if line.widest_m > WIDEST * line.length_m and line.start is None and line.end is None:
            return (
                f"a strip is {line.widest_m / line.length_m:.2f} of its length wide and the line "
                f"model holds up to {WIDEST}"
            )
        for problem in (
            _corner_excuse(line),
            _wide_corner_excuse(antenna, line),
            _curve_excuse(line),
            _tee_excuse(lines, line),
        ):
            if problem:
                return problem
    return _segment_excuse(antenna, lines)


def _segment_excuse(antenna: Antenna, lines: Sequence[ChainLine]) -> str:
    """Wide strips at high frequencies: segments that must be long for the width are too long."""
    line = lines[0]
    straight = len(lines) == 1 and not line.closed and not np.any(turns(line.points) > 1e-6)
    feed = line.feed
    straight = straight and antenna.cable is None  # which divides the wire
    if straight and feed and abs(line.arcs_m[feed.vertex] - line.length_m / 2) < 1e-6:
        return ""  # one wire, whose segments may be shorter
    needed = UNEVEN_RUNS * SHORTEST_RADII * dressing_of(antenna).radius_m(line.widest_m)
    wavelength = light_speed / antenna.frequency.stop_hz
    if needed < wavelength / 10:
        return ""
    return (
        f"a width of {line.widest_m * 1e3:.4g} mm asks for segments of up to {needed * 1e3:.3g} mm "
        "beside corners and an off-centre feed and the line model needs a tenth of the wavelength "
        f"({wavelength * 1e2:.3g} mm)"
    )


def _place(point: FloatArray) -> str:
    return f"({point[0] * 1e3:.4g}, {point[1] * 1e3:.4g}) mm"


def _corner_excuse(line: ChainLine) -> str:
    for vertex, turn in enumerate(turns(line.points), start=1):
        if turn < FIGURE_FROM_RAD - 1e-9:
            continue
        where = f"the corner at {_place(line.points[vertex])}"
        shortest = min(_straight_run(line, vertex, -1), _straight_run(line, vertex, 1))
        if shortest < SHORTEST_LEG_WIDTHS * line.widest_m:
            return (
                f"{where} has a leg of {shortest / line.widest_m:.2g} widths and the line model "
                f"needs {SHORTEST_LEG_WIDTHS}"
            )
        if turn > FIGURE_UP_TO_RAD:
            return (
                f"{where} turns by {np.rad2deg(turn):.0f} degrees and the line model holds to 120"
            )
    return ""


def _wide_corner_excuse(antenna: Antenna, line: ChainLine) -> str:
    """Sharp corners of strips that are wide in wavelengths."""
    wavelength = light_speed / antenna.frequency.stop_hz
    if line.widest_m < WIDEST_CORNER_WAVELENGTHS * wavelength:
        return ""
    for vertex, turn in enumerate(turns(line.points), start=1):
        if turn >= FIGURE_FROM_RAD - 1e-9:
            return (
                f"the corner at {_place(line.points[vertex])} is of a strip "
                f"{line.widest_m / wavelength:.2f} wavelengths wide at the top of the band and the "
                f"line model holds up to {WIDEST_CORNER_WAVELENGTHS}"
            )
    return ""


def _curve_excuse(line: ChainLine) -> str:
    """Curves drawn as many short legs: the mean curvature over three widths of path."""
    legs, bends, arcs = leg_lengths(line.points), turns(line.points), line.arcs_m[1:-1]
    window = 3 * line.widest_m
    for vertex, turn in enumerate(bends, start=1):
        short = max(legs[vertex - 1], legs[vertex]) < 1.5 * line.widest_m
        if not short or not 1e-6 < turn < FIGURE_FROM_RAD:
            continue
        curvature = float(bends[abs(arcs - arcs[vertex - 1]) < window / 2].sum()) / window
        if line.widest_m * curvature > MOST_CURVED:
            return (
                f"the curve at {_place(line.points[vertex])} has a radius of "
                f"{1 / (curvature * line.widest_m):.2g} widths and the line model needs "
                f"{1 / MOST_CURVED:.0f}"
            )
    return ""


def _straight_run(line: ChainLine, vertex: int, way: int) -> float:
    """Length from a vertex to the next bend, feed and seam aside, in one direction."""
    legs, bends = leg_lengths(line.points), turns(line.points)
    total, at, last = 0.0, vertex, len(line.points) - 1
    while total < line.length_m:
        total += float(legs[at - 1] if way < 0 else legs[at])
        at += way
        if line.closed and at in (0, last):
            at = last - at  # a loop begins within a leg
        elif at in (0, last) or bends[at - 1] > NODE_FROM_RAD:
            break
    return total


def _tee_excuse(lines: Sequence[ChainLine], line: ChainLine) -> str:
    for vertex, branch in line.tees:
        other = lines[branch]
        at_start = other.start is not None and lines[other.start.chain] is line
        outwards = (
            other.points[1] - other.points[0] if at_start else other.points[-2] - other.points[-1]
        )
        if not 0 < vertex < len(line.points) - 1:
            return f"a strip ends at the seam of a loop at {_place(line.points[vertex])}"
        along = line.points[vertex + 1] - line.points[vertex]
        off = abs(turn_angle(unit(along), unit(outwards)) - np.pi / 2)
        if off > TEE_ANGLE_RAD:
            return (
                f"the strips at {_place(line.points[vertex])} meet at "
                f"{90 - np.rad2deg(off):.0f} degrees and the line model holds for a right angle"
            )
        if other.length_m < 2 * other.widest_m:
            return f"the branch at {_place(line.points[vertex])} is shorter than two widths"
    return ""


def vertex_kind(
    turn_rad: float, *, fed: bool, roomy: bool, cable: Literal["", "before", "after"] = ""
) -> VertexKind:
    """How a vertex is modelled, from the sharpest turn it makes in a study.

    Parameters
    ----------
    turn_rad : float
    fed, roomy : bool
        The feed is here; the legs beside it are of some segments.
    cable : str
        On which side of the feed a cable is joined to it, if one is.

    Notes
    -----
    Beside a cable the source is spread over the two segments that follow the end the cable is
    joined to, on the other side. On a single one, at whose end the cable takes its part of the
    current, the power at the source is up to 7 % off that radiated. The place of the source matters
    little, that of the cable much: a few millimetres let symmetric modes drive it.
    """
    if fed:
        if turn_rad < STRAIGHT_FEED_RAD:
            return "cable-before" if cable == "before" else "cable-after" if cable else "feed"
        return "figure" if turn_rad >= APEX_FIGURE_FROM_RAD else "node"
    if turn_rad >= FIGURE_FROM_RAD:
        return "figure"
    return "node" if roomy and turn_rad >= NODE_FROM_RAD else "smooth"


def cable_arc_m(line: ChainLine, kind: VertexKind) -> float:
    """Where along the fed chain the cable is joined to a straight feed: at an edge of the gap."""
    feed = line.feed
    assert feed is not None  # only asked for the fed chain
    half = feed.gap_m / 2
    return float(line.arcs_m[feed.vertex]) + (-half if kind == "cable-before" else half)


def corner_offset_m(turn_rad: float, width_m: float) -> float:
    """Half diagonal h of a mitred corner: from the vertex to the outer tip, metres."""
    return float(width_m / (2 * np.cos(turn_rad / 2)))


def chamfer_m(turn_rad: float, width_m: float) -> float:
    """How much of each leg the chamfer of a corner figure takes, metres."""
    return 1.12 * corner_offset_m(turn_rad, width_m)


def whisker_m(turn_rad: float, width_m: float) -> float:
    """Length of the whisker of a corner figure, metres."""
    return max(2.6 * corner_offset_m(turn_rad, width_m) - 0.89 * width_m, 0.52 * width_m)


def segment_limits_m(
    antenna: Antenna, lines: Sequence[ChainLine], stretches: Sequence[Run]
) -> tuple[float, float]:
    """Shortest segment allowed and segment aimed at, metres."""
    width = lines[0].widest_m
    radius = dressing_of(antenna).radius_m(width)
    alone = len(stretches) == 1 and not any(line.closed or line.start or line.end for line in lines)
    alone = alone and antenna.cable is None
    shortest = (SHORTEST_STRAIGHT_RADII if alone else SHORTEST_RADII) * radius
    wavelength = light_speed / antenna.frequency.stop_hz
    share = TARGET_WAVELENGTHS if antenna.cable is None else CABLED_WAVELENGTHS
    return shortest, max(shortest, TARGET_WIDTHS * width, share * wavelength)


def runs(line: ChainLine, kinds: Sequence[VertexKind], *, centred: bool) -> tuple[Run, ...]:
    """Cut a chain at its corners, junctions and an off-centre feed into runs.

    An off-centre feed inside a straight leg splits its run in two that meet at the feed point; the
    source segment is taken out of both when the wires are built. A feed between a strip's foot and
    the plane it stands on splits nothing: it is the first segment of its run.

    Raises
    ------
    GeometryError
        A feed inside a leg lies in no run, but within a corner or beyond the wire's end.
    """
    arcs, bends, width = line.arcs_m, turns(line.points), line.widest_m
    first = _end_edge(line, line.start is not None, line.start_tip_m)
    last = _end_edge(line, line.end is not None, line.end_tip_m)
    # Metal that stands on a plane goes on into its image.
    first, last = first * (not line.start_on_plane), last * (not line.end_on_plane)
    edges: list[tuple[float, float]] = [(first, first)]
    feed_arc = None
    for vertex, kind in enumerate(kinds, start=1):
        at = float(arcs[vertex])
        if kind == "node":
            edges.append((at, at))
        elif kind in ("cable-before", "cable-after"):
            edges.append((cable_arc_m(line, kind),) * 2)
        elif kind == "tee":
            edges.append((at - TEE_HOST_WIDTHS * width, at + TEE_HOST_WIDTHS * width))
        elif kind == "figure":
            cut = chamfer_m(min(bends[vertex - 1], FIGURE_UP_TO_RAD), width)
            edges.append((at - cut, at + cut))
        elif kind == "feed" and line.fed_foot is None:
            feed_arc = at
    edges.append((float(arcs[-1]) - last, float(arcs[-1]) - last))
    found = []
    for (_, start), (stop, _) in pairwise(edges):
        inside = feed_arc is not None and start < feed_arc < stop
        if inside and not centred:
            assert feed_arc is not None
            found += [Run(start, feed_arc, fed=True), Run(feed_arc, stop, fed=True)]
        else:
            found.append(Run(start, stop, fed=inside))
    if feed_arc is not None and not any(run.fed for run in found):
        raise GeometryError(
            f"feed: the source at {_place(point_at(line.points, feed_arc))} sits in a corner, in a "
            f"junction or at the very end of a strip {line.widest_m * 1e3:.4g} mm wide, where it "
            "cannot be modelled; move it about a width away, or put it exactly on the corner of an "
            "open path"
        )
    return tuple(found)


def _end_edge(line: ChainLine, joined: bool, tip_m: float) -> float:
    """How far from the end of a chain its first run begins."""
    if line.closed:
        return 0.0
    if joined:
        return TEE_BRANCH_WIDTHS * line.widest_m
    return OPEN_END_WIDTHS * line.widest_m + tip_m


def doubts(
    antenna: Antenna, lines: Sequence[ChainLine], chains: Sequence[ChainCut], longest_m: float
) -> tuple[str, ...]:
    """Limits of the line model that an antenna exceeds, one sentence each."""
    found = []
    reason = excuse(antenna, lines)
    if reason:
        found.append(f"{reason}: mode frequencies may be off by 1.3 % and Q by 12 %")
    for line, chain in zip(lines, chains, strict=True):
        found += _figure_doubts(line, chain.vertices)
    wavelength = light_speed / antenna.frequency.stop_hz
    # A wide strip's segments may not be shorter than its width allows; the error is then the
    # width's own.
    if longest_m > LONGEST_WAVELENGTHS * wavelength and longest_m > 0.8 * lines[0].widest_m:
        found.append(
            f"segments of {longest_m * 1e3:.3g} mm are longer than 1/18 of the wavelength "
            f"({wavelength * LONGEST_WAVELENGTHS * 1e3:.3g} mm) at the top of the band: mode "
            "frequencies may be off by more than 0.13 %; lower frequency.stop or split the sweep"
        )
    return tuple(found)


class ChainCut(Protocol):
    """What of a chain's plan the rules look at."""

    @property
    def vertices(self) -> tuple[VertexKind, ...]:
        """Kind of each inner vertex."""


def _figure_doubts(line: ChainLine, kinds: Sequence[VertexKind]) -> list[str]:
    found = []
    for vertex, (kind, turn) in enumerate(zip(kinds, turns(line.points), strict=True), start=1):
        apex = line.feed is not None and line.feed.vertex == vertex
        if kind == "figure" and not apex and turn < FIGURE_FROM_RAD - 1e-9:
            found.append(
                f"the corner at {_place(line.points[vertex])} turns by {np.rad2deg(turn):.0f} "
                "degrees here and by 50 or more in other cases, so it keeps the figure of a sharp "
                "corner: mode frequencies may be off by 0.4 %"
            )
    return found


def relative_error(
    antenna: Antenna, lines: Sequence[ChainLine], chains: Sequence[ChainCut], longest_m: float
) -> float:
    """Standard error of mode frequencies, from the evidence behind the rules."""
    ratio = max(line.widest_m / line.length_m for line in lines)
    error = 0.0005 if ratio <= 0.08 else 0.001 if ratio <= 0.13 else 0.002
    if longest_m > FINE_WAVELENGTHS * light_speed / antenna.frequency.stop_hz:
        error = max(error, 0.0012)
    kinds = {kind for chain in chains for kind in chain.vertices}
    if kinds & {"figure", "tee"} or any(line.closed for line in lines):
        return max(error, 0.002)
    bent = any(np.any(turns(line.points) > 1e-3) for line in lines)
    return max(error, 0.0015) if bent else error
