"""Features of one-port curves against circuits whose answers are formulas."""

import numpy as np
import pytest

from simkit.response.features import (
    MIN_DIP_PROMINENCE,
    conductance_peaks,
    find_dips,
    find_resonances,
    impedance_q,
    impedance_q_at,
    matched_bandwidth,
    reflection,
    return_loss_db,
)


def series_rlc(frequency, resistance, inductance, resonance):
    w, w0 = 2 * np.pi * frequency, 2 * np.pi * resonance
    return resistance + 1j * inductance * (w - w0**2 / w)


def two_mode_antenna(frequency):
    """Admittances of two series circuits and a shunt capacitance side by side."""
    admittance = (
        1 / series_rlc(frequency, 70.0, 60e-9, 0.9e9)
        + 1 / series_rlc(frequency, 100.0, 45e-9, 2.8e9)
        + 1j * 2 * np.pi * frequency * 0.1e-12
    )
    return 1 / admittance


def test_yaghjian_best_q_of_a_series_circuit():
    """Series RLC 73 ohm, 100 nH, 1 GHz: Q = w L / R = 8.6071; Yaghjian & Best 2005."""
    frequency = np.linspace(0.8e9, 1.2e9, 401)
    q = impedance_q(frequency, series_rlc(frequency, 73.0, 100e-9, 1e9))
    # Spline error of the slope at 1 MHz steps is far below the last published digit.
    assert q[200] == pytest.approx(8.6071, abs=5e-5)
    assert float(matched_bandwidth(q[200])) == pytest.approx(0.0821539, abs=1e-6)


def test_q_away_from_resonance_is_that_of_the_tuned_circuit():
    frequency = np.linspace(0.8e9, 1.2e9, 401)
    impedance = series_rlc(frequency, 73.0, 100e-9, 1e9)
    w = 2 * np.pi * frequency
    slope = 100e-9 * (1 + (1e9 / frequency) ** 2)
    expected = w / (2 * 73.0) * (slope + np.abs(impedance.imag) / w)
    assert impedance_q(frequency, impedance) == pytest.approx(expected, rel=1e-5)
    for place in (0, 1, len(frequency) // 2, len(frequency) - 1):
        between = frequency[place] + (frequency[1] - frequency[0]) * 0.3 * (place < 2)
        own = np.interp(between, frequency, expected)
        # The curve bends between its points: the interpolation is good to 1e-4.
        assert impedance_q_at(between, frequency, impedance) == pytest.approx(own, rel=1e-4)


def test_q_is_nan_without_resistance():
    frequency = np.linspace(0.8e9, 1.2e9, 11)
    impedance = series_rlc(frequency, 0.0, 100e-9, 1e9)
    assert np.isnan(impedance_q(frequency, impedance)).all()


def test_matched_bandwidth_refuses_a_vswr_of_one():
    with pytest.raises(ValueError, match="vswr must be above 1"):
        matched_bandwidth(5.0, vswr=1.0)


@pytest.mark.parametrize("points", [201, 1351])
def test_dip_of_a_series_circuit_lies_at_its_resonance(points):
    frequency = np.linspace(0.51e9, 1.53e9, points)
    (dip,) = find_dips(frequency, reflection(series_rlc(frequency, 73.0, 100e-9, 1e9), 50.0))
    # Interpolation error at 5 MHz steps (201 points), relative to a 10 dB band of 8 %.
    assert dip.frequency_hz == pytest.approx(1e9, rel=1e-6)
    assert dip.return_loss_db == pytest.approx(-20 * np.log10(23 / 123), abs=1e-4)


def test_bandwidths_are_those_of_the_circuit():
    frequency = np.linspace(0.51e9, 1.53e9, 1021)
    (dip,) = find_dips(frequency, reflection(series_rlc(frequency, 73.0, 100e-9, 1e9), 50.0))
    for width, limit in ((dip.bandwidth_hz, 10**-0.5), (dip.vswr2_bandwidth_hz, 1 / 3)):
        # |(73 + jX - 50) / (73 + jX + 50)| = limit solved for X, X = L (w - w0^2 / w), whose two
        # roots are X / (2 pi L) apart.
        x = np.sqrt((limit**2 * 123**2 - 23**2) / (1 - limit**2))
        # Straight lines over 1 MHz steps.
        assert width == pytest.approx(2 * x / (2 * 2 * np.pi * 100e-9), rel=1e-4)


def test_bandwidth_is_nan_when_shallow_or_cut_off():
    frequency = np.linspace(0.51e9, 1.53e9, 401)
    (shallow,) = find_dips(frequency, reflection(series_rlc(frequency, 150.0, 99e-9, 1e9), 50.0))
    assert shallow.return_loss_db < 9
    assert np.isnan([shallow.bandwidth_hz, shallow.vswr2_bandwidth_hz]).all()
    frequency = np.linspace(0.99e9, 1.53e9, 401)
    (cut,) = find_dips(frequency, reflection(series_rlc(frequency, 73.0, 100e-9, 1e9), 50.0))
    assert np.isnan([cut.bandwidth_hz, cut.vswr2_bandwidth_hz]).all()


def test_perfect_match_is_found_and_ends_are_not_dips():
    frequency = np.linspace(0.51e9, 1.53e9, 400)
    (dip,) = find_dips(frequency, reflection(series_rlc(frequency, 50.0, 100e-9, 1e9), 50.0))
    assert dip.frequency_hz == pytest.approx(1e9, rel=1e-6)
    assert dip.return_loss_db > 80
    falling = np.linspace(0.9, 0.2, 400)
    assert find_dips(frequency, falling) == []


def test_ripple_below_the_prominence_is_no_dip():
    frequency = np.linspace(0.51e9, 1.53e9, 400)
    for ripple, count in ((0.4, 0), (0.6, 12)):
        size = ripple * MIN_DIP_PROMINENCE
        curve = 0.9 + size * np.cos(2 * np.pi * 12 * np.linspace(0, 1, 400))
        assert len(find_dips(frequency, curve)) == count


def test_two_modes_give_two_dips_and_two_conductance_peaks():
    frequency = np.linspace(0.3e9, 3.3e9, 1351)
    impedance = two_mode_antenna(frequency)
    assert [
        round(d.frequency_hz / 1e8) for d in find_dips(frequency, reflection(impedance, 50))
    ] == [
        9,
        28,
    ]
    first, second = conductance_peaks(frequency, impedance)
    # The other branch adds a little susceptance and conductance only.
    assert first.frequency_hz == pytest.approx(0.9e9, rel=1e-3)
    assert first.resistance_ohm == pytest.approx(70.0, rel=0.01)
    assert second.frequency_hz == pytest.approx(2.8e9, rel=1e-3)
    assert second.resistance_ohm == pytest.approx(100.0, rel=0.03)


def test_resonances_alternate_and_the_parallel_one_has_its_true_resistance():
    frequency = np.linspace(0.3e9, 3.3e9, 1351)
    coarse = np.linspace(0.3e9, 3.3e9, 91)
    found = find_resonances(frequency, two_mode_antenna(frequency))
    assert [r.kind for r in found] == ["series", "parallel", "series"]
    for resonance in found:
        near = resonance.frequency_hz + np.array([-1.0, 0.0, 1.0])
        impedance = two_mode_antenna(near)
        assert abs(impedance[1].imag) < 1e-3 * abs(impedance[1])
        assert resonance.resistance_ohm == pytest.approx(impedance[1].real, rel=1e-4)
    for fine, rough in zip(found, find_resonances(coarse, two_mode_antenna(coarse)), strict=True):
        # 33 MHz steps, the second mode is 350 MHz wide.
        assert rough.frequency_hz == pytest.approx(fine.frequency_hz, rel=2e-3)
        assert rough.resistance_ohm == pytest.approx(fine.resistance_ohm, rel=0.03)


def test_a_reactance_jumping_through_infinity_is_no_resonance():
    frequency = np.linspace(0.3e9, 2.9e9, 500)
    theta = np.pi / 2 * frequency / 1e9
    stub = 1j * 200 * np.tan(theta)
    assert (np.sign(stub.imag[:-1]) != np.sign(stub.imag[1:])).sum() == 2
    (zero,) = find_resonances(frequency, stub)
    assert zero.kind == "series"
    assert zero.frequency_hz == pytest.approx(2e9, rel=1e-6)
    assert zero.resistance_ohm == pytest.approx(0.0, abs=1e-3)


def test_a_sharp_parallel_resonance_between_two_samples_keeps_its_resistance():
    frequency = np.linspace(0.8e9, 1.2e9, 82)
    admittance = 1 / 3000.0 + 1j * 2 * np.pi * 2e-12 * (frequency - (1.0023e9) ** 2 / frequency)
    (found,) = find_resonances(frequency, 1 / admittance)
    assert found.kind == "parallel"
    assert found.frequency_hz == pytest.approx(1.0023e9, rel=1e-4)
    # A straight line of R between the samples beside it would give under 2000 ohm.
    assert found.resistance_ohm == pytest.approx(3000.0, rel=0.02)


def test_reflection_of_open_short_and_match():
    assert reflection([0, 50, np.inf], 50.0) == pytest.approx([-1, 0, 1])
    assert return_loss_db(reflection(100.0, 50.0)) == pytest.approx(20 * np.log10(3))
    with pytest.raises(ValueError, match="finite and positive, not -50"):
        reflection(10.0, -50)


@pytest.mark.parametrize(
    ("frequency", "values", "message"),
    [
        ([1e9, 2e9, 3e9], [0.1, 0.2], r"equally long, got shapes \(3,\) and \(2,\)"),
        ([1e9, 2e9, 2e9], [0.1, 0.2, 0.3], "ascend without repeats"),
        ([1e9, 2e9, 3e9], [0.1, np.nan, 0.3], "must be finite"),
    ],
)
@pytest.mark.parametrize("function", [find_dips, find_resonances, conductance_peaks, impedance_q])
def test_unusable_arrays_are_refused(function, frequency, values, message):
    with pytest.raises(ValueError, match=message):
        function(frequency, values)


def test_fewer_than_four_points_show_nothing():
    frequency, values = [1e9, 2e9, 3e9], [0.5, 0.1, 0.5]
    assert find_dips(frequency, values) == []
    assert find_resonances(frequency, values) == []
    assert conductance_peaks(frequency, values) == []
    with pytest.raises(ValueError, match="at least 4 frequencies, got 3"):
        impedance_q(frequency, values)
