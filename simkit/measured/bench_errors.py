"""What lies between the model's curve and the measured one besides the values that are fitted.

Every term has a usual size; a fit treats it as a random number of that standard deviation, so that
its uncertainty enters every interval. Order: model, joint at the feed, delay, analyser.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from simkit.measured.measurement import ComplexArray, FloatArray

MODEL_ERROR = 0.002
"""Standard error of a modelled mode frequency, relative: 0.15 % of the strip-to-wire rules against
full-wave references, the rest for the carrier."""


@dataclass(frozen=True)
class ErrorSizes:
    """Standard deviations of the terms; 0 leaves one out.

    Attributes
    ----------
    model : float
        Relative, of all modelled frequencies together.
    mode : float
        Relative, of each mode's frequency on its own, besides.
    level : float
        Relative, of the impedance: the model's resistance and reactance slope.
    capacitance_f : float
        Across the feed: solder, the connector's flange, the model of the gap.
    delay_s : float
        One way, what the port extension misses; 20 ps are 6 mm of air.
    directivity, source_match, tracking : float
        Of real and imaginary part. Left after calibration; 0.011 each make -36 dB, a tracking of
        0.02 makes 0.25 dB.
    """

    model: float = MODEL_ERROR / 4
    mode: float = MODEL_ERROR
    level: float = 0.005
    capacitance_f: float = 0.03e-12
    delay_s: float = 20e-12
    directivity: float = 0.011
    source_match: float = 0.009
    tracking: float = 0.02


CABLE_DELAYS_S = (0.0,)
"""What leaks past the antenna returns after these times, one way; the directivity is shared out
over them. One without delay is enough: with six over a metre of cable the fit explained its own
model's faults by them, and the permittivity of synthetic prototypes came out a third worse."""

ANALYSER = 5 + 2 * len(CABLE_DELAYS_S)
"""Terms each measured file has for itself: delay, tracking, source match, directivity."""


@dataclass(frozen=True, eq=False)
class AnalyserErrors:
    """One file's terms, SI; `directivity` for each of `CABLE_DELAYS_S`."""

    delay_s: float
    tracking: complex
    source_match: complex
    directivity: ComplexArray

    @classmethod
    def of(cls, sigmas: FloatArray, sizes: ErrorSizes) -> AnalyserErrors:
        """From numbers in standard deviations: delay, then pairs of real and imaginary parts."""
        pairs = sigmas[1::2] + 1j * sigmas[2::2]
        return cls(
            float(sigmas[0]) * sizes.delay_s,
            complex(pairs[0]) * sizes.tracking,
            complex(pairs[1]) * sizes.source_match,
            pairs[2:] * sizes.directivity / np.sqrt(len(CABLE_DELAYS_S)),
        )

    def apply(self, frequency_hz: FloatArray, gamma: ComplexArray) -> ComplexArray:
        """What the analyser shows of a reflection."""
        turned = gamma * np.exp(-4j * np.pi * frequency_hz * self.delay_s)
        leak = np.exp(-4j * np.pi * np.outer(frequency_hz, CABLE_DELAYS_S)) @ self.directivity
        return np.asarray(leak + (1 + self.tracking) * turned / (1 - self.source_match * turned))


def with_capacitance(
    frequency_hz: FloatArray, gamma: ComplexArray, capacitance_f: float, reference_ohm: float
) -> ComplexArray:
    """Return the reflection with a capacitance across the port."""
    half = 0.5j * 2 * np.pi * frequency_hz * capacitance_f * reference_ohm
    # b/2 in y + jb, written in reflections so that a short needs no care.
    return np.asarray((gamma - half * (1 + gamma)) / (1 + half * (1 + gamma)))


def warp(frequency_hz: FloatArray, places_hz: FloatArray, errors: FloatArray) -> FloatArray:
    """Frequencies at which to read the model when each mode is off by an error of its own.

    Between the modes the error is taken as straight over the logarithm of frequency.
    """
    if not len(places_hz):
        return frequency_hz
    order = np.argsort(places_hz)
    error = np.interp(np.log(frequency_hz), np.log(places_hz[order]), errors[order])
    return np.asarray(frequency_hz * (1 + error))
