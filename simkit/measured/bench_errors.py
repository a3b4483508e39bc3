"""What lies between the model's curve and the measured one besides the values that are fitted.

Every term has a usual size; a fit treats it as a random number of that standard deviation, so that
its uncertainty enters every interval. Order: model, joint at the feed, delay, analyser.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from simkit.measured.measurement import ComplexArray, FloatArray

MODEL_ERROR = 0.0015
"""Standard error of a modelled mode frequency, relative: the strip-to-wire rules against full-wave
references."""


@dataclass(frozen=True)
class ErrorSizes:
    """Standard deviations of the terms; 0 leaves one out.

    Attributes
    ----------
    model : float
        Relative, of all modelled frequencies together.
    mode : float
        Relative, of each mode's frequency on its own, besides.
    capacitance_f : float
        Across the feed: solder, the connector's flange, the model of the gap.
    delay_s : float
        One way, what the port extension misses; 20 ps are 6 mm of air.
    directivity, source_match, tracking : float
        Of real and imaginary part. Left after calibration; 0.011 each make -36 dB, a tracking of
        0.02 makes 0.25 dB.
    """

    model: float = MODEL_ERROR
    mode: float = 0.7 * MODEL_ERROR
    capacitance_f: float = 0.03e-12
    delay_s: float = 20e-12
    directivity: float = 0.011
    source_match: float = 0.009
    tracking: float = 0.02


ANALYSER = (
    "delay",
    "directivity, real",
    "directivity, imaginary",
    "tracking, real",
    "tracking, imaginary",
    "source match, real",
    "source match, imaginary",
)
"""Terms each measured file has for itself."""


@dataclass(frozen=True)
class AnalyserErrors:
    """One file's terms, SI."""

    delay_s: float
    directivity: complex
    tracking: complex
    source_match: complex

    @classmethod
    def of(cls, sigmas: FloatArray, sizes: ErrorSizes) -> AnalyserErrors:
        """From numbers in standard deviations, in the order of `ANALYSER`."""
        s = [float(value) for value in sigmas]
        return cls(
            s[0] * sizes.delay_s,
            sizes.directivity * complex(s[1], s[2]),
            sizes.tracking * complex(s[3], s[4]),
            sizes.source_match * complex(s[5], s[6]),
        )

    def apply(self, frequency_hz: FloatArray, gamma: ComplexArray) -> ComplexArray:
        """What the analyser shows of a reflection."""
        turned = gamma * np.exp(-4j * np.pi * frequency_hz * self.delay_s)
        return np.asarray(
            self.directivity + (1 + self.tracking) * turned / (1 - self.source_match * turned)
        )


def with_capacitance(
    frequency_hz: FloatArray, gamma: ComplexArray, capacitance_f: float, reference_ohm: float
) -> ComplexArray:
    """Return the reflection with a capacitance across the port."""
    half = 0.5j * 2 * np.pi * frequency_hz * capacitance_f * reference_ohm
    # b/2 in y + jb, written in reflections so that a short needs no care.
    return np.asarray((gamma - half * (1 + gamma)) / (1 + half * (1 + gamma)))


def warp(
    frequency_hz: FloatArray, places_hz: FloatArray, errors: FloatArray
) -> FloatArray:
    """Frequencies at which to read the model when each mode is off by an error of its own.

    Between the modes the error is taken as straight over the logarithm of frequency.
    """
    if not len(places_hz):
        return frequency_hz
    order = np.argsort(places_hz)
    error = np.interp(np.log(frequency_hz), np.log(places_hz[order]), errors[order])
    return np.asarray(frequency_hz * (1 + error))
