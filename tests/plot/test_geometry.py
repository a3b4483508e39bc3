"""The antenna to scale."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.patches import PathPatch
from shapely import Point

from simkit.geometry.wires import Chain, Wire, WireGrid
from simkit.plot import plot_geometry
from simkit.plot.outline import feed_place, metal_of, open_ends, strip_outline
from simkit.study.model import Antenna, CutFeed, EndFeed, FrequencyBand, Metal, Strip

BAND = FrequencyBand(3e8, 3e9, 28)
BRASS = Metal("brass", 1.5e7, 0.15e-3)
EAST = Strip("east", ((0.001, 0.0), (0.077, 0.0)), 0.008)
WEST = Strip("west", ((-0.001, 0.0), (-0.077, 0.0)), 0.008)
BENT = Strip("bent", ((0.0, 0.0), (0.04, 0.0), (0.04, 0.03)), 0.006)
LOOP = Strip("loop", ((0.0, 0.0), (0.05, 0.0), (0.05, 0.03), (0.0, 0.03), (0.0, 0.0)), 0.004)

DIPOLE = Antenna((EAST, WEST), BRASS, EndFeed("west", "start", "east", "start"), 50.0, BAND)
CUT = Antenna((BENT,), BRASS, CutFeed("bent", 0.012, 0.002), 50.0, BAND)


def extent_mm(ax: Axes) -> tuple[float, ...]:
    boxes = [p.get_path().get_extents() for p in ax.patches if isinstance(p, PathPatch)]
    low = np.min([box.min for box in boxes], axis=0)
    high = np.max([box.max for box in boxes], axis=0)
    return (*low, *high)


def marker(ax: Axes, label: str) -> np.ndarray:
    (found,) = [one for one in ax.get_lines() if str(one.get_label()).startswith(label)]
    return np.array(found.get_xydata())


def test_strips_are_to_scale_in_millimetres() -> None:
    ax = plot_geometry(DIPOLE)
    np.testing.assert_allclose(extent_mm(ax), (-77, -4, 77, 4))
    assert ax.get_aspect() == 1.0
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("x (mm)", "y (mm)")
    texts = {text.get_text() for text in ax.texts}
    assert {"154 mm", "8 mm", "east, 8 mm wide", "west, 8 mm wide"} <= texts


def test_feed_and_open_ends_are_marked_where_they_are() -> None:
    ax = plot_geometry(DIPOLE)
    np.testing.assert_allclose(marker(ax, "feed, gap 2 mm"), [[0, 0]])
    np.testing.assert_allclose(sorted(marker(ax, "open end").tolist()), [[-77, 0], [77, 0]])


def test_corner_is_mitred_and_ends_are_flat() -> None:
    outline = strip_outline(BENT)
    np.testing.assert_allclose(outline.bounds, (0.0, -0.003, 0.043, 0.03))
    # A mitred right angle loses nothing: two legs of 6 mm meeting in a full square.
    assert outline.area == pytest.approx(0.006 * (0.04 + 0.03), rel=1e-9)


def test_loop_is_closed_and_hollow() -> None:
    outline = strip_outline(LOOP)
    assert outline.area == pytest.approx(0.054 * 0.034 - 0.046 * 0.026, rel=1e-9)
    antenna = Antenna((LOOP,), BRASS, CutFeed("loop", 0.02, 0.002), 50.0, BAND)
    assert open_ends(antenna) == []
    ax = plot_geometry(antenna)
    assert "open end" not in [str(one.get_label()) for one in ax.get_lines()]


def test_cut_takes_metal_away_at_its_place() -> None:
    metal = metal_of(CUT)["bent"]
    assert not metal.contains(Point(0.012, 0.001))
    assert metal.contains(Point(0.0105, 0.001))
    assert metal.contains(Point(0.0135, 0.001))
    assert feed_place(CUT).middle_m == pytest.approx((0.012, 0.0))
    assert sorted(open_ends(CUT)) == [(0.0, 0.0), (0.04, 0.03)]


def test_touching_ends_are_not_open() -> None:
    further = Strip("further", ((0.077, 0.0), (0.1, 0.0)), 0.008)
    antenna = Antenna((EAST, WEST, further), BRASS, DIPOLE.feed, 50.0, BAND)
    assert sorted(open_ends(antenna)) == [(-0.077, 0.0), (0.1, 0.0)]


def test_wires_of_the_model_are_drawn_with_their_nodes() -> None:
    wires = (
        Wire((-0.077, 0.0, 0.0), (-0.001, 0.0, 0.0), 3),
        Wire((-0.001, 0.0, 0.0), (0.001, 0.0, 0.0), 1),
        Wire((0.001, 0.0, 0.0), (0.077, 0.0, 0.0), 5),
    )
    count = np.arange(9)
    chain = Chain(count, np.ones(9, dtype=int), np.linspace(0, 0.154, 9), 0.154, False, ())
    grid = WireGrid(
        wires=wires,
        radius_m=0.002,
        chains=(chain,),
        strip_index=np.array([1, 1, 1, -1, 0, 0, 0, 0, 0]),
        strip_position=np.linspace(0, 1, 9),
        source=((3, 1.0),),
        probe=((1, 1.0),),
        model_gap_m=0.002,
        study_gap_m=0.002,
        feed_width_m=0.008,
        relative_error=1e-3,
    )
    ax = plot_geometry(DIPOLE, grid)
    nodes = marker(ax, "wires of the model,\n9 segments,\nradius 2 mm")
    nodes = nodes[np.isfinite(nodes[:, 0])]
    starts, ends = grid.ends_m()
    np.testing.assert_allclose(nodes[0::2], starts[:, :2] * 1e3)
    np.testing.assert_allclose(nodes[1::2], ends[:, :2] * 1e3)
    np.testing.assert_allclose(marker(ax, "source segment")[:2, 0], [-1, 1])


def test_wires_can_come_from_one_case_of_the_results(dataset: xr.Dataset) -> None:
    ax = plot_geometry(DIPOLE, dataset.sel(case=7))
    nodes = marker(ax, "wires of the model,\n31 segments")
    assert np.nanmin(nodes[:, 0]) == pytest.approx(-77)
    assert np.nanmax(nodes[:, 0]) == pytest.approx(77)
    np.testing.assert_allclose(marker(ax, "source segment")[:2, 0], [-1, 1])
