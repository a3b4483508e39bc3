"""Wires the engine would answer with nonsense, an unspecific error, or not at all."""

import numpy as np
import pytest

from simkit.errors import GeometryError
from simkit.geometry.checks import check_wires
from simkit.geometry.wires import Wire

RADIUS = 1e-3
TOP_HZ = 1e9


def wire(start_mm, end_mm, segments=1):
    return Wire(
        tuple(float(v) * 1e-3 for v in (*start_mm, 0.0)),
        tuple(float(v) * 1e-3 for v in (*end_mm, 0.0)),
        segments,
    )


def refused(wires, match, radius=RADIUS, top=TOP_HZ):
    with pytest.raises(GeometryError, match=match):
        check_wires(wires, radius, top)


LONG = wire((0, 0), (80, 0), 16)


def test_sound_wires_pass():
    check_wires([LONG, wire((80, 0), (110, 40), 9), wire((0, 10), (80, 10), 16)], RADIUS, TOP_HZ)


@pytest.mark.parametrize("radius", [0.0, -1e-3, float("nan"), float("inf")])
def test_radius(radius):
    refused([LONG], "wire radius .* must be positive and finite", radius=radius)


@pytest.mark.parametrize("top", [0.0, -1e9, float("nan"), float("inf")])
def test_frequency(top):
    refused([LONG], "frequency .* Hz must be positive and finite", top=top)


@pytest.mark.parametrize("bad", [float("nan"), float("inf")])
def test_coordinate_that_is_not_finite(bad):
    refused([LONG, wire((0, 20), (bad, 20), 5)], "has a coordinate that is not finite")


@pytest.mark.parametrize("segments", [0, -3])
def test_segment_count(segments):
    refused([wire((0, 0), (80, 0), segments)], f"has {segments} segments; one is the least")


def test_wire_without_length():
    refused([wire((5, 5), (5, 5))], r"from \(5, 5, 0\) mm to \(5, 5, 0\) mm has no length")


def test_segments_inside_a_straight_wire_must_exceed_1_3_radii():
    check_wires([wire((0, 0), (14, 0), 10)], RADIUS, TOP_HZ)
    refused([wire((0, 0), (13, 0), 10)], r"segments of 1.3 mm, under 1.3 radii of 1 mm")


def test_a_wire_of_one_segment_must_exceed_two_radii():
    check_wires([wire((0, 0), (2.1, 0))], RADIUS, TOP_HZ)
    refused([wire((0, 0), (2.0, 0))], r"segments of 2 mm, under 2.0 radii of 1 mm")


def test_wires_that_meet_need_segments_over_two_radii():
    corner = wire((0, 0), (0, 30), 15)
    check_wires([wire((0, 0), (80, 0), 30), wire((0, 0), (0, 33), 15)], RADIUS, TOP_HZ)
    refused([LONG, corner], r"wires meet at \(0, 0, 0\) mm .* segments of 2 mm, under two radii")


def test_segments_over_a_tenth_of_the_shortest_wavelength():
    check_wires([wire((0, 0), (59, 0), 2)], RADIUS, TOP_HZ)
    refused([wire((0, 0), (61, 0), 2)], r"segments of 30.5 mm, over 1/10 of the wavelength")


def test_a_piece_of_a_figure_over_a_sixth_of_the_shortest_wavelength():
    check_wires([wire((0, 0), (49, 0))], RADIUS, TOP_HZ)
    refused([wire((0, 0), (51, 0))], r"segments of 51 mm, over 1/6 of the wavelength")


def test_the_same_wire_twice():
    refused([LONG, LONG], r"two wires join the same two points \(0, 0, 0\) mm and \(80, 0, 0\) mm")


def test_the_same_wire_backwards():
    refused([LONG, wire((80, 0), (0, 0), 16)], "two wires join the same two points")


def test_wires_that_cross():
    refused(
        [LONG, wire((33, -30), (33, 40), 14)], r"come within 0 mm of each other at \(33, 0, 0\)"
    )


def test_a_crossing_cannot_slip_between_the_sample_points():
    """At any slant and place, with segments of 25 radii."""
    rng = np.random.default_rng(5)
    coarse = wire((0, 0), (80, 0), 3)
    for _ in range(40):
        angle, place = rng.uniform(0.3, np.pi - 0.3), rng.uniform(5, 75)
        reach = 25 * np.array([np.cos(angle), np.sin(angle)])
        middle = np.array([place, 0.0]) + rng.uniform(-0.7, 0.7) * reach
        refused([coarse, wire(middle - reach, middle + reach, 2)], "of each other at")


def test_wires_that_only_come_near():
    check_wires([LONG, wire((0, 2.1), (80, 2.1), 16)], RADIUS, TOP_HZ)
    refused([LONG, wire((0, 1.9), (80, 1.9), 16)], r"come within 1.9 mm .* at least 2 mm is needed")


def test_an_end_that_nearly_meets_another_wire():
    refused([LONG, wire((81, 0), (120, 0), 8)], "come within 1 mm of each other")


def test_a_fold_back_puts_segment_middles_within_a_radius():
    """At 15 degrees the middle of a segment of 5 mm lies 0.65 mm from the other wire."""
    turn = np.deg2rad(15)
    back = wire((0, 0), (60 * np.cos(turn), 60 * np.sin(turn)), 12)
    refused([LONG, back], "wires fold back to within .* open the bend")
    open_turn = np.deg2rad(30)
    check_wires(
        [LONG, wire((0, 0), (60 * np.cos(open_turn), 60 * np.sin(open_turn)), 12)], RADIUS, TOP_HZ
    )
