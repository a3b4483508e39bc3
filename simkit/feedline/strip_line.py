"""What the three lines of flat strip share: checks, values from the plane solution, doubts."""

from __future__ import annotations

from abc import abstractmethod
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike
from scipy.constants import c, epsilon_0, mu_0

from simkit.feedline.checks import FeedlineError, frequencies, not_negative, positive, quantity
from simkit.feedline.limits import (
    DISPERSION,
    RADIATED,
    WIDEST_WAVELENGTHS,
    radiation_hz,
    width_hz,
)
from simkit.feedline.line import Line, LineValues, metal_impedance_ohm
from simkit.feedline.pair import Crowding, Pair, face_to_face

FULL_SHEET = 10.0
"""A sheet "without end" is solved with this many separations beyond the strips: 0.01 % off."""

SOLVED_RATIOS = (0.01, 100.0)
"""Width over distance for which the plane solution has been checked."""

SKIN_DEPTHS = 2.0
"""Metal thinner than this carries current that crowds less at its edges than the model takes."""


@dataclass(frozen=True)
class Static:
    """Capacitance, inductance and metal of a line, frequency apart."""

    air: float
    permittivity: complex
    sheet: Crowding
    plate: Crowding

    @property
    def impedance_ohm(self) -> float:
        """Without loss."""
        return float(mu_0 * c / self.air / np.sqrt(self.permittivity.real))


class StripLine(Line):
    """What the three lines of strips share."""

    thickness_m: float
    permittivity: float
    loss_tangent: float
    overhang_m: float | None
    conductivity_s_per_m: float | None

    @cached_property
    @abstractmethod
    def static(self) -> Static:
        """The plane solution, cached by cross-section."""

    @property
    @abstractmethod
    def _distance_m(self) -> float:
        """Between the two currents, for radiation."""

    @property
    @abstractmethod
    def _across_m(self) -> float:
        """Largest size of the cross-section that carries field."""

    @property
    @abstractmethod
    def _dispersion_limit_hz(self) -> float:
        """Where the effective permittivity has risen by `DISPERSION`."""

    @property
    @abstractmethod
    def _ratio(self) -> float:
        """Width over distance."""

    def _check(self, lengths: dict[str, float]) -> None:
        for name, value in lengths.items():
            positive(name, value, "m")
        not_negative("metal thickness", self.thickness_m, "m")
        not_negative("loss tangent", self.loss_tangent, "")
        if self.overhang_m is not None:
            not_negative("overhang of the sheet", self.overhang_m, "m")
        if not 1 <= self.permittivity < np.inf:
            raise FeedlineError(
                f"relative permittivity is {self.permittivity:g}: it must be 1 or more"
            )
        if self.conductivity_s_per_m is not None:
            positive("conductivity", self.conductivity_s_per_m, "S/m")
            positive("thickness of metal with loss", self.thickness_m, "m")

    @property
    def _epsilon(self) -> complex:
        lossy = self.permittivity > 1
        return complex(self.permittivity, -self.permittivity * self.loss_tangent * lossy)

    def values(self, frequency_hz: ArrayLike) -> LineValues:
        """Return the line at each frequency.

        Parameters
        ----------
        frequency_hz : array_like of float, (F,)

        Raises
        ------
        FeedlineError
            If a frequency is not positive.
        """
        f = frequencies(frequency_hz)
        omega = 2 * np.pi * f
        static, ones = self.static, np.ones(len(f))
        metal = np.zeros(len(f), dtype=np.complex128)
        if self.conductivity_s_per_m is not None:
            sigma = self.conductivity_s_per_m
            metal += metal_impedance_ohm(static.sheet, self.thickness_m, sigma, f)
            metal += metal_impedance_ohm(static.plate, np.inf, sigma, f)
        capacitance = epsilon_0 * static.air * static.permittivity
        return LineValues(
            f,
            metal.real,
            mu_0 / static.air * ones + metal.imag / omega,
            -omega * capacitance.imag,
            capacitance.real * ones,
        )

    @property
    def impedance_ohm(self) -> float:
        """Characteristic impedance without loss, ohm."""
        return self.static.impedance_ohm

    @property
    def _limits(self) -> dict[str, float]:
        """Frequency limits by what sets them."""
        radiates = f"the line radiates more than {RADIATED:.0%} of the power it carries"
        wide = f"its cross-section is more than {WIDEST_WAVELENGTHS:g} wavelengths wide"
        risen = f"its effective permittivity has risen by more than {DISPERSION:.0%}"
        return {
            radiates: radiation_hz(self._pair_ohm, self._distance_m),
            wide: width_hz(self._across_m, self.permittivity),
            risen: self._dispersion_limit_hz,
        }

    @property
    def _pair_ohm(self) -> float:
        return self.impedance_ohm

    @property
    def frequency_limit_hz(self) -> float:
        """Lowest of the limits by radiation, width and dispersion."""
        return float(min(self._limits.values()))

    def doubts(self, frequency_hz: ArrayLike) -> tuple[str, ...]:
        """Return what to distrust in `values` at these frequencies, one sentence each."""
        f = frequencies(frequency_hz)
        found = [
            f"{self.about}: above {quantity(limit, 'Hz')} {why}; this is used up to "
            f"{quantity(float(f.max()), 'Hz')}"
            for why, limit in self._limits.items()
            if f.max() > limit
        ]
        low, high = SOLVED_RATIOS
        if not low <= self._ratio <= high:
            found.append(
                f"{self.about}: width over distance is {self._ratio:.3g}; the solution has been "
                f"checked from {low:g} to {high:g}"
            )
        if self.conductivity_s_per_m is not None:
            sigma = self.conductivity_s_per_m
            skin_m = 1 / np.sqrt(np.pi * f.min() * mu_0 * sigma)
            if self.thickness_m < SKIN_DEPTHS * skin_m:
                found.append(
                    f"{self.about}: metal of {quantity(self.thickness_m, 'm')} is thinner than "
                    f"{SKIN_DEPTHS:g} skin depths ({quantity(SKIN_DEPTHS * skin_m, 'm')}) at "
                    f"{quantity(float(f.min()), 'Hz')}; its loss may be overrated"
                )
        return tuple(found)

    def _sheet_words(self) -> str:
        if self.permittivity == 1:
            return " in air"
        wide = ""
        if self.overhang_m is not None:
            more = f"{quantity(self.overhang_m, 'm')} wider on each side"
            wide = f", {more if self.overhang_m else 'no wider than the strips'}"
        return f" on a sheet of permittivity {self.permittivity:g}{wide}"


def scaled(pair: Pair, unit_m: float) -> tuple[Crowding, Crowding]:
    first, second = pair.crowding
    return first.times(1 / unit_m), second.times(1 / unit_m)


NONE = Crowding(0.0, 0.0, 0.0)


def facing(
    lower_m: float,
    upper_m: float,
    apart_m: float,
    thickness_m: float,
    overhang_m: float | None,
    epsilon: complex,
) -> Pair:
    """Solve with the separation as unit, so that equal shapes share one solution."""
    beyond_m = FULL_SHEET * apart_m if overhang_m is None else overhang_m
    sizes = (lower_m, upper_m, apart_m, thickness_m, beyond_m if epsilon != 1 else 0.0)
    return face_to_face(*(rounded(size / apart_m) for size in sizes), epsilon)


def rounded(value: float) -> float:
    return float(f"{value:.9g}")
