"""The longest way from tip to tip through the feed. Millimetres."""

from itertools import pairwise

import numpy as np
import pytest

from simkit.geometry import chains_of
from simkit.geometry.route import longest_path
from simkit.study.model import Antenna, CutFeed, FrequencyBand, Metal, Strip


def lines_of(*paths_mm, fed=0, at_mm=20.0):
    strips = tuple(
        Strip(f"strip {k}", tuple((x * 1e-3, y * 1e-3) for x, y in path), 0.004)
        for k, path in enumerate(paths_mm)
    )
    feed = CutFeed(f"strip {fed}", at_mm * 1e-3, 0.0004)
    band = FrequencyBand(0.3e9, 3e9, 11)
    return chains_of(Antenna(strips, Metal("perfect", None, 0.0), feed, 50.0, band))


def length_mm(path):
    return 1e3 * sum(abs(piece.end_m - piece.start_m) for piece in path)


def ends_mm(lines, path):
    """Places of the first and last point of a path, in order of x and y."""
    places = []
    for piece, arc in ((path[0], path[0].start_m), (path[-1], path[-1].end_m)):
        line = lines[piece.chain]
        places.append(
            tuple(float(np.interp(arc, line.arcs_m, line.points[:, k])) * 1e3 for k in range(2))
        )
    return sorted(places)


def joints_meet(lines, path):
    """Each piece begins where the one before it ends, in space."""
    for one, other in pairwise(path):
        a, b = lines[one.chain], lines[other.chain]
        end = [np.interp(one.end_m, a.arcs_m, a.points[:, k]) for k in range(2)]
        start = [np.interp(other.start_m, b.arcs_m, b.points[:, k]) for k in range(2)]
        assert end == pytest.approx(start, abs=1e-9)


BAR = [(-60, 0), (60, 0)]


def test_a_single_strip_is_its_own_path():
    (piece,) = longest_path(lines_of(BAR))
    assert (piece.chain, piece.start_m, piece.end_m) == (0, 0.0, pytest.approx(0.12))


@pytest.mark.parametrize(
    ("stem", "length"),
    [(40, 120 - 40 + 40), (39.9, 120), (30, 120), (70, 150)],
    ids=["tie", "just shorter", "shorter", "longer"],
)
def test_the_longer_of_arm_and_branch(stem, length):
    """The branch leaves 40 mm before the east tip; the feed is west of it."""
    lines = lines_of(BAR, [(20, 0), (20, stem)])
    path = longest_path(lines)
    joints_meet(lines, path)
    assert length_mm(path) == pytest.approx(length)


def test_the_path_must_run_through_the_feed():
    """Two long branches west of the feed: only one of them can be part of it."""
    lines = lines_of(BAR, [(-40, 0), (-40, 90)], [(-20, 0), (-20, -80)], at_mm=90)
    path = longest_path(lines)
    joints_meet(lines, path)
    assert length_mm(path) == pytest.approx(90 + 100)
    assert ends_mm(lines, path) == [(pytest.approx(-40), pytest.approx(90)), (60, 0)]


def test_branches_of_branches():
    lines = lines_of(BAR, [(20, 0), (20, 50)], [(20, 30), (120, 30)])
    path = longest_path(lines)
    joints_meet(lines, path)
    assert length_mm(path) == pytest.approx(80 + 30 + 100)
    assert [piece.chain for piece in path] == [0, 1, 2]


def test_a_fed_branch_goes_on_into_the_longer_arm_of_its_host():
    lines = lines_of([(20, 0), (20, 50)], BAR, at_mm=15)
    path = longest_path(lines)
    joints_meet(lines, path)
    assert length_mm(path) == pytest.approx(50 + 80)
    assert ends_mm(lines, path) == [(-60, 0), (pytest.approx(20), 50)]


def test_a_loop_is_once_round():
    loop = [(0, 0), (60, 0), (60, 40), (0, 40), (0, 0)]
    (piece,) = longest_path(lines_of(loop, [(60, 20), (150, 20)]))
    assert (piece.chain, piece.start_m, piece.end_m) == (0, 0.0, pytest.approx(0.2))


def test_a_strip_apart_is_never_on_the_path():
    lines = lines_of(BAR, [(-90, 30), (90, 30)])
    assert [piece.chain for piece in longest_path(lines)] == [0]


def test_a_ring_closed_through_a_bridge_ends():
    """Metal that leads back to where the path has been is not run through twice."""
    lines = lines_of(BAR, [(-60, 30), (60, 30)], [(-40, 0), (-40, 30)], [(40, 0), (40, 30)])
    path = longest_path(lines)
    joints_meet(lines, path)
    assert len({piece.chain for piece in path}) == len(path)
    assert length_mm(path) >= 120
