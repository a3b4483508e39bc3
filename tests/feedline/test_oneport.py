"""Loads over frequency."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from simkit.feedline import FeedlineError, OnePort
from simkit.measured.measurement import Measurement

F = np.linspace(1e9, 2e9, 11)
Z = 40 + 60j * (F / 1.5e9 - 1)


def test_impedance_there_and_back():
    load = OnePort.from_impedance(F, Z, 75.0)
    assert load.impedance_ohm == pytest.approx(Z)
    assert load.referred_to(20.0).impedance_ohm == pytest.approx(Z)


def test_open_and_short_circuit():
    load = OnePort.from_impedance([1e9, 2e9], [np.inf, 0.0])
    assert load.reflection == pytest.approx([1, -1])
    assert np.isinf(load.impedance_ohm[0])
    assert load.referred_to(7.0).reflection == pytest.approx([1, -1])


def test_between_the_samples():
    load = OnePort.from_impedance(F, Z)
    between = np.array([1.033e9, 1.777e9])
    # Cubic splines through eleven samples of a smooth curve.
    assert load.at(between).impedance_ohm == pytest.approx(
        40 + 60j * (between / 1.5e9 - 1), rel=1e-4
    )


def test_a_measured_sweep_is_a_load():
    measured = Measurement(Path("build_3.s1p"), F, np.full(11, 0.2j), 75.0)
    assert OnePort.from_measurement(measured).reference_ohm == 75.0


@pytest.mark.parametrize(
    ("make", "match"),
    [
        (lambda: OnePort([2e9, 1e9], [0, 0]), "must ascend without repeats"),
        (lambda: OnePort([1e9, 2e9], [0]), "1 values at 2 frequencies"),
        (lambda: OnePort([1e9], [np.nan]), "no finite reflection at 1000 MHz"),
        (lambda: OnePort([1e9], [0], 0.0), "reference resistance is 0 ohm"),
        (lambda: OnePort.from_impedance(F, Z).at([0.5e9]), "known from 1000 MHz to 2000 MHz"),
    ],
)
def test_loads_that_cannot_be(make, match):
    with pytest.raises(FeedlineError, match=match):
        make()
