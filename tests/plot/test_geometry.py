"""The antenna to scale."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.patches import PathPatch
from shapely import Point

from simkit.geometry import build_wires, plan_mesh
from simkit.plot import plot_geometry
from simkit.plot.metal import feed_place, in_plane, metal_of, strip_ends, widths_text
from simkit.study.model import (
    Antenna,
    CutFeed,
    EndFeed,
    FrequencyBand,
    Ground,
    Metal,
    Placement,
    Strip,
)

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


def test_loop_is_closed_and_hollow() -> None:
    antenna = Antenna((LOOP,), BRASS, CutFeed("loop", 0.02, 0.002), 50.0, BAND)
    ends = strip_ends(antenna)
    assert (ends.open_m, ends.joined_m) == ((), ())
    ax = plot_geometry(antenna)
    assert not {"open end", "strips joined"} & {str(one.get_label()) for one in ax.get_lines()}
    metal = metal_of(antenna)["loop"]
    assert metal.area == pytest.approx(0.054 * 0.034 - 0.046 * 0.026 - 0.002 * 0.004, rel=1e-6)


def test_cut_takes_metal_away_at_its_place() -> None:
    metal = metal_of(CUT)["bent"]
    assert not metal.contains(Point(0.012, 0.001))
    assert metal.contains(Point(0.0105, 0.001))
    assert metal.contains(Point(0.0135, 0.001))
    assert feed_place(CUT).middle_m == pytest.approx((0.012, 0.0))
    assert sorted(strip_ends(CUT).open_m) == [(0.0, 0.0), (0.04, 0.03)]


def test_touching_ends_are_not_open() -> None:
    further = Strip("further", ((0.077, 0.0), (0.1, 0.0)), 0.008)
    antenna = Antenna((EAST, WEST, further), BRASS, DIPOLE.feed, 50.0, BAND)
    ends = strip_ends(antenna)
    assert sorted(ends.open_m) == [(-0.077, 0.0), (0.1, 0.0)]
    assert ends.joined_m == ((0.077, 0.0),)


@pytest.mark.parametrize("root_y", [0.0, 0.004], ids=["centre line", "edge"])
def test_a_strip_ending_on_another_is_joined(root_y: float) -> None:
    stub = Strip("stub", ((0.03, root_y), (0.03, 0.04)), 0.006)
    antenna = Antenna((EAST, WEST, stub), BRASS, DIPOLE.feed, 50.0, BAND)
    np.testing.assert_allclose(
        marker(plot_geometry(antenna), "strips joined"), [[30, root_y * 1e3]]
    )
    assert len(strip_ends(antenna).open_m) == 3


def test_an_end_on_the_ground_plane_is_not_open() -> None:
    upright = Placement(((0.0, 0.0, -1.0), (0.0, 1.0, 0.0), (1.0, 0.0, 0.0)))
    rod = Strip("rod", ((0.0, 0.0), (0.08, 0.0)), 0.006)
    feed = CutFeed("rod", 0.02, 0.001)
    antenna = Antenna((rod,), BRASS, feed, 50.0, BAND, placement=upright, ground=Ground("plane"))
    ax = plot_geometry(antenna)
    np.testing.assert_allclose(marker(ax, "on the ground plane"), [[0, 0]])
    np.testing.assert_allclose(marker(ax, "open end"), [[80, 0]])


def test_tapers_are_named_by_both_widths() -> None:
    widths = (0.004, 0.014)
    east = Strip("east", EAST.path_m, 0.014, widths)
    ax = plot_geometry(Antenna((east, WEST), BRASS, DIPOLE.feed, 50.0, BAND))
    np.testing.assert_allclose(extent_mm(ax), (-77, -7, 77, 7))
    (name,) = [text for text in ax.texts if text.get_text() == "east, 4 to 14 mm wide"]
    # Above the metal in the middle of the taper, where it is 9 mm wide.
    np.testing.assert_allclose(name.xy, (39, 4.5))
    assert widths_text((0.014, 0.004)) == "14 to 4 mm"
    assert widths_text((0.006, 0.009, 0.003)) == "3 to 9 mm"


def test_last_title_line_gives_length_area_and_size() -> None:
    title = plot_geometry(CUT, title="Hook").get_title(loc="left")
    # 70 mm of 6 mm strip with a full mitre, 2 mm of it cut away for the feed.
    assert title == ("Hook\n70 mm along the centre lines, 4.08 cm² of metal, fits into 43 × 33 mm")


def test_wires_of_the_model_are_drawn_with_their_nodes() -> None:
    grid = build_wires(DIPOLE, plan_mesh([DIPOLE]))
    ax = plot_geometry(DIPOLE, grid)
    nodes = marker(ax, f"wires of the model,\n{grid.segments} segments,\nradius 2.")
    nodes = nodes[np.isfinite(nodes[:, 0])]
    starts, ends = grid.ends_m()
    np.testing.assert_allclose(nodes[0::2], starts[:, :2] * 1e3)
    np.testing.assert_allclose(nodes[1::2], ends[:, :2] * 1e3)
    middle = np.nanmean(marker(ax, "source segment")[:, 0])
    assert middle == pytest.approx(0, abs=1e-9)


def test_many_rails_are_drawn_thin_and_all_their_sources_are_marked() -> None:
    east, west = (Strip(strip.name, strip.path_m, 0.014, (0.003, 0.014)) for strip in (EAST, WEST))
    antenna = Antenna((east, west), BRASS, DIPOLE.feed, 50.0, BAND)
    grid = build_wires(antenna, plan_mesh([antenna]))
    assert grid.segments > 120
    ax = plot_geometry(antenna, grid)
    (wires,) = [one for one in ax.get_lines() if "wires of" in str(one.get_label())]
    assert wires.get_linewidth() < 1.0
    sources = marker(ax, "source segments")
    assert np.isfinite(sources[:, 0]).sum() == 2 * len(grid.source)
    assert len(np.unique(np.round(sources[0::3, 1], 6))) == len(grid.source) > 1


def test_placed_wires_are_drawn_where_the_strips_are_described() -> None:
    turn = ((0.0, -1.0, 0.0), (0.0, 0.0, -1.0), (1.0, 0.0, 0.0))
    placement = Placement(turn, (0.1, -0.2, 0.3))
    flat = np.array([[0.01, 0.02, 0.0], [-0.03, 0.005, 0.0]])
    placed = flat @ np.array(turn).T + placement.shift_m
    np.testing.assert_allclose(in_plane(placed, placement), flat[:, :2], atol=1e-15)
    placed_antenna = Antenna((EAST, WEST), BRASS, DIPOLE.feed, 50.0, BAND, placement=placement)
    grid = build_wires(placed_antenna, plan_mesh([placed_antenna]))
    ax = plot_geometry(placed_antenna, grid)
    nodes = marker(ax, "wires of the model")
    assert np.nanmax(abs(nodes[:, 1])) < 1e-9
    assert np.nanmin(nodes[:, 0]) == pytest.approx(-77, abs=2)
    assert "drawn flat, before it is placed" in ax.get_title(loc="left")


def test_wires_can_come_from_one_case_of_the_results(dataset: xr.Dataset) -> None:
    ax = plot_geometry(DIPOLE, dataset.sel(case=7))
    nodes = marker(ax, "wires of the model,\n31 segments")
    assert np.nanmin(nodes[:, 0]) == pytest.approx(-77)
    assert np.nanmax(nodes[:, 0]) == pytest.approx(77)
    np.testing.assert_allclose(marker(ax, "source segment")[:2, 0], [-1, 1])
