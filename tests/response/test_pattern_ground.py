"""Fields, power and whole cases over a ground.

Published: radiation resistance 36.54 ohm and directivity 5.16 dBi of a quarter-wave monopole on a
plane with sinusoidal current (half of the induced-EMF dipole; Balanis, Antenna Theory), Fresnel's
coefficients with Brewster's angle, mutual impedance of parallel half-wave dipoles (sine and cosine
integrals).
"""

import re
from dataclasses import replace

import numpy as np
import pytest
from scipy.constants import c as light_speed
from scipy.constants import epsilon_0, mu_0
from scipy.special import sici

from simkit.engine.pynec import solve_wires
from simkit.geometry import build_wires, plan_mesh
from simkit.geometry.wires import Wire
from simkit.response.evaluate import gain_at, ground_of
from simkit.response.labels import half_wave_label
from simkit.response.modes import NaturalMode, without_echoes
from simkit.response.pattern import (
    Radiators,
    far_field,
    gain_grid_dbi,
    intensity_w_per_sr,
    radiated_power_w,
    reflection_coefficients,
)
from simkit.response.peak import peak_direction
from simkit.runner.solve import solve_case
from simkit.store.schema import PHI_DEG, THETA_DEG, VARIABLES, Status
from simkit.study.model import FrequencyBand, Ground, Placement

PLANE = Ground("plane")
EARTH = Ground("earth", 13.0, 0.005)
UPRIGHT = ((0.0, 0.0, -1.0), (0.0, 1.0, 0.0), (1.0, 0.0, 0.0))
FREQUENCY = 1e9
WAVELENGTH = light_speed / FREQUENCY
K = 2 * np.pi / WAVELENGTH
ETA = np.sqrt(mu_0 / epsilon_0)


def quarter_wave(ground, count=200):
    """A monopole from the plane up, with the current of a quarter of a cosine."""
    edges = np.linspace(0, WAVELENGTH / 4, count + 1)
    middle = np.zeros((count, 3))
    middle[:, 2] = (edges[1:] + edges[:-1]) / 2
    up = np.tile([0.0, 0.0, 1.0], (count, 1))
    return Radiators(middle, up, np.diff(edges), ground), np.cos(K * middle[:, 2]) + 0j


def half_wave_lying(height, ground, count=200):
    edges = np.linspace(-WAVELENGTH / 4, WAVELENGTH / 4, count + 1)
    middle = np.zeros((count, 3))
    middle[:, 0] = (edges[1:] + edges[:-1]) / 2
    middle[:, 2] = height
    along = np.tile([1.0, 0.0, 0.0], (count, 1))
    return Radiators(middle, along, np.diff(edges), ground), np.cos(K * middle[:, 0]) + 0j


# -- a perfect plane -------------------------------------------------------------------------------


def test_quarter_wave_monopole_has_its_published_resistance_and_directivity():
    """For 1 A peak at the foot: 2 P is the resistance. 200 segments leave 1e-5."""
    radiators, current = quarter_wave(PLANE)
    power = radiated_power_w(radiators, current, FREQUENCY)
    # Half of 73.079 ohm, (eta/8 pi) Cin(2 pi).
    assert 2 * power == pytest.approx(36.5395, rel=1e-4)
    theta, _, intensity = peak_direction(radiators, current, FREQUENCY, (90.0, 0.0), 10.0)
    assert theta == pytest.approx(90, abs=0.1)
    assert 10 * np.log10(4 * np.pi * intensity / power) == pytest.approx(5.161, abs=2e-3)


@pytest.mark.parametrize("height", [0.13, 0.25, 0.9])
def test_resistance_of_a_lying_dipole_is_own_minus_mutual(height):
    """The image carries the current backwards; the mutual one is in closed form."""
    radiators, current = half_wave_lying(height * WAVELENGTH, PLANE)
    distance, length = 2 * height * WAVELENGTH, WAVELENGTH / 2
    reach = np.hypot(distance, length)
    cosine = sici(K * np.array([distance, reach + length, reach - length]))[1]
    mutual = ETA / (4 * np.pi) * (2 * cosine[0] - cosine[1] - cosine[2])
    power = radiated_power_w(radiators, current, FREQUENCY)
    assert 2 * power == pytest.approx(73.079 - mutual, rel=2e-4)


def test_field_over_a_plane_is_that_of_dipole_and_image():
    rng = np.random.default_rng(8)
    middle = rng.uniform(0.1, 0.6, (5, 3))
    along = rng.normal(size=(5, 3))
    along /= np.linalg.norm(along, axis=1)[:, None]
    length, current = np.full(5, 1e-2), rng.normal(size=5) + 1j * rng.normal(size=5)
    below = middle * [1, 1, -1]
    theta, phi = np.deg2rad([10.0, 45.0, 89.0]), np.deg2rad([0.0, 77.0, 200.0])
    both = Radiators(
        np.vstack([middle, below]), np.vstack([along, along * [-1, -1, 1]]), np.tile(length, 2)
    )
    expected = far_field(both, np.tile(current, 2), FREQUENCY, theta, phi)
    found = far_field(Radiators(middle, along, length, PLANE), current, FREQUENCY, theta, phi)
    for one, other in zip(found, expected, strict=True):
        assert one == pytest.approx(other, rel=1e-12)


@pytest.mark.parametrize("ground", [PLANE, EARTH])
def test_nothing_goes_below_the_horizon(ground):
    radiators, current = half_wave_lying(0.3, ground)
    theta, phi = np.deg2rad([90.1, 120.0, 180.0]), np.zeros(3)
    for field in far_field(radiators, current, FREQUENCY, theta, phi):
        assert np.all(field == 0)
    gain = gain_grid_dbi(radiators, current, FREQUENCY, 1.0, THETA_DEG, PHI_DEG)
    assert gain[10:] == pytest.approx(np.full((9, 37), -100.0))
    assert gain[5].max() > 0


def test_a_monopole_is_strongest_on_the_horizon_itself():
    radiators, current = quarter_wave(PLANE)
    field = far_field(radiators, current, FREQUENCY, np.deg2rad([90.0]), np.array([0.3]))
    assert abs(field[0][0]) == pytest.approx(60 * ETA / (120 * np.pi), rel=1e-4)


@pytest.mark.parametrize(("height", "frequency"), [(0.02, 0.9e9), (0.05, 1.7e9), (0.6, 2.85e9)])
def test_radiated_power_over_a_plane_is_the_input_power(make, height, frequency):
    """All of it upwards, as in free space within 0.5 %."""
    antenna = replace(
        make.straight(150, 6, 55),
        placement=Placement(UPRIGHT, (0.0, 0.0, height)),
        ground=PLANE,
    )
    grid = build_wires(antenna, plan_mesh([antenna]))
    (current,) = solve_wires(grid.wires, grid.radius_m, frequency, [grid.source], ground=PLANE)
    power = 0.5 * sum(volts * current[k].real for k, volts in grid.source)
    radiators = Radiators.of(grid, PLANE)
    assert radiated_power_w(radiators, current, frequency) == pytest.approx(power, rel=5e-3)
    # The mean gain over all directions is then 1, over those above the plane 2.
    theta, phi = np.arange(0.5, 90.0, 1.0), np.arange(0.0, 360.0, 5.0)
    gain = 10 ** (gain_grid_dbi(radiators, current, frequency, power, theta, phi) / 10)
    weight = np.sin(np.deg2rad(theta))[:, None]
    assert np.sum(gain * weight) / (np.sum(weight) * len(phi)) == pytest.approx(2, rel=6e-3)


# -- earth -----------------------------------------------------------------------------------------


def test_fresnel_coefficients_of_lossless_earth():
    """Permittivity 4: index 2, so 1/3 straight down, and none of the upright wave at atan(2)."""
    ground = Ground("earth", 4.0, 0.0)
    theta = np.array([0.0, np.arctan(2.0), np.pi / 2])
    upright, flat = reflection_coefficients(ground, FREQUENCY, theta)
    assert upright == pytest.approx([1 / 3, 0, -1], abs=1e-12)
    # (sqrt(4 - s^2) - c)/(sqrt(4 - s^2) + c) with s^2 = 4/5, c^2 = 1/5.
    assert flat == pytest.approx([1 / 3, 3 / 5, 1], abs=1e-12)


def test_earth_of_endless_conductivity_is_a_plane():
    theta, phi = np.deg2rad([0.0, 30.0, 80.0]), np.deg2rad([0.0, 40.0, 90.0])
    fields = []
    for ground in (PLANE, Ground("earth", 1.0, 1e9)):
        radiators, current = half_wave_lying(0.2, ground)
        fields.append(far_field(radiators, current, FREQUENCY, theta, phi))
    for one, other in zip(*fields, strict=True):
        assert other == pytest.approx(one, rel=2e-4, abs=2e-3)


@pytest.mark.parametrize("ground", [EARTH, Ground("earth", 80.0, 5.0), Ground("earth", 3.0, 0.0)])
@pytest.mark.parametrize("frequency", [0.1e9, 1e9])
def test_power_over_earth_against_many_directions(ground, frequency):
    """Rings of 0.05 degrees by the trapezoidal rule; near the horizon the coefficients of the sea
    turn round within a degree."""
    rng = np.random.default_rng(2)
    middle = rng.uniform(0.1, 0.5, (6, 3))
    along = rng.normal(size=(6, 3))
    along /= np.linalg.norm(along, axis=1)[:, None]
    current = rng.normal(size=6) + 1j * rng.normal(size=6)
    radiators = Radiators(middle, along, np.full(6, 1e-2), ground)
    theta, phi = np.meshgrid(
        np.deg2rad(np.arange(0.025, 90.0, 0.05)), np.deg2rad(np.arange(0.0, 360.0, 6.0))
    )
    field = far_field(radiators, current, frequency, theta.ravel(), phi.ravel())
    ring = np.deg2rad(0.05) * np.deg2rad(6.0) * np.sin(theta.ravel())
    expected = ring @ intensity_w_per_sr(*field)
    assert radiated_power_w(radiators, current, frequency) == pytest.approx(expected, rel=2e-5)


def test_earth_and_air_share_the_power_of_a_dipole_high_above_lossless_earth():
    """What is not reflected goes on: 1 - |coefficient|^2 of the power sent down, 4 wavelengths up,
    where interference of direct and reflected wave averages out to some per cent."""
    ground = Ground("earth", 4.0, 0.0)
    radiators, current = half_wave_lying(4 * WAVELENGTH, ground)
    theta, phi = np.meshgrid(
        np.deg2rad(np.arange(0.25, 90.0, 0.5)), np.deg2rad(np.arange(0.0, 360.0, 6.0))
    )
    angles = theta.ravel(), phi.ravel()
    free = replace(radiators, ground=None)
    e_theta, e_phi = far_field(free, current, FREQUENCY, *angles)
    upright, flat = reflection_coefficients(ground, FREQUENCY, angles[0])
    lost = intensity_w_per_sr(
        e_theta * np.sqrt(1 - abs(upright) ** 2), e_phi * np.sqrt(1 - abs(flat) ** 2)
    )
    into_earth = np.deg2rad(0.5) * np.deg2rad(6.0) * np.sin(angles[0]) @ lost
    sent = radiated_power_w(free, current, FREQUENCY)
    kept = radiated_power_w(radiators, current, FREQUENCY)
    assert kept + into_earth == pytest.approx(sent, rel=0.03)
    assert into_earth > 0.3 * sent


# -- whole cases -----------------------------------------------------------------------------------


def solved(antenna):
    result = solve_case(antenna, plan_mesh([antenna]))
    assert result.status == Status.SOLVED, result.reason
    return result


def known(arrays, name):
    return arrays[name][np.isfinite(arrays["mode_frequency"])]


def standing(make, kind="auto"):
    antenna = make.straight(75, 6, 0.3, gap_mm=0.6)
    return replace(antenna, placement=Placement(UPRIGHT), ground=PLANE, model=kind)


@pytest.mark.parametrize("kind", ["line", "grid"])
def test_a_strip_on_the_plane_is_half_of_the_dipole_with_its_image(make, kind):
    """Same modes, half the impedance. The meshes and the gaps that the sources act like differ:
    0.1 % in frequency, and 2 % in impedance at the parallel resonance, where the gap counts most.
    """
    mast = solved(standing(make, kind)).arrays
    dipole = solved(replace(make.straight(150, 6, 75, gap_mm=1.2), model=kind)).arrays
    odd = [0, 2]
    assert list(known(mast, "mode_half_waves")) == [1, 3]
    assert known(mast, "mode_frequency") == pytest.approx(
        known(dipole, "mode_frequency")[odd], rel=1e-3
    )
    assert known(mast, "mode_q") == pytest.approx(known(dipole, "mode_q")[odd], rel=0.01)
    difference = abs(2 * mast["impedance"] / dipole["impedance"] - 1)
    assert np.max(difference) < 0.02
    assert np.median(difference) < 0.01
    assert known(mast, "directivity") == pytest.approx(
        known(dipole, "directivity")[odd] + 10 * np.log10(2), abs=0.03
    )
    assert known(mast, "power_balance") == pytest.approx(1, abs=0.01)
    assert known(mast, "efficiency") == pytest.approx(1, abs=1e-12)
    assert mast["path_on_plane"] == 1
    assert dipole["path_on_plane"] == 0
    labels = [half_wave_label(n, on_plane=True) for n in known(mast, "mode_half_waves")]
    assert labels == ["1/4 wave", "3/4 wave"]


def test_losses_of_metal_on_a_plane_are_in_the_balance(make):
    arrays = solved(replace(standing(make), metal=replace(make.brass, thickness_m=5e-8))).arrays
    assert np.all(known(arrays, "efficiency") < 0.99)
    assert known(arrays, "power_balance") == pytest.approx(1, abs=0.01)


def lying_case(make, ground, height=0.2):
    antenna = make.straight(150, 6, 75, band=FrequencyBand(0.7e9, 1.2e9, 101))
    return replace(antenna, placement=Placement(shift_m=(0.0, 0.0, height)), ground=ground)


def test_over_earth_there_is_no_balance_but_a_word_and_the_earths_loss(make):
    result = solved(lying_case(make, EARTH))
    assert "over real earth the power balance is not checked" in result.reason
    arrays = result.arrays
    assert np.isnan(known(arrays, "power_balance")).all()
    assert np.all((known(arrays, "efficiency") > 0.5) & (known(arrays, "efficiency") < 0.9))
    plane = solved(lying_case(make, PLANE))
    assert plane.reason == ""
    assert known(plane.arrays, "efficiency") == pytest.approx(1, abs=1e-12)
    assert (arrays["ground_permittivity"], arrays["ground_conductivity"]) == (13.0, 0.005)
    assert np.isinf(plane.arrays["ground_conductivity"])
    assert np.isnan(solved(lying_case(make, None)).arrays["ground_conductivity"])


def test_of_modes_that_the_grounds_echo_splits_the_strongest_is_kept(make):
    """Three wavelengths up three poles or more share that of the dipole alone, near 892 MHz."""
    result = solved(lying_case(make, PLANE, 1.0))
    assert list(known(result.arrays, "mode_half_waves")) == [1]
    assert known(result.arrays, "mode_frequency") == pytest.approx(892e6, rel=0.05)
    words = r"ground resonate together; left out are weaker natural modes at (\d+\.\d, )*8\d\d\.\d"
    assert re.search(words, result.reason)


def test_modes_of_one_number_but_other_currents_are_no_echoes(make):
    antenna = lying_case(make, None)
    grid = build_wires(antenna, plan_mesh([antenna]))
    one = np.sin(np.linspace(0, np.pi, grid.segments)) + 0j
    other = one * np.linspace(-1, 1, grid.segments)
    modes = [
        NaturalMode(pole + 0.1e9j, 1, current, 1j, strength)
        for pole, current, strength in (
            (0.9e9, one, 1.0),
            (1.0e9, 1j * one, 0.9),
            (1.1e9, other, 0.5),
            (1.2e9, other, 0.1),
        )
    ]
    assert [mode.frequency_hz for mode in without_echoes(modes)] == [0.9e9, 1.1e9]


@pytest.mark.parametrize("ground", [PLANE, EARTH, None])
def test_gain_from_the_store_is_the_stored_gain(make, ground):
    """Stored as four-byte numbers later; here both are full. In free space and over a plane the
    power is that of the currents, over earth that at the feed."""
    import xarray as xr

    arrays = solved(lying_case(make, ground)).arrays
    case = xr.Dataset({name: (VARIABLES[name].dims[1:], value) for name, value in arrays.items()})
    assert ground_of(case) == ground
    slot = 0
    assert arrays["driven"][slot] == 1
    theta, phi = np.meshgrid(THETA_DEG, PHI_DEG, indexing="ij")
    gain = gain_at(case, float(arrays["pattern_frequency"][slot]), theta, phi)
    assert gain == pytest.approx(arrays["gain"][slot], abs=1e-6)
    assert gain.max() - 1e-9 <= arrays["peak_gain"][slot] < gain.max() + 0.5


def test_stores_without_a_ground_are_free_space():
    import xarray as xr

    assert ground_of(xr.Dataset()) is None


def test_turning_an_antenna_in_free_space_turns_its_pattern_and_nothing_else(make):
    """To the rounding of the engine, 1e-5."""
    q, _ = np.linalg.qr(np.random.default_rng(5).normal(size=(3, 3)))
    q *= np.sign(np.linalg.det(q))
    rotation = tuple(tuple(float(v) for v in row) for row in q)
    antenna = make.ell(60, 4, 90, 20, metal=make.brass)
    turned = replace(antenna, placement=Placement(rotation, (0.4, -0.1, 0.7)))
    first, other = solved(antenna).arrays, solved(turned).arrays
    assert other["impedance"] == pytest.approx(first["impedance"], rel=1e-4)
    for name in ("mode_frequency", "mode_q", "efficiency", "power_balance", "dip_frequency"):
        assert other[name] == pytest.approx(first[name], rel=1e-4, nan_ok=True), name
    assert other["peak_gain"] == pytest.approx(first["peak_gain"], abs=0.02, nan_ok=True)
    assert list(other["mode_half_waves"]) == list(first["mode_half_waves"])
    # The stored gain in a direction is the first one's in that direction turned back.
    towards = rotation @ unit(37.0, 110.0)
    theta, phi = np.arccos(towards[2]), np.arctan2(towards[1], towards[0])
    gains = []
    for arrays, angles in ((first, np.deg2rad([37.0, 110.0])), (other, (theta, phi))):
        radiators = Radiators(
            *(columns(arrays, kind) for kind in ("", "direction_")), arrays["length"]
        )
        current = arrays["current"][0]
        field = far_field(radiators, current, 1e9, *(np.array([a]) for a in angles))
        gains.append(intensity_w_per_sr(*field)[0])
    assert gains[1] == pytest.approx(gains[0], rel=1e-4)


def unit(theta_deg, phi_deg):
    t, p = np.deg2rad([theta_deg, phi_deg])
    return np.array([np.sin(t) * np.cos(p), np.sin(t) * np.sin(p), np.cos(t)])


def columns(arrays, start):
    return np.stack([arrays[f"{start}{axis}"] for axis in "xyz"], axis=1)


def test_a_thin_monopole_nears_the_published_impedance():
    """36.5 + j21.3 ohm is the limit of no thickness, which falls as slowly as a logarithm: the
    engine's value, against 1/ln(length/radius), runs into it within 1 ohm."""
    quarter = WAVELENGTH / 4
    ratios, values = [1e4, 1e6, 1e8], []
    for ratio in ratios:
        wire = Wire((0.0, 0.0, 0.0), (0.0, 0.0, quarter), 25)
        (current,) = solve_wires(
            [wire], quarter / ratio, FREQUENCY, [((0, 1.0),)], ground=PLANE, extended_kernel=False
        )
        values.append(1 / current[0])
    limit = np.polyfit(1 / np.log(ratios), np.array(values), 1)[1]
    assert limit == pytest.approx(36.54 + 21.26j, abs=1.0)
    assert abs(values[2] - limit) < abs(values[0] - limit)
