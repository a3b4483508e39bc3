"""Coaxial line by its geometry, and any line by impedance and velocity factor."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.constants import c, epsilon_0, mu_0

from simkit.feedline.checks import (
    FeedlineError,
    frequencies,
    not_negative,
    positive,
    quantity,
)
from simkit.feedline.line import DB_PER_NEPER, Line, LineValues


@dataclass(frozen=True)
class Coaxial(Line):
    """A coaxial line by its geometry: exact below its first higher mode.

    Attributes
    ----------
    inner_m, outer_m : float
        Diameters: of the inner conductor, and of the outer one inside.
    permittivity, loss_tangent : float
        Of the filling.
    conductivity_s_per_m : float, optional
        Of both conductors, solid; no loss in the metal if left out.

    Raises
    ------
    FeedlineError
        If a value is not positive or the inner conductor does not fit in the outer one.
    """

    inner_m: float
    outer_m: float
    permittivity: float = 1.0
    loss_tangent: float = 0.0
    conductivity_s_per_m: float | None = None

    def __post_init__(self) -> None:
        positive("inner diameter", self.inner_m, "m")
        positive("outer diameter", self.outer_m, "m")
        not_negative("loss tangent", self.loss_tangent, "")
        if self.inner_m >= self.outer_m:
            raise FeedlineError(
                f"an inner conductor of {quantity(self.inner_m, 'm')} does not fit in an outer one "
                f"of {quantity(self.outer_m, 'm')}: give the outer one's inside diameter"
            )
        if not 1 <= self.permittivity < np.inf:
            raise FeedlineError(
                f"relative permittivity is {self.permittivity:g}: it must be 1 or more"
            )
        if self.conductivity_s_per_m is not None:
            positive("conductivity", self.conductivity_s_per_m, "S/m")

    @property
    def about(self) -> str:
        """Kind and dimensions in a few words."""
        return (
            f"coaxial line {quantity(self.inner_m, 'm')} / {quantity(self.outer_m, 'm')}, "
            f"permittivity {self.permittivity:g}"
        )

    def values(self, frequency_hz: ArrayLike) -> LineValues:
        """Return the line at each frequency."""
        f = frequencies(frequency_hz)
        omega, ones = 2 * np.pi * f, np.ones(len(f))
        log = np.log(self.outer_m / self.inner_m)
        face = 0 * ones
        if self.conductivity_s_per_m is not None:
            around = (1 / self.inner_m + 1 / self.outer_m) / np.pi
            face = np.sqrt(np.pi * f * mu_0 / self.conductivity_s_per_m) * around
        capacitance = 2 * np.pi * epsilon_0 * self.permittivity / log * ones
        return LineValues(
            f,
            face,
            mu_0 / (2 * np.pi) * log * ones + face / omega,
            omega * capacitance * self.loss_tangent,
            capacitance,
        )

    @property
    def frequency_limit_hz(self) -> float:
        """Cut-off of the first higher mode: a wavelength around the mean circumference, within
        some per cent."""
        mean_m = (self.inner_m + self.outer_m) / 2
        return float(c / (np.pi * mean_m * np.sqrt(self.permittivity)))

    def doubts(self, frequency_hz: ArrayLike) -> tuple[str, ...]:
        """Return what to distrust at these frequencies."""
        highest = float(frequencies(frequency_hz).max())
        if highest <= self.frequency_limit_hz:
            return ()
        return (
            f"{self.about}: above {quantity(self.frequency_limit_hz, 'Hz')} it carries a second "
            f"mode; this is used up to {quantity(highest, 'Hz')}",
        )


@dataclass(frozen=True)
class UniformLine(Line):
    """Any line by impedance and velocity factor, as data sheets of cables have it.

    Attributes
    ----------
    impedance_ohm : float
    velocity_factor : float
        Speed over that of light, up to 1.
    attenuation_db_per_m : float
        At `attenuation_at_hz`, growing with the square root of frequency: the metal's part.
    attenuation_at_hz : float
    loss_tangent : float
        Of the dielectric; its attenuation comes in addition and grows with frequency.

    Raises
    ------
    FeedlineError
        If a value is out of range.
    """

    impedance_ohm: float
    velocity_factor: float = 1.0
    attenuation_db_per_m: float = 0.0
    attenuation_at_hz: float = 1e9
    loss_tangent: float = 0.0

    def __post_init__(self) -> None:
        positive("line impedance", self.impedance_ohm, "ohm")
        not_negative("attenuation", self.attenuation_db_per_m, "dB/m")
        positive("frequency of the attenuation", self.attenuation_at_hz, "Hz")
        not_negative("loss tangent", self.loss_tangent, "")
        if not 0 < self.velocity_factor <= 1:
            raise FeedlineError(
                f"velocity factor is {self.velocity_factor:g}: it must be above 0 and at most 1"
            )

    @property
    def about(self) -> str:
        """Impedance and velocity factor in a few words."""
        return f"line of {self.impedance_ohm:.4g} ohm, velocity factor {self.velocity_factor:.4g}"

    def values(self, frequency_hz: ArrayLike) -> LineValues:
        """Return the line at each frequency."""
        f = frequencies(frequency_hz)
        omega, ones = 2 * np.pi * f, np.ones(len(f))
        speed = self.velocity_factor * c
        growth = np.sqrt(f / self.attenuation_at_hz)
        resistance = 2 * self.impedance_ohm * self.attenuation_db_per_m / DB_PER_NEPER * growth
        capacitance = 1 / (self.impedance_ohm * speed)
        return LineValues(
            f,
            resistance,
            self.impedance_ohm / speed * ones,
            omega * capacitance * self.loss_tangent,
            capacitance * ones,
        )

    @property
    def frequency_limit_hz(self) -> float:
        """None is known."""
        return float("inf")

    def doubts(self, frequency_hz: ArrayLike) -> tuple[str, ...]:
        """Return nothing: the numbers are the user's own."""
        frequencies(frequency_hz)
        return ()
