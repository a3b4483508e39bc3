"""Mode currents along the path from tip to tip."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from simkit.plot import plot_current
from simkit.plot.strip_path import strip_path

ARM_MM, GAP_MM = 76.0, 2.0


def strong_lines(dataset: xr.Dataset, case: int) -> dict[str, np.ndarray]:
    ax = plot_current(dataset, case)
    return {
        str(one.get_label()).split(":")[0]: np.array(one.get_xydata())
        for one in ax.get_lines()
        if "wave" in str(one.get_label())
    }


def test_path_runs_from_the_west_tip_through_the_feed(dataset: xr.Dataset) -> None:
    path = strip_path(dataset.sel(case=7))
    assert [(piece.strip, piece.forward) for piece in path.pieces] == [(1, False), (0, True)]
    assert path.length_m == pytest.approx(2 * 0.076 + 0.002, rel=1e-12)
    assert path.feed_m == pytest.approx(0.077, rel=1e-12)


def test_currents_are_joined_along_the_path_in_millimetres(dataset: xr.Dataset) -> None:
    lines = strong_lines(dataset, 7)
    assert list(lines) == ["1/2 wave", "1 wave", "3/2 wave"]
    stored = dataset["mode_current"].values[7]
    for slot, points in enumerate(lines.values()):
        east, west = stored[slot, 0].real, stored[slot, 1].real
        joined = np.concatenate([-west[::-1], east])
        first_half_wave = joined[101 // (slot + 1)]
        np.testing.assert_allclose(points[:, 1], np.sign(first_half_wave) * joined, atol=1e-12)
        assert points[0, 0] == 0.0
        assert points[-1, 0] == pytest.approx(2 * ARM_MM + GAP_MM)
        assert (np.diff(points[:, 0]) > 0).all()


def test_one_direction_throughout_shows_the_reversals_of_each_mode(dataset: xr.Dataset) -> None:
    for half_waves, points in enumerate(strong_lines(dataset, 7).values(), start=1):
        clear = points[abs(points[:, 1]) > 0.05, 1]
        assert np.count_nonzero(np.diff(np.sign(clear))) == half_waves - 1


def test_descriptions_of_strips_do_not_change_the_picture(dataset: xr.Dataset) -> None:
    """The west strip described from its tip: current and positions turn round together."""
    case = dataset.sel(case=7)
    current, position = case["mode_current"].copy(), case["strip_position"].copy()
    current[:, 1] = -current[:, 1, ::-1].values
    on_west = case["strip_index"].values == 1
    position[on_west] = 1 - position.values[on_west]
    turned = case.assign(mode_current=current, strip_position=position)
    path = strip_path(turned)
    assert [piece.forward for piece in path.pieces] == [True, True]
    one, other = (plot_current(each).get_lines()[1].get_xydata() for each in (case, turned))
    np.testing.assert_allclose(other, one, atol=1e-12)


def test_strip_that_meets_no_other_stands_apart(dataset: xr.Dataset) -> None:
    case = dataset.sel(case=7)
    y = case["y"].copy()
    y[case["strip_index"].values == 1] = 0.05
    path = strip_path(case.assign(y=y))
    assert [piece.on_path for piece in path.pieces] == [True, False]
    x, current = path.join(case["mode_current"].values[0], case["position"].values)
    assert np.isnan(current).sum() == 1
    assert (np.diff(x) >= 0).all()
    assert path.length_m == pytest.approx(0.076)


def test_legend_gives_half_waves_frequency_and_q(dataset: xr.Dataset) -> None:
    ax = plot_current(dataset, 7, half_waves=[3])
    texts = [text.get_text() for text in ax.get_legend().get_texts()]
    frequency = float(dataset["mode_frequency"][7, 2]) / 1e6
    assert texts == [f"3/2 wave:\n{frequency:.1f} MHz, Q 9.50"]
    assert ax.get_xlabel() == "distance along the strip from the tip of 'west' (mm)"
    assert "feed" in {text.get_text() for text in ax.texts}


def test_refused_case_shows_its_reason(dataset: xr.Dataset) -> None:
    ax = plot_current(dataset, 10)
    assert ax.texts[0].get_text().startswith("refused: ")
    assert not ax.get_lines()
