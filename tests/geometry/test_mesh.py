"""One mesh topology for a whole study."""

import json

import numpy as np
import pytest
from scipy.constants import c as light_speed

from simkit.errors import GeometryError
from simkit.geometry import build_wires, plan_mesh
from simkit.geometry.mesh import chamfer_m, corner_offset_m, whisker_m


def counts(antennas):
    return plan_mesh(antennas).chains[0].counts


def test_right_angle_has_the_figure_of_the_rules():
    """90 degrees: c = 0.79 w, s = 0.95 w, as the rules round them."""
    turn = np.pi / 2
    assert corner_offset_m(turn, 1.0) == pytest.approx(1 / np.sqrt(2), rel=1e-12)
    assert chamfer_m(turn, 1.0) == pytest.approx(0.79, abs=0.005)
    assert whisker_m(turn, 1.0) == pytest.approx(0.95, abs=0.005)


def test_whisker_of_a_gentle_corner_has_a_least_length():
    """2.6 h - 0.89 w falls below 0.52 w under about 46 degrees."""
    assert whisker_m(np.deg2rad(30), 1.0) == 0.52
    assert whisker_m(np.deg2rad(60), 1.0) == pytest.approx(1.3 / np.cos(np.deg2rad(30)) - 0.89)


def test_thin_strip_is_cut_by_the_wavelength(make):
    """A fortieth at the top, 3 GHz: 2.498 mm into 149.775 mm goes 59 times."""
    assert counts([make.straight(150, 1.5, 75)]) == (59,)


def test_wide_strip_is_cut_by_its_width(make):
    """0.4 w = 8 mm into 147 mm goes 18 times; a centre feed needs an odd number."""
    assert counts([make.straight(150, 20, 75)]) == (17,)


def test_segments_stay_within_the_rules(make):
    for width in (1, 3, 6, 12, 20):
        for stop in (1e9, 3e9):
            band = make.band(0.3e9, stop, 11)
            antenna = make.straight(150, width, 75, band=band)
            (wire,) = build_wires(antenna, plan_mesh([antenna])).wires
            target = max(0.4 * width * 1e-3, light_speed / stop / 40)
            # Rounding to an odd count may add up to two segments' share.
            assert (
                target * (1 - 1e-9)
                <= wire.segment_m
                < target * wire.segments / (wire.segments - 2) * (1 + 1.1 / wire.segments)
            )


def test_counts_serve_the_finest_wish_within_the_fattest_limit(make):
    thin, fat = make.straight(150, 3, 75), make.straight(150, 12, 75)
    long = make.straight(180, 3, 75 * 1.2)
    assert counts([thin, long]) == counts([long])
    # A wide case bears segments down to 1.3 radii inside a straight wire, finer than it asks for.
    assert counts([fat]) < counts([thin, fat]) < counts([thin])
    wide = build_wires(fat, plan_mesh([thin, fat]))
    assert 1.3 < wide.wires[0].segment_m / wide.radius_m < 1.4


def test_a_sweep_keeps_its_topology_while_lengths_stretch(make):
    arms = np.linspace(50, 60, 7)
    antennas = [make.ell(arm, 4, 90, 15) for arm in arms]
    plan = plan_mesh(antennas)
    grids = [build_wires(antenna, plan) for antenna in antennas]
    assert len({tuple(wire.segments for wire in grid.wires) for grid in grids}) == 1
    assert len({grid.source for grid in grids}) == 1
    last = [grid.wires[-1].length_m for grid in grids]
    assert np.diff(last) == pytest.approx((arms[1] - arms[0]) * 1e-3, rel=1e-9)


def test_a_corner_that_is_sharp_in_one_case_has_its_figure_in_all(make):
    gentle, sharp = make.ell(60, 4, 40, 15), make.ell(60, 4, 60, 15)
    assert plan_mesh([gentle]).chains[0].vertices == ("node",)
    plan = plan_mesh([gentle, sharp])
    assert plan.chains[0].vertices == ("figure",)
    (doubt,) = build_wires(gentle, plan).doubts
    assert "turns by 40 degrees here and by 50 or more in other cases" in doubt
    assert build_wires(sharp, plan).doubts == ()


@pytest.mark.parametrize(
    ("turn", "kind"), [(3, "smooth"), (10, "node"), (49, "node"), (51, "figure")]
)
def test_kinds_of_plain_bends(make, turn, kind):
    assert plan_mesh([make.ell(60, 4, turn, 15)]).chains[0].vertices == (kind,)


@pytest.mark.parametrize(("turn", "kind"), [(15, "node"), (30, "figure"), (90, "figure")])
def test_kinds_of_fed_bends(make, turn, kind):
    plan = plan_mesh([make.vee(60, 4, turn)])
    assert (plan.feed_kind, plan.chains[0].vertices) == ("apex", (kind,))


def test_a_feed_that_is_centred_in_one_case_only_is_meshed_off_centre(make):
    middle, aside = make.straight(150, 6, 75), make.straight(150, 6, 70)
    assert plan_mesh([middle]).centred
    plan = plan_mesh([middle, aside])
    assert not plan.centred
    assert len(build_wires(middle, plan).wires) == 3


def test_paths_of_another_number_of_points_are_refused_when_built(make):
    plan = plan_mesh(
        [make.straight(150, 6, 40), make.straight(160, 6, 40), make.ell(70, 6, 90, 20)]
    )
    with pytest.raises(GeometryError, match=r"another number of points.*split the study"):
        build_wires(make.ell(70, 6, 90, 20), plan)


def test_a_feed_swept_past_a_corner_is_refused_only_there(make):
    antennas = [make.ell(60, 4, 90, at) for at in (44, 46, 58, 60.5, 75, 77)]
    plan = plan_mesh(antennas)
    built = []
    for antenna in antennas:
        try:
            built.append(build_wires(antenna, plan).segments)
        except GeometryError:
            built.append(None)
    assert built[2:4] == [None, None]
    assert len({*built[:2], *built[4:]}) == 1


def test_a_feed_swept_along_its_leg_shares_the_legs_segments(make):
    """Equal lengths but for a short side of few segments, and the same number in every case."""
    antennas = [make.straight(150, 6, at) for at in np.linspace(15, 135, 13)]
    plan = plan_mesh(antennas)
    assert plan.moving
    grids = [build_wires(antenna, plan) for antenna in antennas]
    assert len({grid.segments for grid in grids}) == 1
    lengths = np.array([[wire.segment_m for wire in grid.wires] for grid in grids])
    assert lengths.min() > 2.06 * 0.0015
    assert lengths.max() < 1.35 * lengths.mean()
    for grid, antenna in zip(grids, antennas, strict=True):
        ((source, _),) = grid.source
        middle = np.mean([ends[source][0] for ends in grid.ends_m()])
        assert middle == pytest.approx(antenna.feed.at_m, abs=1e-12)


def test_a_feed_swept_a_little_keeps_its_counts(make):
    plan = plan_mesh([make.straight(150, 6, at) for at in (40, 45, 50)])
    assert not plan.moving


def test_cases_that_cannot_be_laid_out_do_not_spoil_the_plan(make):
    good, bad = make.straight(150, 6, 40), make.straight(150, 6, 400)
    assert plan_mesh([bad, good, bad]) == plan_mesh([good])


def test_a_study_without_any_good_case_says_why(make):
    with pytest.raises(GeometryError, match="at = 400 mm lies outside strip"):
        plan_mesh([make.straight(150, 6, 400)])
    with pytest.raises(GeometryError, match="no case with strips of positive width"):
        plan_mesh([make.straight(150, 0, 40, gap_mm=1)])


def test_plan_goes_to_json_and_back(make):
    plan = plan_mesh([make.ell(60, 4, 90, 15)])
    kept = json.loads(json.dumps(plan.as_dict()))
    assert kept["feed_kind"] == "straight"
    assert kept["chains"][0]["vertices"] == ["figure"]
    assert kept["chains"][0]["counts"] == list(plan.chains[0].counts)
