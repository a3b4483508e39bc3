"""The feed cable: the outside of its outer conductor as one more run of wire in space.

A cable without a balun joins one terminal of the antenna to a conductor the study would else not
know: the outside of the braid. It carries whatever current the voltage of that terminal drives
along it. The cable begins at the outer end of the source segment on its side and has the radius of
all other wires, because the engine errs by per cents where radii meet.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Literal

import numpy as np
import shapely
from scipy.constants import c as light_speed

from simkit.errors import GeometryError
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.outlines import outline
from simkit.geometry.placement import stands_on_plane
from simkit.geometry.wires import Chain, FloatArray, Wire
from simkit.study.model import Antenna, Cable, EndFeed, Vector

SEGMENT_WAVELENGTHS = 1 / 25
"""Length of the cable's segments aimed at, at the top of the band."""

LIMIT_WAVELENGTHS = 1 / 10.8
"""Of a coarser mesh; rounded up they must keep below a tenth."""

STOUT_RADII = 4.0
LONGEST_WAVELENGTHS = 1 / 11
"""Segments of thick wires are longer, as far as the wavelength allows: where such wires bend or
lean, power balances to 3 % with segments of four radii and to 4.5 % with two or three."""

SHORTEST_RADII = 2.12
"""As for strips: the engine refuses meeting wires with segments under two radii."""

EQUAL_SEGMENTS = 2
"""So many segments of the cable are as long as those at the feed before they grow."""

FARTHEST_LOG = float(np.log(2.0))
"""A braid twice as thick as the model's wire, or half, makes a case doubtful."""

LEAVES_WIDTHS = 1.0
NEAR_WIDTHS = 2.5
"""So many widths (of the strip or the braid) along the cable it has left the strip it is joined to,
and must be clear of it."""

MOST_PLACES = 20_000
"""At so many places a cable is held against the strips."""

JOINT_ERROR = 0.005
"""Standard error of mode frequencies that joining a cable adds. Against flat metal with a branch of
one width with the strip, at right angles beside the feed, modes of a 6 mm strip of 150 mm were off
by 0.47 % (root mean square, 0.7 at most), of a 1.5 mm one by 0.08 %."""

ON_CABLE = -2
"""Strip index of the cable's segments."""


@dataclass(frozen=True)
class CableCut:
    """How the cable is cut in a study.

    Attributes
    ----------
    most : int
        Most segments in any case. A cable is so much longer in one case than in another that no
        fixed number would serve: each case takes what its own legs ask for.
    fineness : float
        Over 1 for more segments.
    """

    most: int
    fineness: float = 1.0


def plan_cable(antennas: Sequence[Antenna], radii_m: Sequence[float]) -> CableCut | None:
    """Segments of the cable that serve every case of a study; None without a cable.

    Parameters
    ----------
    antennas : sequence of Antenna
    radii_m : sequence of float
        Radius of the wires of each.
    """
    most = 0
    for antenna, radius in zip(antennas, radii_m, strict=True):
        if antenna.cable is None:
            return None
        # The shortest source that the radius allows leads to the most segments.
        target = _target_m(antenna, radius, 1.0)
        cuts = _cuts(antenna.cable.legs_m, SHORTEST_RADII * radius, target)
        most = max(most, sum(count for leg in cuts for _, count in leg))
    return CableCut(most)


def _target_m(antenna: Antenna, radius_m: float, fineness: float) -> float:
    wavelength = light_speed / antenna.frequency.stop_hz
    stout = min(STOUT_RADII * radius_m, LONGEST_WAVELENGTHS * wavelength)
    target = max(SEGMENT_WAVELENGTHS * wavelength, stout) / fineness
    target = min(target, LIMIT_WAVELENGTHS * wavelength)
    return float(max(target, SHORTEST_RADII * radius_m))


def _cuts(
    legs_m: Sequence[float], beside_m: float, target_m: float
) -> list[list[tuple[float, int]]]:
    """Pieces of each leg: part of the leg and segments.

    The first segments are as long as those of the strip at the feed, then twice as long and so on:
    beside segments four times as short the power at the source comes out 7 % off that radiated.
    """
    found = []
    for number, length in enumerate(legs_m):
        pieces: list[tuple[float, int]] = []
        at, step, count = 0.0, beside_m, EQUAL_SEGMENTS
        while number == 0 and 1.5 * step < target_m and at + count * step + target_m < length:
            pieces.append((count * step, count))
            at += count * step
            step, count = 2 * step, 1
        pieces.append((length - at, max(int(np.ceil((length - at) / target_m - 0.05)), 1)))
        found.append([(part / length, count) for part, count in pieces])
    return found


# -- wires -----------------------------------------------------------------------------------------


def joined_cable(
    antenna: Antenna,
    line: ChainLine,
    wires: Sequence[Wire],
    source: Sequence[tuple[int, float]],
    cut: CableCut,
    radius_m: float,
) -> tuple[list[Wire], Chain]:
    """The wires of the antenna with those of its cable behind them, and the cable's chain.

    Parameters
    ----------
    antenna : Antenna
        With a cable.
    line : ChainLine
        The fed chain.
    wires : sequence of Wire
        Of all strips, along which the segments' numbers do not change.
    source : sequence of (int, float)
        In the order of the fed chain, whose wires run along it.
    cut : CableCut
    radius_m : float
        Of all wires.

    Raises
    ------
    GeometryError
        The feed has no end for a cable, or a leg is too short.

    Notes
    -----
    At a straight feed the cable begins at the end it is joined to. At a corner it begins where the
    figure of the corner ends, and is moved there as it is, but for an end on a ground plane.
    """
    cable = antenna.cable
    assert cable is not None  # only called for antennas with one
    side = cable_side(antenna, line)
    segment = source[0][0] if side == "before" else source[-1][0]
    joined, start = _with_node(wires, segment, at_end=side == "after")
    moved = np.array(cable.points_m) + np.subtract(start, cable.points_m[0])
    if stands_on_plane(cable.points_m[-1], antenna):
        moved[-1] = cable.points_m[-1]
    moved[0] = start
    legs = np.linalg.norm(np.diff(moved, axis=0), axis=1)
    _check_legs(legs, radius_m)
    beside = np.linalg.norm(np.subtract(*_ends_of(joined, segment)))
    target = _target_m(antenna, radius_m, cut.fineness)
    made = _legs(moved, _cuts(legs, float(beside), target))
    first = sum(wire.segments for wire in joined)
    if sum(wire.segments for wire in made) > cut.most:
        raise GeometryError(
            f"cable: it takes more than the {cut.most} segments planned for this study; sweep its "
            "length by a value of its own, or split the study"
        )
    return [*joined, *made], _chain(antenna, made, first)


def _ends_of(wires: Sequence[Wire], segment: int) -> tuple[FloatArray, FloatArray]:
    first = 0
    for wire in wires:
        if segment < first + wire.segments:
            nodes = np.linspace(wire.start_m, wire.end_m, wire.segments + 1)
            return nodes[segment - first], nodes[segment - first + 1]
        first += wire.segments
    raise AssertionError("the source lies on no wire")


def _legs(points: FloatArray, cuts: Sequence[Sequence[tuple[float, int]]]) -> list[Wire]:
    """Wires from point to point; ends that meet are the same numbers."""
    made = []
    for (start, stop), pieces in zip(pairwise(points), cuts, strict=True):
        parts = np.cumsum([0.0, *(part for part, _ in pieces)])
        nodes = [tuple(float(x) for x in start + part * (stop - start)) for part in parts[:-1]]
        nodes.append(tuple(float(x) for x in stop))
        made += [Wire(a, b, n) for (a, b), (_, n) in zip(pairwise(nodes), pieces, strict=True)]  # type: ignore[arg-type]
    return made


def cable_side(antenna: Antenna, line: ChainLine) -> Literal["before", "after"]:
    """On which side of the feed, along the fed chain, the cable is joined to it.

    Raises
    ------
    GeometryError
        One side of the feed is a ground plane.
    """
    cable = antenna.cable
    assert cable is not None  # as above
    if line.fed_foot is not None:
        raise GeometryError(
            "cable: the feed lies between the foot of a strip and the ground plane, so the braid "
            "is joined to the plane and nothing is driven along it: leave [cable] out"
        )
    names = [strip.name for strip in antenna.strips]
    span = next(s for s in line.spans if s.strip == names.index(cable.strip))
    forward = span.end_m > span.start_m
    # A strip fed at its start runs away from the feed; a cut has its start behind it.
    after = (cable.end == "start") == forward
    if not isinstance(antenna.feed, EndFeed):
        after = not after
    return "after" if after else "before"


def _with_node(wires: Sequence[Wire], segment: int, *, at_end: bool) -> tuple[list[Wire], Vector]:
    """Wires divided so that one ends at the start or end of a segment, and that place."""
    first = 0
    for index, wire in enumerate(wires):
        node = segment - first + at_end
        first += wire.segments
        if segment >= first:
            continue
        if node in (0, wire.segments):
            return list(wires), wire.start_m if node == 0 else wire.end_m
        part = np.linspace(wire.start_m, wire.end_m, wire.segments + 1)[node]
        place = (float(part[0]), float(part[1]), float(part[2]))
        halves = [Wire(wire.start_m, place, node), Wire(place, wire.end_m, wire.segments - node)]
        return [*wires[:index], *halves, *wires[index + 1 :]], place
    raise AssertionError("the source lies on no wire")


def _check_legs(legs_m: FloatArray, radius_m: float) -> None:
    for number, length in enumerate(legs_m, start=1):
        if length < SHORTEST_RADII * radius_m:
            raise GeometryError(
                f"cable: its leg {number} is {length * 1e3:.4g} mm long; the model's wires have a "
                f"radius of {radius_m * 1e3:.4g} mm, that of the strips, and need "
                f"{SHORTEST_RADII * radius_m * 1e3:.3g} mm: lengthen it or leave it out"
            )


def _chain(antenna: Antenna, wires: Sequence[Wire], first: int) -> Chain:
    cable = antenna.cable
    assert cable is not None  # as above
    lengths = np.concatenate([np.full(wire.segments, wire.segment_m) for wire in wires])
    ends = np.cumsum(lengths)
    return Chain(
        segments=np.arange(first, first + len(lengths)),
        signs=np.ones(len(lengths), dtype=int),
        arc_m=ends - lengths / 2,
        length_m=float(ends[-1]),
        closed=False,
        spans=(),
        open_start=False,
        open_end=not stands_on_plane(cable.points_m[-1], antenna),
    )


# -- limits ----------------------------------------------------------------------------------------


def check_cable(antenna: Antenna) -> tuple[str, ...]:
    """Refuse a cable that runs into the metal; doubts where it passes closely by.

    Raises
    ------
    GeometryError
        Naming the strip and the place in millimetres.
    """
    cable = antenna.cable
    if cable is None:
        return ()
    places, along = _sampled(cable, min(min(strip.widths) for strip in antenna.strips) / 4)
    doubts = []
    for strip in antenna.strips:
        width = strip.width_m
        away = shapely.distance(outline(strip), shapely.points(places[:, :2]))
        away = np.hypot(away, places[:, 2])
        size = max(width, cable.diameter_m)
        touch = (away <= cable.diameter_m / 2) & (along > LEAVES_WIDTHS * size)
        near = (away < width) & (along > NEAR_WIDTHS * size)
        if touch.any():
            raise GeometryError(
                f"cable: it runs into strip {strip.name!r} at {_mm(places[np.argmax(touch)])}; "
                "lead it away from the metal"
            )
        if near.any():
            at = int(np.argmin(np.where(near, away, np.inf)))
            doubts.append(
                f"the cable comes within {away[at] * 1e3:.4g} mm of strip {strip.name!r} at "
                f"{_mm(places[at])}, less than its width ({width * 1e3:.4g} mm): the models do not "
                "see how the current crowds towards a neighbour, so mode frequencies may be off by "
                "1 %"
            )
    return tuple(doubts)


def _sampled(cable: Cable, step_m: float) -> tuple[FloatArray, FloatArray]:
    """Places along the cable and their distance along it from its start."""
    points = np.array(cable.points_m)
    arcs = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(points, axis=0), axis=1))])
    count = int(min(np.ceil(arcs[-1] / step_m), MOST_PLACES)) + 1
    along = np.union1d(np.linspace(0.0, arcs[-1], count), arcs)
    return np.stack([np.interp(along, arcs, points[:, k]) for k in range(3)], axis=1), along


def _mm(point: FloatArray) -> str:
    return "(" + ", ".join(f"{round(value * 1e3, 6) + 0.0:.4g}" for value in point) + ") mm"


def thickness_log(cable: Cable, radius_m: float) -> float:
    """Logarithm of the model's wire radius over that of the braid."""
    return float(np.log(2 * radius_m / cable.diameter_m))


def level_error(cable: Cable, radius_m: float) -> float:
    """Relative error of the cable's characteristic impedance by the model's radius.

    Notes
    -----
    A wire of radius a and length l has about 60 ohm [ln(2 l/a) - 1] (its mean potential per charge;
    Schelkunoff's average characteristic impedance, from memory, differs by a constant). Inductance
    and capacitance go with the logarithm alike, so the wave on it keeps its speed whatever the
    radius. A series inductance, which is all that the engine can add to a wire, would set right the
    one without the other and make the wave slow; so none is added and the error is stated.
    """
    length = max(cable.length_m, 2 * cable.diameter_m)
    return float(thickness_log(cable, radius_m) / (np.log(4 * length / cable.diameter_m) - 1))


def thickness_doubts(cable: Cable, radius_m: float) -> tuple[str, ...]:
    """What to say of a braid much thicker or thinner than the wires of the model."""
    if abs(thickness_log(cable, radius_m)) <= FARTHEST_LOG:
        return ()
    return (
        f"the braid of the cable is {cable.diameter_m * 1e3:.3g} mm thick and the model's wire, "
        f"that of the strips, {2 * radius_m * 1e3:.3g} mm: currents on the cable may be off by "
        f"{100 * abs(level_error(cable, radius_m)):.0f} %",
    )
