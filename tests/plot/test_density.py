"""Current and charge density on the metal."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.collections import QuadMesh
from shapely import Point, Polygon

from simkit.geometry.outlines import outline
from simkit.plot import (
    plot_charge_map,
    plot_charge_maps,
    plot_current_map,
    plot_current_maps,
)
from simkit.plot.sheet import crowding, sheet_of
from simkit.study.model import Antenna, CutFeed, EndFeed, FrequencyBand, Metal, Strip

BAND = FrequencyBand(3e8, 3e9, 28)
BRASS = Metal("brass", 1.5e7, 0.15e-3)
EAST = Strip("east", ((0.001, 0.0), (0.077, 0.0)), 0.008)
WEST = Strip("west", ((-0.001, 0.0), (-0.077, 0.0)), 0.008)
DIPOLE = Antenna((EAST, WEST), BRASS, EndFeed("west", "start", "east", "start"), 50.0, BAND)
ENDS = np.array([0.0, 1.0])


def meshes(ax: Axes) -> list[QuadMesh]:
    return [one for one in ax.collections if isinstance(one, QuadMesh)]


def densities(ax: Axes) -> list[np.ndarray]:
    return [np.ma.filled(one.get_array(), np.nan) for one in meshes(ax)]


def test_crowding_is_the_static_solution_and_keeps_the_current() -> None:
    """Mean over all cells 1; the middle tends to 2/pi, cells at the edge grow."""
    for cells in (6, 40):
        assert crowding(cells).mean() == pytest.approx(1, rel=1e-12)
    assert crowding(401)[200] == pytest.approx(2 / np.pi, rel=1e-4)
    assert crowding(40)[0] > crowding(6)[0] > 1.5
    np.testing.assert_allclose(crowding(6), crowding(6)[::-1])


@pytest.mark.parametrize(
    ("path", "widths"),
    [
        (((0, 0), (0.1, 0)), (0.006, 0.006)),
        (((0, 0), (0.1, 0)), (0.003, 0.014)),
        (((0, 0), (0.05, 0), (0.05, 0.04)), (0.006,) * 3),
        (((0, 0), (0.05, 0.01), (0.03, 0.05), (-0.02, 0.04)), (0.005,) * 4),
        (((0, 0), (0.06, 0), (0.06, 0.04), (0, 0.04), (0, 0)), (0.005,) * 5),
    ],
    ids=["straight", "taper", "corner", "sharp", "loop"],
)
def test_cells_cover_the_metal_and_nothing_else(path, widths) -> None:
    strip = Strip("strip", path, max(widths), widths)
    sheet = sheet_of(strip, ENDS, np.ones(2))
    corners = np.stack([sheet.x_mm, sheet.y_mm], axis=-1)
    covered = 0.0
    for i in range(corners.shape[0] - 1):
        edge = [corners[i, 0], corners[i, -1], corners[i + 1, -1], corners[i + 1, 0]]
        covered += Polygon(edge).area
    metal = outline(strip).buffer(1e-7)
    assert covered * 1e-6 == pytest.approx(metal.area, rel=1e-3)
    middles = (corners[1:, 1:] + corners[:-1, 1:] + corners[1:, :-1] + corners[:-1, :-1]) / 4e3
    assert all(metal.contains(Point(place)) for place in middles.reshape(-1, 2))


def test_density_of_a_taper_falls_as_it_widens() -> None:
    strip = Strip("strip", ((0, 0), (0.1, 0)), 0.014, (0.003, 0.014))
    density = sheet_of(strip, ENDS, np.ones(2)).density
    widths = np.linspace(0.003, 0.014, 321)[1::2]
    np.testing.assert_allclose(density.mean(axis=1), 1 / widths, rtol=1e-9)


def test_current_map_is_the_mode_on_the_metal(dataset: xr.Dataset) -> None:
    ax = plot_current_map(dataset, DIPOLE, 7, half_waves=3)
    east, west = densities(ax)
    assert max(east.max(), west.max()) == pytest.approx(1)
    position = dataset["position"].values
    middles = (np.arange(160) + 0.5) / 160
    for number, found in ((0, east), (1, west)):
        stored = abs(dataset["mode_current"].values[7, 2, number])
        row = found.mean(axis=1)
        np.testing.assert_allclose(
            row / row.max(), np.interp(middles, position, stored) / stored.max(), atol=2e-3
        )
        np.testing.assert_allclose(found[40] / found[40].mean(), crowding(), rtol=1e-9)
    assert ax.get_aspect() == 1.0
    for mesh, bounds in zip(meshes(ax), ((1, -4, 77, 4), (-77, -4, -1, 4)), strict=True):
        box = mesh.get_clip_path()._path.get_extents()
        np.testing.assert_allclose((*box.min, *box.max), bounds, atol=1e-3)


def test_maxima_and_nodes_carry_their_places(dataset: xr.Dataset) -> None:
    ax = plot_current_map(dataset, DIPOLE, 7, half_waves=3)
    texts = sorted(float(text.get_text()) for text in ax.texts)
    # Arms of 76 mm hold 1.5 half waves each; the maximum in the gap has no place on a strip.
    np.testing.assert_allclose(texts, [76 / 3, 76 / 3, 152 / 3, 152 / 3], atol=0.06)


def test_charge_map_is_dark_where_the_current_is_largest(dataset: xr.Dataset) -> None:
    ax = plot_charge_map(dataset, DIPOLE, 7, half_waves=1)
    east, _ = densities(ax)
    along = east[:, 3]
    assert along[2] < 0.05 * np.nanmax(along)
    assert (np.diff(along[10:140]) > 0).all()
    assert sorted(text.get_text() for text in ax.texts) == ["+", "−"]
    # The scale ends half a width from the tips, at 72 mm along the arm.
    assert along[: int(160 * 72 / 76)].max() <= 1.0


def test_branch_does_not_paint_over_the_strip_it_ends_on(dataset: xr.Dataset) -> None:
    beam = Strip("beam", ((0.0, 0.0), (0.15, 0.0)), 0.006)
    stub = Strip("stub", ((0.05, 0.0), (0.05, 0.04)), 0.004)
    antenna = Antenna((stub, beam), BRASS, CutFeed("beam", 0.09, 0.002), 50.0, BAND)
    case = dataset.sel(case=7).assign_coords(strip=["stub", "beam"])
    ax = plot_current_map(case, antenna)
    clip = [mesh.get_clip_path()._path.get_extents() for mesh in meshes(ax)]
    np.testing.assert_allclose((*clip[0].min, *clip[0].max), (48, 3, 52, 40), atol=1e-3)
    np.testing.assert_allclose((*clip[1].min, *clip[1].max), (0, -3, 150, 3), atol=1e-3)


@pytest.mark.parametrize("plot", [plot_current_maps, plot_charge_maps])
def test_several_modes_share_scale_and_colour_bar(dataset: xr.Dataset, plot) -> None:
    figure = plot(dataset, DIPOLE, 7)
    *maps, bar = figure.axes
    titles = [ax.get_title(loc="left").split(":")[0] for ax in maps]
    assert titles == ["1/2 wave", "1 wave", "3/2 wave"]
    assert {mesh.get_clim() for ax in maps for mesh in meshes(ax)} == {(0.0, 1.0)}
    assert bar.get_ylabel() in {"current density", "charge density"}
    assert "1 is the largest of each mode" in figure.get_supxlabel()


def test_what_is_not_there_is_said(dataset: xr.Dataset) -> None:
    assert plot_current_map(dataset, DIPOLE, 10).texts[0].get_text().startswith("refused: ")
    figure = plot_charge_maps(dataset, DIPOLE, 10)
    assert figure.axes[0].texts[0].get_text().startswith("refused: ")
    ax = plot_current_map(dataset, DIPOLE, 7, half_waves=9)
    assert ax.texts[0].get_text() == "there is no such mode"
