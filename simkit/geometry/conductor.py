"""Loss of a flat conductor: resistance per metre of strip."""

from __future__ import annotations

import numpy as np
from scipy.constants import mu_0

from simkit.study.model import Metal


def surface_resistance_ohm(
    conductivity_s_per_m: float, thickness_m: float, frequency_hz: float
) -> float:
    """Resistance per square of one face of a sheet that carries current on both faces.

    Parameters
    ----------
    conductivity_s_per_m, thickness_m, frequency_hz : float

    Returns
    -------
    float
        ``Re[(1 + j)/(sigma delta) coth((1 + j) t/(2 delta))]``, ohm: 1/(sigma delta) for a sheet
        of many skin depths, 2/(sigma t) for one much thinner than that.

    References
    ----------
    Ramo, Whinnery, Van Duzer, Fields and Waves in Communication Electronics, plane conductor of
    finite thickness (from memory; the two limits are tested).
    """
    skin_m = 1.0 / np.sqrt(np.pi * frequency_hz * mu_0 * conductivity_s_per_m)
    argument = (1 + 1j) * thickness_m / (2 * skin_m)
    return float(np.real((1 + 1j) / (conductivity_s_per_m * skin_m) / np.tanh(argument)))


def crowding_per_m(width_m: float, thickness_m: float) -> float:
    """Resistance per metre of a strip over the surface resistance of one face, 1/m.

    Returns
    -------
    float
        ``[1 + ln(4 pi w/t)/pi] / (pi w)``: twice the even spread over both faces, since the current
        crowds at the edges.

    Notes
    -----
    Wheeler's incremental-inductance rule applied to the equivalent radius of a strip of thickness
    t. Holds for t well under w.

    References
    ----------
    H. A. Wheeler, "Formulas for the skin effect", Proc. IRE 30(9), 1942 (the rule).
    """
    return float((1 + np.log(4 * np.pi * width_m / thickness_m) / np.pi) / (np.pi * width_m))


def face_resistance_ohm(metal: Metal, frequency_hz: float) -> float:
    """Surface resistance of one face of a metal sheet, ohm; 0 for a perfect conductor."""
    if metal.conductivity_s_per_m is None:
        return 0.0
    return surface_resistance_ohm(metal.conductivity_s_per_m, metal.thickness_m, frequency_hz)


def strip_resistance_ohm_per_m(width_m: float, metal: Metal, frequency_hz: float) -> float:
    """Series resistance per metre of a strip, its crowding at the edges included.

    Returns
    -------
    float
        ``Rs/(pi w) [1 + ln(4 pi w/t)/pi]``, ohm per metre; 0 for a perfect conductor.
    """
    if metal.conductivity_s_per_m is None:
        return 0.0
    return face_resistance_ohm(metal, frequency_hz) * crowding_per_m(width_m, metal.thickness_m)
