"""Charge per metre from the slope of a current."""

from __future__ import annotations

import numpy as np
import pytest

from simkit.response.charge import charge_along_route, line_charge
from simkit.response.strip_route import routes_of
from simkit.study.model import Antenna, CutFeed, FrequencyBand, Metal, Strip

C = 299_792_458.0
POLE_HZ = 0.9e9 * (1 + 0.5j / 6.0)
BAND = FrequencyBand(3e8, 3e9, 28)
METAL = Metal("perfect", None, 0.0)


def uneven(length_m: float, count: int) -> np.ndarray:
    """Places whose steps differ by up to a factor of two."""
    steps = 1 + 0.5 * np.random.default_rng(7).uniform(-0.66, 0.66, count - 1)
    return np.concatenate([[0.0], np.cumsum(steps)]) * length_m / steps.sum()


@pytest.mark.parametrize("half_waves", [1, 2, 3])
def test_charge_of_a_sinusoidal_current(half_waves: int) -> None:
    """I = sin(ks) leaves q = (j/omega) k cos(ks): at omega = kc the charge of 1/c a metre."""
    length = 0.16
    k = half_waves * np.pi / length
    s = uneven(length, 41)
    charge = line_charge(s, np.sin(k * s).astype(complex), k * C / (2 * np.pi))
    # Second differences of steps up to h: relative error (kh)^2/3 at the ends, less inside.
    bound = (k * np.diff(s).max()) ** 2 / 3
    np.testing.assert_allclose(charge * C, 1j * np.cos(k * s), atol=bound)


def test_errors_fall_with_the_square_of_the_steps() -> None:
    errors = []
    for count in (21, 41, 81):
        s = np.linspace(0.0, 0.16, count)
        charge = line_charge(s, np.sin(30 * s).astype(complex), 1e9)
        exact = 1j / (2 * np.pi * 1e9) * 30 * np.cos(30 * s)
        errors.append(abs(charge - exact).max() / abs(exact).max())
    assert errors[0] / errors[1] == pytest.approx(4, rel=0.1)
    assert errors[1] / errors[2] == pytest.approx(4, rel=0.1)


def test_total_charge_is_the_current_that_flows_in() -> None:
    """Between two places the charge grows by what enters: an exact balance for a linear current."""
    s = uneven(0.1, 15)
    charge = line_charge(s, 2.0 - 5j * s, POLE_HZ)
    np.testing.assert_allclose(charge, 5.0 / (2 * np.pi * POLE_HZ), rtol=1e-12)


def test_breaks_are_left_out_and_not_reached_across() -> None:
    s = np.linspace(0.0, 0.1, 21)
    current = np.where(s < 0.043, 1.0 + 3 * s, 0.2 - 2 * s).astype(complex)
    charge = line_charge(s, current, 1e9, [(0.0401, 0.0449)])
    factor = 1j / (2 * np.pi * 1e9)
    np.testing.assert_allclose(charge[s <= 0.0401], 3 * factor, rtol=1e-9)
    np.testing.assert_allclose(charge[s >= 0.0449], -2 * factor, rtol=1e-9)
    wide = line_charge(s, current, 1e9, [(0.031, 0.058)])
    np.testing.assert_array_equal(np.isnan(wide), (s > 0.031) & (s < 0.058))


def test_closed_line_has_no_ends() -> None:
    k = 2 * np.pi / 0.2
    s = np.linspace(0.0, 0.2, 41)[:-1] + 1e-3
    charge = line_charge(s, np.cos(k * s).astype(complex), k * C / (2 * np.pi), period_m=0.2)
    exact = -1j * np.sin(k * s)
    # Central differences everywhere: (kh)^2/6.
    np.testing.assert_allclose(charge * C, exact, atol=(k * 5e-3) ** 2 / 6 * 1.01)


def test_charge_along_a_route_comes_from_the_segments_not_from_between() -> None:
    """The stored curve bends between segments; only its values at their middles count."""
    strip = Strip("rod", ((0.0, 0.0), (0.15, 0.0)), 0.005)
    antenna = Antenna((strip,), METAL, CutFeed("rod", 0.06, 0.001), 50.0, BAND)
    (route,) = routes_of(antenna)
    middles = (np.arange(25) + 0.5) / 25
    position = np.linspace(0.0, 1.0, 101)
    knots = np.concatenate([[0.0], middles, [1.0]])
    broken = np.interp(position, knots, np.sin(np.pi * knots)).astype(complex)
    segments = (np.zeros(25, dtype=int), middles)
    at, charge = charge_along_route(route, broken[None], position, segments, 1e9)
    np.testing.assert_allclose(at, knots * 0.15, atol=1e-9)
    slope = np.pi / 0.15 * np.cos(np.pi * knots)
    # Half a segment at the ends, a whole one inside: (kh)^2/3 of the largest slope.
    bound = (np.pi / 25) ** 2 / 3 * np.pi / 0.15
    np.testing.assert_allclose((charge * 2 * np.pi * 1e9 / 1j).real, slope, atol=bound)
