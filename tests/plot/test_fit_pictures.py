"""Pictures of a fit and of a trim: what they show, and that nothing is drawn where nothing is."""

from dataclasses import replace

import numpy as np
import pytest

from simkit.measured.bench_errors import AnalyserErrors, ErrorSizes
from simkit.measured.fit_result import FittedCurve, FittedValue
from simkit.measured.measurement import Measurement
from simkit.measured.nearest import NearCase
from simkit.measured.selection import CaseModes
from simkit.measured.targets import Target
from simkit.measured.trim import Trim
from simkit.measured.trim_model import ModeChange
from simkit.measured.trim_pair import PairTrim
from simkit.plot.fit import plot_fit, plot_fit_smith, plot_mode_ratios, plot_residuals
from simkit.plot.nearest import plot_nearest
from simkit.plot.trim import plot_trim
from simkit.plot.trim_map import _label_places, plot_trim_map
from simkit.response.features import Dip

F = np.linspace(0.6e9, 1.4e9, 81)


def modes(*places):
    places = np.array(places)
    nothing = np.full(len(places), np.nan)
    return CaseModes((1, 3)[: len(places)], places, nothing, places, nothing, nothing)


def curve():
    gamma = 0.9 - 0.7 / (1 + ((F - 0.9e9) / 30e6) ** 2) + 0j
    measurement = Measurement(tmp_name("build.s1p"), F, gamma, 50.0, comments=("invented $ data",))
    return FittedCurve(
        measurement=measurement,
        build={},
        before=np.roll(gamma, 3),
        after=gamma + 0.01,
        dips=(Dip(0.9e9, 14.0, np.nan, np.nan), Dip(1.2e9, 4.0, np.nan, np.nan)),
        pairs=((1, 0),),
        errors=AnalyserErrors(0.0, 0j, 0j, np.zeros(1, complex)),
        modes_before=modes(0.92e9),
        modes_after=modes(0.902e9),
    )


def tmp_name(name):
    from pathlib import Path

    return Path(name)


class Words:
    """Stands for a fit: what the pictures ask of one."""

    class study:  # noqa: N801
        title = "Creek gauge $1"

    class problem:  # noqa: N801
        sizes = ErrorSizes()

        class variation:  # noqa: N801
            @staticmethod
            def text(name, value, digits=5):
                return f"{value:.{digits}g}"

    values = (FittedValue("eps", 2.7, 2.9, 0.05, (2.0, 3.3), None, 0.1),)

    def __init__(self, *curves):
        self.curves = curves


def legend_words(ax):
    return " ".join(text.get_text() for text in ax.get_legend().get_texts())


def test_the_overlay_shows_three_curves_and_names_the_dips():
    ax = plot_fit(Words(curve()), curve())
    said = legend_words(ax)
    for word in ("study as it is", "measured", "fitted 902.0 MHz", "of no mode"):
        assert word in said
    assert ax.get_ylabel() == "|reflection| (dB re 50 ohm)"
    assert "eps 2.9 (was 2.7)" in ax.get_title(loc="left")
    assert r"\$" in ax.get_title(loc="left")
    ax.figure.canvas.draw()


def test_the_smith_chart_marks_measured_and_fitted_at_the_same_place():
    ax = plot_fit_smith(Words(curve()), curve())
    full = [line for line in ax.get_lines() if line.get_marker() == "o"]
    assert len(full) == 2
    assert full[1].get_xdata()[0] - full[0].get_xdata()[0] == pytest.approx(0.01)
    ax.figure.canvas.draw()


def test_residuals_are_measured_minus_fitted():
    ax = plot_residuals(Words(curve()), curve())
    real = next(line for line in ax.get_lines() if line.get_label() == "fitted, real part")
    assert real.get_ydata() == pytest.approx(-0.01)
    ax.figure.canvas.draw()


def test_mode_ratios_before_and_after():
    ax = plot_mode_ratios(Words(curve()))
    heights = [line.get_ydata()[0] for line in ax.get_lines() if line.get_marker() == "o"]
    assert heights == pytest.approx([100 * (900 / 920 - 1), 100 * (900 / 902 - 1)])
    assert [label.get_text() for label in ax.get_xticklabels()] == ["1/2 wave"]
    ax.figure.canvas.draw()


def test_no_pairs_no_ratios():
    lone = replace(curve(), pairs=())
    ax = plot_mode_ratios(Words(lone))
    assert "no measured dip could be paired" in ax.texts[0].get_text()
    ax.figure.canvas.draw()


def test_the_trim_curve_shows_now_after_and_band():
    values = np.linspace(70e-3, 80e-3, 11)
    trim = Trim(
        name="arm", unit="mm", label="1/2 wave", half_waves=1, target_hz=0.92e9, present_hz=0.9e9,
        present_sigma_hz=1e6, present=75e-3, change=-1.7e-3, scaling_change=-1.63e-3,
        sigma=0.1e-3, slope_hz_per_m=-12e9, modes=(ModeChange("1/2 wave", 1, 9e8, 9.2e8, 15, 15),),
        values=values, dips_hz=0.9e9 * 75e-3 / values, dip_sigmas_hz=np.full(11, 1e6),
        measured_hz=0.901e9, band_hz=(0.915e9, 0.925e9),
    )  # fmt: skip
    ax = plot_trim(trim)
    said = legend_words(ax)
    for word in ("95 % band", "plain scaling", "now: 75.00 mm", "after: 73.30 mm", "measured dip"):
        assert word in said
    assert ax.get_xlabel() == "arm (mm)"
    assert "-1.70 mm" in ax.get_title(loc="left")
    assert len(ax.figure.axes) == 1
    ax.figure.canvas.draw()
    assert "95 % interval of arm" in said
    assert "UNSUPPORTED" not in ax.get_title(loc="left")
    unseen = plot_trim(replace(trim, is_measured=False))
    assert "UNSUPPORTED: no measured 1/2 wave dip" in unseen.get_title(loc="left")
    banded = replace(trim, losses_db=15 - 1e3 * abs(values - 73.3e-3), band_return_loss_db=15.0)
    ax = plot_trim(banded)
    assert "15.0 dB after" in legend_words(ax)
    assert ax.figure.axes[1].get_ylabel() == "least return loss in the band (dB)"
    ax.figure.canvas.draw()


def pair_trim(kind="dip", **changed):
    arm, width = np.linspace(70e-3, 80e-3, 5), np.linspace(4e-3, 9e-3, 5)
    first = 0.9e9 * 75e-3 / arm[:, None] - 3e9 * (width[None] - 6e-3)
    second = 2.8e9 * 75e-3 / arm[:, None] - 5e9 * (width[None] - 6e-3)
    fields = {
        "names": ("arm", "width"), "units": ("mm", "mm"),
        "targets": (Target("dip", 1, (0.91e9, 0.91e9)), Target(kind, 3, (2.82e9, 2.82e9), 9.0)),
        "labels": ("1/2 wave dip at $910", "the other"), "mode_labels": ("1/2 wave", "3/2 wave"),
        "present": np.array([75e-3, 6e-3]), "change": np.array([-0.5e-3, -1.2e-3]),
        "covariance": np.array([[4e-8, 1e-8], [1e-8, 4e-7]]),
        "scaling_change": np.array([-0.8e-3, -0.1e-3]),
        "before": np.array([0.9e9, 2.8e9]), "after": np.array([0.91e9, 2.82e9]),
        "scaled": np.array([0.91e9, 2.83e9]), "angle_sine": 0.3, "slopes": np.eye(2), "modes": (),
        "metal_m2": (0.0, 1e-5), "map_values": (arm, width),
        "map_tracked": np.array([first, second]), "tracked": np.array([0.91e9, 2.82e9]),
        "tracked_sigma": np.array([1e6, 3e6]), "shown_sigma": np.array([1e6, 3e6]),
    }  # fmt: skip
    return PairTrim(**(fields | changed))


def test_the_map_shows_both_targets_with_bands_and_the_way():
    ax = plot_trim_map(pair_trim())
    said = legend_words(ax)
    for word in (r"dip at \$910", "the other", "95 % band", "now:\narm 75.00 mm, width 6.00 mm"):
        assert word in said
    assert "after, with its 95 % ellipse:\narm 74.50 mm, width 4.80 mm" in said
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("arm (mm)", "width (mm)")
    low, high = ax.get_xlim()
    assert 70 <= low < 74.2 < 75 < high <= 80
    ax.figure.canvas.draw()


def test_faint_lines_of_a_map_are_labelled_once_and_apart():
    ax = plot_trim_map(pair_trim(unmeasured=("3/2 wave",)))
    assert "UNSUPPORTED: no measured 3/2 wave dip" in ax.get_title(loc="left")
    ax.figure.draw_without_rendering()
    labels = [text for text in ax.texts if text.get_text().endswith(" MHz")]
    assert len(labels) > 3
    for k, label in enumerate(labels):
        for other in labels[:k]:
            assert not label.get_window_extent().overlaps(other.get_window_extent())
    # A row that passes a level twice, and one with a gap.
    across = np.linspace(0, 1, 101)
    places = _label_places(across, 4 * across * (1 - across), np.array([0.5, 0.51]), 1.0)
    assert places == pytest.approx([0.14, 0.85], abs=0.011)
    row = np.where(across < 0.4, np.nan, across)
    assert _label_places(across, row, np.array([0.2, 0.6]), 0.9) == pytest.approx([0.6], abs=0.011)


def test_a_map_of_a_match_without_any_value_still_draws():
    nothing = np.full((2, 5, 5), np.nan)
    ax = plot_trim_map(pair_trim("match", map_tracked=nothing))
    ax.figure.canvas.draw()


def test_nearest_cases_over_the_measurement():
    gamma = curve().measurement.reflection
    units = {"arm": "m", "infill": "1"}
    cases = [
        NearCase(k, {"arm": 0.07 + k / 1e3, "infill": 0.4}, 1.0, 0.01, 2.0 + k, F, gamma, units)
        for k in range(3)
    ]
    ax = plot_nearest(curve().measurement, cases)
    assert "1: case 0" in legend_words(ax)
    assert "arm 71 mm, infill 0.4" in legend_words(ax)
    assert "invented" in ax.get_title(loc="left")
    ax.figure.canvas.draw()
