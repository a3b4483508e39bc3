"""Loss of flat metal in its limits."""

import numpy as np
import pytest
from scipy.constants import mu_0

from simkit.geometry.conductor import strip_resistance_ohm_per_m, surface_resistance_ohm
from simkit.study.model import Metal

BRASS, FREQUENCY = 1.5e7, 1e9
skin_m = 1 / np.sqrt(np.pi * FREQUENCY * mu_0 * BRASS)


def test_skin_depth_of_brass_is_about_four_micrometres():
    assert skin_m == pytest.approx(4.11e-6, rel=2e-3)


def test_thick_sheet_has_the_surface_resistance_of_a_half_space():
    """Twenty skin depths leave exp(-20)."""
    found = surface_resistance_ohm(BRASS, 20 * skin_m, FREQUENCY)
    assert found == pytest.approx(1 / (BRASS * skin_m), rel=1e-7)


def test_thin_sheet_has_the_direct_current_resistance_of_half_its_thickness():
    """A face carries half the current: 2/(sigma t); the next term is (t/delta)^4/90 or so."""
    found = surface_resistance_ohm(BRASS, skin_m / 10, FREQUENCY)
    assert found == pytest.approx(2 / (BRASS * skin_m / 10), rel=1e-5)


def test_thick_sheet_resistance_rises_with_the_square_root_of_frequency():
    at = [surface_resistance_ohm(BRASS, 1e-3, f) for f in (1e9, 4e9)]
    assert at[1] == pytest.approx(2 * at[0], rel=1e-9)


def test_strip_is_wheelers_rule_on_its_equivalent_radius():
    """R' = Rs * d(L')/dn / mu0: the inductance falls as metal recedes from all sides.

    The radius a(w, t) of the strip enters L' as -mu0/(2 pi) ln a; a receding of all faces by d
    takes 2 d from width and thickness each.
    """
    width, thickness = 0.008, 0.0002

    def log_radius(w, t):
        return np.log(w / 4 * (1 + t / (np.pi * w) * (1 + np.log(4 * np.pi * w / t))))

    step = 1e-9
    change = log_radius(width + step, thickness + step) - log_radius(width - step, thickness - step)
    # L' has the factor 1/(2 pi); metal receding by d takes 2 d.
    by_rule = surface_resistance_ohm(BRASS, thickness, FREQUENCY) / (2 * np.pi) * change / step
    found = strip_resistance_ohm_per_m(width, Metal("brass", BRASS, thickness), FREQUENCY)
    # The formula drops terms of the order t/w = 1/40.
    assert found == pytest.approx(by_rule, rel=0.06)


def test_perfect_metal_has_none():
    assert strip_resistance_ohm_per_m(0.008, Metal("perfect", None, 0.0), FREQUENCY) == 0.0
