"""Outlines of strips against areas and places known by formula."""

from math import cos, pi, radians, sin, tan
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
import shapely

from simkit.cli.study_lines import with_line
from simkit.errors import GeometryError
from simkit.geometry.outlines import (
    bounding_box_m,
    developed_length_m,
    metal_area_m2,
    mitre_rows,
    normal,
    outline,
)
from simkit.study.model import Strip


def strip(path_mm, width_mm):
    """Millimetres; one width or one per point."""
    widths = width_mm if isinstance(width_mm, (list, tuple)) else ()
    return Strip(
        "any",
        tuple((x * 1e-3, y * 1e-3) for x, y in path_mm),
        max(widths or [width_mm]) * 1e-3,
        tuple(w * 1e-3 for w in widths),
    )


def area_mm2(one):
    return outline(one).area * 1e6


def test_outline_of_a_right_angle_is_two_rectangles_with_a_mitre(make):
    shape = outline(make.ell(40, 6, 90, 12).strips[0])
    assert shape.area == pytest.approx(2 * 0.040 * 0.006, rel=1e-9)
    assert shape.bounds == pytest.approx((0.0, -0.003, 0.043, 0.040), abs=1e-12)


@pytest.mark.parametrize("turn", [10, 60, 90, 119, -75])
def test_a_mitred_bend_has_the_area_of_its_centre_line(turn):
    """What the outer edge gains the inner one loses: width times length, at any turn."""
    end = (50 + 30 * cos(radians(turn)), 30 * sin(radians(turn)))
    shape = outline(strip([(0, 0), (50, 0), end], 6))
    assert shape.area * 1e6 == pytest.approx(80 * 6, rel=1e-9)
    # The outer tip lies w/(2 cos(th/2)) from the vertex, along the bisector.
    tip = np.array([50, 0]) + 3 / cos(radians(turn / 2)) * np.array(
        [sin(radians(abs(turn) / 2)), -np.sign(turn) * cos(radians(turn / 2))]
    )
    corners = np.array(shape.exterior.coords) * 1e3
    assert np.min(np.linalg.norm(corners - tip, axis=1)) < 1e-5


def test_a_taper_is_a_trapezoid():
    shape = outline(strip([(0, 0), (40, 0)], [4, 10]))
    assert shape.area * 1e6 == pytest.approx(40 * 7, rel=1e-9)
    wanted = shapely.Polygon([(0, -2), (40, -5), (40, 5), (0, 2)])
    assert shapely.hausdorff_distance(shapely.transform(shape, lambda p: p * 1e3), wanted) < 1e-5


def test_a_taper_of_several_legs_is_several_trapezoids():
    assert area_mm2(strip([(-75, 0), (0, 0), (75, 0)], [30, 3, 30])) == pytest.approx(
        2 * 75 * 16.5, rel=1e-9
    )


def test_a_loop_has_a_hole(make):
    shape = outline(make.loop(60, 40, 4, 25).strips[0])
    assert len(shape.interiors) == 1
    assert shape.area * 1e6 == pytest.approx(64 * 44 - 56 * 36, rel=1e-9)
    assert shapely.Polygon(shape.interiors[0]).area * 1e6 == pytest.approx(56 * 36, rel=1e-9)


def test_an_arc_of_short_legs_has_the_area_of_its_ring():
    """A polygon of 120 chords is short of the arc by (step/2)^2/6."""
    angles = np.linspace(0, pi, 121)
    bow = strip([(30 * cos(a), 30 * sin(a)) for a in angles], 5)
    assert area_mm2(bow) == pytest.approx(pi * 30 * 5, rel=6e-5)
    assert outline(bow).is_valid
    assert len(outline(bow).interiors) == 0


def test_area_is_the_width_times_the_length_for_a_path_that_does_not_overlap():
    path = [(0, 0), (50, 0), (60, 30), (100, 35), (90, 70)]
    one = strip(path, 4)
    assert area_mm2(one) == pytest.approx(4e3 * developed_length_m(one), rel=1e-9)


def test_common_metal_counts_once():
    bar, stub = strip([(-50, 0), (50, 0)], 6), strip([(0, 0), (0, 40)], 4)
    assert metal_area_m2((bar, stub)) * 1e6 == pytest.approx(600 + 4 * 37, rel=1e-9)


def test_bounding_box_holds_the_metal_not_the_centre_line():
    bar, stub = strip([(-50, 0), (50, 0)], 6), strip([(0, 0), (0, 40)], 4)
    assert bounding_box_m((bar, stub)) == pytest.approx((-0.05, -0.003, 0.05, 0.04), abs=1e-12)


def test_developed_length():
    assert developed_length_m(strip([(0, 0), (30, 0), (30, 40), (0, 0)], 2)) == pytest.approx(0.12)


def test_mitre_rows_lie_half_a_width_from_both_legs():
    turn = radians(50)
    points = np.array([(0.0, 0.0), (1.0, 0.0), (1 + cos(turn), sin(turn))])
    rows = mitre_rows(points)
    assert rows[0] == pytest.approx([0, 1])
    assert rows[1] == pytest.approx([-tan(turn / 2), 1])
    assert rows[1] @ [-sin(turn), cos(turn)] == pytest.approx(1)
    assert rows[2] == pytest.approx([-sin(turn), cos(turn)])


def test_mitre_rows_of_a_loop_agree_at_its_seam():
    square = np.array([(0.0, 0.0), (1.0, 0.0), (1.0, 1.0), (0.0, 1.0), (0.0, 0.0)])
    rows = mitre_rows(square)
    assert rows[0] == pytest.approx(rows[-1])
    assert rows[0] == pytest.approx([1, 1])


def test_normal_points_to_the_left():
    assert normal(np.array([3.0, 0.0])) == pytest.approx([0, 1])


@pytest.mark.parametrize(
    ("left", "place"),
    [
        (shapely.MultiPolygon([shapely.box(0, 0, 1, 1), shapely.box(0.03, 0.01, 0.04, 0.03)]),
         r"\(35, 20\) mm"),
        (shapely.Polygon().boundary, r"\(20, 0\) mm"),
    ],
)  # fmt: skip
def test_a_path_whose_outline_falls_apart_is_refused(monkeypatch, left, place):
    """The smallest piece is named, or the middle of the path where nothing is left."""
    monkeypatch.setattr("simkit.geometry.outlines._united", lambda _: left)
    said = rf"strip 'any': its outline falls into several pieces near {place}.*move or drop them"
    with pytest.raises(GeometryError, match=said) as refused:
        outline(strip([(0, 0), (40, 0)], 4))
    lines = SimpleNamespace(path=Path("kite.toml"), line_of={"strip.any": 7}.get)
    assert with_line(str(refused.value), lines).endswith("drop them (kite.toml:7)")


def test_an_outline_of_corners_nanometres_apart_is_not_lost():
    """Shrinking this one by a nanometre leaves nothing of it, though its area is over 11 cm2."""
    path = [
        (0.0, 0.0),
        (34.61626686197281, -14.666734467430512),
        (32.25599430807361, -20.23742402850489),
        (64.35898473224515, -16.27412868401269),
        (11.30836665266665, -75.29434830225079),
    ]
    one = strip(path, 7.3152856750724245)
    points = np.array(one.path_m)
    half = one.width_m / 2 * mitre_rows(points)
    # Its mitred legs, put together on a grid of a picometre.
    legs = [
        shapely.MultiPoint([*(points + half)[k : k + 2], *(points - half)[k : k + 2]]).convex_hull
        for k in range(4)
    ]
    together = shapely.union_all(legs, grid_size=1e-12)
    assert area_mm2(one) == pytest.approx(together.area * 1e6, rel=1e-5)
    assert outline(one).is_valid
