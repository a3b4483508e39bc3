"""Antennas turned and lifted, and held against a ground."""

from dataclasses import fields, replace

import numpy as np
import pytest

from simkit.errors import GeometryError
from simkit.geometry import build_wires, plan_mesh
from simkit.geometry.placement import far_from_earth, place_point, placed
from simkit.study.model import CutFeed, Ground, Placement

PLANE = Ground("plane")
EARTH = Ground("earth", 13.0, 0.005)
UPRIGHT = ((0.0, 0.0, -1.0), (0.0, 1.0, 0.0), (1.0, 0.0, 0.0))
FLAT = Placement().rotation


def leaning(degrees):
    """The x axis turned up by an angle."""
    c, s = np.cos(np.deg2rad(degrees)), np.sin(np.deg2rad(degrees))
    return ((c, 0.0, -s), (0.0, 1.0, 0.0), (s, 0.0, c))


def askew():
    """Some rotation without a special axis."""
    q, _ = np.linalg.qr(np.random.default_rng(3).normal(size=(3, 3)))
    q *= np.sign(np.linalg.det(q))
    return tuple(tuple(float(v) for v in row) for row in q)


def at(antenna, rotation=FLAT, lift_mm=0.0, ground=None, kind="auto"):
    placement = Placement(rotation, (0.0, 0.0, lift_mm * 1e-3))
    return replace(antenna, placement=placement, ground=ground, model=kind)


def built(antenna):
    return build_wires(antenna, plan_mesh([antenna]))


def heights(grid):
    return np.array([(wire.start_m[2], wire.end_m[2]) for wire in grid.wires])


def test_identity_is_free(make):
    antenna = make.straight(150, 6, 75)
    grid = built(antenna)
    assert placed(grid, antenna) is grid


@pytest.mark.parametrize("kind", ["line", "grid"])
def test_only_the_ends_of_wires_move_and_they_move_rigidly(make, kind):
    antenna = replace(make.ell(60, 4, 90, 20), model=kind)
    before = built(antenna)
    placement = Placement(askew(), (0.3, -0.2, 1.7))
    after = built(replace(antenna, placement=placement))
    for field in fields(before):
        if field.name in ("wires", "chains"):
            continue
        one, other = getattr(before, field.name), getattr(after, field.name)
        assert np.array_equal(one, other, equal_nan=field.name == "strip_position"), field.name
    turn, shift = np.array(placement.rotation), np.array(placement.shift_m)
    for old, new in zip(before.wires, after.wires, strict=True):
        assert new.segments == old.segments
        assert new.start_m == pytest.approx(turn @ old.start_m + shift, abs=1e-15)
        assert new.end_m == pytest.approx(turn @ old.end_m + shift, abs=1e-15)


def test_ends_that_met_still_meet_exactly(make):
    antenna = replace(make.ell(60, 4, 90, 20), model="grid")
    count = [
        len({end for wire in built(a).wires for end in (wire.start_m, wire.end_m)})
        for a in (antenna, replace(antenna, placement=Placement(askew(), (0.1, 0.2, 0.3))))
    ]
    assert count[0] == count[1]


def test_a_point_is_turned_first_and_lifted_then():
    placement = Placement(UPRIGHT, (0.1, 0.0, 0.5))
    assert place_point((0.2, 0.03), placement) == pytest.approx((0.1, 0.03, 0.7))


# -- standing on a plane ---------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ["line", "grid"])
@pytest.mark.parametrize("lift_um", [0.0, 0.4, -0.4])
def test_an_end_on_the_plane_is_exactly_there_and_not_shortened(make, kind, lift_um):
    antenna = at(make.straight(75, 6, 20), UPRIGHT, lift_um * 1e-3, PLANE, kind)
    grid = built(antenna)
    assert heights(grid).min() == 0.0
    assert heights(grid).max() == pytest.approx(75e-3 - 0.075 * 6e-3, abs=1e-6)
    assert grid.path_on_plane == (True, False)
    assert (grid.chains[0].open_start, grid.chains[0].open_end) == (False, True)
    # No metal across the strip in the plane.
    assert heights(grid).max(axis=1).min() > 0


def test_without_a_ground_the_same_end_is_an_open_end(make):
    grid = built(at(make.straight(75, 6, 20), UPRIGHT))
    assert heights(grid).min() == pytest.approx(0.075 * 6e-3)
    assert grid.path_on_plane == (False, False)


@pytest.mark.parametrize("kind", ["line", "grid"])
def test_a_feed_at_the_foot_is_the_lowest_segment(make, kind):
    antenna = at(make.straight(75, 6, 0.3, gap_mm=0.6), UPRIGHT, 0.0, PLANE, kind)
    grid = built(antenna)
    starts, ends = grid.ends_m()
    assert sum(volts for _, volts in grid.source) == (1.0 if kind == "line" else 3.0)
    for segment, volts in grid.source:
        assert volts == 1.0
        assert starts[segment][2] == 0.0
        assert ends[segment][2] > 0
    assert grid.study_gap_m == 0.6e-3
    assert grid.feed_width_m == 2 * 6e-3


@pytest.mark.parametrize("kind", ["line", "grid"])
def test_a_foot_at_the_end_of_the_path_is_like_one_at_its_start(make, kind):
    """Drawn from the tip down, so turned the other way and lifted by its length."""
    down = tuple(tuple(-v for v in row) if n != 1 else row for n, row in enumerate(UPRIGHT))
    first = built(at(make.straight(75, 6, 0.3, gap_mm=0.6), UPRIGHT, 0.0, PLANE, kind))
    other = built(at(make.straight(75, 6, 74.7, gap_mm=0.6), down, 75.0, PLANE, kind))
    assert other.path_on_plane == (False, True)
    assert other.segments == first.segments
    starts, ends = other.ends_m()
    assert {float(ends[s][2]) for s, _ in other.source} == {0.0}
    assert {round(float(starts[s][2]), 9) for s, _ in other.source} == {
        round(float(first.ends_m()[1][s][2]), 9) for s, _ in first.source
    }
    assert other.model_gap_m == pytest.approx(first.model_gap_m)


def test_a_feed_at_nought_is_one_at_the_foot(make):
    antenna = at(make.straight(75, 6, 0.3, gap_mm=0.6), UPRIGHT, 0.0, PLANE)
    nought = replace(antenna, feed=CutFeed("strip", 0.0, 0.6e-3))
    assert built(nought).source == built(antenna).source
    with pytest.raises(GeometryError, match="is an end of the metal"):
        built(replace(nought, ground=None))


def test_feeds_at_the_foot_and_above_it_share_no_study(make):
    foot = at(make.straight(75, 6, 0.3, gap_mm=0.6), UPRIGHT, 0.0, PLANE)
    above = replace(foot, feed=CutFeed("strip", 30e-3, 0.6e-3))
    plan = plan_mesh([foot, foot, above])
    build_wires(foot, plan)
    with pytest.raises(GeometryError, match=r"at the foot of a strip on the plane .* split"):
        build_wires(above, plan)


def test_a_leaning_foot_is_doubtful_and_a_flat_one_refused(make):
    antenna = make.straight(150, 6, 60)
    assert built(at(antenna, leaning(70), 0.0, PLANE)).doubts == ()
    (doubt,) = built(at(antenna, leaning(50), 0.0, PLANE)).doubts
    assert "leans to 50 degrees from the plane" in doubt
    with pytest.raises(GeometryError, match=r"at \(0, 0, 0\) mm leans to 20 degrees"):
        built(at(antenna, leaning(20), 0.0, PLANE))


def test_a_bend_on_the_plane_is_no_end(make):
    """Its outer corner lies below."""
    vee = make.strip([(-60, 60), (0, 0), (60, 60)], 4, 30)
    up = ((1.0, 0.0, 0.0), (0.0, 0.0, -1.0), (0.0, 1.0, 0.0))
    with pytest.raises(
        GeometryError, match=r"reaches 2.828 mm below the ground, at \(0, 0, -2.828\)"
    ):
        built(at(vee, up, 0.0, PLANE))


# -- above a ground --------------------------------------------------------------------------------


def test_metal_below_the_ground_is_refused_with_its_place(make):
    with pytest.raises(
        GeometryError,
        match=r"strip 'strip' reaches 12 mm below the ground, at \(0, -?3, -12\) mm: lift the",
    ):
        built(at(make.straight(150, 6, 60), leaning(40), -12.0, PLANE))


def test_the_edge_of_an_upright_strip_counts_not_its_centre_line(make):
    on_edge = ((1.0, 0.0, 0.0), (0.0, 0.0, -1.0), (0.0, 1.0, 0.0))
    antenna = make.straight(150, 6, 60)
    built(at(antenna, on_edge, 3.5, PLANE))
    with pytest.raises(GeometryError, match="reaches 1 mm below the ground"):
        built(at(antenna, on_edge, 2.0, PLANE))


@pytest.mark.parametrize("ground", [PLANE, EARTH])
def test_a_strip_in_the_plane_is_refused(make, ground):
    with pytest.raises(GeometryError, match=r"a strip lies in the ground plane from \("):
        built(at(make.straight(150, 6, 60), FLAT, 0.0, ground))


def test_a_wire_that_would_cut_the_plane_is_refused(make):
    with pytest.raises(GeometryError, match=r"1.5 mm radius lies 1.2 mm above the plane .* 0.3 mm"):
        built(at(make.straight(150, 6, 60), FLAT, 1.2, PLANE))


def test_metal_near_the_plane_is_doubtful(make):
    antenna = make.straight(150, 6, 60)
    (doubt,) = built(at(antenna, FLAT, 4.0, PLANE)).doubts
    assert (
        "within 2.7 wire radii of the ground; the models are checked from 4 radii (6 mm)" in doubt
    )
    assert built(at(antenna, FLAT, 6.1, PLANE)).doubts == ()


def test_metal_does_not_stand_on_earth(make):
    with pytest.raises(GeometryError, match="can stand on a perfect plane, but not on real earth"):
        built(at(make.straight(75, 6, 20), UPRIGHT, 0.0, EARTH))


def test_little_height_over_earth_is_doubtful(make):
    """0.08 wavelengths at the bottom of the band, 300 MHz, are 80 mm."""
    antenna = make.straight(150, 6, 60)
    low, high = at(antenna, FLAT, 79.0, EARTH), at(antenna, FLAT, 81.0, EARTH)
    (doubt,) = built(low).doubts
    assert "79 mm or 0.079 wavelengths above real earth" in doubt
    assert not far_from_earth(built(low), low)
    assert built(high).doubts == ()
    assert far_from_earth(built(high), high)
