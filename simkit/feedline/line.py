"""What every line has in common: values per metre at each frequency, and doubts about them."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.constants import c, mu_0

from simkit.feedline.checks import ComplexArray, FloatArray
from simkit.feedline.pair import Crowding

DB_PER_NEPER = 20 / np.log(10)

SOLID_DEPTHS = 50.0
"""Metal thicker than so many skin depths is as good as solid."""


@dataclass(frozen=True, eq=False)
class LineValues:
    """What a line is at each of F frequencies: arrays (F,), per metre of length.

    Attributes
    ----------
    frequency_hz : float
    resistance_ohm, inductance_h, conductance_s, capacitance_f : float
    """

    frequency_hz: FloatArray
    resistance_ohm: FloatArray
    inductance_h: FloatArray
    conductance_s: FloatArray
    capacitance_f: FloatArray

    @property
    def _series(self) -> ComplexArray:
        omega = 2 * np.pi * self.frequency_hz
        return np.asarray(self.resistance_ohm + 1j * omega * self.inductance_h)

    @property
    def _shunt(self) -> ComplexArray:
        omega = 2 * np.pi * self.frequency_hz
        return np.asarray(self.conductance_s + 1j * omega * self.capacitance_f)

    @property
    def impedance_ohm(self) -> ComplexArray:
        """Characteristic impedance; a little capacitive where metal loss is the larger one."""
        return np.asarray(np.sqrt(self._series / self._shunt))

    @property
    def propagation_per_m(self) -> ComplexArray:
        """alpha + j beta: neper and radian per metre."""
        # Each root apart: the product may turn past the negative real axis.
        return np.asarray(np.sqrt(self._series) * np.sqrt(self._shunt))

    @property
    def permittivity(self) -> FloatArray:
        """Effective relative permittivity: the square of light's speed over the line's."""
        beta = self.propagation_per_m.imag
        return np.asarray((beta * c / (2 * np.pi * self.frequency_hz)) ** 2)

    @property
    def wavelength_m(self) -> FloatArray:
        """Wavelength on the line, metres."""
        return np.asarray(2 * np.pi / self.propagation_per_m.imag)

    @property
    def conductor_db_per_m(self) -> FloatArray:
        """Attenuation by the metal, dB per metre (loss small)."""
        return np.asarray(DB_PER_NEPER * self.resistance_ohm / 2 / self.impedance_ohm.real)

    @property
    def dielectric_db_per_m(self) -> FloatArray:
        """Attenuation by the dielectric, dB per metre (loss small)."""
        return np.asarray(DB_PER_NEPER * self.conductance_s / 2 * self.impedance_ohm.real)

    @property
    def attenuation_db_per_m(self) -> FloatArray:
        """All attenuation, dB per metre."""
        return np.asarray(DB_PER_NEPER * self.propagation_per_m.real)


class Line(ABC):
    """What every line can say of itself."""

    @property
    @abstractmethod
    def about(self) -> str:
        """Kind and dimensions in a few words."""

    @abstractmethod
    def values(self, frequency_hz: ArrayLike) -> LineValues:
        """Return the line at each frequency."""

    @abstractmethod
    def doubts(self, frequency_hz: ArrayLike) -> tuple[str, ...]:
        """Return what to distrust in `values` at these frequencies, one sentence each."""

    @property
    @abstractmethod
    def frequency_limit_hz(self) -> float:
        """Highest frequency without a doubt; infinite if the model knows no limit."""

    def impedance_at(self, frequency_hz: float) -> float:
        """Return the real part of the characteristic impedance at one frequency."""
        return float(self.values(frequency_hz).impedance_ohm[0].real)

    def wavelength_at(self, frequency_hz: float) -> float:
        """Return the wavelength on the line at one frequency, metres."""
        return float(self.values(frequency_hz).wavelength_m[0])


def metal_impedance_ohm(
    shares: Crowding, thickness_m: float, conductivity_s_per_m: float, frequency_hz: FloatArray
) -> ComplexArray:
    """Series impedance per metre of metal that carries current as charge lies on it.

    Parameters
    ----------
    shares : Crowding
        1 per metre.
    thickness_m : float
        Infinite for solid metal.
    conductivity_s_per_m : float
    frequency_hz : (F,) float

    Returns
    -------
    (F,) complex

    Notes
    -----
    A sheet with surface currents J1 and J2 on its faces takes the power per area
    Re{(eta/2)[(J1^2 + J2^2) coth(g t) + 2 J1 J2 / sinh(g t)]}, g = (1 + j)/delta,
    eta = g/sigma: for thin metal that of the sum of both in the sheet.
    """
    skin_m = 1 / np.sqrt(np.pi * frequency_hz * mu_0 * conductivity_s_per_m)
    eta = (1 + 1j) / (conductivity_s_per_m * skin_m)
    once = np.exp(-(1 + 1j) * np.minimum(thickness_m / skin_m, SOLID_DEPTHS))
    coth, csch = (1 + once**2) / (1 - once**2), 2 * once / (1 - once**2)
    return np.asarray(eta * (shares.faces * coth + shares.between * csch + shares.sides))
