"""One-port curves over frequency: what is to be matched, kept as a bounded reflection."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike
from scipy.interpolate import CubicSpline

from simkit.feedline.checks import ComplexArray, FeedlineError, FloatArray, frequencies, positive
from simkit.feedline.checks import quantity as q

if TYPE_CHECKING:
    from simkit.measured.measurement import Measurement


FEW, MANY = 12, 200
"""At so few frequencies a long curve is evaluated from the samples around each of them."""


@dataclass(frozen=True, eq=False)
class OnePort:
    """A load over frequency.

    Attributes
    ----------
    frequency_hz : (F,) float
        Ascending.
    reflection : (F,) complex
        1 for an open circuit, -1 for a short one.
    reference_ohm : float
        Resistance it refers to.

    Raises
    ------
    FeedlineError
        If frequencies do not ascend, or a value is not finite.
    """

    frequency_hz: FloatArray
    reflection: ComplexArray
    reference_ohm: float = 50.0

    def __post_init__(self) -> None:
        positive("reference resistance", self.reference_ohm, "ohm")
        f = frequencies(self.frequency_hz)
        gamma = np.atleast_1d(np.asarray(self.reflection, dtype=np.complex128))
        if gamma.shape != f.shape:
            raise FeedlineError(
                f"a load has {gamma.size} values at {f.size} frequencies: give one for each"
            )
        if np.any(np.diff(f) <= 0):
            raise FeedlineError("the frequencies of a load must ascend without repeats")
        if not np.isfinite(gamma).all():
            place = float(f[~np.isfinite(gamma)][0])
            raise FeedlineError(f"the load has no finite reflection at {q(place, 'Hz')}")
        object.__setattr__(self, "frequency_hz", f)
        object.__setattr__(self, "reflection", gamma)

    @classmethod
    def from_impedance(
        cls, frequency_hz: ArrayLike, impedance_ohm: ArrayLike, reference_ohm: float = 50.0
    ) -> OnePort:
        """Return a load by its impedance; infinite stands for an open circuit."""
        from simkit.response.features import reflection

        positive("reference resistance", reference_ohm, "ohm")
        f = np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
        impedance = np.broadcast_to(np.asarray(impedance_ohm, dtype=np.complex128), f.shape)
        return cls(f, reflection(impedance, reference_ohm), reference_ohm)

    @classmethod
    def from_measurement(cls, measurement: Measurement) -> OnePort:
        """Return a measured sweep as a load."""
        return cls(measurement.frequency_hz, measurement.reflection, measurement.reference_ohm)

    @property
    def impedance_ohm(self) -> ComplexArray:
        """Impedance, (F,) complex; infinite where the reflection is 1."""
        return impedance_of(self.reflection, self.reference_ohm)

    def referred_to(self, reference_ohm: float) -> OnePort:
        """Return the same load for another reference resistance."""
        positive("reference resistance", reference_ohm, "ohm")
        step = (reference_ohm - self.reference_ohm) / (reference_ohm + self.reference_ohm)
        moved = (self.reflection - step) / (1 - step * self.reflection)
        return OnePort(self.frequency_hz, moved, reference_ohm)

    def at(self, frequency_hz: ArrayLike) -> OnePort:
        """Return the load at other frequencies, on a smooth curve through its reflection.

        Raises
        ------
        FeedlineError
            If one lies outside the curve's own.
        """
        wanted = frequencies(frequency_hz)
        low, high = self.frequency_hz[[0, -1]]
        slack = 1e-9 * high
        if wanted.min() < low - slack or wanted.max() > high + slack:
            raise FeedlineError(
                f"the load is known from {q(low, 'Hz')} to {q(high, 'Hz')}, not from "
                f"{q(float(wanted.min()), 'Hz')} to {q(float(wanted.max()), 'Hz')}: "
                "narrow the band, or sweep or measure a wider one"
            )
        if len(self.frequency_hz) == 1:
            return OnePort(wanted, np.repeat(self.reflection, len(wanted)), self.reference_ohm)
        inside = np.clip(wanted, low, high)
        if len(wanted) <= FEW and len(self.frequency_hz) > MANY:
            return OnePort(wanted, self._near(inside), self.reference_ohm)
        curve = CubicSpline(self.frequency_hz, self.reflection)
        return OnePort(wanted, curve(inside), self.reference_ohm)

    def _near(self, frequency_hz: FloatArray) -> ComplexArray:
        """Reflection at a few frequencies, from the samples around each."""
        from simkit.response.near import Near

        place = np.searchsorted(self.frequency_hz, frequency_hz, side="right") - 1
        place = np.clip(place, 0, len(self.frequency_hz) - 2)
        each = zip(frequency_hz, place, strict=True)
        return np.array(
            [Near(self.frequency_hz, self.reflection, int(at))(float(f)) for f, at in each]
        )


def impedance_of(reflection: ComplexArray, reference_ohm: float) -> ComplexArray:
    """Return R (1 + reflection) / (1 - reflection), infinite where the reflection is 1."""
    open_circuit = reflection == 1
    safe = np.where(open_circuit, 0, reflection)
    impedance = reference_ohm * (1 + safe) / (1 - safe)
    return np.asarray(np.where(open_circuit, complex(np.inf), impedance), dtype=np.complex128)
