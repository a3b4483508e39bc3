"""Make the invented measurement of the creek gauge's first build.

    python studies/make_creek_gauge_sample.py

writes `creek_gauge_build_1.s1p` beside this file. No such antenna was ever built: the sweep is
simulated, then spoilt the way a workshop and a bench spoil it, so that `simkit compare` has
something honest to disagree with. It is made on purpose by another way than `simkit run` goes:
other dimensions (cut a little short, unequal arms, narrow strip), a mesh of its own, one solution
per frequency, and the errors of a calibrated one-port analyser with noise on top.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from simkit.engine.pynec import solve_wires
from simkit.geometry.wires import Wire
from simkit.response.features import reflection

TARGET = Path(__file__).with_name("creek_gauge_build_1.s1p")
SEED = 868
FREQUENCY_HZ = np.linspace(300e6, 3e9, 541)
REFERENCE_OHM = 50.0
EPSILON0 = 8.8541878128e-12

# As cut, in metres; wished were arms of 76 mm, a width of 8 mm and a gap of 2 mm.
ARM_WEST_M = 75.1e-3
ARM_EAST_M = 74.3e-3
WIDTH_M = 7.7e-3
GAP_M = 2.4e-3

# Rules for a flat strip as one wire: radius a quarter of the width, open ends shortened by 0.075
# widths; segments of 0.61 widths act like a feed gap of 0.47 widths.
RADIUS_M = WIDTH_M / 4
SHORTENED_M = 0.075 * WIDTH_M
SEGMENT_M = 0.61 * WIDTH_M
MODEL_GAP_M = 0.47 * WIDTH_M

# What is left of the analyser's errors after calibration.
DIRECTIVITY_DB = -36.0
SOURCE_MATCH_DB = -38.0
TRACKING_DB = 0.05
EXTENSION_ERROR_S = 4e-12
"""The port extension misses the end of the cable by this much time, one way (1.2 mm in air)."""
CABLE_S = 1.1e-9
NOISE = 1.2e-3
"""Standard deviation of real and imaginary part."""

Complex = NDArray[np.complex128]
Real = NDArray[np.float64]


def wires() -> tuple[list[Wire], int]:
    """West arm, feed, east arm, and the segment of the feed."""
    half = SEGMENT_M / 2
    west = -(GAP_M / 2 + ARM_WEST_M - SHORTENED_M)
    east = GAP_M / 2 + ARM_EAST_M - SHORTENED_M
    count_west = round((-half - west) / SEGMENT_M)
    count_east = round((east - half) / SEGMENT_M)
    return [
        Wire((west, 0.0, 0.0), (-half, 0.0, 0.0), count_west),
        Wire((-half, 0.0, 0.0), (half, 0.0, 0.0), 1),
        Wire((half, 0.0, 0.0), (east, 0.0, 0.0), count_east),
    ], count_west


def antenna_impedance(frequency_hz: Real) -> Complex:
    """Impedance at the gap as cut; the model's own gap is replaced by a shunt capacitance."""
    parts, feed = wires()
    current = np.array(
        [solve_wires(parts, RADIUS_M, float(f), [[(feed, 1.0)]])[0, feed] for f in frequency_hz]
    )
    capacitance = EPSILON0 * 2 * WIDTH_M / np.pi * np.log(MODEL_GAP_M / GAP_M)
    return np.asarray(1 / (current + 2j * np.pi * frequency_hz * capacitance))


def analyser_reading(frequency_hz: Real, gamma: Complex, seed: int = SEED) -> Complex:
    """What a calibrated analyser shows of a true reflection: its residual errors and noise."""
    rng = np.random.default_rng(seed)
    turns = 2j * np.pi * frequency_hz
    phase = rng.uniform(0, 2 * np.pi, 3)
    directivity = 10 ** (DIRECTIVITY_DB / 20) * np.exp(1j * phase[0] - turns * 2 * CABLE_S)
    match = 10 ** (SOURCE_MATCH_DB / 20) * np.exp(1j * phase[1] - turns * CABLE_S)
    ripple = np.cos(phase[2] + 2 * np.pi * frequency_hz * CABLE_S)
    tracking = 10 ** (TRACKING_DB * ripple / 20)
    moved = gamma * np.exp(-turns * 2 * EXTENSION_ERROR_S)
    noise = rng.standard_normal(gamma.shape) + 1j * rng.standard_normal(gamma.shape)
    return np.asarray(directivity + tracking * moved / (1 - match * moved) + NOISE * noise)


def measured_reflection() -> Complex:
    """The invented sweep."""
    true = reflection(antenna_impedance(FREQUENCY_HZ), REFERENCE_OHM)
    return analyser_reading(FREQUENCY_HZ, true)


def touchstone_text(frequency_hz: Real, gamma: Complex) -> str:
    """The sweep as Touchstone 1.1."""
    head = [
        "! INVENTED DATA FOR DEMONSTRATION - nothing was built or measured.",
        "! Creek gauge link, build 1: simulated with other dimensions and another mesh than the",
        "! study, with analyser errors and noise added (studies/make_creek_gauge_sample.py).",
        f"# Hz S RI R {REFERENCE_OHM:g}",
    ]
    rows = [
        f"{f:.0f} {g.real:+.6f} {g.imag:+.6f}" for f, g in zip(frequency_hz, gamma, strict=True)
    ]
    return "\n".join([*head, *rows, ""])


def main() -> None:
    """Write the file."""
    TARGET.write_text(touchstone_text(FREQUENCY_HZ, measured_reflection()), encoding="ascii")
    print(f"written: {TARGET}")


if __name__ == "__main__":
    main()
