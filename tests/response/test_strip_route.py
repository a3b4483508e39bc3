"""The path from tip to tip, and what branches off it."""

from __future__ import annotations

import numpy as np
import pytest

from simkit.geometry import build_wires, plan_mesh
from simkit.response.strip_current import current_along_path, current_along_strips
from simkit.response.strip_route import Route, routes_of, turns_m
from simkit.study.model import Antenna, CutFeed, FrequencyBand, Metal, Strip

BAND = FrequencyBand(3e8, 3e9, 28)
METAL = Metal("perfect", None, 0.0)
POSITION = np.linspace(0.0, 1.0, 101)


def antenna_of(*strips: Strip, at_m: float) -> Antenna:
    return Antenna(strips, METAL, CutFeed(strips[0].name, at_m, 0.001), 50.0, BAND)


BEAM = Strip("beam", ((0.0, 0.0), (0.12, 0.0)), 0.005)
TAIL = Strip("tail", ((0.12, 0.05), (0.12, 0.0)), 0.005)
STUB = Strip("stub", ((0.04, 0.07), (0.04, 0.0)), 0.003)


def legs(route: Route) -> list[tuple[int, int, int]]:
    """Strip, start and end in millimetres of every leg."""
    return [(leg.strip, round(leg.start_m * 1e3), round(leg.end_m * 1e3)) for leg in route.legs]


def test_strips_joined_at_ends_are_one_path_whichever_way_they_run() -> None:
    (path,) = routes_of(antenna_of(BEAM, TAIL, at_m=0.05))
    assert legs(path) == [(0, 0, 120), (1, 50, 0)]
    assert path.length_m == pytest.approx(0.17)
    assert path.feed_m == pytest.approx(0.05)
    assert turns_m(path) == pytest.approx([0.12])
    assert path.locate(0.13) == (1, pytest.approx(0.04))
    assert path.point_m(0.13, (BEAM, TAIL)) == pytest.approx((0.12, 0.01))


def test_path_takes_the_longer_way_at_a_joint_and_leaves_the_rest_as_a_branch() -> None:
    path, rest = routes_of(antenna_of(BEAM, STUB, at_m=0.09))
    assert legs(path) == [(1, 0, 70), (0, 40, 120)]
    assert legs(rest) == [(0, 40, 0)]
    assert (rest.start, rest.open_end) == ("joint", True)
    assert [joint.distance_m for joint in path.joinings] == pytest.approx([0.07])
    assert rest.joinings[0].distance_m == 0.0
    # Half a width of the wider strip, and a quarter more for the model to settle.
    assert rest.joinings[0].reach_m == pytest.approx(1.25 * 0.0025)


def test_short_branch_runs_away_from_its_joint() -> None:
    short = Strip("stub", ((0.04, 0.03), (0.04, 0.0)), 0.003)
    path, branch = routes_of(antenna_of(BEAM, short, at_m=0.09))
    assert legs(path) == [(0, 0, 120)]
    assert legs(branch) == [(1, 30, 0)]
    assert [joint.distance_m for joint in path.joinings] == pytest.approx([0.04])


def test_strip_without_contact_is_apart() -> None:
    parasite = Strip("parasite", ((0.0, 0.03), (0.11, 0.03)), 0.005)
    _, apart = routes_of(antenna_of(BEAM, parasite, at_m=0.05))
    assert (apart.start, legs(apart)) == ("apart", [(1, 0, 110)])
    knots = apart.knots_m(np.array([0, 1, 1]), np.array([0.5, 0.25, 0.75]))
    np.testing.assert_allclose(knots, [0.0, 0.0275, 0.0825, 0.11])


def test_loop_is_run_once_round_from_opposite_the_feed() -> None:
    corners = ((0.0, 0.0), (0.06, 0.0), (0.06, 0.04), (0.0, 0.04), (0.0, 0.0))
    strip = Strip("loop", corners, 0.004)
    (path,) = routes_of(antenna_of(strip, at_m=0.025))
    assert path.closed
    assert path.length_m == pytest.approx(0.2)
    assert sum(leg.length_m for leg in path.legs) == pytest.approx(0.2)
    assert path.locate(path.feed_m) == (0, pytest.approx(0.025))
    assert path.point_m(path.feed_m, (strip,)) == pytest.approx((0.025, 0.0))
    assert turns_m(path) == []


def test_current_jumps_at_a_joint_and_is_carried_on_to_it() -> None:
    """What the model has inside the joint belongs to neither side."""
    path, rest = routes_of(antenna_of(BEAM, STUB, at_m=0.09))
    beam = np.where(POSITION < 1 / 3, 0.2, 0.9).astype(complex)
    beam[abs(POSITION - 1 / 3) < 0.0025 / 0.12] = -7.0
    stub = np.where(POSITION < 0.068 / 0.07, 0.7, 7.0).astype(complex)
    distance, current = path.current(np.array([beam, stub]), POSITION)
    assert set(np.round(current.real, 12)) == {0.7, 0.9}
    np.testing.assert_allclose(distance[np.flatnonzero(np.diff(current))], 0.07)
    assert np.count_nonzero(abs(distance - 0.07) < 1e-12) == 2
    distance, current = rest.current(np.array([beam, stub]), POSITION)
    assert distance[0] == 0.0
    np.testing.assert_allclose(current, -0.2)


@pytest.mark.parametrize(
    "antenna",
    [
        antenna_of(BEAM, TAIL, at_m=0.05),
        antenna_of(BEAM, Strip("stub", ((0.04, 0.03), (0.04, 0.0)), 0.005), at_m=0.09),
        antenna_of(BEAM, Strip("stub", ((0.04, 0.07), (0.04, 0.0)), 0.005), at_m=0.09),
    ],
    ids=["ends", "short stub", "long stub"],
)
def test_current_along_the_route_is_that_along_the_models_path(antenna: Antenna) -> None:
    """Half waves are counted along the model's path; the pictures must show the same curve."""
    grid = build_wires(antenna, plan_mesh([antenna]))
    current = np.sin(np.arange(grid.segments) / 9.0).astype(complex)
    rows = current_along_strips(current, grid.chains, len(antenna.strips), POSITION)
    route = routes_of(antenna)[0]
    distance, along = route.current(rows, POSITION)
    model_distance, model = current_along_path(current, grid, 2001)
    at = np.linspace(0.02, route.length_m - 0.02, 57)
    clear = [abs(at - joint.distance_m) > joint.reach_m + 0.002 for joint in route.joinings]
    at = at[np.all(clear, axis=0)] if clear else at
    shown = np.interp(at, distance, along.real)
    # The model may run its path the other way.
    apart = [
        np.max(abs(shown - np.interp(at, model_distance, curve.real)))
        for curve in (model, -model[::-1])
    ]
    # Cubics against straight lines between places a hundredth of a strip apart.
    assert min(apart) < 5e-3
