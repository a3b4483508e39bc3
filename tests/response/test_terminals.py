"""From source current to the impedance at the study's gap."""

import numpy as np
import pytest
from scipy.constants import epsilon_0

from simkit.response.terminals import feed_impedance_ohm, gap_susceptance_s

FREQUENCY = np.array([0.3e9, 0.9e9, 2.7e9])
CURRENT = np.array([0.002 + 0.003j, 0.013 - 0.002j, 0.008 + 0.004j])


def test_the_same_gap_needs_no_correction():
    found = feed_impedance_ohm(CURRENT, FREQUENCY, 0.006, 0.002, 0.002)
    assert found == pytest.approx(1 / CURRENT, rel=1e-14)


def test_a_narrower_gap_has_the_logarithm_more_capacitance():
    """C = eps0 (2 w / pi) ln(g_model / g_study): 6 mm, from 2 to 0.6 mm, 0.0407 pF."""
    susceptance = gap_susceptance_s(FREQUENCY, 0.006, 0.002, 0.0006)
    capacitance = susceptance / (2 * np.pi * FREQUENCY)
    by_hand = epsilon_0 * 0.012 / np.pi * np.log(2 / 0.6)
    assert capacitance == pytest.approx(np.full(3, by_hand), rel=1e-12)
    assert by_hand == pytest.approx(0.0407e-12, rel=2e-3)
    assert np.all(gap_susceptance_s(FREQUENCY, 0.006, 0.002, 0.003) < 0)


def test_correction_is_a_shunt():
    found = feed_impedance_ohm(CURRENT, FREQUENCY, 0.006, 0.002, 0.0006)
    shunt = gap_susceptance_s(FREQUENCY, 0.006, 0.002, 0.0006)
    assert 1 / found == pytest.approx(CURRENT + 1j * shunt, rel=1e-14)
