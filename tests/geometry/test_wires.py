"""Wires and the numbering of their segments."""

import numpy as np
import pytest

from simkit.geometry import build_wires, plan_mesh
from simkit.geometry.wires import Wire


def test_wire_and_segment_length():
    wire = Wire((0.0, 0.0, 0.0), (0.03, 0.04, 0.0), 10)
    assert wire.length_m == pytest.approx(0.05)
    assert wire.segment_m == pytest.approx(0.005)


def test_segment_ends_follow_the_wires_in_order(make):
    antenna = make.ell(60, 4, 90, 15)
    grid = build_wires(antenna, plan_mesh([antenna]))
    starts, ends = grid.ends_m()
    assert starts.shape == ends.shape == (grid.segments, 3)
    first = 0
    for wire in grid.wires:
        last = first + wire.segments - 1
        assert starts[first] == pytest.approx(wire.start_m)
        assert ends[last] == pytest.approx(wire.end_m)
        lengths = np.linalg.norm(ends[first : last + 1] - starts[first : last + 1], axis=1)
        assert lengths == pytest.approx(np.full(wire.segments, wire.segment_m))
        first = last + 1
