"""From currents to the impedance at the study's feed gap."""

from __future__ import annotations

import numpy as np
from scipy.constants import epsilon_0

from simkit.geometry.wires import FloatArray
from simkit.response.rational import ComplexArray


def gap_susceptance_s(
    frequency_hz: FloatArray, width_m: float, model_gap_m: float, study_gap_m: float
) -> FloatArray:
    """Susceptance to add at the feed to go from one gap in a strip to another, siemens.

    Parameters
    ----------
    frequency_hz : (F,) float array
    width_m, model_gap_m, study_gap_m : float

    Returns
    -------
    (F,) float array
        ``omega eps0 (2 w/pi) ln(g_model/g_study)``: the charge on the two edges of a gap between
        coplanar plates grows with the logarithm of its inverse width.
    """
    capacitance = epsilon_0 * 2 * width_m / np.pi * np.log(model_gap_m / study_gap_m)
    return np.asarray(2 * np.pi * frequency_hz * capacitance)


def feed_impedance_ohm(
    feed_current_a: ComplexArray,
    frequency_hz: FloatArray,
    width_m: float,
    model_gap_m: float,
    study_gap_m: float,
) -> ComplexArray:
    """Impedance at the study's feed gap, ohm.

    Parameters
    ----------
    feed_current_a : (F,) complex array
        Current through the engine's source for 1 V, ampere.
    frequency_hz : (F,) float array
    width_m : float
        Strip width at the feed.
    model_gap_m, study_gap_m : float
        Gap the engine's source acts like, and the gap the study asks for.

    Returns
    -------
    (F,) complex array
    """
    susceptance = gap_susceptance_s(frequency_hz, width_m, model_gap_m, study_gap_m)
    return np.asarray(1 / (feed_current_a + 1j * susceptance), dtype=np.complex128)
