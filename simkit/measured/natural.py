"""Natural modes read from a measured sweep, given to the modes of a simulated case.

Like with like: a pole of the measured curve with a pole of the simulated current. The poles move
with the reference plane, which a sweep alone does not tell, but the simulated curve does: the
antenna between them is nearly the same.
"""

from __future__ import annotations

import numpy as np
from scipy.optimize import linear_sum_assignment

from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.measured.poles import MeasuredMode, MeasuredModes, measured_modes
from simkit.measured.selection import CaseModes

DELAY_SIGMA_S = 6e-12
"""Standard error of a delay found by comparing phases: a feed capacitance off by 0.1 pF in 50 ohm
turns the phase like 3 ps, a width or carrier that pulls one mode by 1 % about as much."""

TOLD_DELAY_S = 40e-12
"""A reference plane off by more, 12 mm of air, is worth a word."""

NEAR = 0.035
"""How far from where the dips put it a measured natural mode may lie, relative."""

LEAST_POINTS = 31


def delay_beside_s(
    measurement: Measurement, frequency_hz: FloatArray, simulated: ComplexArray, ratio: float
) -> float:
    """Delay of the measured curve behind the simulated one, one way.

    Parameters
    ----------
    measurement : Measurement
    frequency_hz : (F,) float array
    simulated : (F,) complex array
        Reflection at the feed, for the same reference resistance.
    ratio : float
        Measured over simulated frequencies, by which the simulated curve is stretched first.

    Returns
    -------
    float
        From the slope of the phase between the curves through zero at no frequency, weighted by
        what both reflect; 0 if too few points are common.
    """
    at = measurement.frequency_hz / ratio
    inside = (at >= frequency_hz[0]) & (at <= frequency_hz[-1])
    if inside.sum() < LEAST_POINTS:
        return 0.0
    model = np.interp(at[inside], frequency_hz, simulated.real) + 1j * np.interp(
        at[inside], frequency_hz, simulated.imag
    )
    between = measurement.reflection[inside] * model.conj()
    turn, f = np.unwrap(np.angle(between)), measurement.frequency_hz[inside]
    # The branch of the phase is that with which the line through zero fits best.
    turn = turn - 2 * np.pi * np.round((turn[0] - _slope(f, turn, between) * f[0]) / (2 * np.pi))
    weight = np.abs(between)
    total = float(weight @ f**2)
    return float(-(weight @ (f * turn)) / total / (4 * np.pi)) if total > 0 else 0.0


def _slope(f: FloatArray, turn: FloatArray, between: ComplexArray) -> float:
    weight = np.abs(between)
    total = float(weight.sum())
    if not total > 0:
        return 0.0
    away = f - float(weight @ f) / total
    moment = float(weight @ away**2)
    return float(weight @ (away * turn)) / moment if moment > 0 else 0.0


def natural_beside(
    measurement: Measurement, frequency_hz: FloatArray, simulated: ComplexArray, ratio: float
) -> MeasuredModes:
    """Read the natural modes of a sweep with the reference plane settled by a simulated curve.

    Parameters are those of `delay_beside_s`.
    """
    delay = delay_beside_s(measurement, frequency_hz, simulated, ratio)
    return measured_modes(measurement, delay_s=delay, delay_sigma_s=DELAY_SIGMA_S)


def natural_pairs(
    modes: CaseModes, found: MeasuredModes, ratio: float, dip_ratios: FloatArray
) -> dict[int, MeasuredMode]:
    """Give each mode of a case the supported measured one that lies where its dip says.

    Parameters
    ----------
    modes : CaseModes
    found : MeasuredModes
    ratio : float
        Measured over simulated frequencies of all modes.
    dip_ratios : (M,) float array
        The same of each mode's own dip, NaN without a pair; a mode without one stands by `ratio`.
    """
    sure = [mode for mode in found.modes if mode.supported]
    if not sure or not len(modes.natural_hz):
        return {}
    expected = modes.natural_hz * np.where(np.isfinite(dip_ratios), dip_ratios, ratio)
    seen = np.array([mode.frequency_hz for mode in sure])
    off = np.abs(np.log(seen[None] / expected[:, None]))
    rows, columns = linear_sum_assignment(off)
    return {
        int(i): sure[j] for i, j in zip(rows, columns, strict=True) if off[i, j] <= np.log1p(NEAR)
    }
