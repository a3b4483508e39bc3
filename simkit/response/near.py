"""A smooth curve between its samples, from the few that lie around."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

NEIGHBOURS = 6
"""Samples through which a polynomial stands for the curve between two of them.

It errs with the sixth power of the step: by 4e-6 of a resonance's peak if its half width has ten
samples, by 2e-4 if it has five, and by 5 % if it has two (the pole lies one half width away).
"""

SPLINE_REACH = 20
"""Samples on either side on which the slope of a spline depends.

What lies farther away acts on it by 0.27 (2 - sqrt 3) less for each sample: under 1e-11.
"""


def samples_near(place: int) -> slice:
    """Samples on which the slope of a spline near one of them depends."""
    return slice(max(0, place - SPLINE_REACH), place + SPLINE_REACH + 2)


class Near:
    """Polynomial through the samples around one of them, for one step before and behind it.

    Parameters
    ----------
    frequency : (F,) float array
        Ascending.
    samples : (F,) complex array
    place : int
        Which of them.
    """

    def __init__(self, frequency: FloatArray, samples: ComplexArray, place: int) -> None:
        first = min(max(0, place - NEIGHBOURS // 2 + 1), max(0, len(frequency) - NEIGHBOURS))
        part = slice(first, first + NEIGHBOURS)
        self.centre = float(frequency[place])
        self.step = float(frequency[part][-1] - frequency[first]) / NEIGHBOURS
        powers = np.vander((frequency[part] - self.centre) / self.step)
        self.factors: list[complex] = np.linalg.solve(powers, samples[part]).tolist()

    def __call__(self, frequency_hz: float) -> complex:
        """Return the curve at a frequency near the sample."""
        at = (frequency_hz - self.centre) / self.step
        value = 0j
        for factor in self.factors:
            value = value * at + factor
        return value

    def imag(self, frequency_hz: float) -> float:
        """Return the imaginary part of the curve there."""
        return self(frequency_hz).imag
