"""What a strip must be before it is meshed, and the numbers that follow from its width."""

from dataclasses import replace

import numpy as np
import pytest

from simkit.errors import GeometryError
from simkit.geometry.strips import (
    FEED_GAP_WIDTHS,
    SOURCE_SEGMENT_WIDTHS,
    check_strips,
    equivalent_radius_m,
    model_gap_m,
    outline,
)


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


def test_outline_of_a_right_angle_is_two_rectangles_with_a_mitre(make):
    shape = outline(make.ell(40, 6, 90, 12).strips[0])
    assert shape.area == pytest.approx(2 * 0.040 * 0.006, rel=1e-9)
    assert shape.bounds == pytest.approx((0.0, -0.003, 0.043, 0.040), abs=1e-12)


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


def test_a_patch_is_not_a_strip(make):
    refused(make.straight(19, 10, 6), "19 mm is shorter than twice the width of 10 mm")


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


def test_strips_of_different_widths(make):
    antenna = make.dipole([(1, 0), (60, 0)], [(-1, 0), (-60, 0)], 4)
    east, west = antenna.strips
    antenna = replace(antenna, strips=(east, replace(west, width_m=0.005)))
    refused(antenna, r"different widths \(east 4 mm, west 5 mm\).*give all strips the same width")


def test_fed_strips_that_touch_short_the_feed(make):
    """Ends 0.5 mm apart on the centre line, square, at 90 degrees: the inner corners overlap."""
    antenna = make.dipole([(0.5, 0), (60, 0)], [(0, -0.5), (0, -60)], 4)
    refused(antenna, "touch near .* shorts the feed between them .*: widen the gap")


def test_strips_that_touch_away_from_the_feed(make):
    antenna = make.dipole([(1, 0), (60, 0)], [(-1, 0), (-60, 0)], 4)
    third = replace(antenna.strips[0], name="stub", path_m=((0.04, 0.001), (0.04, 0.03)))
    antenna = replace(antenna, strips=(*antenna.strips, third))
    refused(antenna, r"strips 'east' and 'stub' touch or overlap near .* move them apart")


def test_a_close_neighbour_is_a_doubt_that_says_how_close(make):
    antenna = make.dipole([(1, 0), (60, 0)], [(-1, 0), (-60, 0)], 4)
    third = replace(antenna.strips[0], name="rod", path_m=((0.02, 0.0065), (0.05, 0.0065)))
    (doubt,) = check_strips(replace(antenna, strips=(*antenna.strips, third)))
    assert "'east' and 'rod' come within 2.5 mm" in doubt
    assert "less than a width (4 mm)" in doubt
