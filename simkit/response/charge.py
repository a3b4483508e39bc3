"""Charge per metre of strip, from the continuity of current."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from simkit.geometry.wires import FloatArray, IntArray
from simkit.response.rational import ComplexArray
from simkit.response.strip_route import Route


def line_charge(
    distance_m: FloatArray,
    current: ComplexArray,
    frequency_hz: complex,
    breaks_m: Sequence[tuple[float, float]] = (),
    period_m: float | None = None,
) -> ComplexArray:
    """Charge per metre that a current along a line leaves behind.

    Parameters
    ----------
    distance_m : (K,) float array
        Places along the line, ascending, metres.
    current : (K,) complex array
        Ampere, time factor exp(j omega t).
    frequency_hz : complex
        Complex for a natural mode: its pole, with a positive imaginary part.
    breaks_m : sequence of (float, float)
        Stretches where current enters or leaves sideways (a joint with another strip): what flows
        along the line alone does not say there what stays behind.
    period_m : float, optional
        Length of a closed line.

    Returns
    -------
    (K,) complex array
        ``q = (j/omega) dI/ds``, coulomb per metre; NaN inside the breaks, and between two breaks
        with a single place between them.

    Notes
    -----
    Derivatives of parabolas through three neighbouring places, which is of second order also for
    unequal steps; they reach across no break.
    """
    place, value = np.asarray(distance_m, dtype=float), np.asarray(current, dtype=np.complex128)
    if period_m is not None:
        extra = min(2, place.size)
        place = np.concatenate([place[-extra:] - period_m, place, place[:extra] + period_m])
        value = np.concatenate([value[-extra:], value, value[:extra]])
        breaks_m = [(a + n * period_m, b + n * period_m) for a, b in breaks_m for n in (-1, 0, 1)]
    stretch = np.zeros(place.size, dtype=int)
    for start, stop in sorted(breaks_m):
        stretch[place >= (start + stop) / 2] += 1
    for start, stop in breaks_m:
        stretch[(place > start) & (place < stop)] = -1
    slope = np.full(place.size, complex(np.nan, np.nan))
    for number in np.unique(stretch[stretch >= 0]):
        here = stretch == number
        count = int(here.sum())
        if count > 1:
            slope[here] = np.gradient(value[here], place[here], edge_order=2 if count > 2 else 1)
    if period_m is not None:
        slope = slope[extra : slope.size - extra]
    return np.asarray(1j / (2 * np.pi * frequency_hz) * slope)


def charge_along_route(
    route: Route,
    current: ComplexArray,
    position: FloatArray,
    segments: tuple[IntArray, FloatArray],
    frequency_hz: complex,
) -> tuple[FloatArray, ComplexArray]:
    """Charge per metre along a route, from the current along each strip.

    Parameters
    ----------
    route : Route
    current : (strip, P) complex array
        Ampere, positive from the start to the end of each strip.
    position : (P,) float array
        0..1 along each strip.
    segments : (strip_index, strip_position)
        Of the model, (S,) each: differences are taken between segments, since between them the
        current is interpolated and its slope means little.
    frequency_hz : complex

    Returns
    -------
    distance_m : (K,) float array
    charge_c_per_m : (K,) complex array
        Without the places at joints; those at its sides may be joined by a straight line, since
        metal of one potential has no jump of charge there.
    """
    knots = route.knots_m(*segments)
    at, along = route.current(current, position)
    at, first = np.unique(at, return_index=True)
    breaks = [(j.distance_m - j.reach_m, j.distance_m + j.reach_m) for j in route.joinings]
    period = route.length_m if route.closed else None
    charge = line_charge(knots, np.interp(knots, at, along[first]), frequency_hz, breaks, period)
    known = np.isfinite(charge)
    knots, charge = knots[known], charge[known]
    if route.closed and knots.size:
        seam = np.array([0.0, route.length_m])
        value = np.interp(seam, knots, charge, period=route.length_m)
        knots = np.concatenate([seam[:1], knots, seam[1:]])
        charge = np.concatenate([value[:1], charge, value[1:]])
    return knots, charge
