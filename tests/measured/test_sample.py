"""The invented measurement of the creek gauge: marked as such, and what its script makes."""

import importlib
import importlib.util
from pathlib import Path

import numpy as np
import pytest

from simkit.measured import read_touchstone
from simkit.measured.dips import measured_dips

STUDIES = Path(__file__).parents[2] / "studies"


@pytest.fixture(scope="module")
def script():
    spec = importlib.util.spec_from_file_location("sample", STUDIES / "make_creek_gauge_sample.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_the_committed_file_is_what_the_script_makes(script):
    kept = read_touchstone(script.TARGET)
    assert kept.frequency_hz == pytest.approx(script.FREQUENCY_HZ, rel=1e-9)
    # Six decimals are written; another build of the engine may round its currents otherwise.
    assert kept.reflection == pytest.approx(script.measured_reflection(), abs=2e-5)


def test_it_says_that_it_is_invented(script):
    first = script.TARGET.read_text().split("\n")[0]
    assert first.startswith("! INVENTED DATA FOR DEMONSTRATION")
    kept = read_touchstone(script.TARGET)
    assert kept.notes == ()
    assert kept.reference_ohm == 50.0


def test_it_shows_the_odd_modes_of_the_perturbed_dipole(script):
    dips, notes = measured_dips(read_touchstone(script.TARGET))
    assert notes == []
    true = script.reflection(script.antenna_impedance(script.FREQUENCY_HZ), 50.0)
    expected = script.FREQUENCY_HZ[
        [np.argmin(np.abs(true[:200])), 400 + np.argmin(np.abs(true[400:]))]
    ]
    # Step of 5 MHz, and a directivity of -36 dB against a slope of |reflection| near the dip.
    assert [dip.frequency_hz for dip in dips] == pytest.approx(expected, abs=12e6)


def test_the_analyser_without_errors_shows_the_truth(script, monkeypatch):
    for name, value in (
        ("DIRECTIVITY_DB", -400.0),
        ("SOURCE_MATCH_DB", -400.0),
        ("TRACKING_DB", 0.0),
        ("EXTENSION_ERROR_S", 0.0),
        ("NOISE", 0.0),
    ):
        monkeypatch.setattr(script, name, value)
    gamma = np.exp(1j * np.linspace(0.0, 5.0, len(script.FREQUENCY_HZ)))
    assert script.analyser_reading(script.FREQUENCY_HZ, gamma) == pytest.approx(gamma)


@pytest.fixture(scope="module")
def matched_script():
    with pytest.MonkeyPatch.context() as patch:
        patch.syspath_prepend(STUDIES)  # it takes dipole and analyser from the other script
        return importlib.import_module("make_creek_gauge_matched_sample")


def test_the_file_at_the_connector_is_what_its_script_makes(matched_script):
    kept = read_touchstone(matched_script.TARGET)
    assert matched_script.TARGET.read_text().startswith("! INVENTED DATA FOR DEMONSTRATION")
    assert kept.frequency_hz == pytest.approx(matched_script.FREQUENCY_HZ, rel=1e-9)
    assert kept.reflection == pytest.approx(matched_script.measured_reflection(), abs=2e-5)


def test_its_pair_of_strips_agrees_with_the_feed_line_of_a_study(matched_script, monkeypatch):
    """Other formulas than simkit's: Wheeler's impedance within 1 %, a tanh in place of waves."""
    from simkit.feedline import Chain, LineSection, OnePort, TwoStrips

    monkeypatch.setattr(matched_script, "FOAM_PERMITTIVITY", 1.0)
    monkeypatch.setattr(matched_script, "LOSS_DB_PER_M", 0.0)
    frequency = np.linspace(800e6, 950e6, 7)
    load = np.linspace(50, 80, 7) + 1j * np.linspace(-40, 30, 7)
    pair = [
        LineSection(TwoStrips(width, matched_script.SEPARATION_M), length)
        for length, width in matched_script.PAIR_M
    ]
    chain = Chain(tuple(pair)).reflection(OnePort.from_impedance(frequency, load))
    seen = matched_script.behind_pair(frequency, load)
    # 1 % of impedance in two lines is at most 1 % of reflection.
    assert (seen - 50) / (seen + 50) == pytest.approx(chain, abs=0.01)
