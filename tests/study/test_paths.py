"""Curves as points, against circles and lines, whose every point is known."""

from __future__ import annotations

import math

import pytest

from simkit.study.paths import (
    SPLINE_POINTS,
    arc,
    cos_sin,
    is_closed,
    mirrored,
    path_length,
    rotated,
    smoothed,
    spread_evenly,
    width_at,
)

BENT = ((0.0, 0.0), (0.03, 0.0), (0.03, 0.05))


@pytest.mark.parametrize("quarters", range(-9, 10))
def test_quarter_turns_are_exact(quarters: int) -> None:
    assert set(cos_sin(quarters * math.pi / 2)) <= {0.0, 1.0, -1.0}
    cos, sin = cos_sin(quarters * math.pi / 2)
    # 2e-15 is what rounding of nine quarters of pi leaves
    assert cos == pytest.approx(math.cos(quarters * math.pi / 2), abs=2e-15)
    assert sin == pytest.approx(math.sin(quarters * math.pi / 2), abs=2e-15)


def test_other_turns_are_left_alone() -> None:
    for angle in (1e-9, 0.3, math.pi / 2 + 1e-9, -2.0):
        assert cos_sin(angle) == (math.cos(angle), math.sin(angle))


def test_a_turn_is_counterclockwise() -> None:
    assert rotated([(0.02, 0.0), (0.0, 0.01)], math.pi / 2) == ((0.0, 0.02), (-0.01, 0.0))


def test_mirrors_know_their_axes() -> None:
    assert mirrored([(0.02, 0.01)], "y") == ((-0.02, 0.01),)
    assert mirrored([(0.02, 0.01)], "x") == ((0.02, -0.01),)


def test_an_arc_runs_from_start_to_stop() -> None:
    points = arc((0.1, 0.2), 0.05, math.pi, math.pi / 2, 31)
    assert points[0] == (0.1 - 0.05, 0.2)
    assert points[-1] == (0.1, 0.2 + 0.05)
    assert all(
        math.dist(p, (0.1, 0.2)) == pytest.approx(0.05, rel=1e-12) for p in points
    )  # rounding
    chord = 2 * 0.05 * math.sin(math.pi / 2 / 30 / 2)
    assert path_length(points) == pytest.approx(30 * chord, rel=1e-12)  # rounding


def test_a_spline_goes_through_its_points_and_keeps_widths_linear() -> None:
    path, widths = smoothed(BENT, (4e-3, 6e-3, 5e-3))
    assert len(path) == len(widths) == 2 * SPLINE_POINTS + 1
    assert path[::SPLINE_POINTS] == BENT
    assert widths[::SPLINE_POINTS] == (4e-3, 6e-3, 5e-3)
    assert widths[SPLINE_POINTS // 4] == pytest.approx(4.5e-3, rel=1e-12)  # rounding
    assert smoothed(BENT, ())[1] == ()


def test_an_open_spline_is_straight_at_its_ends() -> None:
    """Second differences vanish at the ends and are largest at the middle point."""
    path, _ = smoothed(((0.0, 0.0), (0.04, 0.01), (0.08, 0.0)), ())
    bends = [abs(a[1] - 2 * b[1] + c[1]) for a, b, c in zip(path, path[1:], path[2:], strict=False)]
    assert bends[0] < 0.1 * max(bends)
    assert max(bends) == bends[SPLINE_POINTS - 1]


def test_a_straight_line_stays_straight() -> None:
    path, _ = smoothed(((0.0, 0.0), (0.01, 0.02), (0.05, 0.1)), ())
    assert all(y == pytest.approx(2 * x, abs=1e-15) for x, y in path)  # rounding
    assert path_length(path) == pytest.approx(math.hypot(0.05, 0.1), rel=1e-12)


def test_a_closed_spline_has_no_kink() -> None:
    """A cubic through twelve points of a circle is round to h**4/384 = 2e-4 and a little more."""
    points = arc((0.0, 0.0), 0.05, 0.0, 2 * math.pi, 13)
    path, _ = smoothed((*points[:-1], points[0]), ())
    assert is_closed(path)
    assert all(math.hypot(*p) == pytest.approx(0.05, rel=2.5e-4) for p in path)
    # 144 legs of nearly one length: no turn differs much from 2.5 degrees, the one at the seam too
    before, seam, after = path[-2], path[0], path[1]
    turn = math.atan2(after[1] - seam[1], after[0] - seam[0]) - math.atan2(
        seam[1] - before[1], seam[0] - before[0]
    )
    assert math.degrees(turn) == pytest.approx(2.5, abs=0.05)


@pytest.mark.parametrize(
    ("at_m", "width_m"),
    [(0.0, 4e-3), (0.015, 5e-3), (0.03, 6e-3), (0.055, 5.5e-3), (0.08, 5e-3), (0.2, 5e-3)],
)
def test_the_width_somewhere_along_a_taper(at_m: float, width_m: float) -> None:
    found = width_at(BENT, (4e-3, 6e-3, 5e-3), at_m)
    assert found == pytest.approx(width_m, rel=1e-12)  # rounding


def test_widths_spread_over_a_curve() -> None:
    assert spread_evenly((1.0, 3.0, 2.0), 5) == (1.0, 2.0, 3.0, 2.5, 2.0)
    assert spread_evenly((1.0, 3.0), 2) == (1.0, 3.0)
    assert spread_evenly((1.0, 3.0, 2.0), 3) == (1.0, 3.0, 2.0)
