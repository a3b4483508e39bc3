"""Bundles of rails: static radius, least distance, symmetry, and where their end bars lie."""

import numpy as np
import pytest
from scipy.integrate import quad

from simkit.crosssection import strip_radius_m
from simkit.crosssection.radius import static_radius_m
from simkit.errors import GeometryError
from simkit.geometry.rails import (
    CLOSEST_RADII,
    closest_radius_widths,
    rail_rule,
    rails_for,
)

COUNTS = (3, 5, 7, 9)


def widths_of(rule):
    """From the narrowest the rails allow to ten times that."""
    narrowest = rule.radius_m / closest_radius_widths(rule.count)
    return np.geomspace(1.0000001 * narrowest, 10 * narrowest, 25)


def spread_rule(count):
    rule = rail_rule(3e-3, 30e-3, count) if count != 3 else rail_rule(3e-3, 3e-3)
    assert rule.count == count
    return rule


@pytest.mark.parametrize("count", COUNTS[1:])
def test_static_radius_is_a_quarter_of_the_width_at_every_width(count):
    """To the accuracy of the root finder; at the narrowest the closest bundle has it by itself."""
    rule = spread_rule(count)
    for width in widths_of(rule):
        offsets = rule.offsets_m(width)
        assert static_radius_m(offsets, rule.radius_m) == pytest.approx(width / 4, rel=2e-7)


@pytest.mark.parametrize("count", COUNTS[1:])
def test_rails_keep_their_distance_and_are_symmetric(count):
    rule = spread_rule(count)
    for width in widths_of(rule):
        offsets = rule.offsets_m(width)
        assert len(offsets) == count
        assert np.diff(offsets).min() >= CLOSEST_RADII * rule.radius_m * (1 - 1e-6)
        assert offsets == pytest.approx(-offsets[::-1], abs=1e-15)
        assert np.all(np.diff(offsets) > 0)


@pytest.mark.parametrize("count", COUNTS[1:])
def test_rails_spread_smoothly_and_outwards_with_the_width(count):
    """A jump in an offset would be a jump in a mode frequency of a swept width."""
    rule = spread_rule(count)
    widths = np.linspace(1.0001, 10, 400) * rule.radius_m / closest_radius_widths(count)
    edges = np.array([rule.offsets_m(w)[-1] for w in widths])
    slope = np.diff(edges) / np.diff(widths)
    assert slope.min() > 0.3
    assert slope.max() < 0.9


def test_three_rails_of_one_width_have_the_places_of_the_rules():
    rule = rail_rule(8e-3, 8e-3)
    assert (rule.count, rule.constant) == (3, True)
    assert rule.radius_m == pytest.approx(0.4e-3)
    assert rule.offsets_m(8e-3) == pytest.approx([-3.44e-3, 0, 3.44e-3])
    assert rule.tip_m(8e-3, 8e-3) == pytest.approx(0.6e-3)
    # The rules found these places for the strip's radius, w/4, to 2 %.
    assert static_radius_m(rule.offsets_m(8e-3), rule.radius_m) == pytest.approx(2e-3, rel=0.02)


def test_radius_of_the_strip_is_a_quarter_of_its_width():
    """What the bundles are held to, by a solution of the cross-section that knows no bundles."""
    assert strip_radius_m(4e-3) == pytest.approx(1e-3, rel=1e-3)


@pytest.mark.parametrize(("count", "radius"), [(3, 0.122), (5, 0.0796), (7, 0.0592)])
def test_closest_bundles_have_the_radii_of_the_rules(count, radius):
    """Gaps of 2.1 radii, static radius w/4; the rules give three digits."""
    assert closest_radius_widths(count) == pytest.approx(radius, abs=6e-4)


def test_bundle_of_one_and_two_wires():
    """One wire is itself; two of radius a at a distance d act like sqrt(a d)."""
    assert static_radius_m(np.array([0.0]), 0.001) == pytest.approx(0.001, rel=1e-9)
    pair = static_radius_m(np.array([-0.004, 0.004]), 0.001)
    assert pair == pytest.approx(np.sqrt(0.001 * 0.008), rel=1e-9)


def test_many_rails_become_a_strip():
    """A hundred wires of the radius that fills the width once: w/4, the strip's, to 1 %."""
    offsets = np.linspace(-1, 1, 400)
    assert static_radius_m(offsets, 0.005 / np.pi) == pytest.approx(0.5, rel=0.01)


def test_strip_reference_by_its_own_potential():
    """Charge 1/(pi sqrt(1 - x^2)) on -1..1 has potential ln 2 everywhere: radius 1/2 of half w."""
    value = quad(lambda t: -np.log(abs(np.cos(t) - 0.3)) / np.pi, 0, np.pi, points=[np.arccos(0.3)])
    assert value[0] == pytest.approx(np.log(2), rel=1e-6)


@pytest.mark.parametrize("count", COUNTS)
def test_spreading_scales_with_the_structure(count):
    one, other = rail_rule(3e-3, 12e-3, count), rail_rule(6e-3, 24e-3, count)
    assert other.radius_m == pytest.approx(2 * one.radius_m)
    assert other.offsets_m(10e-3) == pytest.approx(2 * one.offsets_m(5e-3), rel=1e-6)
    assert other.tip_m(10e-3, 10e-3) == pytest.approx(2 * one.tip_m(5e-3, 5e-3), rel=1e-6)


TIPS = {
    3: (0.118, 0.082, 0.114, 0.164),
    5: (0.081, 0.038, 0.030, 0.032),
    7: (0.065, 0.0265, 0.0148, 0.0093),
}


@pytest.mark.parametrize("count", [5, 7])
@pytest.mark.parametrize("place", range(4))
def test_end_bars_lie_where_the_rules_have_them(count, place):
    ratio = (1.0, 3.0, 6.0, 10.0)[place]
    rule = spread_rule(count)
    width = ratio * rule.radius_m / closest_radius_widths(count)
    assert rule.tip_m(width, width) == pytest.approx(TIPS[count][place] * width, rel=1e-6)


@pytest.mark.parametrize("count", [5, 7, 9])
def test_end_bars_between_and_beyond_the_table(count):
    rule = spread_rule(count)
    base = rule.radius_m / closest_radius_widths(count)
    parts = [rule.tip_m(r * base, r * base) / (r * base) for r in (0.5, 1, 3, 5, 6, 10, 14)]
    assert parts[0] == pytest.approx(parts[1])
    assert parts[-1] == pytest.approx(parts[-2])
    assert min(parts[2], parts[4]) <= parts[3] <= max(parts[2], parts[4])


def test_the_number_of_rails_grows_with_the_ratio_of_widths():
    counts = [rails_for(r) for r in (1.01, 1.5, 2, 3, 4, 6, 10)]
    assert counts == sorted(counts)
    assert set(counts) <= set(COUNTS)
    assert rail_rule(3e-3, 3e-3).count == 3


def test_a_strip_too_narrow_for_the_number_of_rails():
    """A study of 7 rails of one radius has a least width."""
    rule = rail_rule(4e-3, 12e-3, 7)
    assert np.all(np.isfinite(rule.offsets_m(4e-3)))
    with pytest.raises(GeometryError, match=r"wire radii is too narrow for 7 rails"):
        rule.offsets_m(3.5e-3)
