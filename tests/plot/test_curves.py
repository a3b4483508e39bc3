"""Impedance, reflection and Smith chart over frequency."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.patches import Circle

from simkit.errors import StoreError
from simkit.plot import plot_impedance, plot_reflection, plot_smith

REFUSED = 10


def line(ax: Axes, label: str) -> Line2D:
    found = [one for one in ax.get_lines() if str(one.get_label()).startswith(label)]
    assert len(found) == 1, [one.get_label() for one in ax.get_lines()]
    return found[0]


def gamma_of(dataset: xr.Dataset, case: int) -> np.ndarray:
    impedance = dataset["impedance"].values[case]
    return (impedance - 50) / (impedance + 50)


def test_impedance_shows_the_stored_curve_in_ohm_over_megahertz(dataset: xr.Dataset) -> None:
    ax = plot_impedance(dataset, 5)
    resistance, reactance = line(ax, "resistance"), line(ax, "reactance")
    np.testing.assert_array_equal(resistance.get_ydata(), dataset["impedance"].values[5].real)
    np.testing.assert_array_equal(reactance.get_ydata(), dataset["impedance"].values[5].imag)
    np.testing.assert_allclose(resistance.get_xdata(), dataset["frequency"].values / 1e6)
    assert ax.get_xlabel() == "frequency (MHz)"
    assert ax.get_ylabel() == "resistance, reactance (ohm)"
    assert resistance.get_linestyle() != reactance.get_linestyle()


def test_impedance_marks_natural_modes_and_resonances(dataset: xr.Dataset) -> None:
    ax = plot_impedance(dataset, 5)
    for slot, name in enumerate(["1/2 wave", "1 wave", "3/2 wave"]):
        marked = line(ax, f"natural mode, {name}")
        place = float(dataset["mode_frequency"][5, slot]) / 1e6
        np.testing.assert_allclose(marked.get_xdata(), place)
    # Two series circuits: series resonances where each is tuned, one parallel between them.
    series, parallel = line(ax, "series resonance"), line(ax, "parallel resonance")
    assert np.size(series.get_xdata()) == 2
    assert np.size(parallel.get_xdata()) == 1
    assert series.get_xdata()[0] < parallel.get_xdata()[0] < series.get_xdata()[1]
    assert series.get_fillstyle() != parallel.get_fillstyle()


def test_middle_solved_case_is_the_default(dataset: xr.Dataset) -> None:
    assert "case 7: arm 76 mm, width 8 mm" in plot_impedance(dataset).get_title(loc="left")


def test_doubtful_case_says_so(dataset: xr.Dataset) -> None:
    assert "(doubtful)" in plot_reflection(dataset, 4).get_title(loc="left")


@pytest.mark.parametrize("plot", [plot_impedance, plot_reflection, plot_smith])
def test_refused_case_shows_its_reason_and_no_curve(dataset: xr.Dataset, plot: object) -> None:
    ax = plot(dataset, REFUSED)  # type: ignore[operator]
    assert any("refused: strip east: its path crosses" in t.get_text() for t in ax.texts)
    assert not any(np.size(one.get_xdata()) > 50 for one in ax.get_lines())


@pytest.mark.parametrize("plot", [plot_impedance, plot_reflection, plot_smith])
def test_unknown_case_is_named_with_what_there_is(dataset: xr.Dataset, plot: object) -> None:
    with pytest.raises(StoreError, match=r"case 15 is not in these results.* 0 to 14"):
        plot(dataset, 15)  # type: ignore[operator]


def test_reflection_is_in_decibel_of_the_stored_impedance(dataset: xr.Dataset) -> None:
    ax = plot_reflection(dataset, 5)
    expected = 20 * np.log10(abs(gamma_of(dataset, 5)))
    np.testing.assert_allclose(ax.get_lines()[0].get_ydata(), expected, atol=1e-9)
    assert ax.get_ylabel() == "|reflection| (dB re 50 ohm)"


def test_reflection_labels_each_dip_by_its_mode(dataset: xr.Dataset) -> None:
    ax = plot_reflection(dataset, 5)
    for slot, name in ((0, "1/2 wave"), (2, "3/2 wave")):
        marker = line(ax, f"{name}:")
        np.testing.assert_allclose(
            marker.get_xdata(), float(dataset["dip_frequency"][5, slot]) / 1e6
        )
        np.testing.assert_allclose(marker.get_ydata(), -float(dataset["dip_return_loss"][5, slot]))
    assert {"1/2 wave", "3/2 wave"} == {text.get_text() for text in ax.texts}


def test_reference_resistance_comes_from_the_results(dataset: xr.Dataset) -> None:
    other = dataset.assign_attrs(reference_ohm=75.0)
    ax = plot_reflection(other, 5)
    assert "75 ohm" in ax.get_ylabel()
    impedance = dataset["impedance"].values[5]
    expected = 20 * np.log10(abs((impedance - 75) / (impedance + 75)))
    np.testing.assert_allclose(ax.get_lines()[0].get_ydata(), expected, atol=1e-9)


def test_smith_curve_is_the_reflection_inside_the_unit_circle(dataset: xr.Dataset) -> None:
    ax = plot_smith(dataset, 5)
    curve = max(ax.get_lines(), key=lambda one: np.size(one.get_xdata()))
    x, y = np.asarray(curve.get_xdata()), np.asarray(curve.get_ydata())
    np.testing.assert_allclose(x + 1j * y, gamma_of(dataset, 5), atol=1e-12)
    assert (np.hypot(x, y) <= 1).all()
    assert ax.get_aspect() == 1.0


def test_smith_circles_are_those_of_constant_resistance_and_reactance(dataset: xr.Dataset) -> None:
    ax = plot_smith(dataset, 5)
    circles = [(c.center, c.radius) for c in ax.patches if isinstance(c, Circle)]
    for z in (0.5 + 0.3j, 2.0 - 0.7j, 0.2 + 1j, 3.0 - 5j):
        gamma = (z - 1) / (z + 1)
        passing = [r for (x, y), r in circles if abs(abs(gamma - complex(x, y)) - r) < 1e-12]
        expected = []
        if z.real in (0.5, 2.0, 0.2):
            expected.append(1 / (1 + z.real))
        if abs(z.imag) in (1.0, 5.0):
            expected.append(1 / abs(z.imag))
        assert sorted(passing) == pytest.approx(sorted(expected))


def test_smith_arrows_point_to_higher_frequency(dataset: xr.Dataset) -> None:
    ax = plot_smith(dataset, 5)
    gamma = gamma_of(dataset, 5)
    arrows = [text for text in ax.texts if getattr(text, "arrow_patch", None) is not None]
    assert len(arrows) == 6
    for arrow in arrows:
        tail, head = complex(*arrow.get_position()), complex(*arrow.xy)  # type: ignore[attr-defined]
        assert np.argmin(abs(gamma - head)) == np.argmin(abs(gamma - tail)) + 1


def test_smith_names_both_ends_of_the_sweep(dataset: xr.Dataset) -> None:
    ax = plot_smith(dataset, 5)
    gamma = gamma_of(dataset, 5)
    for index, label in ((0, "start: 300 MHz"), (-1, "end: 3000 MHz")):
        np.testing.assert_allclose(
            line(ax, label).get_xydata(), [[gamma[index].real, gamma[index].imag]], atol=1e-12
        )
