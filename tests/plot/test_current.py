"""Mode currents along the path from tip to tip."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from matplotlib.axes import Axes

from simkit.plot import plot_current
from simkit.plot.strip_path import routes_from_wires
from simkit.plot.style import mode_style, mode_styles
from simkit.response.strip_route import routes_of
from simkit.study.model import Antenna, CutFeed, EndFeed, FrequencyBand, Metal, Strip

ARM_MM, GAP_MM = 76.0, 2.0
BAND = FrequencyBand(3e8, 3e9, 28)
METAL = Metal("brass", 1.5e7, 0.15e-3)
EAST = Strip("east", ((0.001, 0.0), (0.077, 0.0)), 0.008)
WEST = Strip("west", ((-0.001, 0.0), (-0.077, 0.0)), 0.008)
DIPOLE = Antenna((EAST, WEST), METAL, EndFeed("west", "start", "east", "start"), 50.0, BAND)


def strong_lines(dataset: xr.Dataset, case: int) -> dict[str, np.ndarray]:
    ax = plot_current(dataset, case)
    return {
        str(one.get_label()).split(":")[0]: np.array(one.get_xydata())
        for one in ax.get_lines()
        if "wave" in str(one.get_label())
    }


def test_path_runs_from_the_west_tip_through_the_feed(dataset: xr.Dataset) -> None:
    (path,) = routes_from_wires(dataset.sel(case=7))
    assert [(leg.strip, leg.sign) for leg in path.legs] == [(1, -1), (0, 1)]
    assert path.length_m == pytest.approx(2 * 0.076 + 0.002, rel=1e-12)
    assert path.feed_m == pytest.approx(0.077, rel=1e-12)


def test_the_antenna_gives_the_path_that_its_wires_give(dataset: xr.Dataset) -> None:
    (path,), (from_wires,) = routes_of(DIPOLE), routes_from_wires(dataset.sel(case=7))
    assert [(leg.strip, leg.sign) for leg in path.legs] == [(1, -1), (0, 1)]
    for name in ("start_m", "end_m", "begin_m"):
        one, other = ([getattr(leg, name) for leg in route.legs] for route in (path, from_wires))
        np.testing.assert_allclose(one, other, atol=1e-12)
    assert path.feed_m == pytest.approx(from_wires.feed_m)


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
    (path,) = routes_from_wires(turned)
    assert [leg.sign for leg in path.legs] == [1, 1]
    one, other = (plot_current(each).get_lines()[1].get_xydata() for each in (case, turned))
    np.testing.assert_allclose(other, one, atol=1e-12)


def test_strip_that_meets_no_other_stands_apart(dataset: xr.Dataset) -> None:
    case = dataset.sel(case=7)
    y = case["y"].copy()
    y[case["strip_index"].values == 1] = 0.05
    path, apart = routes_from_wires(case.assign(y=y))
    assert [leg.strip for leg in path.legs] == [0]
    assert (apart.start, apart.legs[0].strip) == ("apart", 1)
    assert path.length_m == pytest.approx(0.076)
    ax = plot_current(case.assign(y=y), half_waves=[1])
    assert "west (apart)" in {text.get_text() for text in ax.texts}
    x, shown = strong(ax)[0].T
    assert np.isnan(shown).sum() == 1
    assert (np.diff(x[np.isfinite(x)]) >= 0).all()


def test_rails_side_by_side_lie_on_one_centre_line(dataset: xr.Dataset) -> None:
    """Every segment twice, 3 mm above and below its place: the path is the same."""
    case = dataset.sel(case=7)
    doubled = xr.concat(
        [case.assign(y=case["y"] + 3e-3), case.assign(y=case["y"] - 3e-3)],
        "segment",
        data_vars="minimal",
    )
    (path,), (single,) = routes_from_wires(doubled), routes_from_wires(case)
    assert path.length_m == pytest.approx(single.length_m, rel=1e-12)


def strong(ax: Axes) -> list[np.ndarray]:
    return [np.array(one.get_xydata()) for one in ax.get_lines() if "wave" in str(one.get_label())]


def marks(ax: Axes, marker: str) -> np.ndarray:
    found = [one.get_xydata()[0] for one in ax.get_lines() if one.get_marker() == marker]
    return np.array(found)


def test_maxima_and_nodes_are_marked(dataset: xr.Dataset) -> None:
    """A sinusoid of three half waves over 154 mm with a gap of 2 mm in its middle."""
    ax = plot_current(dataset, 7, half_waves=[3])
    # Each arm holds 1.5 half waves in 76 mm: nodes a third of an arm from the gap.
    np.testing.assert_allclose(marks(ax, "x"), [[76 * 2 / 3, 0], [78 + 76 / 3, 0]], atol=0.05)
    maxima = marks(ax, mode_style(3).marker)
    np.testing.assert_allclose(maxima[:, 0], [76 / 3, 77, 78 + 152 / 3], atol=0.05)
    np.testing.assert_allclose(maxima[:, 1], [1, -1, 1], atol=2e-3)


def branched(dataset: xr.Dataset) -> tuple[xr.Dataset, Antenna]:
    """One strip of 150 mm with a 40 mm stub on its edge, 50 mm from its start; made-up currents."""
    beam = Strip("beam", ((0.0, 0.0), (0.15, 0.0)), 0.006)
    stub = Strip("stub", ((0.05, 0.003), (0.05, 0.043)), 0.004)
    antenna = Antenna((beam, stub), METAL, CutFeed("beam", 0.09, 0.002), 50.0, BAND)
    case = dataset.sel(case=7).assign_coords(strip=["beam", "stub"])
    position = case["position"].values
    current = case["mode_current"].copy()
    current[0, 0] = np.where(position < 1 / 3, 0.3, 1.0) * np.sin(np.pi * position)
    current[0, 1] = -0.6 * (1 - position)
    return case.assign(mode_current=current), antenna


def test_branches_follow_the_path_counted_from_their_joint(dataset: xr.Dataset) -> None:
    case, antenna = branched(dataset)
    path, branch = routes_of(antenna)
    assert [leg.strip for leg in path.legs] == [0]
    assert path.feed_m == pytest.approx(0.09)
    assert path.joinings[0].distance_m == pytest.approx(0.05)
    assert (branch.start, branch.open_end) == ("joint", True)
    ax = plot_current(case, antenna=antenna, half_waves=[1])
    (line,) = strong(ax)
    cut = int(np.flatnonzero(np.isnan(line[:, 0]))[0])
    np.testing.assert_allclose(line[cut - 1, 0], 150.0)
    # The stub's metal begins 3 mm from the joint on the beam's centre line; there the current is
    # carried on from 3.75 mm, 5/8 of the beam's width.
    offset = 150.0 * 1.08
    np.testing.assert_allclose(line[[cut + 1, -1], 0], [offset, offset + 43])
    np.testing.assert_allclose(line[[cut + 1, -1], 1], [-0.6 * (1 - 0.75 / 40), 0.0], atol=7e-3)
    assert {"beam", "stub (branch)"} <= {text.get_text() for text in ax.texts}
    ticks = dict(zip(ax.get_xticks(), [t.get_text() for t in ax.get_xticklabels()], strict=True))
    assert ticks[offset] == "0"
    assert "branches from their joint" in ax.get_xlabel()


def test_modes_of_one_number_look_different() -> None:
    first, second, third = mode_styles([2, 2, 3])
    assert first == mode_style(2)
    assert third == mode_style(3)
    assert len({first.colour, second.colour}) == 2
    assert len({first.marker, second.marker}) == 2
    assert len({str(first.linestyle), str(second.linestyle)}) == 2


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
