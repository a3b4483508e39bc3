"""How much a carrier lowers the potential of a strip: kappa, per strip and as a matrix.

Plastic around a strip lowers the potential of its charge by q kappa / (2 pi eps0), the same
everywhere along the strip and at every frequency at which the cross-section is small against the
wavelength. A wire model takes it up as a radius exp(kappa) times larger, and gives the inductance
that the larger radius would take away back in series, mu0 kappa / (2 pi) per metre, because plastic
is not magnetic.

References
----------
B. D. Popovic, A. Nesic, "Generalisation of the concept of equivalent radius of thin cylindrical
antennas", IEE Proc. H 131(3), 1984 (coated round wires; from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from scipy.constants import mu_0

from simkit.crosssection.panels import ComplexArray
from simkit.crosssection.potential import solve
from simkit.crosssection.section import CrossSection, FlatConductor, Layer, cut

COUNTS = (16, 32, 64, 128)
"""Panels across the strip: two neighbours of these give one extrapolated solution.

The error falls with the square of the count, and the first pair is nearly always enough.
"""

GOOD_ENOUGH = 3e-3
"""Finer panels are tried while `Kappa.error` is above this part of the largest element.

By comparison with panels eight times finer the result is then within 1e-3, mostly within 2e-4.
"""

LEAST_ERROR = 5e-4
"""No smaller error is claimed: two solutions may agree by chance."""

TINY = 1e-9
"""kappa below this is rounding error of the potentials: that of plastic with eps_r = 1."""

DIGITS = 9
"""Significant digits of sizes over width that tell cross-sections apart in the cache."""

CACHED = 4096


@dataclass(frozen=True)
class Kappa:
    """kappa of the strips of one cross-section.

    Attributes
    ----------
    matrix : (K, K) complex
        2 pi eps0 times the fall of the potential of strip l per unit line charge on strip k;
        kappa' - j kappa''.
    error : float
        Numerical error estimate, over the largest element: the difference of the extrapolated and
        the finer solution, at least 5e-4.
    """

    matrix: ComplexArray
    error: float


def kappa(section: CrossSection) -> complex:
    """Return kappa' - j kappa'' of the only strip of a cross-section.

    Parameters
    ----------
    section : CrossSection
        With one strip.

    Returns
    -------
    complex
        0 without plastic, growing with thickness, overhang and permittivity. The imaginary part is
        0 or negative and gives the dielectric loss.

    Raises
    ------
    ValueError
        If the section has more than one strip: `kappa_matrix` is meant for those.

    Notes
    -----
    A round wire of radius a coated to radius b has (1 - 1/eps_r) ln(b/a). Cached by sizes over
    width and permittivities.
    """
    if len(section.strips) != 1:
        raise ValueError(f"{len(section.strips)} strips on one carrier: use kappa_matrix")
    return complex(kappa_matrix(section).matrix[0, 0])


def kappa_matrix(section: CrossSection) -> Kappa:
    """Return the fall of potential of every strip by the charge of every strip.

    Strips on one carrier share its bound charge: charge on one lowers the potential of the others
    by the elements off the diagonal, times q / (2 pi eps0).

    Parameters
    ----------
    section : CrossSection

    Returns
    -------
    Kappa
        Symmetric, to the numerical error.
    """
    width_m = section.strips[0].width_m
    lengths = [section.left_m, section.right_m, section.depth_m]
    left, right, depth = (_rounded(length_m / width_m) for length_m in lengths)
    return _solved(
        tuple(
            (
                _rounded(strip.centre_m / width_m),
                _rounded(strip.width_m / width_m),
                _rounded(strip.thickness_m / width_m),
            )
            for strip in section.strips
        ),
        (left, right, depth),
        tuple(
            (_rounded(layer.thickness_m / width_m), complex(layer.permittivity))
            for layer in section.layers
        ),
    )


def _rounded(value: float) -> float:
    return float(f"{value:.{DIGITS - 1}e}")


@lru_cache(maxsize=CACHED)
def _solved(
    strips: tuple[tuple[float, float, float], ...],
    sizes: tuple[float, float, float],
    layers: tuple[tuple[float, complex], ...],
) -> Kappa:
    left, right, depth = sizes
    section = CrossSection(
        tuple(FlatConductor(*strip) for strip in strips),
        left,
        right,
        tuple(Layer(*layer) for layer in layers),
        depth,
    )
    fine = unextrapolated(section, COUNTS[0])
    for count in COUNTS[1:]:
        coarse, fine = fine, unextrapolated(section, count)
        # Twice the panels, a quarter of the error: `fine` is off by a third of the difference.
        matrix = fine + (fine - coarse) / 3
        error = float(np.abs(matrix - fine).max() / max(np.abs(matrix).max(), TINY))
        if error < GOOD_ENOUGH:
            break
    matrix.setflags(write=False)
    return Kappa(matrix, max(error, LEAST_ERROR))


def unextrapolated(section: CrossSection, count: int) -> ComplexArray:
    """Return the matrix of kappa from one solution with `count` panels across the strip.

    Air is solved on the same panels of the strips, so that most of the error of the metal cancels.
    """
    panels = cut(section, count)
    fall = solve(panels.in_air()).coefficients - solve(panels).coefficients
    return np.asarray(fall, dtype=np.complex128)


def wire_radius_m(radius_m: float, kappa_strip: complex) -> float:
    """Return the radius of the wire that stands for a strip on its carrier.

    Parameters
    ----------
    radius_m : float
        Equivalent radius of the bare strip.
    kappa_strip : complex
    """
    return float(radius_m * np.exp(complex(kappa_strip).real))


def series_inductance_h_per_m(kappa_strip: complex) -> float:
    """Return the inductance in series with that wire, henry per metre."""
    return float(mu_0 / (2 * np.pi) * complex(kappa_strip).real)
