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
from typing import NamedTuple

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


class Build(NamedTuple):
    """Dimensions of a dipole as cut, metres.

    Rules for a flat strip as one wire: radius a quarter of the width, open ends shortened by 0.075
    widths; segments of 0.61 widths act like a feed gap of 0.47 widths.
    """

    arm_west_m: float
    arm_east_m: float
    width_m: float
    gap_m: float

    @property
    def segment_m(self) -> float:
        """Length of the segment with the source."""
        return 0.61 * self.width_m

    @property
    def model_gap_m(self) -> float:
        """Feed gap that this segment acts like."""
        return 0.47 * self.width_m


BUILD_1 = Build(75.1e-3, 74.3e-3, 7.7e-3, 2.4e-3)
"""Wished were arms of 76 mm, a width of 8 mm and a gap of 2 mm."""

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


def wires(build: Build) -> tuple[list[Wire], int]:
    """West arm, feed, east arm, and the segment of the feed."""
    half = build.segment_m / 2
    shortened = 0.075 * build.width_m
    west = -(build.gap_m / 2 + build.arm_west_m - shortened)
    east = build.gap_m / 2 + build.arm_east_m - shortened
    count_west = round((-half - west) / build.segment_m)
    count_east = round((east - half) / build.segment_m)
    return [
        Wire((west, 0.0, 0.0), (-half, 0.0, 0.0), count_west),
        Wire((-half, 0.0, 0.0), (half, 0.0, 0.0), 1),
        Wire((half, 0.0, 0.0), (east, 0.0, 0.0), count_east),
    ], count_west


def antenna_impedance(frequency_hz: Real, build: Build = BUILD_1) -> Complex:
    """Impedance at the gap as cut; the model's own gap is replaced by a shunt capacitance."""
    parts, feed = wires(build)
    radius = build.width_m / 4
    current = np.array(
        [solve_wires(parts, radius, float(f), [[(feed, 1.0)]])[0, feed] for f in frequency_hz]
    )
    log = np.log(build.model_gap_m / build.gap_m)
    capacitance = EPSILON0 * 2 * build.width_m / np.pi * log
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
