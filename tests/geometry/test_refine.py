"""Mesh plans with finer and coarser segments."""

from __future__ import annotations

from dataclasses import replace

import pytest

from simkit.errors import GeometryError
from simkit.geometry import plan_mesh
from simkit.geometry.refine import cut_count, refined


@pytest.mark.parametrize("factor", [2 / 3, 1.5, 2.25])
def test_the_line_model_gets_more_segments_and_keeps_the_rest(make, factor):
    antenna = make.ell(80, 2, 90, 30)
    plan = plan_mesh([antenna])
    other = refined(plan, antenna, factor)
    assert other.kind == "line"
    assert [c.vertices for c in other.chains] == [c.vertices for c in plan.chains]
    assert cut_count(other) / cut_count(plan) == pytest.approx(factor, rel=0.06)


def test_a_centred_feed_keeps_a_segment_in_the_middle(make):
    antenna = make.straight(120, 2, 60)
    plan = plan_mesh([antenna])
    assert plan.centred
    for factor in (2 / 3, 1.5, 1.7, 2.25):
        assert refined(plan, antenna, factor).chains[0].counts[0] % 2 == 1


def test_wide_strips_leave_no_room_for_finer_segments(make):
    antenna = replace(make.ell(80, 10, 90, 30), model="line")
    plan = plan_mesh([antenna])
    assert refined(plan, antenna, 1.5) == plan
    assert cut_count(refined(plan, antenna, 2 / 3)) < cut_count(plan)


def test_the_grid_keeps_its_rails_ties_and_corners(make):
    antenna = replace(make.ell(80, 6, 90, 30), model="grid")
    plan = plan_mesh([antenna])
    other = refined(plan, antenna, 1.5)
    assert (other.kind, other.rails) == ("grid", plan.rails)
    assert other.chains[0].ties == plan.chains[0].ties
    for before, after in zip(plan.chains[0].counts, other.chains[0].counts, strict=True):
        assert after in (before, round(1.5 * before))
    assert cut_count(other) > 1.25 * cut_count(plan)


def test_another_antennas_plan_is_refused(make):
    plan = plan_mesh([make.straight(120, 2, 60)])
    with pytest.raises(GeometryError, match="the mesh plan is another antenna's"):
        refined(plan, make.ell(80, 2, 90, 30), 1.5)
