"""Impedances of lines in closed form: a quick estimate, and a check on the plane solution.

All are for perfect strips of no thickness and a dielectric sheet that reaches far beyond them. What
`simkit.feedline.lines` returns comes from the plane solution of the cross-section, which knows of
thickness and of narrow sheets; each function here says how far it is from that.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike
from scipy.constants import c, mu_0
from scipy.special import ellipk, ellipkm1

from simkit.feedline.checks import FloatArray

FREE_SPACE_OHM = float(mu_0 * c)
"""Wave impedance of free space, 376.73 ohm."""

NARROW_TO, WIDE_FROM = 0.5, 1.0
"""Width over separation between which the two formulas of Wheeler are joined."""


def two_strips_wheeler_ohm(ratio: ArrayLike, permittivity: float = 1.0) -> FloatArray:
    """Two equal strips face to face: Wheeler's narrow and wide formulas, joined smoothly.

    Parameters
    ----------
    ratio : array_like of float
        Width over separation.
    permittivity : float
        Of the sheet between the strips.

    Returns
    -------
    ndarray of float
        Ohm. For ratios of 0.05 to 20 within 0.6 % of the plane solution in air, 1.1 % with a
        permittivity of 2.7 and 1.6 % with 10.

    References
    ----------
    H. A. Wheeler, IEEE Trans. MTT 12, 280 (1964) and 13, 172 (1965), from memory.
    """
    w = np.asarray(ratio, dtype=np.float64)
    part = np.log(w / NARROW_TO) / np.log(WIDE_FROM / NARROW_TO)
    wide = _smooth_step(np.clip(part, 0.0, 1.0))
    narrow_ohm = two_strips_narrow_ohm(w, permittivity)
    return np.asarray((1 - wide) * narrow_ohm + wide * two_strips_wide_ohm(w, permittivity))


def _smooth_step(part: FloatArray) -> FloatArray:
    return np.asarray(part**2 * (3 - 2 * part))


def two_strips_narrow_ohm(ratio: ArrayLike, permittivity: float = 1.0) -> FloatArray:
    """Wheeler's formula for strips narrower than their separation (arguments as above)."""
    w = np.asarray(ratio, dtype=np.float64)
    e = permittivity
    mixed = 0.5 * (e - 1) / (e + 1) * (np.log(np.pi / 2) + np.log(4 / np.pi) / e)
    filled = np.sqrt((e + 1) / 2)
    return np.asarray(
        FREE_SPACE_OHM / (np.pi * filled) * (np.log(4 / w) + w**2 / 8 - mixed), dtype=np.float64
    )


def two_strips_wide_ohm(ratio: ArrayLike, permittivity: float = 1.0) -> FloatArray:
    """Wheeler's formula for strips wider than their separation (arguments as above)."""
    w = np.asarray(ratio, dtype=np.float64)
    e = permittivity
    fringe = np.log(np.pi * np.e / 2) + np.log(w + 0.94)
    widths = w + 2 * np.log(2) / np.pi + 0.082 * (e - 1) / e**2 + (e + 1) / (2 * np.pi * e) * fringe
    return np.asarray(FREE_SPACE_OHM / np.sqrt(e) / widths, dtype=np.float64)


def strip_over_plate_air_ohm(ratio: ArrayLike) -> FloatArray:
    """A strip over a wide plate in air; `ratio` is width over height. Within 0.03 %.

    References
    ----------
    E. Hammerstad, O. Jensen, IEEE MTT-S Symposium 1980, 407 (from memory).
    """
    u = np.asarray(ratio, dtype=np.float64)
    f = 6 + (2 * np.pi - 6) * np.exp(-((30.666 / u) ** 0.7528))
    return np.asarray(FREE_SPACE_OHM / (2 * np.pi) * np.log(f / u + np.sqrt(1 + (2 / u) ** 2)))


def strip_over_plate_permittivity(ratio: ArrayLike, permittivity: float) -> FloatArray:
    """Effective permittivity of the same with a wide sheet under the strip. Within 0.2 %.

    References
    ----------
    E. Hammerstad, O. Jensen, IEEE MTT-S Symposium 1980, 407 (from memory).
    """
    u = np.asarray(ratio, dtype=np.float64)
    e = permittivity
    a = (
        1
        + np.log((u**4 + (u / 52) ** 2) / (u**4 + 0.432)) / 49
        + np.log(1 + (u / 18.1) ** 3) / 18.7
    )
    b = 0.564 * ((e - 0.9) / (e + 3)) ** 0.053
    return np.asarray((e + 1) / 2 + (e - 1) / 2 * (1 + 10 / u) ** (-a * b), dtype=np.float64)


def strip_over_plate_ohm(ratio: ArrayLike, permittivity: float = 1.0) -> FloatArray:
    """Impedance of the same; two strips face to face have twice that of half their separation."""
    filled = strip_over_plate_permittivity(ratio, permittivity)
    return np.asarray(strip_over_plate_air_ohm(ratio) / np.sqrt(filled))


def coplanar_strips_air_ohm(ratio: ArrayLike) -> FloatArray:
    """Two equal strips in one plane in air; `ratio` is gap over width. Exact for no thickness.

    Notes
    -----
    120 pi K(k)/K(k') with k = gap/(gap + 2 width), K the complete elliptic integral of modulus k.

    References
    ----------
    Conformal mapping of the plane slit twice; e.g. K. C. Gupta et al., Microstrip Lines and
    Slotlines, chapter 7 (from memory).
    """
    g = np.asarray(ratio, dtype=np.float64)
    k2 = (g / (g + 2)) ** 2
    return np.asarray(FREE_SPACE_OHM * ellipk(k2) / ellipkm1(k2), dtype=np.float64)
