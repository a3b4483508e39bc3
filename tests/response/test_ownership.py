"""Which mode owns which dip, peak and resonance, on sums of two modes."""

import numpy as np
import pytest

from simkit.response.features import conductance_peaks, find_dips, reflection
from simkit.response.modes import NaturalMode
from simkit.response.ownership import owned_features

FREQUENCY = np.linspace(0.3e9, 3e9, 1351)
SHAPE = np.ones(3, dtype=complex)


def mode(frequency_ghz, q, resistance_ohm, half_waves=1):
    """A pole whose own conductance has its maximum 1/R near its frequency."""
    pole = frequency_ghz * 1e9 * (1 + 0.5j / q)
    return NaturalMode(pole, half_waves, SHAPE, -1j * pole.imag / resistance_ohm)


def impedance(modes, capacitance=0.0):
    admittance = sum(m.feed_admittance(FREQUENCY) for m in modes)
    return 1 / (admittance + 2j * np.pi * FREQUENCY * capacitance)


def test_each_mode_owns_what_it_causes():
    modes = [mode(0.9, 5, 70), mode(2.8, 9, 100, 3)]
    first, third = owned_features(modes, FREQUENCY, impedance(modes), 50.0)
    assert first.peak.frequency_hz == pytest.approx(0.9e9, rel=0.01)
    assert first.peak.resistance_ohm == pytest.approx(70, rel=0.03)
    assert first.dip.frequency_hz == pytest.approx(0.9e9, rel=0.02)
    assert third.dip.frequency_hz == pytest.approx(2.8e9, rel=0.02)
    assert third.peak.resistance_ohm == pytest.approx(100, rel=0.03)
    assert first.series.frequency_hz == pytest.approx(0.9e9, rel=0.02)
    assert first.series.kind == "series"
    assert third.q == pytest.approx(9, rel=0.1)


def test_a_mode_the_feed_hardly_excites_owns_nothing():
    """Even if it lies nearer to the dip than the mode that causes it."""
    strong, weak = mode(0.9, 4, 60), mode(0.912, 30, 1e5, 2)
    modes = [strong, weak]
    # The capacitance moves the dip off its pole.
    first, second = owned_features(modes, FREQUENCY, impedance(modes, 0.4e-12), 50.0)
    assert abs(first.dip.frequency_hz - 0.912e9) < abs(first.dip.frequency_hz - 0.9e9)
    assert second.dip is None
    assert second.peak is None
    assert np.isnan(second.q)


def test_of_two_features_of_one_mode_the_stronger_is_kept():
    """A second circuit, unknown as a mode, dips on the shoulder of a broad one."""
    known, unknown = mode(1.5, 3, 60), mode(1.9, 20, 150)
    curve = impedance([known, unknown])
    dips = find_dips(FREQUENCY, reflection(curve, 50.0))
    assert [dip.frequency_hz > 1.7e9 for dip in dips] == [False, True]
    assert dips[0].return_loss_db > dips[1].return_loss_db
    (owned,) = owned_features([known], FREQUENCY, curve, 50.0)
    assert owned.dip == dips[0]


def test_what_another_pole_causes_is_not_given_to_the_nearest_mode():
    """The cause was not kept as a mode; its neighbour carries a thousandth of the conductance."""
    cause, neighbour = mode(0.9, 4, 60), mode(0.912, 30, 6e4, 2)
    (owned,) = owned_features([neighbour], FREQUENCY, impedance([cause, neighbour]), 50.0)
    assert owned.dip is None
    assert owned.peak is None


def test_what_lies_far_from_every_pole_is_nobodys():
    """On the skirt of a mode below the band, seven half widths away, it still carries 40 %."""
    below, unknown = mode(0.25, 3, 60), mode(0.6, 20, 3000)
    curve = impedance([below, unknown])
    (peak,) = conductance_peaks(FREQUENCY, curve)
    share = below.feed_admittance(np.array([peak.frequency_hz]))[0].real * peak.resistance_ohm
    assert share > 0.3
    (owned,) = owned_features([below], FREQUENCY, curve, 50.0)
    assert owned.peak is None


def test_without_modes_there_are_no_owners():
    assert owned_features([], FREQUENCY, impedance([mode(0.9, 5, 70)]), 50.0) == ()
