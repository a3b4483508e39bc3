"""What lies between the model's curve and the measured one besides the values that are fitted.

Every term has a usual size; a fit treats it as a random number of that standard deviation, so that
its uncertainty enters every interval. Order: model, joint at the feed, delay, analyser.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from simkit.measured.measurement import ComplexArray, FloatArray

MODEL_ERROR = 0.002
"""Standard error of a modelled mode frequency, relative, at least: 0.15 % of the rules that turn
strips into wires, and nearly as much for what no drawing has, solder and the sheet's waves."""


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

    @classmethod
    def of_model(cls, relative_error: float) -> ErrorSizes:
        """Usual sizes with the error that the rules state for the antenna's mode frequencies."""
        error = max(relative_error, MODEL_ERROR)
        return cls(model=error / 4, mode=error)


ANALYSER = 7
"""Terms each measured file has for itself: delay, tracking, source match, directivity."""

ECHO_DELAYS_S = np.linspace(-1e-9, 1e-9, 21)
"""What leaks past the antenna, and what returns to it, may do so this long after the reference
plane or, after a port extension, before it; one way, some 0.2 m of cable at most. Steps are half of
what a band of 2.5 GHz tells apart."""


@dataclass(frozen=True, eq=False)
class AnalyserErrors:
    """One file's terms, SI; all of them sit at the reference plane."""

    delay_s: float
    tracking: complex
    source_match: complex
    directivity: complex

    @classmethod
    def of(cls, sigmas: FloatArray, sizes: ErrorSizes) -> AnalyserErrors:
        """From numbers in standard deviations: delay, then pairs of real and imaginary parts."""
        pairs = sigmas[1::2] + 1j * sigmas[2::2]
        return cls(
            float(sigmas[0]) * sizes.delay_s,
            complex(pairs[0]) * sizes.tracking,
            complex(pairs[1]) * sizes.source_match,
            complex(pairs[2]) * sizes.directivity,
        )

    def apply(self, frequency_hz: FloatArray, gamma: ComplexArray) -> ComplexArray:
        """What the analyser shows of a reflection."""
        turned = gamma * np.exp(-4j * np.pi * frequency_hz * self.delay_s)
        through = (1 + self.tracking) * turned / (1 - self.source_match * turned)
        return np.asarray(self.directivity + through)


@dataclass(frozen=True, eq=False)
class Echoes:
    """Directivity and source match at a distance from the reference plane, as correlated noise.

    They add (d + s gamma^2) exp(-2j w t) for every delay t one way, d and s random. The fit
    does not look for the amplitudes: it weighs its residuals by the inverse root of their
    covariance, which comes to the same. Taken for noise that differs from point to point, such a
    ripple was the largest part of the scatter of fitted permittivities.

    Attributes
    ----------
    shapes : (F, K) complex array
        Orthonormal.
    sizes : (K,) float array
        Standard deviation of each, of real and imaginary part.
    """

    shapes: ComplexArray
    sizes: FloatArray

    @classmethod
    def of(cls, frequency_hz: FloatArray, gamma: ComplexArray, sizes: ErrorSizes) -> Echoes:
        """Echoes in a measured reflection, both (F,); the sizes are shared out over the delays."""
        turns = np.exp(-4j * np.pi * np.outer(frequency_hz, ECHO_DELAYS_S))
        again = turns * gamma[:, np.newaxis] ** 2
        parts = np.hstack([sizes.directivity * turns, sizes.source_match * again])
        shapes, scale, _ = np.linalg.svd(parts / np.sqrt(len(ECHO_DELAYS_S)), full_matrices=False)
        return cls(shapes, scale)

    def whitened(self, off: ComplexArray, weight: float) -> ComplexArray:
        """Residual over the root of its covariance, where that of its noise is 1/weight^2; (F,)."""
        keep = 1 / np.sqrt(1 + (weight * self.sizes) ** 2)
        return weight * (off - self._part(off, 1 - keep))

    def removed(self, off: ComplexArray, weight: float) -> ComplexArray:
        """Residual without its likeliest echoes, (F,)."""
        return off - self._part(off, 1 - 1 / (1 + (weight * self.sizes) ** 2))

    def _part(self, off: ComplexArray, factor: FloatArray) -> ComplexArray:
        return np.asarray(self.shapes @ (factor * (self.shapes.conj().T @ off)))


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
