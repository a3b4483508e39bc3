"""The best match over a band that any network without loss can give, after Bode and Fano."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.optimize import nnls

from simkit.feedline.checks import ComplexArray, FloatArray
from simkit.feedline.checks import quantity as q
from simkit.feedline.oneport import OnePort
from simkit.feedline.solutions import check_load

LARGEST_DB = 100.0
"""Return losses are not given above this: nothing real is matched better."""

POOR_FIT = 0.1
"""Largest distance in the reflection at which one resonator still stands for the load."""


@dataclass(frozen=True)
class MatchBound:
    """A resonator fitted to a load over a band, and what it allows.

    Attributes
    ----------
    kind : {"series", "parallel"}
    resistance_ohm, inductance_h, capacitance_f : float
        Of the resonator. A series one without capacitor has infinite capacitance, a parallel one
        without coil infinite inductance.
    return_loss_db : float
        Largest worst return loss over the band for a network without loss; at most 100.
    misfit : float
        Largest distance between the reflections of load and resonator, both against its resistance.
    """

    kind: Literal["series", "parallel"]
    resistance_ohm: float
    inductance_h: float
    capacitance_f: float
    return_loss_db: float
    misfit: float

    @property
    def resonance_hz(self) -> float:
        """Of the resonator; 0 or infinite if it lacks one of its reactances."""
        product = self.inductance_h * self.capacitance_f
        return 1 / (2 * math.pi * math.sqrt(product)) if product > 0 else math.inf

    def q_at(self, frequency_hz: float) -> float:
        """Return the Q of the resonator tuned to a frequency by a further reactance.

        Of its two reactances the larger one counts.
        """
        omega = 2 * math.pi * frequency_hz
        coil, capacitor = omega * self.inductance_h, 1 / (omega * self.capacitance_f or math.inf)
        if self.kind == "series":
            return max(coil, capacitor) / self.resistance_ohm
        branch = [1 / x if x > 0 else 0.0 for x in (coil, capacitor)]
        return self.resistance_ohm * max(branch)

    def as_text(self, centre_hz: float) -> str:
        """Return the bound in one or two sentences."""
        text = (
            f"as a {self.kind} resonator of {self.resistance_ohm:.3g} ohm with Q "
            f"{self.q_at(centre_hz):.3g} at {q(centre_hz, 'Hz')}, "
        )
        if self.return_loss_db < LARGEST_DB:
            text += (
                f"no network without loss gives more than {self.return_loss_db:.1f} dB return "
                "loss over the band (Bode, Fano)"
            )
        else:
            text += "the load sets no limit that matters over this band (Bode, Fano)"
        if self.misfit > POOR_FIT:
            text += (
                f"; the load differs from it by {self.misfit:.2f} in reflection, so take the bound "
                "as a rough one"
            )
        return text


def match_bound(load: OnePort, start_hz: float, stop_hz: float, points: int = 41) -> MatchBound:
    """Fit a series and a parallel resonator to a load over a band, and bound its match.

    Parameters
    ----------
    load : OnePort
    start_hz, stop_hz : float
    points : int

    Returns
    -------
    MatchBound
        Of the resonator that fits better.

    Raises
    ------
    FeedlineError
        If the load is purely reactive at a point of the band.

    Notes
    -----
    For a series resonator the integrals of ln(1/|reflection|) over omega and over -1/omega are at
    most pi R / L and pi R C; for a parallel one pi / (R C) and pi L / R. Spent evenly on the
    band alone, both give a bound; they agree, and make pi / Q over the relative bandwidth, if the
    resonance is the geometric mean of the band.

    References
    ----------
    R. M. Fano, "Theoretical limitations on the broadband matching of arbitrary impedances",
    J. Franklin Inst. 249, 1950 (from memory).
    """
    f = np.linspace(start_hz, stop_hz, points)
    impedance = load.at(f).impedance_ohm
    for frequency, value in zip(f, impedance, strict=True):
        check_load(complex(value), f" at {q(float(frequency), 'Hz')}")
    series, parallel = (
        _fitted(f, curve, start_hz, stop_hz, kind)
        for kind, curve in (("series", impedance), ("parallel", 1 / impedance))
    )
    return series if series.misfit <= parallel.misfit else parallel


def _fitted(
    f: FloatArray, curve: ComplexArray, start_hz: float, stop_hz: float, kind: str
) -> MatchBound:
    """Least squares of curve = r + j w a - j b / w with a, b >= 0; the dual for admittances."""
    omega = 2 * np.pi * f
    middle = math.sqrt(omega[0] * omega[-1])
    resistance = float(np.mean(curve.real))
    matrix = np.stack([omega / middle, -middle / omega], -1) * resistance
    (rising, falling), _ = nnls(matrix, curve.imag)
    rises = rising * resistance / middle  # L in series, C in parallel
    falls = falling * resistance * middle  # 1/C in series, 1/L in parallel
    model = resistance + 1j * (omega * rises - falls / omega)
    apart = [(z - resistance) / (z + resistance) for z in (curve, model)]
    misfit = float(np.abs(apart[0] - apart[1]).max())
    low, high = 2 * np.pi * start_hz, 2 * np.pi * stop_hz
    area = math.pi * resistance
    neper = min(_share(area, rises * (high - low)), _share(area, falls * (1 / low - 1 / high)))
    best = min(20 / math.log(10) * neper, LARGEST_DB)
    inverse = 1 / falls if falls > 0 else math.inf
    if kind == "series":
        return MatchBound("series", resistance, float(rises), inverse, best, misfit)
    return MatchBound("parallel", 1 / resistance, inverse, float(rises), best, misfit)


def _share(area: float, cost: float) -> float:
    """Area over cost, cut off where it does not matter any more: a cost may be 0."""
    return area / cost if area < LARGEST_DB * cost else LARGEST_DB
