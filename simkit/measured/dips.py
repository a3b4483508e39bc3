"""Dips in measured sweeps: smoothing against noise, then the search used for simulated curves."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.signal import savgol_coeffs, savgol_filter

from simkit.errors import MeasurementError
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.response.features import Dip, find_dips

ORDER = 3
"""Local cubics: the lowest order that keeps place and depth of a minimum to first order."""

BLOCKS = 12
"""The smoothing window is judged on this many parts of the sweep, so that a window which hurts the
one narrow dip is not chosen for the sake of the flat rest."""

LEAST_PROMINENCE = 0.03
"""Least rise of |reflection| on both sides of a measured dip.

Twice a residual directivity of -36 dB, usual after calibration: with a cable's changing phase the
residual makes ripples of that height which are not the antenna's.
"""

NOISE_FACTOR = 8.0
"""A dip must also exceed the noise left after smoothing by this much: the extremes of a thousand
noisy points lie 3.3 sigma above and below, and sigma itself is only known to some 10 %."""

PIN_REACH = 0.02
"""How near a pinned frequency must be to the dip it means."""

FEW_POINTS = 5
"""Fewer points than these within the band of a dip leave its depth to chance."""


@dataclass(frozen=True, eq=False)
class SmoothSweep:
    """A measured reflection with the noise smoothed out.

    Attributes
    ----------
    frequency_hz : (F,) float array
    reflection : (F,) complex array
    noise : float
        Standard deviation of the noise in |reflection| as measured.
    remaining_noise : float
        The same after smoothing.
    window : int
        Points in the smoothing window, 1 for none.
    """

    frequency_hz: FloatArray
    reflection: ComplexArray
    noise: float
    remaining_noise: float
    window: int


def smooth(measurement: Measurement) -> SmoothSweep:
    """Smooth a measured reflection by local cubics over a window chosen from the data.

    The complex value is smoothed, as noise is symmetric there and not in |reflection|; the mean
    delay is taken out before and put back after, so that a long cable does not count as structure.
    Each point is predicted from its neighbours alone with every window (leave-one-out); the window
    whose error is nowhere far above the best one there is taken.

    Parameters
    ----------
    measurement : Measurement

    Returns
    -------
    SmoothSweep
    """
    gamma = measurement.reflection
    turn = np.exp(-1j * _step_angle(gamma) * np.arange(len(gamma)))
    flat = gamma * turn
    windows = _windows(len(flat))
    errors = [_left_out_errors(flat, window) for window in windows]
    window = windows[_best(errors)]
    level = float(np.sqrt(np.median(errors[windows.index(window)]) / np.log(2) / 2))
    centre = float(savgol_coeffs(window, ORDER)[window // 2])
    # A left-out error holds the point's own noise and that of its prediction.
    noise = level * float(np.sqrt(1 - centre))
    return SmoothSweep(
        frequency_hz=measurement.frequency_hz,
        reflection=_smoothed(flat, window) * turn.conj(),
        noise=noise,
        remaining_noise=noise * float(np.sqrt(centre)),
        window=window,
    )


def measured_dips(measurement: Measurement) -> tuple[list[Dip], list[str]]:
    """Find the dips of a measured sweep and what is to be said about them.

    Parameters
    ----------
    measurement : Measurement

    Returns
    -------
    dips : list of Dip
        Lowest frequency first.
    notes : list of str
        One sentence for each reason to doubt them.
    """
    sweep = smooth(measurement)
    prominence = max(LEAST_PROMINENCE, NOISE_FACTOR * sweep.remaining_noise)
    dips = find_dips(sweep.frequency_hz, sweep.reflection, min_prominence=prominence)
    notes = []
    if prominence > LEAST_PROMINENCE:
        notes.append(
            f"noise of {sweep.noise:.2g} in |reflection| hides dips shallower than "
            f"{prominence:.2g}: average more sweeps"
        )
    if not dips:
        notes.append(
            "no dip stands out of the measured curve: is the antenna connected, and does the sweep "
            "cover its resonances?"
        )
    points = [_points_across(sweep.frequency_hz, dip) for dip in dips]
    notes += [_few_points(dip, n) for dip, n in zip(dips, points, strict=True) if n < FEW_POINTS]
    return dips, notes


def _few_points(dip: Dip, points: int) -> str:
    """Say how badly a dip is sampled."""
    place, width = f"the dip at {dip.frequency_hz / 1e6:.1f} MHz", dip.bandwidth_hz / 1e6
    if not points:
        return (
            f"{place} falls between two measured points, none is within its 10 dB width of "
            f"{width:.3g} MHz: its depth is uncertain; measure with a finer step"
        )
    only = "one point" if points == 1 else f"{points} points"
    return f"{place} has only {only} within its band; measure with a finer step"


def pinned_dip(dips: Sequence[Dip], frequency_hz: float, measurement: Measurement) -> int:
    """Place of the measured dip a user means by a frequency.

    Raises
    ------
    MeasurementError
        If none lies within 2 % of it.
    """
    off = [abs(dip.frequency_hz / frequency_hz - 1) for dip in dips]
    if not off or min(off) > PIN_REACH:
        known = ", ".join(f"{dip.frequency_hz / 1e6:.1f}" for dip in dips)
        raise MeasurementError(
            f"{measurement.path}: no measured dip lies within {PIN_REACH:.0%} of the pinned "
            f"{frequency_hz / 1e6:g} MHz; "
            + (f"they are at {known} MHz" if dips else "there is none at all")
        )
    return int(np.argmin(off))


def _step_angle(gamma: ComplexArray) -> float:
    """Mean change of phase from point to point, radian."""
    return float(np.angle(np.sum(gamma[1:] * gamma[:-1].conj())))


def _windows(points: int) -> list[int]:
    """Odd window lengths, each about 1.4 times the last, up to an eighth of the sweep."""
    lengths = [5]
    while lengths[-1] * 1.4 < points / 8:
        lengths.append(int(lengths[-1] * 1.4) | 1 if lengths[-1] > 5 else 7)
    return lengths


def _smoothed(values: ComplexArray, window: int) -> ComplexArray:
    real, imaginary = (
        savgol_filter(part, window, ORDER, mode="interp") for part in (values.real, values.imag)
    )
    return np.asarray(real + 1j * imaginary)


def _left_out_errors(values: ComplexArray, window: int) -> FloatArray:
    """|error|^2 of predicting each inner point from the others in its window."""
    half = window // 2
    centre = savgol_coeffs(window, ORDER)[half]
    error = np.abs(values - _smoothed(values, window)) ** 2 / (1 - centre) ** 2
    return np.asarray(error[half : len(values) - half])


def _best(errors: list[FloatArray]) -> int:
    """The window whose mean error is least above the best one in the worst part of the sweep."""
    blocks = min(BLOCKS, len(errors[-1]) // 4 or 1)
    score = np.array([[part.mean() for part in np.array_split(e, blocks)] for e in errors])
    # A reflection has rounding errors of this square: below it no window is better than another.
    floor = np.maximum(score.min(axis=0), np.finfo(float).eps ** 2)
    return int(np.argmin((score / floor).max(axis=1)))


def _points_across(frequency: FloatArray, dip: Dip) -> int:
    if not np.isfinite(dip.bandwidth_hz):
        return FEW_POINTS
    half = dip.bandwidth_hz / 2
    return int(np.sum(np.abs(frequency - dip.frequency_hz) <= half))
