"""Natural modes read from sweeps whose poles are known."""

import re
from pathlib import Path

import numpy as np
import pytest

from simkit.errors import MeasurementError
from simkit.measured import read_touchstone
from simkit.measured.measurement import Measurement
from simkit.measured.plane import delay_of_s, extended
from simkit.measured.poles import fit_poles, measured_modes
from simkit.measured.quality import quality_notes
from simkit.measured.wording import natural_text

F = np.linspace(0.4e9, 3.2e9, 561)
BRANCHES = ((70.0, 60e-9, 0.9e9), (98.0, 45e-9, 2.8e9))
SAMPLE = Path(__file__).parents[2] / "studies" / "creek_gauge_build_1.s1p"


def gamma_of(branches):
    total = 0
    for resistance, inductance, place in branches:
        total = total + 1 / (resistance + 2j * np.pi * inductance * (F - place**2 / F))
    return (1 / total - 50) / (1 / total + 50)


def poles_of(branches):
    """Zeros of R + jwL + 1/jwC: f = ja + sqrt(place^2 - a^2), a = R / (4 pi L)."""
    decay = np.array([r / (4 * np.pi * ind) for r, ind, _ in branches])
    place = np.array([at for *_, at in branches])
    return 1j * decay + np.sqrt(place**2 - decay**2)


def sweep(gamma, noise=0.0, seed=4):
    rng = np.random.default_rng(seed)
    size = (2, len(gamma))
    real, imaginary = noise * rng.standard_normal(size)
    return Measurement(Path("bench.s1p"), F, gamma + real + 1j * imaginary, 50.0)


def test_poles_of_two_branches_are_exact():
    model = fit_poles(F, gamma_of(BRANCHES), 2)
    assert model(F) == pytest.approx(gamma_of(BRANCHES), abs=1e-9)
    found = np.sort_complex(model.natural_hz())
    assert found == pytest.approx(poles_of(BRANCHES), rel=1e-7)


@pytest.mark.parametrize("noise", [1e-4, 3e-3])
def test_noise_does_not_make_modes(noise):
    found = measured_modes(sweep(gamma_of(BRANCHES), noise), delay_sigma_s=0.0)
    assert found.order == 2
    assert found.held_out_error == pytest.approx(noise * np.sqrt(2), rel=0.3)
    modes = [mode for mode in found.modes if mode.supported]
    truth = poles_of(BRANCHES)
    assert [mode.frequency_hz for mode in modes] == pytest.approx(truth.real, rel=3 * noise)
    assert [mode.q for mode in modes] == pytest.approx(truth.real / truth.imag / 2, rel=30 * noise)
    for mode, pole in zip(modes, truth, strict=True):
        # Five folds give the standard error to half of itself.
        assert abs(mode.frequency_hz - pole.real) < 6 * mode.frequency_sigma_hz


def test_a_mode_the_noise_hides_is_not_claimed():
    hidden = (*BRANCHES, (9000.0, 1e-6, 1.8e9))
    found = measured_modes(sweep(gamma_of(hidden), 2e-2), delay_sigma_s=0.0)
    near = [m for m in found.modes if m.supported and 1.6e9 < m.frequency_hz < 2.0e9]
    assert near == []


@pytest.mark.long
def test_a_wrong_reference_plane_is_within_the_interval():
    """20 ps off and as much directivity as a calibration leaves: 95 % of the poles are held."""
    off = []
    for seed in range(8):
        rng = np.random.default_rng(seed)
        turn = np.exp(-4j * np.pi * F * rng.normal(0, 20e-12))
        leak = 0.016 * np.exp(2j * np.pi * (rng.random() - 2 * F * rng.uniform(0, 1e-9)))
        found = measured_modes(sweep(gamma_of(BRANCHES) * turn + leak, 1e-3, seed))
        for pole in poles_of(BRANCHES):
            near = [m for m in found.modes if m.supported and abs(m.frequency_hz - pole.real) < 8e7]
            if near:
                mode = min(near, key=lambda m: abs(m.frequency_hz - pole.real))
                off.append((mode.frequency_hz - pole.real) / mode.frequency_sigma_hz)
                off.append((mode.q - pole.real / pole.imag / 2) / mode.q_sigma)
    assert len(off) >= 20
    # Some twenty draws of 95 %, of which those of one sweep go together.
    assert np.mean(np.abs(off) < 1.96) > 0.8


def test_the_sample_shows_its_two_odd_modes():
    found = measured_modes(read_touchstone(SAMPLE))
    modes = [mode for mode in found.modes if mode.supported]
    assert len(modes) == 2
    # Poles of the straight wire the sample was made of, within what its analyser does to them.
    assert [mode.frequency_hz for mode in modes] == pytest.approx([0.877e9, 2.76e9], rel=0.015)
    for mode, truth in zip(modes, (0.877e9, 2.76e9), strict=True):
        assert abs(mode.frequency_hz - truth) < 3 * mode.frequency_sigma_hz
    assert all(mode.why for mode in found.modes if not mode.supported)


def test_the_words_tell_sure_modes_from_unsure_poles():
    text = natural_text(measured_modes(read_touchstone(SAMPLE)))
    assert re.match(
        r"natural modes read from the sweep: 87\d\.\d \+- \d+\.\d MHz \(Q 4\.\d\d\)", text
    )
    assert "not supported" in text


def test_extension_takes_a_delay_off_and_says_so():
    delayed = sweep(gamma_of(BRANCHES) * np.exp(-4j * np.pi * F * 120e-12))
    moved = extended(delayed, 120e-12)
    assert moved.reflection == pytest.approx(gamma_of(BRANCHES), abs=1e-12)
    assert "+120 ps" in moved.notes[-1]
    assert extended(delayed, 0.0) is delayed
    # 35 mm of PTFE: 35 mm * sqrt(2.1) / c.
    assert delay_of_s(35e-3, 2.1) == pytest.approx(169.2e-12, rel=1e-3)


def test_absurd_extensions_are_refused():
    with pytest.raises(MeasurementError, match="beyond 1e-06 s"):
        extended(sweep(gamma_of(BRANCHES)), 120.0)
    with pytest.raises(MeasurementError, match="does not exist"):
        delay_of_s(0.1, 0.5)


def test_a_good_sweep_has_no_quality_notes():
    assert quality_notes(sweep(gamma_of(BRANCHES), 1e-3)) == []


def test_a_dip_that_runs_round_the_centre_is_no_cable():
    """A resistance just below the reference and one above: 360 degrees more or not."""
    f = np.linspace(700e6, 1000e6, 1201)
    x = 4j * (f / 850e6 - 850e6 / f)
    round_it, beside_it = ((r + x - 1) / (r + x + 1) for r in (0.96, 1.04))
    for measured, expected in ((round_it, beside_it), (beside_it, round_it)):
        assert quality_notes(Measurement(Path("x.s1p"), f, measured, 50.0), (f, expected)) == []
    assert "ns of line" in quality_notes(Measurement(Path("x.s1p"), f, round_it, 50.0))[0]


def test_what_is_wrong_with_a_sweep_is_said():
    gamma = gamma_of(BRANCHES)
    behind = gamma * np.exp(-4j * np.pi * F * 2.5e-9)
    assert any("ns of line, one way" in note for note in quality_notes(sweep(behind, 1e-3)))
    expected = (F, gamma)
    (note,) = quality_notes(sweep(behind, 1e-3), expected)
    # As accurate as the search is fine: a 64th of the inverse of the span.
    assert float(note.split("behind ")[1].split(" ns")[0]) == pytest.approx(2.5, abs=0.02)
    leak = behind + 0.09
    assert any("ripple of 0.0" in note for note in quality_notes(sweep(leak, 1e-3)))
    assert any("noise is 0.03" in note for note in quality_notes(sweep(gamma, 3e-2)))
