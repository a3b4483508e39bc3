"""Charge at the open end of a strip on a carrier that ends too: electrostatics in space.

A straight strip of finite length on a rectangular block of plastic is solved by boundary elements:
rectangles of constant charge on metal and plastic. A hollow round tube of the carrier's equivalent
radius is solved for comparison. The tube that holds the same charge at the same potential is
shorter or longer than the strip; half the difference is what one end takes off. It does not depend
on the length of the strip from some five widths on, so it belongs to the end.

All lengths here are in strip widths and charges are over 4 pi eps0: electrostatics has no scale.
This module makes the table of `simkit.crosssection.ends` and is not needed to use it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import product
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.special import ellipkm1

from simkit.crosssection.carrier_kappa import kappa
from simkit.crosssection.panels import FloatArray, IntArray
from simkit.crosssection.section import Layer, single_strip

HALF_LENGTH = 6.0
"""Half the strip's length. At 5, 8 and 12 the result is the same to 5e-4."""

FINE = (9, 6, 6, 21, 6)
COARSE = (6, 4, 4, 14, 4)
"""Rectangles across half the strip, the overhang, the thickness, along half the strip and the end
overhang. The two solutions are extrapolated: the error falls with the square of the count."""

BARE_RADIUS = 0.25

THICKNESSES = (0.125, 0.25, 0.5, 1.0, 2.0)
OVERHANGS = END_OVERHANGS = (0.0, 0.25, 0.5, 1.0, 2.0)
PERMITTIVITIES = (1.5, 2.7, 4.4)
"""What the table holds."""

_TINY = 1e-280


@dataclass(frozen=True)
class Block:
    """Carrier of a strip, in strip widths: its thickness, and how far it stands out.

    `overhang` is sideways, beyond both edges; `end_overhang` is beyond both ends.
    """

    thickness: float
    overhang: float
    end_overhang: float


@dataclass(frozen=True)
class _Rectangles:
    """N rectangles across the axes, in the quarter x > 0, y > 0 of a symmetric body.

    low, high : (N, 3) corners; axis : (N,) direction of the normal; out : (N,) its outward sign;
    metal : (N,) whether it belongs to the strip.
    """

    low: FloatArray
    high: FloatArray
    axis: IntArray
    out: FloatArray
    metal: NDArray[np.bool_]

    @property
    def area(self) -> FloatArray:
        size = self.high - self.low
        size[np.arange(len(size)), self.axis] = 1.0
        return np.asarray(size.prod(axis=1))


def end_shortening(block: Block, permittivities: Sequence[float]) -> FloatArray:
    """How much shorter at each end a tube must be to hold the strip's charge.

    Parameters
    ----------
    block : Block
    permittivities : sequence of float, (P,)
        Relative, real. 1 is a strip without a carrier, which takes off 0.049.

    Returns
    -------
    (P,) float
        In strip widths; negative if the tube must be longer. The tube's radius is
        exp(kappa)/4. Good to about 0.002.
    """
    coarse, fine = (_strip_charges(block, permittivities, counts) for counts in (COARSE, FINE))
    ratio2 = (FINE[0] / COARSE[0]) ** 2
    charges = fine + (fine - coarse) / (ratio2 - 1)
    return np.array(
        [
            _tube_shortening(_radius(block, permittivity), charge)
            for permittivity, charge in zip(permittivities, charges, strict=True)
        ]
    )


def write_table(path: Path) -> None:
    """Write what a carrier adds to the shortening of a bare strip, one row a block (10 minutes)."""
    bare = end_shortening(Block(1.0, 0.0, 0.0), [1.0])[0]
    rows = []
    for sizes in product(THICKNESSES, OVERHANGS, END_OVERHANGS):
        added = end_shortening(Block(*sizes), PERMITTIVITIES) - bare
        rows.append([*sizes, *added])
    np.savetxt(path, rows, fmt=["%.3f"] * 3 + ["%8.5f"] * 3, header=HEADER)


HEADER = """What a carrier adds to the shortening of an open end, over the strip's width.
Made by simkit.crosssection.end_charge.write_table. Columns: thickness, overhang and end overhang
over the width; then the added shortening for permittivity 1.5, 2.7, 4.4."""


def _radius(block: Block, permittivity: float) -> float:
    section = single_strip(1.0, [Layer(block.thickness, permittivity)], block.overhang)
    return BARE_RADIUS * float(np.exp(kappa(section).real))


def _tube_shortening(radius: float, charge: float) -> float:
    def excess(shortening: float) -> float:
        return tube_charge(radius, HALF_LENGTH - shortening) - charge

    return float(brentq(excess, -1.0, 1.0, xtol=1e-5))


def tube_charge(radius: float, half_length: float, count: int = 80) -> float:
    """Charge of a hollow round tube, open at both ends, at 1 V (over 4 pi eps0).

    Rings of constant charge, their potential averaged over each ring: 80 on half the length are
    good to 1e-6. The kernel is the exact one, an elliptic integral with a logarithm in it.
    """
    u = np.linspace(0, 1, count + 1)
    nodes = half_length * (1 - (1 - u) ** 2.5)
    low, high = nodes[:-1], nodes[1:]
    middle, length = (low + high) / 2, high - low
    s, weight = np.polynomial.legendre.leggauss(6)
    matrix: FloatArray = np.zeros((count, count))
    for image in (1, -1):
        apart = np.abs(middle[:, np.newaxis] - image * middle)
        near = apart < 3 * np.maximum(length[:, np.newaxis], length)
        for at, part in zip(s, weight / 2, strict=True):
            y = (middle + length / 2 * at)[:, np.newaxis]
            for at2, part2 in zip(s, weight / 2, strict=True):
                away = np.abs(y - image * (middle + length / 2 * at2))
                away = np.maximum(away, 1e-14 * half_length)
                smooth = np.where(near, np.log(away) / (np.pi * radius), 0.0)
                matrix += part * part2 * (_ring(away, radius) + smooth)
            logs = image * (_log_integral(y - image * low) - _log_integral(y - image * high))
            matrix -= part * np.where(near, logs / length / (np.pi * radius), 0.0)
    return float(2 * np.linalg.solve(matrix, np.ones(count)).sum())


def _ring(away: FloatArray, radius: float) -> FloatArray:
    """Potential of a ring of unit charge on a coaxial ring of the same radius, `away` from it."""
    longest2 = away**2 + 4 * radius**2
    return np.asarray(2 / np.pi * ellipkm1(away**2 / longest2) / np.sqrt(longest2))


def _log_integral(x: FloatArray) -> FloatArray:
    """Integral of ln|x| from 0."""
    return np.asarray(x * np.log(np.abs(x) + _TINY) - x)


def _strip_charges(
    block: Block, permittivities: Sequence[float], counts: tuple[int, int, int, int, int]
) -> FloatArray:
    """Free charge of the strip at 1 V (over 4 pi eps0) for each permittivity."""
    body = _rectangles(block, counts)
    logs, fluxes = _influences(body)
    charges = []
    for permittivity in permittivities:
        chosen = body.metal if permittivity == 1 else np.ones(len(body.axis), dtype=bool)
        jump = (1 - permittivity) * fluxes + (1 + permittivity) / 2 * np.eye(len(body.axis))
        matrix = np.where(body.metal[:, np.newaxis], logs, jump)[np.ix_(chosen, chosen)]
        # Fluxes are exact solid angles: the plastic is neutral, and all charge is free charge.
        charges.append(4 * np.linalg.solve(matrix, body.metal[chosen].astype(float)).sum())
    return np.array(charges)


def _rectangles(block: Block, counts: tuple[int, int, int, int, int]) -> _Rectangles:
    """Strip and block, the strip's face at z = 0, finest at edges and ends."""
    across, over, through, along, beyond = counts
    x_strip = 0.5 * _towards_end(across, 3.0)
    y_strip = HALF_LENGTH * _towards_end(along, 3.0)
    x_over = 0.5 + block.overhang * _both_ends(over)
    y_over = HALF_LENGTH + block.end_overhang * _both_ends(beyond)
    x_all = np.concatenate([x_strip, x_over[1:]]) if block.overhang > 0 else x_strip
    y_all = np.concatenate([y_strip, y_over[1:]]) if block.end_overhang > 0 else y_strip
    z = block.thickness * (_both_ends(through) - 1)
    faces = [_face((x_strip, y_strip, np.zeros(1)), 1.0, metal=True)]
    if block.overhang > 0:
        faces.append(_face((x_over, y_strip, np.zeros(1)), 1.0))
    if block.end_overhang > 0:
        faces.append(_face((x_all, y_over, np.zeros(1)), 1.0))
    faces.append(_face((x_all, y_all, z[:1]), -1.0))
    faces.append(_face((x_all[-1:], y_all, z), 1.0))
    faces.append(_face((x_all, y_all[-1:], z), 1.0))
    return _Rectangles(
        np.concatenate([face.low for face in faces]),
        np.concatenate([face.high for face in faces]),
        np.concatenate([face.axis for face in faces]),
        np.concatenate([face.out for face in faces]),
        np.concatenate([face.metal for face in faces]),
    )


def _towards_end(count: int, power: float) -> FloatArray:
    """Cuts of 0 to 1, crowded at 1; the plane of symmetry is at 0."""
    return np.asarray(1 - (1 - np.linspace(0, 1, count + 1)) ** power)


def _both_ends(count: int) -> FloatArray:
    u = np.linspace(0, 1, count + 1)
    return np.asarray(u**2.5 / (u**2.5 + (1 - u) ** 2.5))


def _face(nodes: tuple[FloatArray, ...], out: float, *, metal: bool = False) -> _Rectangles:
    """All rectangles between the nodes of two axes; the third has one node, its place."""
    axis = next(number for number, places in enumerate(nodes) if len(places) == 1)
    low = np.meshgrid(*(_but(places, last=True) for places in nodes), indexing="ij")
    high = np.meshgrid(*(_but(places, last=False) for places in nodes), indexing="ij")
    count = low[0].size
    return _Rectangles(
        np.stack([grid.ravel() for grid in low], axis=1),
        np.stack([grid.ravel() for grid in high], axis=1),
        np.full(count, axis),
        np.full(count, out),
        np.full(count, metal),
    )


def _but(places: FloatArray, *, last: bool) -> FloatArray:
    if len(places) == 1:
        return places
    return places[:-1] if last else places[1:]


def _influences(body: _Rectangles) -> tuple[FloatArray, FloatArray]:
    """Mean potential of, and flux out of, every rectangle by unit charge on every other, (N, N).

    The charge is spread over four Gauss points and its mirror images; potential and flux of a point
    are then exact over the whole rectangle.
    """
    count = len(body.axis)
    potential, flux = np.zeros((count, count)), np.zeros((count, count))
    middle, half = (body.low + body.high) / 2, (body.high - body.low) / 2
    first, second = (body.axis + 1) % 3, (body.axis + 2) % 3
    row = np.arange(count)
    gauss = 1 / np.sqrt(3)
    for one in (-gauss, gauss):
        for two in (-gauss, gauss):
            points = middle.copy()
            points[row, first] += one * half[row, first]
            points[row, second] += two * half[row, second]
            for mirror in ((1, 1, 1), (-1, 1, 1), (1, -1, 1), (-1, -1, 1)):
                for axis in range(3):
                    on = np.flatnonzero(body.axis == axis)
                    value, angle = _corner_sums(points * mirror, body.low[on], body.high[on], axis)
                    potential[on] += value.T / 4
                    flux[on] -= angle.T / 4
    potential /= body.area[:, np.newaxis]
    flux *= body.out[:, np.newaxis] / (4 * np.pi)
    # The same integral either way, were it exact; the mean keeps the matrix symmetric.
    return (potential + potential.T) / 2, flux


def _corner_sums(
    points: FloatArray, low: FloatArray, high: FloatArray, axis: int
) -> tuple[FloatArray, FloatArray]:
    """Integral of 1/r over rectangles, and the signed solid angle they fill, from each point.

    Both are sums over the four corners of x ln(y + r) + y ln(x + r) - z atan(xy/(zr)) and of the
    arc tangent alone.
    """
    first, second = (axis + 1) % 3, (axis + 2) % 3
    z = points[:, axis, np.newaxis] - low[:, axis]
    z_safe = np.where(z == 0, 1.0, z)
    total, angle = np.zeros(z.shape), np.zeros(z.shape)
    for x_corner, x_sign in ((low, 1), (high, -1)):
        x = points[:, first, np.newaxis] - x_corner[:, first]
        for y_corner, y_sign in ((low, 1), (high, -1)):
            y = points[:, second, np.newaxis] - y_corner[:, second]
            r = np.sqrt(x * x + y * y + z * z) + _TINY
            corner = np.where(z == 0, 0.0, np.arctan(x * y / (z_safe * r)))
            logs = x * _log_sum(y, r, x * x + z * z) + y * _log_sum(x, r, y * y + z * z)
            total += x_sign * y_sign * (logs - z * corner)
            angle += x_sign * y_sign * corner
    return total, angle


def _log_sum(y: FloatArray, r: FloatArray, rest: FloatArray) -> FloatArray:
    """ln(y + r) with r^2 = y^2 + rest, without losing digits where y is negative."""
    log = np.log(np.abs(y) + r)
    return np.where(y >= 0, log, np.log(rest + _TINY) - log)
