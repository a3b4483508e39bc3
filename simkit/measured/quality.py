"""What a sweep says about its own quality."""

from __future__ import annotations

import numpy as np

from simkit.measured.dips import smooth
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement

RIPPLE_LIMIT = 0.022
"""Amplitude of a ripple in |reflection| that a calibration should have removed, a mean over the
sweep: what a directivity of -36 dB and a source match of -38 dB leave behind a cable read 0.020 at
most in forty draws, a cable of 60 ohm in a system of 50 reads 0.023."""

LEAST_RIPPLE_DELAY_S = 1.5e-9
"""Ripple of a shorter delay, one way, cannot be told from the antenna: a mode of Q 5 at 900 MHz
rings as long."""

PEAK_OVER_MEDIAN = 12.0
"""A ripple is a line in the transform; noise is none."""

NOISY = 0.01
LONG_CABLE_S = 0.3e-9
LONGEST_DELAY_S = 20e-9
"""Four metres of cable: longer ones are calibrated out, or seen by their ripple."""
ENOUGH = 1000
"""Points that tell a delay well; more only take time."""


Curve = tuple[FloatArray, ComplexArray]
"""Frequencies, Hz, and the reflection at them."""


def quality_notes(measurement: Measurement, expected: Curve | None = None) -> list[str]:
    """Return one sentence for each thing a user should know before trusting a sweep.

    |reflection| above 1 and too few points across a dip are noted by the reader and by the search
    for dips.

    Parameters
    ----------
    measurement : Measurement
    expected : (F,) float array and (F,) complex array, optional
        What the sweep should show. Its phase turns too, behind a feed line or through a deep dip,
        and only what the measured one turns more is noted.
    """
    notes = level_notes(measurement)
    extra = _mean_delay_s(measurement) if expected is None else _delay_s(measurement, expected)
    if extra > LONG_CABLE_S:
        notes.append(
            f"the phase turns like behind {extra * 1e9:.2f} ns of line, one way: set the port "
            "extension or calibrate at the antenna, else phase cannot be compared"
        )
    return notes


def level_notes(measurement: Measurement) -> list[str]:
    """Return what `quality_notes` has to say of |reflection| alone: noise and ripple."""
    notes = []
    noise = smooth(measurement).noise
    if noise > NOISY:
        notes.append(
            f"the noise is {noise:.3f} in |reflection| ({20 * np.log10(noise):.0f} dB): narrow the "
            "analyser's bandwidth, raise its power or average"
        )
    ripple = _ripple(measurement)
    if ripple is not None:
        delay, size = ripple
        notes.append(
            f"a ripple of {size:.3f} in |reflection| with a period of {0.5e-6 / delay:.0f} MHz "
            f"({delay * 1e9:.1f} ns one way): the cable does not seem to be calibrated out"
        )
    return notes


def _ripple(measurement: Measurement) -> tuple[float, float] | None:
    """Delay (one way) and amplitude of the strongest long-delay ripple of |reflection|."""
    frequency = measurement.frequency_hz
    count = len(frequency)
    span = float(frequency[-1] - frequency[0])
    if count < 64 or span <= 0:
        return None
    even = np.linspace(frequency[0], frequency[-1], count)
    size = np.interp(even, frequency, np.abs(measurement.reflection))
    window = np.hanning(count)
    lines = 2 * np.abs(np.fft.rfft((size - size.mean()) * window)) / window.sum()
    delays = np.arange(len(lines)) / (2 * span)
    far = np.flatnonzero(delays >= LEAST_RIPPLE_DELAY_S)
    far = far[far > 6]
    if len(far) < 8:
        return None
    place = int(far[np.argmax(lines[far])])
    if lines[place] < RIPPLE_LIMIT or lines[place] < PEAK_OVER_MEDIAN * np.median(lines[far]):
        return None
    return float(delays[place]), float(lines[place])


def _delay_s(measurement: Measurement, expected: Curve) -> float:
    """One-way delay that lays the measured curve best over the expected one, 0 or more.

    The phases themselves would not do: near a match one curve may run round the origin, and the
    other beside it.
    """
    f = measurement.frequency_hz
    common = (f >= expected[0][0]) & (f <= expected[0][-1])
    if np.count_nonzero(common) < 2:
        return 0.0
    every = 1 + np.count_nonzero(common) // ENOUGH
    f, gamma = f[common][::every], measurement.reflection[common][::every]
    product = gamma * np.conj(np.interp(f, expected[0], expected[1]))
    span, step = float(np.ptp(f)), float(np.median(np.diff(f)))
    # Beyond the longest one the samples cannot tell it from a shorter one.
    delays = np.arange(0.0, min(LONGEST_DELAY_S, 0.25 / step), 1 / (64 * span))
    turned = np.exp(4j * np.pi * np.multiply.outer(delays, f - f[0]))
    return float(delays[np.argmax(np.abs(turned @ product))])


def _mean_delay_s(measurement: Measurement) -> float:
    """One-way delay of the mean turn of phase, weighted by the power reflected."""
    gamma, frequency = measurement.reflection, measurement.frequency_hz
    turn = np.unwrap(np.angle(gamma))
    weight = np.abs(gamma) ** 2
    total = float(weight.sum())
    if not total > 0:
        return 0.0
    away = frequency - float(weight @ frequency) / total
    moment = float(weight @ away**2)
    # All the power at one frequency: there is no slope to speak of.
    if not moment > 1e-9 * total * float(np.ptp(frequency)) ** 2:
        return 0.0
    slope = float(weight @ (away * turn)) / moment
    return max(-slope / (4 * np.pi), 0.0)
