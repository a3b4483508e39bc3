"""Modes of strips whose rails carry more against each other than along the strip."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from simkit.geometry import build_wires, plan_mesh
from simkit.response.modes import LEAST_COHERENCE, find_modes
from simkit.response.rational import RationalModel, Sweep, fit_weights
from simkit.response.strip_current import coherence

POLES_HZ = np.array([0.9 + 0.1j, 1.8 + 0.14j, 2.7 + 0.17j]) * 1e9
ALONG = np.array([0.4, 0.2, 0.4])
AGAINST = np.array([0.5, -1.0, 0.5])


@pytest.fixture(scope="module")
def rails(make):
    antenna = replace(make.straight(150, 6, 75), model="grid")
    return build_wires(antenna, plan_mesh([antenna]))


def current(grid, number, shares):
    """A current of so many half waves, with a part of it on each rail."""
    (path,) = grid.chains
    arcs, place = path.places()
    rail = np.zeros(len(place), dtype=int)
    for k in range(len(arcs)):
        rail[place == k] = np.arange(3)
    made = np.zeros(grid.segments, dtype=complex)
    made[path.segments] = shares[rail] * np.sin(number * np.pi * arcs / path.length_m)[place]
    return np.tile(made, 2)


def modes(grid, shares):
    rows = np.array([current(grid, k + 1, share) for k, share in enumerate(shares)])
    frequency = np.linspace(0.3e9, 3e9, 15)
    values = (0.1e9 / (frequency[:, None] - POLES_HZ[None])) @ rows
    weight = fit_weights(frequency / 3e9, values, 1e-12)[0]
    model = RationalModel(frequency, weight, values)
    return find_modes(Sweep(model, True, 1e-4, (model,)), grid, 3e8, 3e9)


@pytest.mark.parametrize("spoilt", [0, 1, 2])
def test_a_mode_is_kept_whatever_its_rails_carry_against_each_other(rails, spoilt):
    """As where a sweep judged by total currents passes by a sharp pole between the rails."""
    shares = [ALONG, ALONG, ALONG]
    shares[spoilt] = ALONG + 3 * AGAINST
    found = modes(rails, shares)
    assert [mode.half_waves for mode in found] == [1, 2, 3]
    assert coherence(found[spoilt].current, rails) < LEAST_COHERENCE


@pytest.mark.parametrize("along", [0.0, 0.01])
def test_what_flows_between_rails_alone_is_no_mode(rails, along):
    found = modes(rails, [ALONG, along * ALONG + AGAINST, ALONG])
    assert [mode.half_waves for mode in found] == [1, 3]
