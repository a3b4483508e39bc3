"""Far field, power and gain of currents whose patterns are formulas."""

import numpy as np
import pytest
from scipy.constants import c as light_speed
from scipy.constants import epsilon_0, mu_0

from simkit.engine.pynec import solve_wires
from simkit.geometry import build_wires, plan_mesh
from simkit.response.pattern import (
    Radiators,
    far_field,
    gain_grid_dbi,
    intensity_w_per_sr,
    radiated_power_w,
)
from simkit.response.peak import peak_direction

THETA = np.arange(0.0, 181.0, 10.0)
PHI = np.arange(0.0, 361.0, 10.0)
ONE_AMPERE = np.array([1.0 + 0j])


def short_dipole(direction, length=1e-3, middle=(0.0, 0.0, 0.0)):
    along = np.array(direction, dtype=float) / np.linalg.norm(direction)
    return Radiators(np.array([middle]), along[None], np.array([length]))


def solved(antenna, frequency):
    grid = build_wires(antenna, plan_mesh([antenna]))
    current = solve_wires(grid.wires, grid.radius_m, frequency, [grid.source])[0]
    power = 0.5 * sum(volts * current[k].real for k, volts in grid.source)
    return Radiators.of(grid), current, power


@pytest.mark.parametrize("direction", [(0, 0, 1), (1, 0, 0), (1, -2, 0.5)])
def test_short_dipole_has_directivity_1_5_and_its_power(direction):
    frequency, length = 1e9, 1e-3
    dipole = short_dipole(direction, length)
    power = radiated_power_w(dipole, ONE_AMPERE, frequency)
    wavelength = light_speed / frequency
    # (eta/3) pi (l/lambda)^2 for 1 A peak; the length enters the field at 2e-5 of itself.
    expected = np.sqrt(mu_0 / epsilon_0) * np.pi / 3 * (length / wavelength) ** 2
    assert power == pytest.approx(expected, rel=1e-4)
    theta, phi, intensity = peak_direction(dipole, ONE_AMPERE, frequency, (90.0, 60.0), 10.0)
    assert 4 * np.pi * intensity / power == pytest.approx(1.5, rel=1e-4)
    t, p = np.deg2rad([theta, phi])
    towards = np.array([np.sin(t) * np.cos(p), np.sin(t) * np.sin(p), np.cos(t)])
    assert abs(towards @ dipole.direction[0]) < 5e-3


def test_field_of_a_z_dipole_is_along_theta_in_step_with_its_distance():
    frequency, length = 1e9, 1e-3
    e_theta, e_phi = far_field(
        short_dipole((0, 0, 1)), ONE_AMPERE, frequency, np.array([np.pi / 3]), np.array([0.7])
    )
    k = 2 * np.pi * frequency / light_speed
    # E_theta = j k eta I l sin(theta) / (4 pi r) exp(-jkr).
    expected = 1j * k * np.sqrt(mu_0 / epsilon_0) * length * np.sin(np.pi / 3) / (4 * np.pi)
    assert e_theta[0] == pytest.approx(expected, rel=1e-4)
    assert abs(e_phi[0]) < 1e-12 * abs(expected)


def test_moving_a_dipole_turns_only_the_phase_and_the_right_way():
    """Nearer to the observer by a quarter wave: the field leads by 90 degrees."""
    frequency = 1e9
    quarter = light_speed / frequency / 4
    there = short_dipole((0, 0, 1), middle=(quarter, 0.0, 0.0))
    at = (np.array([np.pi / 2]), np.array([0.0]))
    here, moved = (
        far_field(d, ONE_AMPERE, frequency, *at)[0][0] for d in (short_dipole((0, 0, 1)), there)
    )
    assert moved / here == pytest.approx(1j, rel=1e-9)


def test_one_long_segment_falls_off_like_many_short_ones():
    """To second order: a segment of a twentieth wavelength errs in the fourth, 1e-5 here."""
    frequency = 1e9
    length = light_speed / frequency / 20
    edges = np.linspace(-length / 2, length / 2, 41)
    middles = np.zeros((40, 3))
    middles[:, 0] = (edges[1:] + edges[:-1]) / 2
    k = 2 * np.pi * frequency / light_speed
    many = Radiators(middles, np.tile([1.0, 0.0, 0.0], (40, 1)), np.full(40, length / 40))
    theta, phi = np.deg2rad([90.0, 90.0, 40.0]), np.deg2rad([20.0, 90.0, 0.0])
    fine = far_field(many, np.cos(k * middles[:, 0]) + 0j, frequency, theta, phi)
    coarse = far_field(short_dipole((1, 0, 0), length), ONE_AMPERE, frequency, theta, phi)
    for one, other in zip(fine, coarse, strict=True):
        assert other == pytest.approx(one, rel=5e-5, abs=1e-9)


@pytest.mark.parametrize("frequency", [0.5e9, 0.95e9, 2.85e9])
def test_radiated_power_is_the_input_power_of_a_lossless_strip(make, frequency):
    """Within 0.5 %: the moment solution is not exactly power-conserving."""
    radiators, current, power = solved(make.straight(150, 6, 55), frequency)
    assert radiated_power_w(radiators, current, frequency) == pytest.approx(power, rel=5e-3)


def test_power_does_not_depend_on_where_the_antenna_lies(make):
    radiators, current, _ = solved(make.ell(60, 4, 90, 20), 1.4e9)
    moved = Radiators(
        radiators.middle_m + np.array([3.0, -2.0, 1.0]), radiators.direction, radiators.length_m
    )
    powers = [radiated_power_w(r, current, 1.4e9) for r in (radiators, moved)]
    assert powers[1] == pytest.approx(powers[0], rel=1e-9)


def test_mean_gain_over_the_sphere_is_one(make):
    """A grid of 2 degrees weighted by sin(theta): trapezoids leave 1e-4."""
    frequency = 2.2e9
    radiators, current, _ = solved(make.ell(60, 4, 90, 20), frequency)
    power = radiated_power_w(radiators, current, frequency)
    theta, phi = np.arange(1.0, 180.0, 2.0), np.arange(0.0, 360.0, 2.0)
    gain = 10 ** (gain_grid_dbi(radiators, current, frequency, power, theta, phi) / 10)
    weight = np.sin(np.deg2rad(theta))[:, None]
    assert np.sum(gain * weight) / (np.sum(weight) * len(phi)) == pytest.approx(1, abs=2e-4)


def test_gain_of_a_flat_antenna_is_the_same_above_and_below(make):
    radiators, current, power = solved(make.ell(60, 4, 90, 20), 2.2e9)
    gain = gain_grid_dbi(radiators, current, 2.2e9, power, THETA, PHI)
    assert gain.shape == (19, 37)
    assert gain == pytest.approx(gain[::-1], abs=1e-9)
    assert gain[:, 0] == pytest.approx(gain[:, -1], abs=1e-9)
    # At the poles the azimuth means nothing.
    assert np.ptp(gain[0]) < 1e-9


def test_mirrored_antenna_has_the_mirrored_pattern(make):
    path = [(0, 0), (60, 0), (80, 40)]
    grids = []
    for sign in (1, -1):
        antenna = make.strip([(sign * x, y) for x, y in path], 4, 22)
        radiators, current, power = solved(antenna, 2.2e9)
        grids.append(gain_grid_dbi(radiators, current, 2.2e9, power, THETA, PHI))
    # x -> -x takes phi to 180 - phi.
    turned = grids[0][:, (18 - np.arange(37)) % 36]
    assert grids[1] == pytest.approx(turned, abs=1e-6)
    assert abs(grids[1] - grids[0]).max() > 1


def test_nulls_are_cut_at_minus_100_dbi():
    gain = gain_grid_dbi(short_dipole((0, 0, 1)), ONE_AMPERE, 1e9, 1.0, THETA, PHI)
    assert gain[0] == pytest.approx(np.full(37, -100.0))
    assert np.isfinite(gain).all()


def test_peak_is_found_between_grid_points(make):
    """Against a search on a grid of a quarter degree in the plane of the strip."""
    frequency = 2.85e9
    radiators, current, _ = solved(make.vee(75, 8, 40), frequency)
    phi = np.arange(180.0, 360.0, 0.25)
    field = far_field(radiators, current, frequency, np.full(phi.shape, np.pi / 2), np.deg2rad(phi))
    best = intensity_w_per_sr(*field)
    theta, found, intensity = peak_direction(radiators, current, frequency, (90.0, 280.0), 10.0)
    assert intensity == pytest.approx(best.max(), rel=1e-4)
    assert (theta, found) == pytest.approx((90.0, phi[np.argmax(best)]), abs=0.3)
