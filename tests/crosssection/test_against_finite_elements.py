"""kappa against an independent solution: bilinear finite elements for the potential in a box.

Nothing is shared with the boundary elements: the unknown is the potential, in a grounded box
sixty widths away, and P follows from the stored energy. Metal and box are the same with and without
plastic, so that box and logarithm drop out of the difference.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.linalg import spsolve

from simkit.crosssection import Layer, kappa, single_strip

FloatArray = NDArray[np.float64]

BOX = 60.0
"""Distance of the grounded box; the plastic's quadrupole there is 1e-5 of its field."""


def _graded(start: float, end: float, count: int) -> FloatArray:
    """Nodes crowded at both ends."""
    u = np.linspace(0, 1, count + 1)
    return start + (end - start) * u**2.5 / (u**2.5 + (1 - u) ** 2.5)


def _outwards(start: float, end: float, count: int) -> FloatArray:
    """Nodes that grow apart from `start` to `end`."""
    return start + (end - start) * np.linspace(0, 1, count + 1) ** 4


def _nodes(places: list[float], refine: int) -> FloatArray:
    """Nodes through all places, fine at each, up to the box on both sides."""
    pieces = [_graded(a, b, refine) for a, b in pairwise(places)]
    outer = _outwards(places[-1], BOX, 2 * refine)
    inner = np.array([]) if places[0] == 0 else -_outwards(-places[0], BOX, 2 * refine)[::-1]
    return np.unique(np.round(np.concatenate([inner, *pieces, outer]), 12))


def _potential(x: FloatArray, z: FloatArray, permittivity: FloatArray, held: FloatArray) -> float:
    """2 pi eps0 times the potential per unit charge; (len(x), len(z)) nodes, half of the plane."""
    nx, nz = len(x), len(z)
    dx, dz = np.diff(x)[:, np.newaxis], np.diff(z)[np.newaxis, :]
    number = np.arange(nx * nz).reshape(nx, nz)
    corners = [number[:-1, :-1], number[1:, :-1], number[:-1, 1:], number[1:, 1:]]
    slope = np.array([[1, -1], [-1, 1]])
    mass = np.array([[2, 1], [1, 2]]) / 6
    rows, cols, values = [], [], []
    for one, row in enumerate(corners):
        for two, col in enumerate(corners):
            (ix, iz), (jx, jz) = divmod(one, 2)[::-1], divmod(two, 2)[::-1]
            across = slope[ix, jx] * mass[iz, jz] * dz / dx
            upwards = mass[ix, jx] * slope[iz, jz] * dx / dz
            rows.append(row.ravel())
            cols.append(col.ravel())
            values.append((permittivity * (across + upwards)).ravel())
    shape = (nx * nz, nx * nz)
    stiffness = coo_array(
        (np.concatenate(values), (np.concatenate(rows), np.concatenate(cols))), shape=shape
    ).tocsr()
    given = np.ravel(~np.isnan(held))
    phi = np.nan_to_num(held.ravel())
    free = np.flatnonzero(~given)
    phi[free] = spsolve(stiffness[free][:, free].tocsc(), -(stiffness[free] @ phi))
    return float(2 * np.pi / (2 * (phi @ (stiffness @ phi))))


@dataclass(frozen=True)
class Shape:
    """A strip 1 wide with `above` of the carrier's thickness above its lower face."""

    thickness: float
    overhang: float
    above: float
    eps: float
    metal: float = 0.0


def _fall(shape: Shape, refine: int) -> float:
    """kappa by finite elements, `refine` of them between any two neighbouring places."""
    edge, bottom = 0.5 + shape.overhang, shape.above - shape.thickness
    x = _nodes(sorted({0.0, 0.5, edge}), refine)
    z = _nodes(sorted({bottom, 0.0, shape.above, shape.metal}), refine)
    held = np.full((len(x), len(z)), np.nan)
    held[-1] = held[:, 0] = held[:, -1] = 0.0
    metal = (z > -1e-9) & (z < shape.metal + 1e-9)
    held[np.ix_(x < 0.5 + 1e-9, metal)] = 1.0
    mx, mz = (x[1:] + x[:-1]) / 2, (z[1:] + z[:-1]) / 2
    plastic = (mx < edge)[:, np.newaxis] & ((bottom < mz) & (mz < shape.above))
    air = _potential(x, z, np.ones(plastic.shape), held)
    return air - _potential(x, z, np.where(plastic, shape.eps, 1.0), held)


@pytest.mark.parametrize(
    "shape",
    [
        Shape(0.5, 0.0, 0.0, 2.7),
        Shape(0.5, 0.5, 0.0, 2.7),
        Shape(0.3, 0.2, 0.1, 4.4),
        Shape(0.5, 0.3, 0.0, 2.7, metal=0.1),
    ],
    ids=["flush", "overhang", "embedded", "thick metal"],
)
def test_agrees_with_finite_elements(shape: Shape) -> None:
    coarse, fine = (_fall(shape, refine) for refine in (10, 20))
    independent = fine + (fine - coarse) / 3
    section = single_strip(
        1.0,
        [Layer(shape.thickness, shape.eps)],
        shape.overhang,
        depth_m=shape.above,
        metal_thickness_m=shape.metal,
    )
    # The finite elements still move by 6e-5 when refined and extrapolated once more.
    assert kappa(section).real == pytest.approx(independent, rel=3e-4)
