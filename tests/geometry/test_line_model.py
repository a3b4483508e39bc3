"""Strips as one wire each, by the rules."""

import re
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from simkit.engine.pynec import solve_wires
from simkit.errors import GeometryError
from simkit.geometry import build_wires, plan_mesh
from simkit.geometry.checks import check_wires
from simkit.geometry.line_rules import chamfer_m, whisker_m
from simkit.study.model import Antenna, CutFeed, FrequencyBand, Metal, Strip


def grid_of(antenna):
    return build_wires(antenna, plan_mesh([antenna]))


def segment_ends_mm(grid):
    starts, ends = grid.ends_m()
    return starts[:, :2] * 1e3, ends[:, :2] * 1e3


def as_line(antenna):
    """The antenna with the line model asked for, also where its limits would choose the grid."""
    return replace(antenna, model="line")


def refused(antenna, match):
    with pytest.raises(GeometryError, match=match):
        grid_of(as_line(antenna))


def test_radius_is_that_of_the_strip_with_its_thickness(make):
    assert grid_of(make.straight(150, 6, 75)).radius_m == pytest.approx(0.0015, rel=1e-12)
    thick = grid_of(make.straight(150, 6, 75, metal=make.brass)).radius_m
    assert 1.02 < thick / 0.0015 < 1.06


def test_open_ends_stop_0_075_widths_inside(make):
    (wire,) = grid_of(make.straight(150, 6, 75)).wires
    assert wire.start_m[0] == pytest.approx(0.00045, abs=1e-12)
    assert wire.end_m[0] == pytest.approx(0.14955, abs=1e-12)


def test_fed_ends_are_not_shortened_and_the_gap_is_bridged(make):
    grid = grid_of(make.dipole([(1, 0), (71, 0)], [(-1, 0), (-51, 0)], 4))
    starts, ends = segment_ends_mm(grid)
    assert starts[0] == pytest.approx([-50.7, 0.0], abs=1e-9)
    assert ends[-1] == pytest.approx([70.7, 0.0], abs=1e-9)
    # One unbroken chain with the source segment's middle in the gap's.
    assert starts[1:] == pytest.approx(ends[:-1], abs=1e-9)
    ((source, volts),) = grid.source
    assert volts == 1.0
    assert (starts[source] + ends[source]) / 2 == pytest.approx([0.0, 0.0], abs=1e-9)


def test_a_centre_feed_sits_on_the_middle_segment_of_one_wire(make):
    grid = grid_of(make.straight(150, 6, 75))
    assert len(grid.wires) == 1
    assert grid.source == (((grid.segments - 1) // 2, 1.0),)


@pytest.mark.parametrize("at", [20.0, 47.5, 90.0])
def test_an_off_centre_feed_has_its_segment_around_the_feed_point(make, at):
    grid = grid_of(make.straight(150, 6, at))
    ((source, _),) = grid.source
    starts, ends = segment_ends_mm(grid)
    assert (starts[source] + ends[source])[0] / 2 == pytest.approx(at, abs=1e-9)
    lengths = ends[:, 0] - starts[:, 0]
    # Wires that meet need over two radii, 3.09 mm here; a short side may fall short by one piece.
    assert lengths.min() > 3.09
    assert lengths.max() < 3.6
    assert lengths.sum() == pytest.approx(149.1, abs=1e-9)


def test_right_angle_gets_chamfer_and_whisker(make):
    """Rules at 90 degrees: cut 0.79 w along each leg, whisker 0.95 w outwards."""
    grid = grid_of(make.ell(60, 4, 90, 15))
    first, second, whisker = (w for w in grid.wires if w.segments == 1 and w.start_m[0] > 0.05)
    cut, out = 4 * 0.792, 4 * 0.9485
    assert np.array(first.start_m[:2]) * 1e3 == pytest.approx([60 - cut, 0], abs=0.01)
    assert np.array(first.end_m[:2]) * 1e3 == pytest.approx([60 - cut / 2, cut / 2], abs=0.01)
    assert np.array(second.end_m[:2]) * 1e3 == pytest.approx([60, cut], abs=0.01)
    assert whisker.start_m == first.end_m
    tip = np.array([60 - cut / 2, cut / 2]) + out * np.array([1, -1]) / np.sqrt(2)
    assert np.array(whisker.end_m[:2]) * 1e3 == pytest.approx(tip, abs=0.01)


@pytest.mark.parametrize("turn", [55.0, 75.0, 119.0])
def test_figures_of_other_corners(make, turn):
    grid = grid_of(make.ell(70, 3, turn, 15))
    whisker = grid.wires[-2]
    assert whisker.length_m == pytest.approx(whisker_m(np.deg2rad(turn), 0.003), rel=1e-9)
    cut = 0.070 - np.linalg.norm(grid.wires[-4].start_m)
    assert cut == pytest.approx(chamfer_m(np.deg2rad(turn), 0.003), rel=1e-9)


def test_a_feed_on_the_leg_before_a_corner_leaves_the_corner_alone(make):
    """Leg, source, leg, two chamfer pieces, whisker, leg."""
    grid = grid_of(make.ell(60, 4, 90, 15))
    assert [wire.segments for wire in grid.wires][1] == 1
    assert [wire.segments for wire in grid.wires][3:6] == [1, 1, 1]
    assert len(grid.wires) == 7


def test_no_segment_but_chamfers_and_whiskers_leaves_the_path(make):
    grid = grid_of(make.strip([(0, 0), (60, 0), (90, 25), (140, 25)], 4, 20))
    starts, ends = segment_ends_mm(grid)
    legs = [((0, 0), (60, 0)), ((60, 0), (90, 25)), ((90, 25), (140, 25))]
    for point in np.vstack([starts, ends]):
        off = min(distance(point, np.array(a), np.array(b)) for a, b in legs)
        assert off < 1e-9


def distance(point, start, end):
    along = (end - start) / np.linalg.norm(end - start)
    return abs(np.cross(np.append(along, 0), np.append(point - start, 0))[2]) + max(
        0.0, -(point - start) @ along, (point - end) @ along
    )


@pytest.mark.parametrize("turn", [10.0, 15.0])
def test_source_of_a_gentle_fed_corner_is_split_beside_the_node(make, turn):
    grid = grid_of(make.vee(60, 4, turn))
    (left, half), (right, other) = grid.source
    assert (half, other) == (0.5, 0.5)
    _, ends = segment_ends_mm(grid)
    starts, _ = segment_ends_mm(grid)
    assert ends[left] == pytest.approx([0, 0], abs=1e-9)
    assert starts[right] == pytest.approx([0, 0], abs=1e-9)


@pytest.mark.parametrize("turn", [30.0, 60.0, 90.0])
def test_source_of_a_sharp_fed_corner_is_split_on_the_chamfer(make, turn):
    grid = grid_of(make.vee(60, 4, turn))
    (left, half), (right, other) = grid.source
    assert (half, other) == (0.5, 0.5)
    starts, ends = segment_ends_mm(grid)
    assert ends[left] == pytest.approx(starts[right], abs=1e-9)
    # Both lie in one straight line, across the bisector.
    assert starts[left][1] == pytest.approx(ends[right][1], abs=1e-9)
    assert starts[left][0] == pytest.approx(-ends[right][0], abs=1e-9)


@pytest.mark.parametrize("turn", [20.0, 49.0, 60.0, 90.0])
@pytest.mark.parametrize("at", [10.0, 15.0, 45.0])
def test_a_source_never_lies_across_a_corner(make, turn, at):
    grid = grid_of(make.ell(60, 4, turn, at))
    starts, ends = segment_ends_mm(grid)
    for segment, _ in (*grid.source, *grid.probe):
        low, high = sorted((starts[segment][0], ends[segment][0]))
        assert not low < 60 - 1e-9 < high - 2e-9


def test_a_corner_sharper_than_the_rules(make):
    refused(make.ell(60, 3, 125, 15), r"corner at \(60, 0\) mm turns by 125 degrees.*up to 120")


def test_no_room_between_corner_and_end(make):
    antenna = make.strip([(0, 0), (60, 0), (60, 7)], 6, 20)
    refused(antenna, r"the straight part of a leg is 1.8 mm long.*needs half a width there")


def test_no_room_between_feed_and_corner(make):
    refused(make.ell(60, 6, 90, 54), r"near .* the straight part of a leg is .*move the feed")


@pytest.mark.parametrize("at", [57.0, 62.0])
def test_a_feed_within_a_corner(make, at):
    refused(make.ell(60, 6, 90, at), r"the source at \(.*\) mm sits in a corner, .* move it about")


@pytest.mark.parametrize("at", [0.2, 149.8])
def test_a_feed_at_the_very_end(make, at):
    refused(make.straight(150, 6, at), r"at the very end of a strip 6 mm wide")


def test_a_path_all_of_whose_segments_the_source_takes(make):
    antenna = make.vee(9, 4, 10, band=make.band(0.1e9, 0.4e9, 11))
    refused(antenna, r"a fed path of 18 mm has 2 segments, all taken by the source")


def test_short_legs_are_doubted(make):
    grid = grid_of(as_line(make.strip([(0, 0), (60, 0), (60, 14)], 6, 20)))
    assert any("the corner at (60, 0) mm has a leg of 2.3 widths" in d for d in grid.doubts)


def test_a_strip_too_wide_for_its_length_is_refused_with_the_remedy(make):
    antenna = make.ell(20, 9, 60, 8)
    refused(antenna, r"too wide for (its length|this corner)|needs half a width there")


def test_a_strip_wider_than_a_fifth_of_its_length_is_doubted(make):
    (doubt,) = grid_of(as_line(make.straight(80, 18, 40))).doubts
    assert "0.23 of its length wide" in doubt


def test_long_segments_at_the_top_of_the_band_are_doubted(make):
    wide = make.band(0.3e9, 3e9, 11)
    plan = plan_mesh([make.straight(150, 3, 40, band=make.band(0.3e9, 1.1e9, 11))])
    (doubt,) = build_wires(make.straight(150, 3, 40, band=wide), plan).doubts
    assert re.search(r"segments of \d\S* mm are longer than .* of the wavelength", doubt)


@pytest.mark.parametrize("width", [3, 6, 8, 10])
def test_corner_figures_are_no_reason_to_doubt(make, width):
    """The rules hold for 3 to 12 mm up to 3.6 GHz with whiskers of one segment."""
    assert grid_of(make.ell(80, width, 90, 30)).doubts == ()


def test_expected_error_grows_with_width_and_bends(make):
    thin, wide = grid_of(make.straight(150, 6, 75)), grid_of(make.straight(150, 15, 75))
    bent = grid_of(make.ell(75, 6, 90, 20))
    assert thin.relative_error < wide.relative_error < bent.relative_error <= 0.003


def test_chain_runs_through_every_segment_but_whiskers_in_order(make):
    antenna = make.strip([(0, 0), (60, 0), (60, 50), (110, 50)], 4, 20)
    grid = grid_of(antenna)
    (chain,) = grid.chains
    assert chain.length_m == pytest.approx(0.16, rel=1e-12)
    assert np.all(np.diff(chain.arc_m) > 0)
    assert len(chain.segments) == grid.segments - 2
    starts, ends = segment_ends_mm(grid)
    assert starts[chain.segments][1:] == pytest.approx(ends[chain.segments][:-1], abs=1e-9)
    # Away from the figures the arc length is that of the path itself.
    middle = (starts + ends)[chain.segments] / 2
    on_first = middle[:, 0] < 55
    assert chain.arc_m[on_first] * 1e3 == pytest.approx(middle[on_first, 0], abs=1e-9)


def test_segments_know_their_strip_and_place(make):
    grid = grid_of(make.dipole([(1, 0), (71, 0)], [(-1, 0), (-51, 0)], 4))
    x = np.sum(segment_ends_mm(grid), axis=0)[:, 0] / 2
    east, west = x > 1, x < -1
    assert set(grid.strip_index[east]) == {0}
    assert set(grid.strip_index[west]) == {1}
    assert grid.strip_position[east] == pytest.approx((x[east] - 1) / 70, abs=1e-9)
    assert grid.strip_position[west] == pytest.approx((-x[west] - 1) / 50, abs=1e-9)
    ((source, _),) = grid.source
    assert grid.strip_index[source] == -1
    assert np.isnan(grid.strip_position[source])


def test_whiskers_belong_to_their_strip_but_have_no_place(make):
    grid = grid_of(make.ell(60, 4, 90, 15))
    whisker = sum(w.segments for w in grid.wires[:-2])
    assert grid.strip_index[whisker] == 0
    assert np.isnan(grid.strip_position[whisker])
    assert np.isfinite(np.delete(grid.strip_position, whisker)).all()


def test_second_source_is_off_the_centre_and_off_the_first(make):
    for antenna in (make.straight(150, 6, 75), make.straight(150, 6, 20), make.vee(75, 8, 60)):
        grid = grid_of(antenna)
        ((probe, volts),) = grid.probe
        assert volts == 1.0
        assert probe not in [segment for segment, _ in grid.source]
        (chain,) = grid.chains
        place = chain.arc_m[list(chain.segments).index(probe)] / chain.length_m
        assert place == pytest.approx(0.08, abs=0.03)


def test_loop_is_closed_and_has_no_end_correction(make):
    grid = grid_of(make.loop(60, 40, 3, 75))
    (chain,) = grid.chains
    starts, ends = segment_ends_mm(grid)
    row = chain.segments
    assert chain.closed
    assert starts[row] == pytest.approx(np.roll(ends[row], 1, axis=0), abs=1e-9)
    ((source, _),) = grid.source
    assert (starts[source] + ends[source]) / 2 == pytest.approx([60, 15], abs=1e-9)


def test_a_strip_without_the_feed_is_a_chain_of_its_own(make):
    antenna = make.dipole([(1, 0), (71, 0)], [(-1, 0), (-51, 0)], 4)
    rod = replace(antenna.strips[0], name="rod", path_m=((-0.06, 0.03), (0.05, 0.03)))
    grid = grid_of(replace(antenna, strips=(*antenna.strips, rod)))
    assert [chain.closed for chain in grid.chains] == [False, False]
    assert set(grid.strip_index[grid.chains[1].segments]) == {2}
    assert grid.chains[1].length_m == pytest.approx(0.11, rel=1e-12)


def test_mirrored_antenna_is_the_mirrored_grid(make):
    path = [(0, 0), (60, 0), (60, 50), (110, 60)]
    grid = grid_of(make.strip(path, 4, 20))
    mirrored = grid_of(make.strip([(-x, y) for x, y in path], 4, 20))
    for one, other in zip(grid.ends_m(), mirrored.ends_m(), strict=True):
        assert other == pytest.approx(one * [-1, 1, 1], abs=1e-12)
    assert mirrored.source == grid.source
    assert mirrored.probe == grid.probe


# -- junctions -------------------------------------------------------------------------------------


def tee(make, at=75.0, start=0.0, side=1, width=6):
    antenna = make.straight(120, width, 25)
    branch = Strip(
        "branch", ((at * 1e-3, side * start * 1e-3), (at * 1e-3, side * 0.04)), width * 1e-3
    )
    return replace(antenna, strips=(*antenna.strips, branch))


@pytest.mark.parametrize("side", [1, -1])
@pytest.mark.parametrize("start", [0.0, 3.0])
def test_junction_is_a_rhombus_with_nothing_at_its_centre(make, side, start):
    """A, B at 0.5 w along the host, M at 0.9 w up the branch, K at 0.25 w on the far side."""
    grid = grid_of(tee(make, side=side, start=start))
    a, b = (72, 0), (78, 0)
    k, m = (75, -1.5 * side), (75, 5.4 * side)
    pieces = {tuple(sorted([mm(w.start_m), mm(w.end_m)])) for w in grid.wires if w.segments == 1}
    assert {tuple(sorted(pair)) for pair in ((a, k), (k, b), (a, m), (m, b))} <= pieces
    points = np.vstack(segment_ends_mm(grid))
    assert np.min(np.linalg.norm(points - [75, 0], axis=1)) > 1.4
    # The branch goes on from M.
    last = grid.wires[-1]
    assert (mm(last.start_m), mm(last.end_m)) == (m, (75, (40 - 0.45) * side))


def mm(point):
    return tuple(float(round(v * 1e3, 6) + 0.0) for v in point[:2])


def test_host_and_branch_are_two_chains_that_share_a_node(make):
    grid = grid_of(tee(make))
    host, branch = grid.chains
    assert (host.open_start, host.open_end) == (True, True)
    assert (branch.open_start, branch.open_end) == (False, True)
    assert host.length_m == pytest.approx(0.12)
    assert branch.length_m == pytest.approx(0.04)
    # On the rhombus two segments run side by side.
    _, number = host.places()
    assert sorted(np.bincount(number))[-3:] == [1, 2, 2]
    assert set(grid.strip_index.tolist()) == {0, 1}


def test_longest_way_leads_through_the_branch(make):
    grid = grid_of(tee(make, at=90.0))
    assert sum(abs(p.end_m - p.start_m) for p in grid.path) == pytest.approx(0.13)


@pytest.mark.parametrize("shape", ["tee", "ell", "loop", "vee"])
def test_ends_that_meet_coincide(make, shape):
    """But for rounding of the last bit; the engine joins within a thousandth of a segment."""
    antenna = {
        "tee": tee(make),
        "ell": make.ell(60, 4, 73, 15),
        "loop": make.loop(60, 40, 4, 20),
        "vee": make.vee(75, 8, 60),
    }[shape]
    grid = grid_of(antenna)
    ends = np.array([[w.start_m, w.end_m] for w in grid.wires]).reshape(-1, 3)
    apart = np.linalg.norm(ends[:, None] - ends[None], axis=2)
    assert np.all((apart < 1e-16) | (apart > 1e-3))
    # Every end but those of the metal and of the whiskers meets another.
    alone = int(np.sum(np.sum(apart < 1e-16, axis=1) == 1))
    assert alone == {"tee": 3, "ell": 3, "loop": 4, "vee": 3}[shape]


def bow(make, radius, length, width):
    angles = (np.arange(101) / 100 - 0.5) * length / radius
    path = [(radius * np.sin(a), radius * np.cos(a)) for a in angles]
    return make.strip(path, width, 0.3 * length)


@pytest.mark.parametrize("name", ["straight", "thin", "wide", "vee", "ell", "zigzag", "bow"])
def test_unknowns(make, name):
    """65 at most for a straight or curved strip of 150 mm to 3 GHz, three half waves."""
    antenna = {
        "straight": make.straight(150, 6, 40),
        "thin": make.straight(150, 1.5, 40),
        "wide": make.straight(150, 20, 75),
        "vee": make.vee(75, 8, 60),
        "ell": make.ell(75, 4, 90, 30),
        "zigzag": make.strip([(0, 0), (50, 0), (75, 43), (125, 43)], 6, 25),
        "bow": bow(make, 50, 150, 3),
    }[name]
    assert grid_of(as_line(antenna)).segments <= 65


@st.composite
def polylines(draw):
    """Two to six legs of any length and turn, with a cut somewhere or on the first corner."""
    legs = np.array(draw(st.lists(st.floats(0.002, 0.08), min_size=1, max_size=6)))
    turns = draw(st.lists(st.floats(-2.2, 2.2), min_size=len(legs), max_size=len(legs)))
    heading = np.cumsum(turns)
    steps = legs[:, None] * np.stack([np.cos(heading), np.sin(heading)], axis=1)
    points = np.vstack([np.zeros(2), np.cumsum(steps, axis=0)])
    width = draw(st.floats(0.3e-3, 15e-3))
    on_corner = len(legs) > 1 and draw(st.booleans())
    at = float(legs[0]) if on_corner else draw(st.floats(0.02, 0.98)) * float(legs.sum())
    return Antenna(
        strips=(Strip("any", tuple((float(x), float(y)) for x, y in points), width),),
        metal=Metal("perfect", None, 0.0),
        feed=CutFeed("any", at, width / 10),
        reference_ohm=50.0,
        frequency=FrequencyBand(0.3e9, draw(st.floats(0.4e9, 4e9)), 11),
    )


@settings(max_examples=150, deadline=None, derandomize=True)
@given(antenna=polylines())
def test_any_path_is_either_refused_or_solvable(antenna):
    try:
        plan = plan_mesh([antenna])
        grid = build_wires(antenna, plan)
    except GeometryError:
        return
    check_wires(grid.wires, grid.radius_m, antenna.frequency.stop_hz)
    for source in (grid.source, grid.probe):
        # 1 V across the strip, so on each of its rails; at an apex half on either side.
        assert sum(volts for _, volts in source) == pytest.approx(plan.rails)
    currents = solve_wires(
        grid.wires, grid.radius_m, antenna.frequency.stop_hz, [grid.source, grid.probe]
    )
    assert currents.shape == (2, grid.segments)
