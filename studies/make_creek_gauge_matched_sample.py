"""Make the invented measurement of the matched creek gauge, at its connector.

    python studies/make_creek_gauge_matched_sample.py

writes `creek_gauge_matched_build_2.s1p` beside this file. No such antenna was ever built. The
dipole is that of `make_creek_gauge_sample.py` with other dimensions; the stepped pair of strips
between it and the connector is reckoned here by formulas and chain matrices of its own, not by
simkit's feed line: cut a little wrong, held apart by thin foam, and losing a little.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
from make_creek_gauge_sample import (
    REFERENCE_OHM,
    Build,
    Complex,
    Real,
    analyser_reading,
    antenna_impedance,
)

from simkit.response.features import reflection

TARGET = Path(__file__).with_name("creek_gauge_matched_build_2.s1p")
SEED = 870
FREQUENCY_HZ = np.linspace(600e6, 1200e6, 601)
LIGHT_M_PER_S = 299_792_458.0
FREE_SPACE_OHM = 376.730313668

BUILD_2 = Build(75.7e-3, 76.2e-3, 7.9e-3, 2.2e-3)
"""Wished were arms of 76 mm, a width of 8 mm and a gap of 2 mm."""

# The pair of strips as cut, from the antenna to the connector: length and width, metres.
PAIR_M = ((17.9e-3, 5.1e-3), (79.4e-3, 10.5e-3))
SEPARATION_M = 2.05e-3
FOAM_PERMITTIVITY = 1.02
LOSS_DB_PER_M = 0.3


def pair_ohm(width_m: float) -> float:
    """Impedance of two strips face to face in air, by conformal mapping of wide plates.

    Wheeler's formula for strips wider than their separation (from memory), within 1 %.
    """
    ratio = width_m / SEPARATION_M
    fringe = np.log(np.pi * np.e / 2) + np.log(ratio + 0.94)
    return float(FREE_SPACE_OHM / (ratio + 2 * np.log(2) / np.pi + fringe / np.pi))


def behind_pair(frequency_hz: Real, impedance_ohm: Complex) -> Complex:
    """Impedance at the connector: the transmission-line formula, section by section."""
    seen = impedance_ohm
    neper = LOSS_DB_PER_M * np.log(10) / 20
    gamma = neper + 2j * np.pi * frequency_hz * np.sqrt(FOAM_PERMITTIVITY) / LIGHT_M_PER_S
    for length, width in PAIR_M:
        own = pair_ohm(width) / np.sqrt(FOAM_PERMITTIVITY)
        turn = np.tanh(gamma * length)
        seen = own * (seen + own * turn) / (own + seen * turn)
    return np.asarray(seen)


def measured_reflection() -> Complex:
    """The invented sweep."""
    at_feed = antenna_impedance(FREQUENCY_HZ, BUILD_2)
    true = reflection(behind_pair(FREQUENCY_HZ, at_feed), REFERENCE_OHM)
    return analyser_reading(FREQUENCY_HZ, true, SEED)


def touchstone_text(frequency_hz: Real, gamma: Complex) -> str:
    """The sweep as Touchstone 1.1."""
    head = [
        "! INVENTED DATA FOR DEMONSTRATION - nothing was built or measured.",
        "! Creek gauge link with its matching network, build 2, at the connector: simulated with",
        "! other dimensions and other formulas than the study, with analyser errors and noise",
        "! added (studies/make_creek_gauge_matched_sample.py).",
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
