"""Equivalent radii: bundles against closed forms and boundary elements, strips and bars."""

from __future__ import annotations

from math import gamma

import numpy as np
import pytest

from simkit.crosssection import charge_parts, static_radius_m, strip_radius_m
from simkit.crosssection.panels import chain, circle, graded, join
from simkit.crosssection.potential import solve


def _rail_places(count: int, gap: float) -> np.ndarray:
    return gap * (np.arange(count) - (count - 1) / 2)


def test_one_wire_is_itself() -> None:
    assert static_radius_m([3.0], 0.2) == pytest.approx(0.2, rel=1e-12)
    assert static_radius_m([3.0], 0.2, harmonics=5) == pytest.approx(0.2, rel=1e-12)


def test_two_wires() -> None:
    """sqrt(a d) for evenly charged wires."""
    assert static_radius_m([0.0, 1.3], 0.02) == pytest.approx(np.sqrt(0.02 * 1.3), rel=1e-12)


def test_ring_of_wires() -> None:
    """(N a R^(N - 1))^(1/N), the bundle of a power line."""
    turn = np.exp(2j * np.pi * np.arange(5) / 5)
    radius = static_radius_m(0.4 * turn.real, 3e-3, heights_m=0.4 * turn.imag)
    assert radius == pytest.approx((5 * 3e-3 * 0.4**4) ** 0.2, rel=1e-12)


def test_equal_wires_share_the_charge() -> None:
    assert charge_parts([-0.65, 0.65], 0.02) == pytest.approx([0.5, 0.5], rel=1e-12)


def test_the_middle_of_three_wires_carries_less_than_a_third() -> None:
    """Equal potentials of wires at -d, 0, d: middle over outer is ln(d / 2a) / ln(d / a)."""
    ratio = np.log(4.3) / np.log(8.6)
    wanted = np.array([1, ratio, 1]) / (2 + ratio)
    assert charge_parts([-4.3, 0.0, 4.3], 0.5) == pytest.approx(wanted, rel=1e-12)
    assert wanted[1] == pytest.approx(0.253, abs=1e-3)


def test_many_wires_carry_the_charge_of_a_strip() -> None:
    """1 / (pi sqrt(1 - x^2)) over a strip from -1 to 1: a third lies within half of it, exactly."""
    places = np.linspace(-1, 1, 401)
    parts = charge_parts(places, 0.0025 / np.pi)
    # Half of a wire's charge at the limits, and edges that end in wires: 1 %.
    assert parts[abs(places) < 0.5 - 1e-9].sum() == pytest.approx(1 / 3, rel=0.01)


def test_two_wires_that_touch() -> None:
    """pi a / 2, exact: inversion maps two touching circles to a strip between parallel lines."""
    # The charge where they touch is none, but the series of harmonics ends: 5e-4 at order 16.
    assert static_radius_m([0.0, 2.0], 1.0, harmonics=16) == pytest.approx(np.pi / 2, rel=5e-4)


@pytest.mark.parametrize(("count", "gap"), [(2, 2.1), (3, 2.1), (7, 2.1), (3, 3.0), (4, 8.0)])
def test_against_boundary_elements(count: int, gap: float) -> None:
    places = _rail_places(count, gap)
    wires = [chain(circle(place, 1.0, 48), conductor=number) for number, place in enumerate(places)]
    elements = np.exp(-solve(join(wires)).common.real)
    # Polygons of 48 sides are good to 3e-6, 8 harmonics at gaps of 2.1 radii to 1e-5.
    assert static_radius_m(places, 1.0, harmonics=8) == pytest.approx(elements, rel=2e-5)


def test_even_charge_is_too_small_for_close_wires() -> None:
    """At gaps of 2.1 radii by 3 to 6 %: the bundle of a thin-wire model is not that of rods."""
    places = _rail_places(3, 2.1)
    even, real = static_radius_m(places, 1.0), static_radius_m(places, 1.0, harmonics=8)
    assert 0.93 < even / real < 0.96


@pytest.mark.parametrize(
    ("offsets", "radius"),
    [
        ([-0.354, 0.354], 0.0884),
        ([-0.43, 0.0, 0.43], 0.05),
        (_rail_places(3, 2.1 * 0.122), 0.122),
        (_rail_places(5, 2.1 * 0.0796), 0.0796),
        (_rail_places(7, 2.1 * 0.0592), 0.0592),
    ],
    ids=["2 rails", "3 rails", "3 at 2.1 a", "5 at 2.1 a", "7 at 2.1 a"],
)
def test_rails_stand_for_a_strip_of_width_1(offsets: np.ndarray, radius: float) -> None:
    # The rules give three digits; the rails of three were fitted to modes, not to this.
    assert static_radius_m(offsets, radius) == pytest.approx(0.25, rel=2.5e-3)


def test_scales() -> None:
    places = np.array([0.0, 0.3, 1.1])
    assert static_radius_m(7e-3 * places, 7e-4) == pytest.approx(
        7e-3 * static_radius_m(places, 0.1), rel=1e-12
    )


def test_strip_of_no_thickness_by_the_elements() -> None:
    """w/4, exact by conformal mapping, to five digits."""
    coarse, fine = (
        solve(chain(graded(0.0, 1.0, count), conductor=0)).common.real for count in (32, 64)
    )
    # Constant charge on 64 graded panels is off by 6e-6; the extrapolation leaves 7e-6.
    assert np.exp(-fine) == pytest.approx(0.25, rel=1e-5)
    assert np.exp(-(fine + (fine - coarse) / 3)) == pytest.approx(0.25, rel=1e-5)
    assert strip_radius_m(0.012) == 0.003


def test_square_bar() -> None:
    """Gamma(1/4)^2 / (4 pi^1.5) times the side."""
    exact = gamma(0.25) ** 2 / (4 * np.pi**1.5)
    # What the extrapolation of graded panels leaves is 5e-7.
    assert strip_radius_m(3e-3, 3e-3) == pytest.approx(3e-3 * exact, rel=2e-6)


def test_bar_on_edge_is_the_same_bar() -> None:
    assert strip_radius_m(0.3, 1.7) == strip_radius_m(1.7, 0.3)


def test_thin_bar_tends_to_the_strip() -> None:
    """(w/4) [1 + (t / (pi w)) (1 + ln(4 pi w / t))], to first order in t/w."""
    thickness = 0.002
    expected = 0.25 * (1 + thickness / np.pi * (1 + np.log(4 * np.pi / thickness)))
    # Terms of the second order, (t/w ln)^2.
    assert strip_radius_m(1.0, thickness) == pytest.approx(expected, rel=1e-4)


@pytest.mark.parametrize(
    ("offsets", "radius", "match"),
    [
        ([], 1.0, "one row of wires is needed"),
        ([[0.0, 1.0]], 0.1, r"shape \(1, 2\)"),
        ([0.0, 1.0], 0.0, "radius is 0 m: it must be positive"),
        ([0.0, 1.0], 0.51, "1000 mm apart with a radius of 510 mm: they need 2 radii"),
    ],
)
def test_impossible_bundles(offsets: list[float], radius: float, match: str) -> None:
    with pytest.raises(ValueError, match=match):
        static_radius_m(offsets, radius)


@pytest.mark.parametrize(("width", "thickness"), [(0.0, 0.0), (0.01, -1e-3)])
def test_impossible_bars(width: float, thickness: float) -> None:
    with pytest.raises(ValueError, match="the width must be positive"):
        strip_radius_m(width, thickness)
