"""Natural modes and dips against a swept value."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from matplotlib.axes import Axes

from simkit.errors import StoreError
from simkit.plot import MeasuredBuild, plot_tracks
from simkit.plot.style import mode_style
from simkit.store.schema import Status


def drawn(ax: Axes, half_waves: int, *, dip: bool, strong: bool) -> list[np.ndarray]:
    return [
        np.array(one.get_xydata())
        for one in ax.get_lines()
        if one.get_color() == mode_style(half_waves).colour
        and (one.get_linestyle() == "--") == dip
        and (one.get_alpha() == 1.0) == strong
    ]


@pytest.mark.parametrize(("half_waves", "slot"), [(1, 0), (2, 1), (3, 2)])
def test_strong_lines_hold_the_nominal_width(
    dataset: xr.Dataset, half_waves: int, slot: int
) -> None:
    ax = plot_tracks(dataset, "arm")
    (line,) = drawn(ax, half_waves, dip=False, strong=True)
    np.testing.assert_allclose(line[:, 0], [70, 73, 76, 79, 82])
    stored = dataset["mode_frequency"].values[1::3, slot] / 1e6
    np.testing.assert_array_equal(np.isnan(line[:, 1]), [False, False, False, True, False])
    np.testing.assert_allclose(line[:, 1], stored)
    assert len(drawn(ax, half_waves, dip=False, strong=False)) == 2


def test_dips_are_dashed_and_gaps_stay_gaps(dataset: xr.Dataset) -> None:
    ax = plot_tracks(dataset, "arm", nominal={"width": 0.012})
    (line,) = drawn(ax, 3, dip=True, strong=True)
    np.testing.assert_allclose(line[:, 1], dataset["dip_frequency"].values[2::3, 2] / 1e6)
    # Case 8, arm 76 mm and width 12 mm, has no 3/2-wave mode.
    np.testing.assert_array_equal(np.isnan(line[:, 1]), [False, False, True, False, False])
    (even,) = drawn(ax, 2, dip=True, strong=True)
    assert np.isnan(even[:, 1]).all()


def test_numbers_of_a_failed_case_are_not_drawn(dataset: xr.Dataset) -> None:
    status = dataset["status"].copy()
    status[4] = Status.FAILED
    (line,) = drawn(plot_tracks(dataset.assign(status=status), "arm"), 1, dip=False, strong=True)
    np.testing.assert_array_equal(np.isnan(line[:, 1]), [False, True, False, True, False])


def test_the_other_swept_value_can_be_the_axis(dataset: xr.Dataset) -> None:
    ax = plot_tracks(dataset, "width")
    (line,) = drawn(ax, 1, dip=False, strong=True)
    np.testing.assert_allclose(line[:, 0], [4, 8, 12])
    np.testing.assert_allclose(line[:, 1], dataset["mode_frequency"].values[6:9, 0] / 1e6)
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("width (mm)", "frequency (MHz)")


def test_modes_are_followed_by_number_not_by_slot(dataset: xr.Dataset) -> None:
    shuffled = dataset.copy()
    for name in ("mode_frequency", "mode_half_waves", "dip_frequency"):
        values = shuffled[name].values.copy()
        values[7, [0, 2]] = values[7, [2, 0]]
        shuffled[name] = (("case", "mode"), values)
    (line,) = drawn(plot_tracks(shuffled, "arm"), 3, dip=False, strong=True)
    assert line[2, 1] == pytest.approx(float(dataset["mode_frequency"][7, 2]) / 1e6)


def test_display_unit_is_the_users(dataset: xr.Dataset) -> None:
    inches = dataset.assign_coords(arm=dataset["arm"].assign_attrs(display_unit="in"))
    ax = plot_tracks(inches, "arm")
    assert ax.get_xlabel() == "arm (in)"
    (line,) = drawn(ax, 1, dip=False, strong=True)
    np.testing.assert_allclose(line[:, 0], np.array([70, 73, 76, 79, 82]) / 25.4)


def test_samples_off_a_grid_are_markers_and_steps_are_lines(dataset: xr.Dataset) -> None:
    scattered = dataset.isel(case=[1, 3, 8, 14])
    scattered = scattered.assign_coords(width=("case", [0.004, 0.012, 0.006, 0.008]))
    ax = plot_tracks(scattered, "arm")
    assert {one.get_linestyle() for one in ax.get_lines()} == {"None"}
    in_step = scattered.assign_coords(width=("case", [0.004, 0.006, 0.008, 0.012]))
    assert {one.get_linestyle() for one in plot_tracks(in_step, "arm").get_lines()} == {"-", "--"}


def test_measured_builds_are_crosses(dataset: xr.Dataset) -> None:
    ax = plot_tracks(dataset, "arm", measured=[MeasuredBuild("build_1", 0.0765, (9e8, 2.8e9))])
    (cross,) = [one for one in ax.get_lines() if one.get_marker() == "x"]
    np.testing.assert_allclose(cross.get_xydata(), [[76.5, 900], [76.5, 2800]])
    assert "measured dips:\nbuild_1" in [text.get_text() for text in ax.get_legend().get_texts()]


def test_legend_names_modes_lines_widths_and_blemishes(dataset: xr.Dataset) -> None:
    texts = [text.get_text() for text in plot_tracks(dataset, "arm").get_legend().get_texts()]
    assert texts == [
        "3/2 wave",
        "1 wave",
        "1/2 wave",
        "natural mode",
        "dip at the connector",
        "strong: width 8 mm",
        "faint:\nwidth 4 mm\nwidth 12 mm",
        "of 15 cases: 1 doubtful,\n1 without a solution",
    ]


def test_what_was_not_swept_is_refused(dataset: xr.Dataset) -> None:
    with pytest.raises(StoreError, match="'gap' was not swept in these results; swept: arm, width"):
        plot_tracks(dataset, "gap")
    with pytest.raises(StoreError, match="nothing was swept"):
        plot_tracks(dataset.assign_attrs(swept={}))
