"""Plane polylines, on a path of unequal legs."""

import numpy as np
import pytest

from simkit.geometry.paths import (
    arc_lengths,
    leg_lengths,
    point_at,
    same_point,
    sub_path,
    turn_angle,
    turns,
    unit,
)

PATH = np.array([[0.0, 0.0], [3.0, 4.0], [3.0, 6.0], [10.0, 6.0]])


def test_leg_and_arc_lengths():
    assert leg_lengths(PATH) == pytest.approx([5.0, 2.0, 7.0])
    assert arc_lengths(PATH) == pytest.approx([0.0, 5.0, 7.0, 14.0])


def test_turns_are_unsigned():
    assert turns(PATH) == pytest.approx([np.arctan2(3, 4), np.pi / 2])
    assert turn_angle(np.array([1.0, 0.0]), np.array([-1.0, 0.0])) == pytest.approx(np.pi)


def test_point_at_one_place_and_at_several():
    assert point_at(PATH, 6.0) == pytest.approx([3.0, 5.0])
    assert point_at(PATH, np.array([-1.0, 2.5, 20.0])) == pytest.approx(
        np.array([[0.0, 0.0], [1.5, 2.0], [10.0, 6.0]])
    )


def test_sub_path_keeps_the_vertices_inside():
    assert sub_path(PATH, 2.5, 8.0) == pytest.approx(
        np.array([[1.5, 2.0], [3.0, 4.0], [3.0, 6.0], [4.0, 6.0]])
    )
    assert sub_path(PATH, 5.0, 7.0) == pytest.approx(PATH[1:3])


def test_unit_and_same_point():
    assert unit(np.array([3.0, 4.0])) == pytest.approx([0.6, 0.8])
    assert same_point(np.zeros(2), np.array([5e-10, 5e-10]))
    assert not same_point(np.zeros(2), np.array([2e-9, 0.0]))
