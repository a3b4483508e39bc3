"""Two conductors with a common cross-section, from the plane solution: capacity and loss.

A line of two conductors carries equal and opposite charge, so its capacitance does not depend on
where the plane's potential is zero. In air, current crowds on the metal as charge does, which gives
the loss once the metal is several skin depths thick.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise

import numpy as np
from scipy.linalg import solve as solve_dense

from simkit.crosssection.panels import INTERFACE, Panels, chain, graded, join
from simkit.crosssection.potential import Solution, pair_integrals, solve
from simkit.crosssection.section import CrossSection, FlatConductor, Layer, cut
from simkit.feedline.checks import ComplexArray, FloatArray

COUNTS = (16, 32, 64)
"""Panels across a line of the cross-section; two neighbours give one extrapolated solution."""

GOOD_ENOUGH = 2e-3
"""Finer panels are tried while extrapolation moves the capacitance by more than this part."""

SHORTEST = 0.5
"""Part of the panels that lines much shorter than the narrowest strip keep (sides of foil)."""

LONGER = 0.25
"""More panels, as a part of the count, for each doubling of a line over its unit."""

SAME = 1e-12
CACHED = 4096


@dataclass(frozen=True)
class Crowding:
    """Shares of the squared surface current, over the squared current of the line, 1 per length.

    Attributes
    ----------
    faces : float
        Integral of J^2 over the upper and lower faces of both strips.
    between : float
        Twice the integral of the product of the currents on the two faces of each strip.
    sides : float
        Integral of J^2 over the narrow sides.
    """

    faces: float
    between: float
    sides: float

    def __add__(self, other: Crowding) -> Crowding:
        return Crowding(
            self.faces + other.faces, self.between + other.between, self.sides + other.sides
        )

    def times(self, factor: float) -> Crowding:
        """Return all shares times `factor`."""
        return Crowding(factor * self.faces, factor * self.between, factor * self.sides)


@dataclass(frozen=True)
class Pair:
    """Static solution of two conductors.

    Attributes
    ----------
    air : float
        Capacitance per length over eps0, without any dielectric.
    permittivity : complex
        Effective relative permittivity eps' - j eps'': capacitance with the dielectric over `air`.
    crowding : tuple of Crowding
        Of each conductor, per unit of the lengths given; zeros for metal of no thickness.
    error : float
        Estimated relative error of the capacitance.
    """

    air: float
    permittivity: complex
    crowding: tuple[Crowding, Crowding]
    error: float


def pair_capacitance(solution: Solution) -> tuple[complex, ComplexArray]:
    """Return the capacitance over eps0 of a neutral pair, and the charge on all panels for 1 V.

    Raises
    ------
    ValueError
        If the solution is not of two conductors.
    """
    if len(solution.capacitance) != 2:
        raise ValueError(f"a line has two conductors, not {len(solution.capacitance)}")
    potential = np.linalg.inv(solution.capacitance)
    charges = np.array([1.0, -1.0]) / (potential[0, 0] + potential[1, 1] - 2 * potential[0, 1])
    volts = charges @ potential
    # The solution counts charge in 2 pi eps0.
    return complex(2 * np.pi * charges[0]), 2 * np.pi * (volts @ solution.charge)


def solve_mirrored(panels: Panels) -> Solution:
    """Return what `solve` returns for panels that are their own mirror image at x = 0.

    Every panel has the charge of its image, so that half of the unknowns are left: less than a
    quarter of the time, and a matrix so small that its solution is not spread over threads, which
    costs much more than it gains.
    """
    reference_m = 2 * panels.extent_m
    logs, fluxes = pair_integrals(panels.start_m / reference_m, panels.end_m / reference_m)
    middle = (panels.start_m + panels.end_m) / 2
    kept = np.flatnonzero(middle.real >= -SAME * panels.extent_m)
    image = np.abs(middle + np.conj(middle[kept])[:, np.newaxis]).argmin(axis=1)
    own = image == kept  # across x = 0

    def folded(matrix: FloatArray) -> FloatArray:
        return matrix[np.ix_(kept, kept)] + np.where(own, 0.0, matrix[np.ix_(kept, image)])

    half = panels.only(np.isin(np.arange(len(middle)), kept))
    mean = (half.left + half.right) / 2
    contrast = (half.left - half.right) / mean
    lossless = not np.iscomplex(contrast).any()
    jump = (contrast.real if lossless else contrast)[:, np.newaxis] * folded(fluxes)
    jump += np.eye(len(kept))
    held = half.conductor[:, np.newaxis] == np.arange(panels.conductors)
    metal = (half.conductor != INTERFACE)[:, np.newaxis]
    matrix = np.where(metal, -folded(logs), jump)
    charge = solve_dense(matrix, held.astype(matrix.dtype), check_finite=False).T
    free = mean * (charge @ jump.T) * np.where(own, 1, 2)
    whole = np.zeros((panels.conductors, len(middle)), dtype=np.complex128)
    whole[:, image] = charge
    whole[:, kept] = charge
    return Solution(panels, whole, np.asarray(free @ held, dtype=np.complex128), reference_m)


@lru_cache(maxsize=CACHED)
def face_to_face(
    lower: float,
    upper: float,
    apart: float,
    thickness: float,
    overhang: float,
    permittivity: complex,
) -> Pair:
    """Solve two strips centred face to face on either side of a dielectric sheet.

    Parameters
    ----------
    lower, upper : float
        Widths, in any unit.
    apart : float
        Between the inner faces: the sheet's thickness.
    thickness : float
        Of the strips, which lie outside the sheet.
    overhang : float
        Of the sheet beyond the edges of the wider strip.
    permittivity : complex
        Of the sheet, relative.
    """

    def cut_up(count: int) -> Panels:
        return _facing(lower, upper, apart, thickness, overhang, permittivity, count)

    return _extrapolated(cut_up, solve_mirrored)


@lru_cache(maxsize=CACHED)
def side_by_side(
    first: float,
    second: float,
    gap: float,
    thickness: float,
    sheet: float,
    overhang: float,
    permittivity: complex,
) -> Pair:
    """Solve two strips in one plane on a sheet of thickness `sheet` (as `face_to_face`)."""
    strips = (
        FlatConductor(-(gap + first) / 2, first, thickness),
        FlatConductor((gap + second) / 2, second, thickness),
    )
    section = CrossSection(
        strips,
        -gap / 2 - first - overhang,
        gap / 2 + second + overhang,
        (Layer(sheet, permittivity),),
    )
    return _extrapolated(lambda count: cut(section, count), solve)


Solver = Callable[[Panels], Solution]


def _extrapolated(cut_up: Callable[[int], Panels], solver: Solver) -> Pair:
    fine = _pair(cut_up(COUNTS[0]), solver)
    for count in COUNTS[1:]:
        coarse, fine = fine, _pair(cut_up(count), solver)
        air = fine.air + (fine.air - coarse.air) / 3
        filled = fine.air * fine.permittivity
        filled += (filled - coarse.air * coarse.permittivity) / 3
        error = max(abs(air / fine.air - 1), abs(filled / fine.air / fine.permittivity - 1))
        if error < GOOD_ENOUGH:
            break
    return Pair(air, filled / air, fine.crowding, error)


def _pair(panels: Panels, solver: Solver) -> Pair:
    bare = panels.in_air()
    air, charge = pair_capacitance(solver(bare))
    filled = air
    if len(bare.start_m) != len(panels.start_m) or np.any(panels.left != panels.right):
        filled, _ = pair_capacitance(solver(panels))
    current = charge.real / air.real
    crowding = (_crowding(bare, current, 0), _crowding(bare, current, 1))
    return Pair(air.real, filled / air, crowding, 0.0)


def _crowding(panels: Panels, current: FloatArray, conductor: int) -> Crowding:
    """Integrals of the current on one conductor, which carries 1 in all."""
    own = np.flatnonzero(panels.conductor == conductor)
    step = (panels.end_m - panels.start_m)[own]
    middle = panels.start_m[own] + step / 2
    flat = np.abs(step.imag) < np.abs(step.real)
    if flat.all():
        return Crowding(0.0, 0.0, 0.0)  # no thickness: the integrals have no bound
    height = np.mean(middle.imag)
    order = np.argsort(middle.real)
    # Both faces are cut at the same places, so that sorted by x they stand in pairs.
    upper = own[order][(flat & (middle.imag > height))[order]]
    lower = own[order][(flat & (middle.imag < height))[order]]
    length = panels.length_m
    one, two = current[upper] / length[upper], current[lower] / length[lower]
    sides = own[~flat]
    return Crowding(
        float(np.sum((one**2 + two**2) * length[upper])),
        float(np.sum(2 * one * two * length[upper])),
        float(np.sum(current[sides] ** 2 / length[sides])),
    )


def _facing(
    lower: float,
    upper: float,
    apart: float,
    thickness: float,
    overhang: float,
    permittivity: complex,
    count: int,
) -> Panels:
    """Cut two strips face to face into panels; z = 0 is half way."""
    edge = max(lower, upper) / 2 + overhang
    unit = min(lower, upper)
    cuts = sorted({side * x for side in (-1, 1) for x in (lower / 2, upper / 2, edge)})
    parts = []
    for number, width, out in ((0, lower, -1), (1, upper, 1)):
        inner, outer = out * apart / 2, out * (apart / 2 + thickness)
        # To the left of a line along x lies what is above it.
        sides = (1.0, permittivity) if out > 0 else (permittivity, 1.0)
        for start, end in pairwise(cuts):
            metal = abs(start + end) < width
            if metal or permittivity != 1:
                kind = number if metal else INTERFACE
                parts.append(
                    _line(complex(start, inner), complex(end, inner), kind, count, unit, sides)
                )
            if metal and thickness:
                parts.append(_line(complex(start, outer), complex(end, outer), number, count, unit))
        if thickness:
            low, high = sorted((inner, outer))
            parts += [
                _line(complex(x, low), complex(x, high), number, count, unit)
                for x in (-width / 2, width / 2)
            ]
    if permittivity != 1:
        for x, sides in ((-edge, (1.0, permittivity)), (edge, (permittivity, 1.0))):
            low, high = -apart / 2, apart / 2
            parts.append(_line(complex(x, low), complex(x, high), INTERFACE, count, unit, sides))
    return join(parts)


def _line(
    start: complex,
    end: complex,
    conductor: int,
    count: int,
    unit: float,
    sides: tuple[complex, complex] = (1.0, 1.0),
) -> Panels:
    doublings = np.log2(abs(end - start) / unit)
    panels = int(np.ceil(count * max(SHORTEST, 1 + LONGER * doublings)))
    return chain(graded(start, end, panels), conductor, *sides)
