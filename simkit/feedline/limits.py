"""Frequencies up to which a line may be taken as one with static capacitance and inductance."""

from __future__ import annotations

import numpy as np
from scipy.constants import c, mu_0

RADIATED = 0.05
"""Part of the carried power that a matched line may radiate before the line is doubted."""

DISPERSION = 0.01
"""Part by which the effective permittivity may rise with frequency before it is."""

WIDEST_WAVELENGTHS = 0.125
"""Largest cross-section in wavelengths of the dielectric: then no higher mode is near."""


def radiation_hz(impedance_ohm: float, distance_m: float) -> float:
    """Where a matched pair with currents so far apart radiates `RADIATED` of what it carries.

    Notes
    -----
    60 (k s)^2 / Z of the power, for a line longer than some distances s.

    References
    ----------
    J. E. Storer, R. King, "Radiation resistance of a two-wire line", Proc. IRE 39, 1951 (from
    memory).
    """
    wave_number = np.sqrt(RADIATED * impedance_ohm / 60) / distance_m
    return float(wave_number * c / (2 * np.pi))


def width_hz(across_m: float, permittivity: float) -> float:
    """Where the cross-section is `WIDEST_WAVELENGTHS` of the dielectric wide."""
    return float(WIDEST_WAVELENGTHS * c / (across_m * np.sqrt(permittivity)))


def plate_dispersion_hz(
    plate_ohm: float, height_m: float, permittivity: float, effective: float
) -> float:
    """Where the permittivity of a strip over a plate has risen by `DISPERSION`.

    References
    ----------
    W. J. Getsinger, IEEE Trans. MTT 21(1), 1973 (from memory).
    """
    risen = DISPERSION * effective / (permittivity - effective) if permittivity > effective else 1.0
    if risen >= 1:
        return float("inf")
    cut_off_hz = plate_ohm / (2 * mu_0 * height_m)
    growth = 0.6 + 0.009 * plate_ohm
    return float(cut_off_hz * np.sqrt(risen / (1 - risen) / growth))


def coplanar_dispersion_hz(
    width_m: float, gap_m: float, sheet_m: float, permittivity: float, effective: float
) -> float:
    """Where the permittivity of coplanar strips has risen by `DISPERSION`.

    References
    ----------
    M. Y. Frankel et al., IEEE Trans. MTT 39(6), 1991 (from memory).
    """
    if permittivity <= effective:
        return float("inf")
    part = (np.sqrt(1 + DISPERSION) - 1) * np.sqrt(effective)
    part /= np.sqrt(permittivity) - np.sqrt(effective)
    if part >= 1:
        return float("inf")
    q = np.log(width_m / sheet_m)
    u, v = 0.54 - 0.64 * q + 0.015 * q**2, 0.43 - 0.86 * q + 0.54 * q**2
    a = np.exp(u * np.log(width_m / gap_m) + v)
    surface_hz = c / (4 * sheet_m * np.sqrt(permittivity - 1))
    return float(surface_hz * (a / (1 / part - 1)) ** (1 / 1.8))
