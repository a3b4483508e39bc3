"""How alike two curves are, by feature selective validation.

References
----------
IEEE Std 1597.1-2008, "Validation of computational electromagnetics computer modeling and
simulations"; A. P. Duffy, A. J. M. Martin, A. Orlandi, G. Antonini, T. M. Benson, M. S. Woolfson,
"Feature selective validation (FSV) for validation of computational electromagnetics (CEM), part I:
the FSV method", IEEE Trans. Electromagn. Compat. 48(3), 2006. The formulas, the constants of the
feature measure and the steps of the window are written from memory of the latter.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from simkit.measured.measurement import FloatArray

OFFSET_BINS = 5
"""Lowest lines of the transform, the mean among them, that make the offset."""

BREAK_SHARE = 0.4
"""Part of the intensity beyond the offset below which the trend lies."""

STEPS = np.array([0.834, 0.667, 0.5, 0.334, 0.167])
"""How the trend fades into the features around the break point."""

GRADES = (
    (0.1, "excellent"),
    (0.2, "very good"),
    (0.4, "good"),
    (0.8, "fair"),
    (1.6, "poor"),
    (np.inf, "very poor"),
)
POINTS = 512


def decibels(reflection: ArrayLike) -> FloatArray:
    """|reflection| in dB, no lower than -60: nothing below is ever measured."""
    return np.asarray(20 * np.log10(np.maximum(np.abs(np.asarray(reflection)), 1e-3)))


def grade(value: float) -> str:
    """Return the word for a difference measure: below 0.1, 0.2, 0.4, 0.8, 1.6 and above."""
    return next(word for limit, word in GRADES if value < limit or limit == np.inf)


@dataclass(frozen=True, eq=False)
class Agreement:
    """Difference measures; means over the band, and point by point.

    Attributes
    ----------
    amplitude, feature, overall : float
        ADM, FDM and GDM of the standard.
    frequency_hz : (N,) float array
    amplitude_at, feature_at, overall_at : (N,) float array
    """

    amplitude: float
    feature: float
    overall: float
    frequency_hz: FloatArray = field(repr=False)
    amplitude_at: FloatArray = field(repr=False)
    feature_at: FloatArray = field(repr=False)
    overall_at: FloatArray = field(repr=False)

    @property
    def grade(self) -> str:
        """Word for the overall measure."""
        return grade(self.overall)

    def as_text(self) -> str:
        """One line."""
        return (
            f"curves agree: {self.grade} (amplitude {self.amplitude:.2f} "
            f"{grade(self.amplitude)}, feature {self.feature:.2f} {grade(self.feature)}, "
            f"overall {self.overall:.2f}; IEEE Std 1597.1)"
        )


def agreement(
    frequency_hz: ArrayLike,
    first: ArrayLike,
    other_frequency_hz: ArrayLike,
    second: ArrayLike,
    points: int = POINTS,
) -> Agreement:
    """Compare two real curves over the band they share.

    Parameters
    ----------
    frequency_hz, other_frequency_hz : (F,), (G,) array_like of float
        Ascending.
    first, second : (F,), (G,) array_like of float
        For instance |reflection| in dB.
    points : int, optional
        Equal steps to which both are brought.

    Returns
    -------
    Agreement

    Raises
    ------
    ValueError
        If the curves share no band or are not finite.
    """
    f, g = np.asarray(frequency_hz, dtype=float), np.asarray(other_frequency_hz, dtype=float)
    a, b = np.asarray(first, dtype=float), np.asarray(second, dtype=float)
    if not (np.isfinite(a).all() and np.isfinite(b).all()):
        raise ValueError("curves must be finite to be compared")
    low, high = max(f[0], g[0]), min(f[-1], g[-1])
    if not low < high:
        raise ValueError("the curves have no frequency in common")
    common = np.linspace(low, high, points)
    parts = _split(np.interp(common, f, a), np.interp(common, g, b))
    amplitude, feature = _amplitude(parts), _feature(parts)
    overall = np.hypot(amplitude, feature)
    return Agreement(
        float(amplitude.mean()),
        float(feature.mean()),
        float(overall.mean()),
        common,
        amplitude,
        feature,
        overall,
    )


Parts = list[tuple[FloatArray, FloatArray, FloatArray]]


def _split(first: FloatArray, second: FloatArray) -> Parts:
    """Offset, trend and features of both curves, the break point being the lower of theirs."""
    lines = [np.fft.rfft(first), np.fft.rfft(second)]
    place = min(_break(line) for line in lines)
    count = len(lines[0])
    offset = np.zeros(count)
    offset[:OFFSET_BINS] = 1.0
    trend = np.zeros(count)
    trend[OFFSET_BINS:place] = 1.0
    stop = min(place + len(STEPS), count)
    trend[place:stop] = STEPS[: stop - place]
    features = 1.0 - trend - offset
    size = len(first)
    return [
        (
            np.fft.irfft(line * offset, size),
            np.fft.irfft(line * trend, size),
            np.fft.irfft(line * features, size),
        )
        for line in lines
    ]


def _break(lines: np.ndarray[tuple[int, ...], np.dtype[np.complex128]]) -> int:
    """Line at which the intensity beyond the offset reaches its share, and five more."""
    intensity = np.cumsum(np.abs(lines[OFFSET_BINS:]))
    # The share of nothing is reached at once.
    reached = int(np.searchsorted(intensity, BREAK_SHARE * intensity[-1]))
    return OFFSET_BINS + reached + 5 - len(STEPS) // 2


def _relative(first: FloatArray, second: FloatArray, weight: float = 1.0) -> FloatArray:
    """Difference of sizes over `weight` times their mean sum; 0 where both are nothing."""
    a, b = np.abs(first), np.abs(second)
    mean = weight * float(np.mean(a + b))
    return np.asarray((a - b) / mean) if mean > 1e-12 else np.zeros_like(a)


def _amplitude(parts: Parts) -> FloatArray:
    (offset1, trend1, _), (offset2, trend2, _) = parts
    offset = np.abs(_relative(offset1, offset2))
    return np.asarray(np.abs(_relative(trend1, trend2)) + offset * np.exp(offset))


def _feature(parts: Parts) -> FloatArray:
    (_, trend1, fine1), (_, trend2, fine2) = parts
    slope = _relative(np.gradient(trend1), np.gradient(trend2), 2.0)
    detail = _relative(np.gradient(fine1), np.gradient(fine2), 6.0)
    bend = _relative(np.gradient(np.gradient(fine1)), np.gradient(np.gradient(fine2)), 7.2)
    return np.asarray(2 * np.abs(slope + detail + bend))
