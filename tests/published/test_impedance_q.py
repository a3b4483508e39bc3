"""Q from the impedance, against the example computed from the published definition."""

import numpy as np
import pytest

from simkit.response.features import impedance_q, matched_bandwidth


def circuit(row, frequency):
    turn, resonance = 2 * np.pi * frequency, 2 * np.pi * row["resonance_hz"]
    return row["resistance_ohm"] + 1j * row["inductance_h"] * (turn - resonance**2 / turn)


@pytest.mark.published("yaghjian_best")
def test_reference_agrees_with_omega_l_over_r(row):
    q = 2 * np.pi * row["resonance_hz"] * row["inductance_h"] / row["resistance_ohm"]
    row.check("q", q)
    row.check("bandwidth", (row["vswr"] - 1) / (np.sqrt(row["vswr"]) * q))


@pytest.mark.published("yaghjian_best")
def test_impedance_q(row):
    frequency = np.linspace(0.8, 1.2, 401) * row["resonance_hz"]
    q = impedance_q(frequency, circuit(row, frequency))[200]
    row.check("q", q)
    row.check("bandwidth", float(matched_bandwidth(q, row["vswr"])))
