"""Current paths: strips in a row through the feed."""

from dataclasses import replace

import numpy as np
import pytest

from simkit.errors import GeometryError
from simkit.geometry.skeleton import feed_point, skeletons
from simkit.study.model import EndFeed


def test_end_feed_puts_the_strips_in_a_row_with_the_gap_between(make):
    antenna = make.dipole([(1, 0), (71, 0)], [(-1, 0), (-51, 0)], 4)
    (line,) = skeletons(antenna)
    assert line.length_m == pytest.approx(0.122, abs=1e-12)
    assert line.feed.kind == "straight"
    assert line.feed.arc_m == pytest.approx(0.051, abs=1e-12)
    assert line.feed.gap_m == pytest.approx(0.002, abs=1e-12)
    west, east = line.spans
    # West is run from its tip to its start, so backwards.
    assert (west.strip, west.start_m, west.end_m) == pytest.approx((1, 0.050, 0.0), abs=1e-12)
    assert (east.strip, east.start_m, east.end_m) == pytest.approx((0, 0.052, 0.122), abs=1e-12)


def test_end_feed_takes_either_end(make):
    antenna = make.dipole([(71, 0), (1, 0)], [(-1, 0), (-51, 0)], 4)
    antenna = replace(antenna, feed=EndFeed("west", "start", "east", "end"))
    (line,) = skeletons(antenna)
    east = line.spans[1]
    assert (east.start_m, east.end_m) == pytest.approx((0.122, 0.052), abs=1e-12)
    assert line.points[-1] == pytest.approx([0.071, 0.0], abs=1e-12)


def test_strips_at_an_angle_meet_at_an_apex_on_both_centre_lines(make):
    a = np.deg2rad(30)
    east = [(2 * np.cos(a), -2 * np.sin(a)), (60 * np.cos(a), -60 * np.sin(a))]
    west = [(-x, y) for x, y in east]
    (line,) = skeletons(make.dipole(east, west, 2))
    assert line.feed.kind == "apex"
    assert line.points[line.feed.vertex] == pytest.approx([0.0, 0.0], abs=1e-12)
    assert line.feed.arc_m == pytest.approx(0.060, abs=1e-12)
    # The gap is measured between the strip ends.
    assert line.feed.gap_m == pytest.approx(0.004 * np.cos(a), rel=1e-12)
    assert line.spans[0].start_m == pytest.approx(0.058, abs=1e-12)


def test_strip_ends_that_meet_are_a_shorted_feed(make):
    with pytest.raises(GeometryError, match=r"ends meet at \(0, 0\) mm, so the feed is shorted"):
        skeletons(make.dipole([(0, 0), (60, 0)], [(0, 0), (-60, 0)], 4))


def test_strip_ends_that_do_not_face_each_other(make):
    antenna = make.dipole([(0, 3), (60, 3)], [(0, 0), (-10, -40)], 2)
    with pytest.raises(GeometryError, match="do not face each other across the gap"):
        skeletons(antenna)


def test_a_source_between_the_two_ends_of_one_strip(make):
    antenna = make.dipole([(1, 0), (60, 0)], [(-1, 0), (-60, 0)], 4)
    antenna = replace(antenna, feed=EndFeed("east", "start", "east", "end"))
    with pytest.raises(GeometryError, match="from and to both name strip 'east'"):
        skeletons(antenna)


@pytest.mark.parametrize("at", [-1.0, 0.0, 100.0, 120.0, float("nan")])
def test_a_cut_outside_the_strip(make, at):
    with pytest.raises(GeometryError, match="lies outside strip 'strip', whose path is 100 mm"):
        skeletons(make.straight(100, 4, at))


def test_a_cut_wider_than_a_quarter_of_the_path(make):
    with pytest.raises(GeometryError, match="a cut of 30 mm is too wide for a path of 100 mm"):
        skeletons(make.straight(100, 4, 40, gap_mm=30))


def test_a_cut_on_a_path_point_is_at_an_apex_and_one_beside_it_is_not(make):
    (on,) = skeletons(make.vee(60, 4, 60))
    assert (on.feed.kind, on.feed.vertex) == ("apex", 1)
    (beside,) = skeletons(make.ell(60, 4, 60, 41))
    assert (beside.feed.kind, beside.feed.vertex) == ("straight", -1)


def test_an_apex_feed_must_stay_on_its_corner_through_the_study(make):
    with pytest.raises(GeometryError, match="the cut moves off the corner"):
        skeletons(make.ell(60, 4, 60, 41), "apex")


@pytest.mark.parametrize("at", [5.0, 71.0, 119.0, 190.0])
def test_a_loop_is_opened_away_from_the_feed_and_keeps_its_places(make, at):
    antenna = make.loop(60, 40, 4, at)
    (line,) = skeletons(antenna)
    assert line.closed
    assert line.length_m == pytest.approx(0.2, abs=1e-12)
    assert line.points[0] == pytest.approx(line.points[-1], abs=1e-12)
    assert min(line.feed.arc_m, 0.2 - line.feed.arc_m) > 0.035
    place = np.interp(at, [0, 60, 100, 160, 200], [0, 60, 60, 0, 0])
    assert feed_point(antenna)[0] == pytest.approx(place * 1e-3, abs=1e-12)
    (span,) = line.spans
    assert (line.feed.arc_m - span.start_m) % 0.2 == pytest.approx(at * 1e-3, abs=1e-12)


def test_strips_without_the_feed_get_paths_of_their_own(make):
    antenna = make.dipole([(1, 0), (71, 0)], [(-1, 0), (-51, 0)], 4)
    rod = replace(antenna.strips[0], name="rod", path_m=((-0.06, 0.03), (0.05, 0.03)))
    fed, alone = skeletons(replace(antenna, strips=(rod, *antenna.strips)))
    assert [span.strip for span in fed.spans] == [2, 1]
    assert (alone.feed, [span.strip for span in alone.spans]) == (None, [0])
