"""Pattern cuts."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from matplotlib.figure import Figure
from numpy.typing import ArrayLike

from simkit.plot import plot_pattern, plot_pattern_cuts
from simkit.plot.pattern import (
    PLANES,
    Cut,
    Plane,
    computed_cut,
    pattern_cut,
    pattern_of,
    smooth_cut,
)


@pytest.fixture
def lopsided() -> xr.DataArray:
    """A gain that differs in every direction."""
    theta, phi = np.arange(0.0, 181.0, 10.0), np.arange(0.0, 361.0, 10.0)
    values = theta[:, np.newaxis] / 100 + (phi % 360)[np.newaxis, :] / 1000
    return xr.DataArray(values, {"theta": theta, "phi": phi}, ("theta", "phi"))


def test_xy_cut_runs_over_phi_at_the_horizon(lopsided: xr.DataArray) -> None:
    cut = pattern_cut(lopsided, "xy")
    np.testing.assert_array_equal(cut.angle_deg, lopsided["phi"])
    np.testing.assert_array_equal(cut.gain_dbi, lopsided.sel(theta=90))


@pytest.mark.parametrize(("plane", "near", "far"), [("xz", 0, 180), ("yz", 90, 270)])
def test_theta_cuts_go_down_one_side_and_up_the_other(
    lopsided: xr.DataArray, plane: Plane, near: int, far: int
) -> None:
    cut = pattern_cut(lopsided, plane)
    np.testing.assert_array_equal(cut.angle_deg, np.arange(0.0, 361.0, 10.0))
    at = dict(zip(cut.angle_deg.tolist(), cut.gain_dbi.tolist(), strict=True))
    assert at[40.0] == float(lopsided.sel(theta=40, phi=near))
    assert at[320.0] == float(lopsided.sel(theta=40, phi=far))
    assert at[180.0] == float(lopsided.sel(theta=180, phi=near))


def three_half_waves_dbi(angle_deg: np.ndarray) -> np.ndarray:
    """Sinusoidal current on 1.5 wavelengths, angle from broadside."""
    along = np.sin(np.deg2rad(angle_deg))
    field = np.cos(1.5 * np.pi * along) / np.sqrt(np.maximum(1 - along**2, 1e-12))
    return 20 * np.log10(np.maximum(abs(field), 1e-4))


def test_smooth_cut_keeps_the_stored_points_and_fills_in_between() -> None:
    coarse = np.arange(0.0, 361.0, 10.0)
    cut = smooth_cut(Cut(coarse, three_half_waves_dbi(coarse)))
    np.testing.assert_allclose(cut.gain_dbi[::10], three_half_waves_dbi(coarse), atol=1e-3)
    exact = three_half_waves_dbi(cut.angle_deg)
    strong = exact > -15.0
    # 18 harmonics for k r = 4.7: what is left out is far below a pen's width.
    np.testing.assert_allclose(cut.gain_dbi[strong], exact[strong], atol=0.02)


def test_cut_with_gaps_is_left_alone() -> None:
    gain = np.arange(37.0)
    gain[5] = np.nan
    cut = Cut(np.arange(0.0, 361.0, 10.0), gain)
    assert smooth_cut(cut) is cut


@pytest.mark.parametrize("plane", PLANES)
def test_lines_are_the_stored_gain_down_to_the_floor(dataset: xr.Dataset, plane: Plane) -> None:
    ax = plot_pattern(dataset, 7, plane)
    floor, rim = ax.get_ylim()
    assert rim - floor == 30.0
    for slot, one in enumerate(ax.get_lines()):
        stored = pattern_cut(dataset["gain"].sel(case=7).isel(mode=slot), plane).gain_dbi
        drawn = np.asarray(one.get_ydata())[::10]
        np.testing.assert_allclose(drawn, np.maximum(stored, floor), atol=0.02)


def test_legend_names_mode_excitation_and_peak(dataset: xr.Dataset) -> None:
    texts = [t.get_text() for t in plot_pattern(dataset, 7).get_legend().get_texts()]
    assert [text.split(" at ")[0] for text in texts] == ["1/2 wave", "1 wave", "3/2 wave"]
    assert ["mode current alone" in text for text in texts] == [False, True, False]
    assert [f"peak {g:.1f} dBi" in t for g, t in zip([2.1, 3.7, 5.1], texts, strict=True)] == [
        True
    ] * 3


def test_angles_are_named_by_axes(dataset: xr.Dataset) -> None:
    labels = {
        plane: [t.get_text() for t in plot_pattern(dataset, 7, plane).get_xticklabels()]
        for plane in PLANES
    }
    assert labels["xy"][3] == "90°\n+y"
    assert labels["xz"][:4] == ["0°\n+z", "30°", "60°", "90°\n+x"]
    assert labels["yz"][9:] == ["90°\n−y", "60°", "30°"]
    ax = plot_pattern(dataset, 7, "xz")
    assert ax.get_theta_direction() == -1  # type: ignore[attr-defined]
    assert ax.get_theta_offset() == pytest.approx(np.pi / 2)  # type: ignore[attr-defined]


def test_three_cuts_share_scale_and_legend(dataset: xr.Dataset) -> None:
    figure = plot_pattern_cuts(dataset, 7)
    assert [ax.get_title().split(" ")[0] for ax in figure.axes] == list(PLANES)
    assert len({ax.get_ylim() for ax in figure.axes}) == 1
    assert [ax.get_legend() for ax in figure.axes] == [None] * 3
    assert len(figure.legends) == 1


def test_wrong_plane_and_wrong_axes_are_refused(dataset: xr.Dataset) -> None:
    with pytest.raises(ValueError, match="plane must be one of xy, xz, yz, not 'zx'"):
        plot_pattern(dataset, 7, "zx")  # type: ignore[arg-type]
    flat = Figure().add_subplot()
    with pytest.raises(ValueError, match="projection 'rectilinear', this picture needs 'polar'"):
        plot_pattern(dataset, 7, ax=flat)


def test_refused_case_shows_its_reason(dataset: xr.Dataset) -> None:
    assert plot_pattern(dataset, 10).texts[0].get_text().startswith("refused: strip east")
    assert not plot_pattern_cuts(dataset, 10).legends


class Sweeping:
    """Stands for a pattern: gain grows with theta, and with phi by a tenth of that."""

    def gain_dbi(self, theta_deg: ArrayLike, phi_deg: ArrayLike) -> np.ndarray:
        return np.asarray(theta_deg) / 10 + np.asarray(phi_deg) / 100


@pytest.mark.parametrize("plane", PLANES)
def test_computed_cuts_run_as_the_stored_ones_every_2_degrees(plane: Plane) -> None:
    theta, phi = np.arange(0.0, 181.0, 10.0), np.arange(0.0, 361.0, 10.0)
    grid = xr.DataArray(
        Sweeping().gain_dbi(theta[:, np.newaxis], phi),
        {"theta": theta, "phi": phi},
        ("theta", "phi"),
    )
    stored, fine = pattern_cut(grid, plane), computed_cut(Sweeping(), plane)  # type: ignore[arg-type]
    np.testing.assert_array_equal(np.diff(fine.angle_deg), 2.0)
    np.testing.assert_allclose(fine.gain_dbi[::5], stored.gain_dbi)


def test_without_currents_the_stored_grid_serves(dataset: xr.Dataset) -> None:
    assert pattern_of(dataset.sel(case=7), 0) is None
    assert pattern_of(dataset.sel(case=7).drop_vars("current"), 0) is None
