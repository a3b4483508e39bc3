"""Dips found in noisy sweeps against the same curves without noise."""

import re
from pathlib import Path

import numpy as np
import pytest

from simkit.measured.dips import LEAST_PROMINENCE, measured_dips, smooth
from simkit.measured.measurement import Measurement
from simkit.response.features import find_dips, reflection


def branch(frequency, resistance, inductance, resonance):
    return resistance + 2j * np.pi * inductance * (frequency - resonance**2 / frequency)


def antenna(points, delay_s=0.0):
    """Three modes, the middle one hardly excited and narrow, behind a cable."""
    frequency = np.linspace(0.3e9, 3.0e9, points)
    admittance = (
        1 / branch(frequency, 70.0, 60e-9, 0.9e9)
        + 1 / branch(frequency, 100.0, 45e-9, 2.7e9)
        + 1 / branch(frequency, 1500.0, 2e-6, 1.8e9)
        + 2j * np.pi * frequency * 0.1e-12
    )
    gamma = reflection(1 / admittance, 50.0) * np.exp(-2j * np.pi * frequency * delay_s)
    return frequency, gamma


def measured(frequency, gamma, noise=0.0, seed=5):
    rng = np.random.default_rng(seed)
    shape = gamma.shape
    disturbance = rng.standard_normal(shape) + 1j * rng.standard_normal(shape)
    return Measurement(Path("bench.s1p"), frequency, gamma + noise * disturbance, 50.0)


@pytest.mark.parametrize("delay_s", [0.0, 3e-9])
@pytest.mark.parametrize(
    # Allowed: a tenth of the noise as a part of the band of the widest dip (10 %), rounded up.
    ("noise", "off"),
    [(0.0, 1e-5), (1e-3, 1e-3), (1e-2, 4e-3)],
)
def test_dips_survive_noise_and_a_cable(noise, off, delay_s):
    frequency, gamma = antenna(801, delay_s)
    truth = find_dips(frequency, gamma)
    found, notes = measured_dips(measured(frequency, gamma, noise))
    assert [d.frequency_hz for d in found] == pytest.approx(
        [d.frequency_hz for d in truth], rel=off
    )
    # Depth: three times the noise left after smoothing (a third of it) over |reflection| of 0.17.
    assert [d.return_loss_db for d in found] == pytest.approx(
        [d.return_loss_db for d in truth], abs=0.01 + 8.7 * noise / 0.17
    )
    assert notes == []


def test_noise_invents_no_dips():
    frequency, gamma = antenna(801)
    for seed in range(20):
        found, _ = measured_dips(measured(frequency, gamma, 1e-2, seed))
        assert len(found) == 3


def test_pure_noise_has_no_dip_and_says_so():
    frequency = np.linspace(0.3e9, 3e9, 601)
    found, notes = measured_dips(measured(frequency, np.full(601, 0.95 + 0j), 2e-2))
    assert found == []
    assert any("no dip stands out" in note for note in notes)


def test_strong_noise_hides_the_shallow_dip_and_says_so():
    frequency, gamma = antenna(401)
    found, notes = measured_dips(measured(frequency, gamma, 4e-2))
    assert len(found) == 2
    assert any("hides dips shallower" in note for note in notes)


def test_ripple_of_a_residual_directivity_is_no_dip():
    frequency = np.linspace(0.3e9, 3e9, 601)
    cable = np.exp(-2j * np.pi * frequency * 5e-9)
    gamma = 0.9 + 0.45 * LEAST_PROMINENCE * cable
    assert measured_dips(measured(frequency, gamma))[0] == []
    gamma = 0.9 + 0.7 * LEAST_PROMINENCE * cable
    assert len(measured_dips(measured(frequency, gamma))[0]) == 13


def test_noise_is_estimated_and_reduced():
    frequency, gamma = antenna(801)
    sweep = smooth(measured(frequency, gamma, 5e-3))
    # Standard deviation of an estimate from 801 points is 4 %; smoothing adds correlation.
    assert sweep.noise == pytest.approx(5e-3, rel=0.1)
    left = np.sqrt(np.mean(np.abs(sweep.reflection - gamma) ** 2) / 2)
    # The window is chosen where rounding-off by the cubics is about as large as the noise.
    assert sweep.remaining_noise < left < 2 * sweep.remaining_noise
    assert sweep.remaining_noise < sweep.noise / 2


def test_a_dip_between_few_points_is_noted():
    frequency = np.linspace(0.3e9, 3.0e9, 271)
    gamma = reflection(branch(frequency, 60.0, 600e-9, 1.0e9), 50.0)
    found, notes = measured_dips(measured(frequency, gamma))
    assert len(found) == 1
    assert any("one point within its band; measure with a finer step" in note for note in notes)


@pytest.mark.parametrize(
    ("offset_hz", "said"),
    [
        (0.0, "has only one point within its band; measure with a finer step"),
        (5e6, r"falls between two measured points, none is within its 10 dB width of \d\.\d"),
    ],
)
def test_none_and_one_point_within_a_dip_have_words_of_their_own(offset_hz, said):
    """A series branch of Q 84 on steps of 10 MHz, more than its dip is wide at 10 dB."""
    frequency = np.arange(0.5e9, 1.5e9, 10e6) + offset_hz
    gamma = reflection(branch(frequency, 60.0, 800e-9, 1.0e9), 50.0)
    (dip,), notes = measured_dips(measured(frequency, gamma))
    (note,) = [note for note in notes if f"the dip at {dip.frequency_hz / 1e6:.1f} MHz" in note]
    assert re.search(said, note)
    assert not re.search(r"\b[01] points", note)


def test_shortest_sweep_works():
    frequency, gamma = antenna(11)
    sweep = smooth(measured(frequency, gamma))
    assert sweep.window == 5
    measured_dips(measured(frequency, gamma))
