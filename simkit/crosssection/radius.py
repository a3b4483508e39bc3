"""Equivalent radius of conductors in air: strips, bars and bundles of equal wires.

The round wire of this radius has the same potential per unit line charge as the conductor it stands
for. What a thin wire model needs of a cross-section in air is this one number.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike
from scipy.linalg import solve as solve_dense

from simkit.crosssection.panels import ComplexArray, FloatArray, chain, graded
from simkit.crosssection.potential import solve

CLOSEST = 2.0
"""Wires of a bundle stand at least so many radii apart: at 2 they touch."""


def static_radius_m(
    offsets_m: ArrayLike, radius_m: float, *, harmonics: int = 0, heights_m: ArrayLike = 0.0
) -> float:
    """Equivalent radius of N equal parallel wires held at one potential.

    Parameters
    ----------
    offsets_m : array_like, (N,)
        Places of the wires across the bundle, in any order.
    radius_m : float
    harmonics : int
        0: the charge of every wire lies evenly around it, as in a thin-wire engine; its rails are
        then to be placed with this value. 1 and more: the charge is also pulled towards
        and away from the neighbours, up to that angular order. 8 is good to 1e-4 at gaps
        of 2.1 radii and nearly exact from 3 radii on.
    heights_m : array_like, (N,) or scalar
        Places in the other direction, if the bundle is not flat.

    Returns
    -------
    float
        Metres. For 0 harmonics exp(-1/S), S the sum of the elements of the inverse of P, with
        P_kk = -ln a and P_kl = -ln d_kl.

    Raises
    ------
    ValueError
        If there is no wire, the radius is not positive, or two wires overlap.
    """
    places, apart, unit_m = _bundle(offsets_m, radius_m, heights_m)
    if harmonics == 0:
        charge = _charges(apart, radius_m, unit_m)
        return float(unit_m * np.exp(-1 / charge.sum()))
    total = _with_harmonics(places / unit_m, radius_m / unit_m, harmonics)
    return float(unit_m * np.exp(-1 / total))


def charge_parts(offsets_m: ArrayLike, radius_m: float) -> FloatArray:
    """Parts of a bundle's charge on its wires when all are at one potential.

    A wave that runs along the bundle has its current in the same parts, since in air the magnetic
    field of the currents looks like the electric field of the charges.

    Parameters
    ----------
    offsets_m : array_like, (N,)
        Places of the wires across the bundle, in any order.
    radius_m : float

    Returns
    -------
    (N,) float array
        Their sum is 1. The charge lies evenly around every wire.

    Raises
    ------
    ValueError
        As `static_radius_m`.
    """
    _, apart, unit_m = _bundle(offsets_m, radius_m, 0.0)
    charge = _charges(apart, radius_m, unit_m)
    return np.asarray(charge / charge.sum())


def _bundle(
    offsets_m: ArrayLike, radius_m: float, heights_m: ArrayLike
) -> tuple[ComplexArray, FloatArray, float]:
    """Places of the wires, their distances, and a length that is large against the bundle."""
    places = np.asarray(offsets_m, dtype=np.float64) + 1j * np.asarray(heights_m)
    if places.ndim != 1 or not len(places):
        raise ValueError(f"offsets have the shape {places.shape}: one row of wires is needed")
    if not radius_m > 0:
        raise ValueError(f"the wires' radius is {radius_m:g} m: it must be positive")
    apart = np.abs(places[:, np.newaxis] - places)
    np.fill_diagonal(apart, np.inf)
    if apart.min() < CLOSEST * radius_m * (1 - 1e-9):
        raise ValueError(
            f"two wires are {apart.min() * 1e3:g} mm apart with a radius of {radius_m * 1e3:g} mm: "
            f"they need {CLOSEST:g} radii or more"
        )
    # In units in which the whole bundle is well inside the unit circle, as in `potential.solve`.
    unit_m = 2 * float(np.ptp(places.real) + np.ptp(places.imag) + 2 * radius_m)
    return places, apart, unit_m


def _charges(apart_m: FloatArray, radius_m: float, unit_m: float) -> FloatArray:
    """Charges over 2 pi eps0 for 1 V, each lying evenly around its wire; (N,)."""
    logs = apart_m / unit_m
    np.fill_diagonal(logs, radius_m / unit_m)
    return np.asarray(solve_dense(-np.log(logs), np.ones(len(logs))))


def _with_harmonics(places: ComplexArray, radius: float, orders: int) -> float:
    """Charge of the bundle over 2 pi eps0 for 1 V, with every wire's multipoles.

    The potential of wire l is Re[-q ln u + sum_m c_m (a/u)^m], u from its axis. On wire k it is
    matched at equally spaced angles, which for a smooth periodic function is as good as its
    Fourier series.
    """
    angles = 2 * np.pi * np.arange(2 * orders + 1) / (2 * orders + 1)
    points = (places[:, np.newaxis] + radius * np.exp(1j * angles)).ravel()
    u = points[:, np.newaxis] - places
    powers = (radius / u)[:, :, np.newaxis] ** np.arange(1, orders + 1)
    wires = len(places)
    flat = powers.reshape(len(points), wires * orders)
    matrix = np.hstack([-np.log(np.abs(u)), flat.real, -flat.imag])
    solved = solve_dense(matrix, np.ones(len(points)))
    return float(solved[:wires].sum())


def strip_radius_m(width_m: float, thickness_m: float = 0.0) -> float:
    """Equivalent radius of a strip or bar of rectangular section in air.

    Parameters
    ----------
    width_m, thickness_m : float

    Returns
    -------
    float
        Metres; a quarter of the width for a thin strip. Good to 2e-5.

    Raises
    ------
    ValueError
        If the width is not positive or the thickness negative.
    """
    if not (width_m > 0 and thickness_m >= 0):
        raise ValueError(
            f"width {width_m * 1e3:g} mm, thickness {thickness_m * 1e3:g} mm: the width must be "
            "positive and the thickness 0 or more"
        )
    if thickness_m == 0:
        return width_m / 4
    larger, smaller = max(width_m, thickness_m), min(width_m, thickness_m)
    return larger * _bar_radius(smaller / larger)


@lru_cache(maxsize=1024)
def _bar_radius(ratio: float) -> float:
    """Equivalent radius of a bar 1 wide and `ratio` thick."""
    coarse, fine = (_bar_potential(ratio, count) for count in (32, 64))
    return float(np.exp(-(fine + (fine - coarse) / 3)))


def _bar_potential(ratio: float, count: int) -> float:
    corners = np.array([0, 1, 1 + 1j * ratio, 1j * ratio, 0])
    sides = [graded(complex(start), complex(end), count)[:-1] for start, end in pairwise(corners)]
    nodes = np.concatenate([*sides, corners[:1]])
    return solve(chain(nodes, conductor=0)).common.real
