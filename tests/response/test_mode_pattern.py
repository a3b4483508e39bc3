"""Gain of stored modes in any direction, against what solving the case stored."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from simkit.geometry import plan_mesh
from simkit.response.evaluate import gain_at
from simkit.response.mode_pattern import ModePattern, mode_current
from simkit.runner.solve import solve_case
from simkit.store.schema import PHI_DEG, THETA_DEG, VARIABLES, Status


@pytest.fixture(scope="module")
def case(make) -> xr.Dataset:
    """A strip fed in its middle: the modes of an even number of half waves are not driven."""
    antenna = make.strip([(0, 0), (160, 0)], 6, 80, band=make.band(0.4e9, 3.0e9, 131))
    result = solve_case(antenna, plan_mesh([antenna]))
    assert result.status is Status.SOLVED
    data = {
        name: (VARIABLES[name].dims[1:], np.asarray(value)) for name, value in result.arrays.items()
    }
    data |= {"status": ((), int(result.status)), "reason": ((), "")}
    return xr.Dataset(data, {"theta": THETA_DEG, "phi": PHI_DEG})


@pytest.mark.parametrize(("slot", "driven"), [(0, 1), (1, 0), (2, 1)])
def test_stored_directions_come_back(case: xr.Dataset, slot: int, driven: int) -> None:
    assert int(case["driven"][slot]) == driven
    pattern = ModePattern(case, slot)
    assert pattern.trusted
    theta, phi = np.meshgrid(THETA_DEG, PHI_DEG, indexing="ij")
    stored = case["gain"].values[slot]
    clear = stored > np.nanmax(stored) - 25
    # The same currents; driven ones are interpolated by the rational model, good to its 1e-3.
    np.testing.assert_allclose(pattern.gain_dbi(theta, phi)[clear], stored[clear], atol=0.02)


@pytest.mark.parametrize("slot", [0, 2])
def test_between_the_stored_directions_it_is_the_gain_of_the_driven_antenna(
    case: xr.Dataset, slot: int
) -> None:
    """Evaluation from the store refers to the power of the currents, the pattern to stored gain."""
    theta, phi = np.array([13.0, 47.0, 71.0, 88.0, 133.0]), np.array([4.0, 33.0, 117.0, 201.0, 352])
    wanted = gain_at(case, float(case["pattern_frequency"][slot]), theta, phi)
    np.testing.assert_allclose(ModePattern(case, slot).gain_dbi(theta, phi), wanted, atol=0.02)


def test_the_null_of_an_even_mode_is_deep(case: xr.Dataset) -> None:
    """Both halves of the mode current cancel broadside: a null limited by nothing but rounding."""
    gain = ModePattern(case, 1).gain_dbi(np.array([88.0, 90.0, 92.0]), 90.0)
    assert gain.max() < -40
    assert ModePattern(case, 1).gain_dbi(90.0, 86.0) > -20


def test_mode_current_is_the_stored_one(case: xr.Dataset) -> None:
    for slot, half_waves in ((0, 1), (1, 2), (2, 3)):
        assert int(case["mode_half_waves"][slot]) == half_waves
        current = mode_current(case, slot)
        own = np.isfinite(case["strip_position"].values)
        at = case["strip_position"].values[own]
        position = np.linspace(0, 1, case.sizes["position"])
        stored = np.interp(at, position, case["mode_current"].values[slot, 0])
        scale = np.vdot(stored, current[own]) / np.vdot(stored, stored)
        # Straight lines between the 101 stored places.
        np.testing.assert_allclose(current[own] / scale, stored, atol=5e-3)


def test_currents_that_do_not_fit_the_stored_gain_are_not_trusted(case: xr.Dataset) -> None:
    rolled = case.assign(gain=case["gain"].roll(phi=3, roll_coords=False))
    assert not ModePattern(rolled, 0).trusted
