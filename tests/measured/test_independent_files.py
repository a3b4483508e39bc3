"""Files written by scikit-rf from its own circuits: what is read, and what is said of them.

Nothing of simkit takes part in making them: circuits, lines, noise and the Touchstone text are
those of scikit-rf and numpy.
"""

import numpy as np
import pytest
import skrf
from skrf.media import DefinedGammaZ0

from simkit.errors import MeasurementError
from simkit.measured.dips import measured_dips
from simkit.measured.quality import quality_notes
from simkit.measured.touchstone import read_touchstone

F = np.linspace(0.4e9, 3.0e9, 521)
MODES = ((70.0, 60e-9, 0.9e9), (98.0, 45e-9, 2.6e9))


def medium(frequency=F, z0=50.0):
    band = skrf.Frequency.from_f(frequency, unit="hz")
    gamma = 2j * np.pi * frequency / 2.998e8
    return DefinedGammaZ0(band, gamma=gamma, z0=np.full(len(frequency), z0), z0_port=50.0)


def antenna(frequency=F):
    """Two series resonances side by side, as a dipole shows them."""
    w = 2 * np.pi * frequency
    total = sum(
        1 / (r + 1j * w * ind + (2 * np.pi * place) ** 2 * ind / (1j * w))
        for r, ind, place in MODES
    )
    z = (1 / total).reshape(-1, 1, 1)
    return skrf.Network(f=frequency, f_unit="hz", s=skrf.network.z2s(z, 50.0), z0=50.0)


def noisy(network, size, seed=3):
    rng = np.random.default_rng(seed)
    shape = network.s.shape
    made = network.copy()
    made.s = made.s + size * (rng.standard_normal(shape) + 1j * rng.standard_normal(shape))
    return made


def written(network, folder, name="build", **options):
    network.write_touchstone(name, dir=str(folder), **options)
    (file,) = folder.glob(f"{name}.s*p")
    return file


@pytest.mark.parametrize("form", ["ri", "ma", "db"])
@pytest.mark.parametrize("unit", ["hz", "khz", "mhz", "ghz"])
def test_one_port_files_in_every_format_and_unit(tmp_path, form, unit):
    network = antenna()
    network.frequency.unit = unit
    data = read_touchstone(written(network, tmp_path, form=form))
    assert data.frequency_hz == pytest.approx(F, rel=1e-9)
    assert data.reflection == pytest.approx(network.s[:, 0, 0], abs=1e-9)
    assert data.notes == ()


def test_another_reference_is_read_and_referred_back(tmp_path):
    network = antenna()
    other = network.copy()
    other.renormalize(75.0)
    data = read_touchstone(written(other, tmp_path))
    assert data.reference_ohm == 75.0
    assert data.reflection == pytest.approx(other.s[:, 0, 0], abs=1e-9)
    assert data.renormalised(50.0).reflection == pytest.approx(network.s[:, 0, 0], abs=1e-9)


def test_the_port_of_a_two_port_file_is_the_chosen_one(tmp_path):
    """A tee of two lines: the antenna on one, a match on the other, seen from both ends."""
    media = medium()
    pair = media.line(30e-3, "m") ** media.shunt_capacitor(0.5e-12) ** media.line(11e-3, "m")
    file = written(pair, tmp_path, "pair")
    for port in (1, 2):
        data = read_touchstone(file, port)
        assert data.reflection == pytest.approx(pair.s[:, port - 1, port - 1], abs=1e-9)
    assert (
        abs(read_touchstone(file, 1).reflection - read_touchstone(file, 2).reflection).max() > 0.1
    )
    with pytest.raises(MeasurementError, match="2 ports and none was chosen"):
        read_touchstone(file)


def test_a_good_sweep_has_nothing_said_of_it(tmp_path):
    data = read_touchstone(written(noisy(antenna(), 1e-3), tmp_path))
    dips, notes = measured_dips(data)
    assert [dip.frequency_hz for dip in dips] == pytest.approx([0.9e9, 2.6e9], rel=0.02)
    assert [*data.notes, *quality_notes(data), *notes] == []


def test_a_cable_that_was_not_calibrated_out_ripples(tmp_path):
    """A metre and a half of 60 ohm cable with a connector's step before the antenna."""
    cable = medium(z0=60.0).line(1.5, "m")
    data = read_touchstone(written(noisy(cable ** antenna(), 1e-3), tmp_path))
    said = " ".join(quality_notes(data))
    assert "the cable does not seem to be calibrated out" in said
    assert "set the port extension or calibrate at the antenna" in said


def test_a_sweep_without_calibration_exceeds_one(tmp_path):
    network = antenna()
    network.s = network.s * 1.12
    (note,) = read_touchstone(written(network, tmp_path)).notes
    assert "which a passive antenna cannot do: check calibration" in note


def test_too_few_points_across_a_dip_are_told(tmp_path):
    """A narrow resonance of 8 MHz on a grid of 5 MHz."""
    w = 2 * np.pi * F
    narrow = 1 / (55 + 1j * w * 1.1e-6 + (2 * np.pi * 1.5e9) ** 2 * 1.1e-6 / (1j * w))
    z = (1 / narrow).reshape(-1, 1, 1)
    network = skrf.Network(f=F, f_unit="hz", s=skrf.network.z2s(z, 50.0), z0=50.0)
    _, notes = measured_dips(read_touchstone(written(network, tmp_path)))
    assert any("only one point within its band; measure with a finer step" in n for n in notes)


def test_a_high_noise_floor_is_told_and_hides_shallow_dips(tmp_path):
    data = read_touchstone(written(noisy(antenna(), 0.05), tmp_path))
    _, notes = measured_dips(data)
    assert any("average more sweeps" in note for note in notes)
    (note,) = quality_notes(data)
    assert note.startswith("the noise is 0.0")
    assert "narrow the analyser's bandwidth" in note


def test_more_points_than_needed_are_averaged(tmp_path):
    many = np.linspace(0.4e9, 3.0e9, 50_002)
    data = read_touchstone(written(noisy(antenna(many), 1e-2), tmp_path))
    assert len(data.frequency_hz) == 16_667
    assert data.notes == ("50002 points are averaged in groups of 3",)
    exact = antenna(data.frequency_hz).s[:, 0, 0]
    # Noise of a hundredth in groups of three.
    assert np.std((data.reflection - exact).real) == pytest.approx(1e-2 / np.sqrt(3), rel=0.05)
    dips, _ = measured_dips(data)
    assert [dip.frequency_hz for dip in dips] == pytest.approx([0.9e9, 2.6e9], rel=0.02)
