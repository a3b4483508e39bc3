"""Where a mode's current is largest and where it vanishes: places for feeds and supports."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from simkit.geometry.wires import FloatArray
from simkit.response.modes import QUIET, turned_to_real
from simkit.response.rational import ComplexArray
from simkit.response.strip_route import Route, routes_of
from simkit.study.model import Antenna, Strip

if TYPE_CHECKING:
    import xarray as xr

Kind = Literal["maximum", "node"]


@dataclass(frozen=True)
class Extremum:
    """A maximum or a node at a distance along a line; `size` is the current's magnitude there."""

    kind: Kind
    distance_m: float
    size: float


@dataclass(frozen=True)
class Place:
    """A maximum or node of a mode's current on the antenna.

    Attributes
    ----------
    kind : {"maximum", "node"}
    route : int
        0 for the tip-to-tip path, then branches, as `routes_of` numbers them.
    distance_m : float
        Along the route.
    strip : int
        -1 in a gap between strips, as in that of the feed.
    along_m : float
        From the start of the strip along its path; NaN in a gap.
    x_m, y_m : float
        In the plane in which the strips are drawn, before any placement.
    size : float
        Magnitude over that of the mode's largest current.
    """

    kind: Kind
    route: int
    distance_m: float
    strip: int
    along_m: float
    x_m: float
    y_m: float
    size: float

    def as_dict(self, strips: Sequence[Strip]) -> dict[str, Any]:
        """Plain values under the names of the JSON output; strip and place are None in a gap."""
        inside = self.strip >= 0
        return {
            "kind": self.kind,
            "strip": strips[self.strip].name if inside else None,
            "along_m": self.along_m if inside else None,
            "x_m": self.x_m,
            "y_m": self.y_m,
            "relative_current": self.size,
        }


def find_extrema(
    distance_m: FloatArray,
    current: ComplexArray,
    *,
    period_m: float | None = None,
    largest: float | None = None,
) -> tuple[Extremum, ...]:
    """Maxima and nodes of a mode current along a line.

    Parameters
    ----------
    distance_m : (K,) float array
        Not falling.
    current : (K,) complex array
        Positive in one direction throughout; its common phase does not matter.
    period_m : float, optional
        Length of a closed line.
    largest : float, optional
        Magnitude to which "quiet" refers; the largest of the line if left out.

    Returns
    -------
    tuple of Extremum
        In order of distance. Each half wave has one maximum; a node lies where the phase reverses
        between two of them. Ends of the line are no nodes, though the current ends there too.

    Notes
    -----
    Half waves are told apart as when they are counted: by the sign of the current in its common
    phase, currents under 5 % of the largest left out.
    """
    real = turned_to_real(current).real
    size: FloatArray = np.abs(current)
    loud = np.flatnonzero(abs(real) > QUIET * (largest or float(size.max(initial=0.0))))
    if not loud.size:
        return ()
    if period_m is not None:
        return _round_a_loop(distance_m, current, loud, period_m)
    signs = np.sign(real[loud])
    cuts = np.flatnonzero(signs[1:] != signs[:-1])
    edges = [0, *(cuts + 1).tolist(), loud.size]
    found = [_largest(distance_m, real, size, loud[a:b]) for a, b in pairwise(edges)]
    found += [_crossing(distance_m, real, size, int(loud[cut]), int(loud[cut + 1])) for cut in cuts]
    return tuple(sorted(found, key=lambda one: one.distance_m))


def _round_a_loop(
    distance_m: FloatArray, current: ComplexArray, loud: Any, period_m: float
) -> tuple[Extremum, ...]:
    """The same on a closed line: opened where the current is largest, and closed again."""
    real = turned_to_real(current).real
    signs = np.sign(real[loud])
    if np.all(signs == signs[0]):
        top = int(np.argmax(abs(real)))
        return (Extremum("maximum", float(distance_m[top]), float(abs(current[top]))),)
    # Begin at a reversal, so that no half wave is cut in two.
    change = int(np.flatnonzero(signs != np.roll(signs, 1))[0])
    begin = int(loud[change])
    order = np.concatenate([np.arange(begin, real.size), np.arange(0, begin + 1)])
    away = np.where(np.arange(order.size) < real.size - begin, 0.0, period_m)
    # The last value closes the circle, as the first one's neighbour on the other side.
    opened = find_extrema(distance_m[order] + away, current[order])
    last = len([one for one in opened if one.kind == "node"])
    maxima = [one for one in opened if one.kind == "maximum"][:last]
    nodes = [one for one in opened if one.kind == "node"]
    moved = [Extremum(o.kind, o.distance_m % period_m, o.size) for o in (*maxima, *nodes)]
    return tuple(sorted(moved, key=lambda one: one.distance_m))


def _largest(distance_m: FloatArray, real: FloatArray, size: FloatArray, where: Any) -> Extremum:
    """The maximum among some neighbours, refined by a parabola through the three topmost."""
    top = int(where[np.argmax(abs(real[where]))])
    place, height = float(distance_m[top]), float(size[top])
    if 0 < top < real.size - 1:
        x = distance_m[top - 1 : top + 2]
        y = abs(real[top - 1 : top + 2])
        if x[0] < x[1] < x[2]:
            curve = np.polynomial.Polynomial.fit(x, y, 2).convert()
            bend = float(curve.coef[2]) if curve.coef.size > 2 else 0.0
            if bend < 0:
                place = float(np.clip(-curve.coef[1] / (2 * bend), x[0], x[2]))
                height *= float(curve(place)) / float(y[1])
    return Extremum("maximum", place, height)


def _crossing(
    distance_m: FloatArray, real: FloatArray, size: FloatArray, before: int, after: int
) -> Extremum:
    """The reversal between two loud places of unlike sign: halfway between several crossings."""
    part = real[before : after + 1]
    steps = np.flatnonzero(np.sign(part[:-1]) != np.sign(part[1:])) + before
    step = int(steps[len(steps) // 2])
    share = real[step] / (real[step] - real[step + 1])
    at = distance_m[step] + share * (distance_m[step + 1] - distance_m[step])
    return Extremum("node", float(at), float(size[step] + share * (size[step + 1] - size[step])))


def mode_places(
    current: ComplexArray, position: FloatArray, routes: Sequence[Route], strips: Sequence[Strip]
) -> tuple[Place, ...]:
    """Maxima and nodes of a mode on all strips of an antenna.

    Parameters
    ----------
    current : (strip, P) complex array
        Mode current along each strip, as stored.
    position : (P,) float array
    routes : sequence of Route
        From `routes_of`.
    strips : sequence of Strip

    Returns
    -------
    tuple of Place
        Route by route, along each. A branch's largest current at its very joint is left out: it is
        the host's.
    """
    largest = float(np.nanmax(abs(current)))
    found = []
    for number, route in enumerate(routes):
        distance, along = route.current(current, position)
        known = np.isfinite(along)
        period = route.length_m if route.closed else None
        for one in find_extrema(distance[known], along[known], period_m=period, largest=largest):
            if route.start == "joint" and one.distance_m <= route.joinings[0].reach_m:
                continue
            strip, at = route.locate(one.distance_m)
            x, y = route.point_m(one.distance_m, strips)
            size = min(one.size / largest, 1.0)
            found.append(Place(one.kind, number, one.distance_m, strip, at, x, y, size))
    return tuple(found)


def case_places(case: xr.Dataset, antenna: Antenna) -> list[tuple[Place, ...]]:
    """Maxima and nodes of every natural mode of one solved case.

    Parameters
    ----------
    case : xarray.Dataset
        One case of an opened store.
    antenna : Antenna
        Of that case, ``study.case(number).antenna``.

    Returns
    -------
    list of tuple of Place
        From the lowest natural frequency up.
    """
    frequency = np.asarray(case["mode_frequency"].values, dtype=float)
    stored = case["mode_current"].transpose("mode", "strip", "position").values
    position = np.asarray(case["position"].values, dtype=float)
    routes = routes_of(antenna)
    slots = [int(slot) for slot in np.argsort(frequency) if np.isfinite(frequency[slot])]
    return [mode_places(stored[slot], position, routes, antenna.strips) for slot in slots]
