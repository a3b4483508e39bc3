"""Pictures of studies with a feed line: both planes, the way between them, the line itself."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from simkit.errors import StoreError
from simkit.feedline.build import chain_of
from simkit.feedline.oneport import OnePort
from simkit.plot import (
    KINDS,
    plot_feedline,
    plot_feedline_match,
    plot_feedline_path,
    plot_impedance,
    plot_reflection,
    plot_smith,
    save_all,
    save_plot,
)
from simkit.response.features import find_dips
from simkit.study.feedline_text import feedline_text
from simkit.study.model import DataSheetLine, LineItem, StubItem

from .conftest import FREQUENCY_HZ, REFUSED

LINE = DataSheetLine(110.0, 0.8)
ITEMS = (LineItem("pair", LINE, 31e-3), StubItem("stub", LINE, 17e-3, "short", "shunt"))


@pytest.fixture(scope="module")
def behind(dataset: xr.Dataset) -> xr.Dataset:
    """The results with a feed line put before every case."""
    found = dataset.copy(deep=True)
    chain = chain_of(ITEMS, 50.0)
    text = feedline_text(ITEMS)
    for name in ("dip_frequency", "dip_return_loss", "dip_bandwidth"):
        found[name][:] = np.nan
    found["feedline"] = ("case", np.full(15, text, dtype=object))
    for case in range(15):
        if case == REFUSED:
            continue
        load = OnePort.from_impedance(FREQUENCY_HZ, dataset["impedance"].values[case])
        seen = chain.terminate(load)
        found["impedance_at_connector"][case] = seen.impedance_ohm[-1]
        deepest = max(
            find_dips(FREQUENCY_HZ, seen.reflection[-1]), key=lambda dip: dip.return_loss_db
        )
        found["dip_frequency"][case, 0] = deepest.frequency_hz
        found["dip_return_loss"][case, 0] = deepest.return_loss_db
        found["dip_bandwidth"][case, 0] = deepest.bandwidth_hz
    return found.assign_attrs(feedline=["pair", "stub"])


def lines(ax):
    return {str(line.get_label()).split(":")[0].split("  ")[0]: line for line in ax.get_lines()}


def gamma(dataset, name, case=5):
    impedance = dataset[name].values[case]
    return (impedance - 50) / (impedance + 50)


def test_reflection_at_both_planes(behind):
    ax = plot_reflection(behind, 5)
    shown = lines(ax)
    for label, name in (
        ("at the feed", "impedance"),
        ("at the connector", "impedance_at_connector"),
    ):
        level = 20 * np.log10(abs(gamma(behind, name)))
        assert shown[label].get_ydata() == pytest.approx(level, abs=1e-9)
    assert shown["at the feed"].get_linestyle() != shown["at the connector"].get_linestyle()
    assert ax.get_legend().get_title().get_text() == "planes and dips"


def test_smith_chart_at_both_planes(behind):
    shown = lines(plot_smith(behind, 5))
    for label, name in (
        ("at the feed", "impedance"),
        ("at the connector", "impedance_at_connector"),
    ):
        assert shown[label].get_xdata() == pytest.approx(gamma(behind, name).real)
        assert shown[label].get_ydata() == pytest.approx(gamma(behind, name).imag)


def test_impedance_at_both_planes(behind):
    ax = plot_impedance(behind, 5)
    shown = lines(ax)
    at_connector = behind["impedance_at_connector"].values[5]
    assert shown["R at the connector"].get_ydata() == pytest.approx(at_connector.real)
    assert shown["X at the connector"].get_ydata() == pytest.approx(at_connector.imag)
    assert shown["resistance R"].get_ydata() == pytest.approx(behind["impedance"].values[5].real)
    assert "at the feed and at the connector" in ax.get_title(loc="left")


def test_without_a_feed_line_one_plane_is_drawn(dataset):
    for plot in (plot_reflection, plot_smith, plot_impedance):
        assert not any("at the" in label for label in lines(plot(dataset, 5)))


def test_way_from_feed_to_connector_at_the_deepest_dip(behind):
    ax = plot_feedline_path(behind, 5)
    shown = lines(ax)
    at_hz = float(behind["dip_frequency"][5, 0])
    load = OnePort.from_impedance(FREQUENCY_HZ, behind["impedance"].values[5])
    assert shown["1"].get_xdata()[0] == pytest.approx(load.at([at_hz]).reflection[0].real)
    end = chain_of(ITEMS, 50.0).reflection(load.at([at_hz]))[0]
    assert shown["2"].get_xdata()[-1] == pytest.approx(end.real)
    assert f"at {at_hz / 1e6:.6g} MHz" in ax.get_title(loc="left")
    assert "case 5: arm 73 mm, width 12 mm" in ax.get_title(loc="left")
    other = plot_feedline_path(behind, 5, frequency_hz=1.2e9)
    assert "at 1200 MHz" in other.get_title(loc="left")


def test_reflection_before_and_after_with_the_band_of_the_dip(behind):
    ax = plot_feedline_match(behind, 5)
    (shaded,) = (patch for patch in ax.patches if patch.get_label() == "band")
    width = float(behind["dip_bandwidth"][5, 0]) / 1e6
    assert shaded.get_width() == pytest.approx(width)
    middle = shaded.get_x() + shaded.get_width() / 2
    assert middle == pytest.approx(float(behind["dip_frequency"][5, 0]) / 1e6)


def test_a_case_without_dips_is_drawn_in_the_middle_of_its_band(behind):
    bare = behind.copy(deep=True)
    bare["dip_frequency"][:] = np.nan
    assert "at 1650 MHz" in plot_feedline_path(bare, 5).get_title(loc="left")
    plot_feedline_match(bare, 5)


def test_the_line_is_drawn_with_the_sizes_of_the_case(behind):
    ax = plot_feedline(behind, 5)
    words = [text.get_text() for text in ax.texts]
    assert {"31.0", "17.0"} <= set(words)
    assert "case 5: arm 73 mm" in ax.get_title(loc="left")


@pytest.mark.parametrize("plot", [plot_feedline, plot_feedline_path, plot_feedline_match])
def test_a_refused_case_says_why(behind, plot):
    ax = plot(behind, REFUSED)
    assert any("refused: strip east" in text.get_text() for text in ax.texts)


@pytest.mark.parametrize("kind", [kind.name for kind in KINDS.values() if kind.of_feedline])
def test_kinds_of_feed_lines_need_one(dataset, behind, tmp_path: Path, kind):
    with pytest.raises(StoreError, match=rf"the picture '{kind}' needs a study with \[\[feedline"):
        save_plot(dataset, kind, tmp_path / "a.png")
    assert save_plot(behind, kind, tmp_path / "a.png").read_bytes().startswith(b"\x89PNG")


def test_all_pictures_of_a_run_with_a_feed_line(behind, tmp_path: Path):
    single = behind.isel(case=[7]).assign_attrs(swept={})
    names = [path.stem for path, _ in save_all(single, tmp_path)]
    assert names[:6] == [
        "impedance",
        "reflection",
        "smith",
        "feedline",
        "feedline_path",
        "feedline_match",
    ]
