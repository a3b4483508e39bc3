"""What passes the reader, however odd, passes everything behind it or is refused in a sentence."""

import numpy as np
import pytest

from simkit.errors import MeasurementError
from simkit.measured import compare, nearest_cases
from simkit.measured.dips import measured_dips
from simkit.measured.measurement import Measurement
from simkit.measured.poles import measured_modes
from simkit.measured.quality import quality_notes

from . import synthetic
from .test_comparison import results


def odd(rng):
    """A sweep with something wrong with it."""
    points = int(rng.choice([11, 12, 17, 60, 201, 400]))
    data = synthetic.measured(74e-3, 2.7, points=points, noise=float(rng.choice([0, 1e-3, 0.3])))
    frequency, gamma = data.frequency_hz.copy(), data.reflection.copy()
    for _ in range(int(rng.integers(1, 4))):
        kind = rng.integers(9)
        if kind == 0:
            gamma[rng.integers(points)] = rng.choice([0, 1, -1, 50, 1j])
        elif kind == 1:
            gamma[:] = rng.choice([0, 1, -1, 0.5])
        elif kind == 2:
            frequency = frequency * rng.choice([1e-6, 1e-3, 1e3])
        elif kind == 3:
            frequency = frequency[0] + np.sort(rng.random(points)) * rng.choice([1.0, 1e9])
            frequency = frequency + np.arange(points) * 1e-3
        elif kind == 4:
            gamma *= rng.choice([1e-9, 3.0, 90.0])
        elif kind == 5:
            gamma = gamma * np.exp(-4j * np.pi * frequency * rng.choice([1e-9, 1e-6]))
        elif kind == 6:
            gamma = rng.permutation(gamma)
        elif kind == 7:
            frequency = frequency - frequency[0]
        else:
            gamma = gamma + rng.choice([0.1, 1.0])
    return Measurement(data.path, frequency, gamma, float(rng.choice([50.0, 75.0, 1e-3])))


def run(count, seed):
    rng = np.random.default_rng(seed)
    stored, refused = results(), 0
    for _ in range(count):
        sweep = odd(rng)
        dips, notes = measured_dips(sweep)
        assert all(np.isfinite(dip.frequency_hz) for dip in dips)
        quality = quality_notes(sweep)
        said = " ".join((*notes, *quality)).split()
        assert not {"nan", "inf", "-inf"} & set(said)
        for mode in measured_modes(sweep).modes:
            assert not (mode.supported and not np.isfinite(mode.frequency_sigma_hz))
        try:
            compare(stored, sweep).as_text()
            nearest_cases(stored, sweep)
        except MeasurementError:
            refused += 1
    return refused


def test_odd_sweeps_pass_or_are_refused():
    assert run(5, seed=3) < 5


@pytest.mark.long
def test_many_odd_sweeps_pass_or_are_refused():
    assert run(600, seed=5) < 600
