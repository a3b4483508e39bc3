"""What a strip must be before it is meshed, and the numbers that follow from its width."""

from dataclasses import replace

import numpy as np
import pytest

from simkit.errors import GeometryError
from simkit.geometry import plan_mesh
from simkit.geometry.strips import (
    FEED_GAP_WIDTHS,
    SOURCE_SEGMENT_WIDTHS,
    check_strips,
    equivalent_radius_m,
    model_gap_m,
)
from simkit.study.model import Carrier, EndFeed, Strip


def refused(antenna, match):
    with pytest.raises(GeometryError, match=match):
        check_strips(antenna)


def test_radius_is_a_quarter_of_the_width_and_grows_with_thickness():
    assert equivalent_radius_m(0.008, 0.0) == pytest.approx(0.002, rel=1e-15)
    # (w/4) [1 + t/(pi w) (1 + ln(4 pi w/t))] by hand for t/w = 1/40: 1 + 0.0079577 * 7.2195.
    assert equivalent_radius_m(0.008, 0.0002) == pytest.approx(0.00211490, rel=1e-5)


@pytest.mark.parametrize(
    ("segment", "gap"), list(zip(SOURCE_SEGMENT_WIDTHS, FEED_GAP_WIDTHS, strict=True))
)
def test_model_gap_goes_through_its_table(segment, gap):
    assert model_gap_m(segment * 0.006, 0.006) == pytest.approx(gap * 0.006, rel=1e-12)


def test_model_gap_rises_smoothly_on_and_beyond_its_table():
    segments = np.geomspace(0.3, 4.0, 60)
    gaps = np.array([model_gap_m(s * 0.01, 0.01) for s in segments])
    slope = np.diff(np.log(gaps)) / np.diff(np.log(segments))
    assert np.all(slope > 0.8)
    assert np.all(slope < 3.0)


@pytest.mark.parametrize("scale", [0.5, 3.0])
def test_model_gap_scales_with_the_strip(scale):
    assert model_gap_m(0.003 * scale, 0.005 * scale) == pytest.approx(
        scale * model_gap_m(0.003, 0.005), rel=1e-12
    )


def test_sound_strips_pass_without_doubts(make):
    assert check_strips(make.ell(40, 6, 90, 12)) == ()


@pytest.mark.parametrize("bad", [float("nan"), float("inf")])
def test_path_that_is_not_finite(make, bad):
    refused(make.strip([(0, 0), (bad, 0)], 6, 12), "strip 'strip': its path or width is not finite")


def test_width_that_is_not_finite(make):
    refused(make.straight(100, float("nan"), 12, gap_mm=1), "its path or width is not finite")


@pytest.mark.parametrize("width", [0.0, -3.0])
def test_width_that_is_not_positive(make, width):
    refused(make.straight(100, width, 12, gap_mm=1), r"width = -?[03] mm must be positive")


def test_path_points_that_coincide(make):
    antenna = make.strip([(0, 0), (30, 0), (30, 0), (60, 0)], 4, 12)
    refused(antenna, r"two path points coincide at \(30, 0\) mm; drop one")
    # Planning a mesh walks along the paths before their strips are checked.
    with pytest.raises(GeometryError, match=r"'strip': two path points coincide at \(30, 0\) mm"):
        plan_mesh([antenna])


def test_a_patch_is_not_a_strip(make):
    refused(make.straight(9, 10, 6), "a path of 9 mm is shorter than its width of 10 mm")


def test_a_path_that_crosses_itself(make):
    antenna = make.strip([(0, 0), (60, 0), (60, 40), (30, 40), (30, -40)], 3, 12)
    refused(antenna, r"'strip' crosses or overlaps itself near \(30, 0\) mm: its legs 1 and 4")


def test_a_tight_loop_that_crosses_within_three_widths_of_path(make):
    antenna = make.strip([(0, 0), (40, 0), (44, 8), (34, 8), (36, -40)], 8, 12)
    refused(antenna, "crosses or overlaps itself .* legs 1 and 4 come within 0 mm")


def test_a_path_that_comes_back_within_its_width(make):
    antenna = make.strip([(0, 0), (60, 0), (60, 30), (20, 30), (20, 5)], 6, 12)
    refused(antenna, r"legs 1 and 4 come within 5 mm, less than the width of 6 mm; spread")


def test_a_path_that_comes_back_a_little_farther_away_is_fine(make):
    check_strips(make.strip([(0, 0), (60, 0), (60, 30), (20, 30), (20, 7)], 6, 12))


def test_a_closed_loop_does_not_overlap_itself(make):
    assert check_strips(make.loop(60, 40, 4, 25)) == ()


def test_fed_strips_that_touch_short_the_feed(make):
    """Ends 0.5 mm apart on the centre line, square, at 90 degrees: the inner corners overlap."""
    antenna = make.dipole([(0.5, 0), (60, 0)], [(0, -0.5), (0, -60)], 4)
    refused(antenna, "touch near .* shorts the feed between them .*: widen the gap")


DIPOLE = [(1, 0), (60, 0)], [(-1, 0), (-60, 0)]


def with_third(make, name, path_mm, width_mm=4.0):
    antenna = make.dipole(*DIPOLE, 4)
    path = tuple((x * 1e-3, y * 1e-3) for x, y in path_mm)
    third = Strip(name, path, width_mm * 1e-3)
    return replace(antenna, strips=(*antenna.strips, third))


def test_strips_that_cross_away_from_their_ends(make):
    antenna = with_third(make, "bar", [(40, -20), (40, 30)])
    refused(antenna, r"'east' and 'bar' cross or overlap near \(4?\d.*, -?2\) mm without an end of")


def test_strips_that_lie_on_each_other_away_from_their_joint(make):
    """They leave their common end at 5 degrees: after 25 mm they are not yet a width apart."""
    antenna = with_third(make, "twin", [(60, 0), (0.5, 4.8)])
    refused(antenna, r"'east' and 'twin' overlap near .* mm, away from where they are joined")


@pytest.mark.parametrize("start_y", [0.0, 1.5, 1.9999])
def test_an_end_on_the_metal_of_another_is_a_joint(make, start_y):
    assert check_strips(with_third(make, "stub", [(40, start_y), (40, 30)])) == ()


@pytest.mark.parametrize(("start_y", "short"), [(2.1, 0.1), (5.9, 3.9)])
def test_an_end_that_stops_just_short_of_another_strip(make, start_y, short):
    antenna = with_third(make, "stub", [(40, start_y), (40, 30)])
    refused(
        antenna,
        rf"the start of strip 'stub' at \(40, {start_y}\) mm stops {short} mm short of strip "
        "'east', less than its own width of 4 mm: let it touch, or leave more room",
    )


def test_an_end_a_width_away_from_another_strip_is_meant(make):
    assert check_strips(with_third(make, "rod", [(40, 6.1), (40, 30)])) == ()


def test_a_near_miss_of_the_other_strips_end(make):
    """Whichever of the two stops short, and whichever is named first."""
    antenna = with_third(make, "bar", [(62.5, -20), (62.5, 20)], 3.0)
    refused(antenna, r"the end of strip 'east' at \(60, 0\) mm stops 1 mm short of strip 'bar'")


def test_the_fed_ends_do_not_count_as_near_misses(make):
    """They face each other across 2 mm, half their width."""
    assert check_strips(make.dipole(*DIPOLE, 4)) == ()


def test_a_loop_fed_between_its_own_ends_needs_a_gap(make):
    antenna = make.loop(60, 40, 4, 25)
    feed = EndFeed("strip", "start", "strip", "end")
    refused(
        replace(antenna, feed=feed),
        r"start and end of strip 'strip' meet at \(0, 0\) mm, so the feed is shorted",
    )


def test_a_close_neighbour_is_a_doubt_that_says_how_close(make):
    antenna = make.dipole([(1, 0), (60, 0)], [(-1, 0), (-60, 0)], 4)
    third = replace(antenna.strips[0], name="rod", path_m=((0.02, 0.0065), (0.05, 0.0065)))
    (doubt,) = check_strips(replace(antenna, strips=(*antenna.strips, third)))
    assert "'east' and 'rod' come within 2.5 mm" in doubt
    assert "less than a width (4 mm)" in doubt


def test_neighbours_on_one_carrier_are_refused(make):
    """The coupling through shared plastic is in no model; in air the same strips pass."""
    fed = make.straight(120, 6, 60)
    along = ((0.0, 0.0165), (0.12, 0.0165))
    pair = replace(fed, strips=(*fed.strips, Strip("near", along, 0.006)))
    check_strips(pair)
    carried = replace(pair, carrier=Carrier(2.7, 0.01, 3e-3))
    message = r"come within 10\.5 mm near .* mm; .* 4 of its thicknesses \(12 mm\)"
    with pytest.raises(GeometryError, match=message):
        check_strips(carried)
    check_strips(replace(carried, carrier=Carrier(2.7, 0.01, 2e-3)))
