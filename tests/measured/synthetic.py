"""A study whose response is a formula: two modes that move with length and permittivity."""

from pathlib import Path

import numpy as np

from simkit.measured.measurement import Measurement
from simkit.measured.simulator import REFERENCE_OHM, Axis, Node, Surrogate, chebyshev
from simkit.response.features import find_dips, reflection

BAND = (0.4e9, 3.2e9)
STUDY = """
title = "Creek gauge link"
[values]
arm = "74 mm"     # as drawn
eps = 2.7
half = "arm/2"
width = "6 mm"
[[strip]]
name = "east"
path = [["1 mm", "0 mm"], ["1 mm + arm", "0 mm"]]
width = "width"
[[strip]]
name = "west"
mirror = "east"
[carrier]
permittivity = "eps"
thickness = "2 mm"
[feed]
from = "west.start"
to = "east.start"
[frequency]
start = "400 MHz"
stop = "3.2 GHz"
points = 401
"""


def impedance(frequency, arm, eps):
    slow = (eps / 2.7) ** -0.07
    total = 2j * np.pi * frequency * 0.12e-12
    for resistance, inductance, place, extra in (
        (70, 60e-9, 0.9e9, 0.0),
        (98, 45e-9, 2.8e9, -0.02),
    ):
        at = place * 74e-3 / arm * slow * (eps / 2.7) ** extra
        total = total + 1 / (resistance + 2j * np.pi * inductance * (frequency - at**2 / frequency))
    return 1 / total


def node(arm, eps):
    frequency = np.linspace(*BAND, 801)
    dips = find_dips(frequency, reflection(impedance(frequency, arm, eps), 50.0))
    modes = {
        half_waves: (dip.frequency_hz, dip.frequency_hz / 1.02, 5.0, dip.return_loss_db)
        for half_waves, dip in zip((1, 3), dips, strict=True)
    }
    return Node(lambda f: reflection(impedance(f, arm, eps), REFERENCE_OHM), modes)


def surrogate(arm=(71e-3, 77e-3), eps=(2.0, 3.4), count=5):
    axes = [Axis("arm", chebyshev(*arm, count)), Axis("eps", chebyshev(*eps, count))]
    nodes = [node(a, e) for a in axes[0].nodes for e in axes[1].nodes]
    return Surrogate(axes, nodes, (BAND[0] / 1.1, BAND[1] * 1.1))


def measured(arm, eps, *, points=401, noise=1e-3, seed=2, directivity=0.0, delay_s=0.0, band=BAND):
    frequency = np.linspace(*band, points)
    gamma = reflection(impedance(frequency, arm, eps), 50.0)
    rng = np.random.default_rng(seed)
    gamma = gamma * np.exp(-4j * np.pi * frequency * delay_s) + directivity
    gamma = gamma + noise * (rng.standard_normal(points) + 1j * rng.standard_normal(points))
    return Measurement(Path("build.s1p"), frequency, gamma, 50.0)
