"""The picture of a comparison: what is drawn where, and that nothing hides the curves."""

from pathlib import Path

import numpy as np
import pytest

from simkit.measured import Comparison, Measurement, ModeLine
from simkit.plot.overlay import MEASURED_COLOUR, plot_overlay, plot_overlay_smith
from simkit.plot.style import INK, mode_style
from simkit.response.features import Dip

NAN = float("nan")


def comparison(comments=(), lines=None, unpaired=()):
    frequency = np.linspace(0.3e9, 3.0e9, 28)
    measured = np.linspace(0.5e9, 2.5e9, 41)
    if lines is None:
        lines = (
            ModeLine(1, 0.88e9, 4.7, 0.9e9, 15.0, 80e6, 0.87e9, 17.0, 90e6, 1.0, 1.0),
            ModeLine(2, 1.8e9, 6.5),
            ModeLine(3, 2.65e9, 7.9, 2.7e9, 9.0, NAN, NAN, NAN, NAN, 3.0, NAN),
        )
    return Comparison(
        measurement=Measurement(
            Path("bench/build_1.s1p"), measured, np.full(41, 0.5 + 0.1j), 75.0, (), comments
        ),
        title="Creek gauge link",
        case=7,
        values={"arm": 0.076},
        units={"arm": "m"},
        status="solved",
        frequency_hz=frequency,
        simulated_reflection=np.full(28, 0.05j),
        lines=lines,
        unpaired=unpaired,
        notes=(),
    )


def drawn(ax, marker):
    return [line for line in ax.lines if line.get_marker() == marker]


def test_curves_in_decibels_with_units():
    ax = plot_overlay(comparison())
    simulated, measured = ax.lines[:2]
    assert simulated.get_color() == INK
    assert simulated.get_ydata() == pytest.approx(np.full(28, 20 * np.log10(0.05)))
    assert simulated.get_xdata()[[0, -1]] == pytest.approx([300, 3000])
    assert measured.get_color() == MEASURED_COLOUR
    assert measured.get_xdata()[[0, -1]] == pytest.approx([500, 2500])
    assert ax.get_xlabel() == "frequency (MHz)"
    assert ax.get_ylabel() == "|reflection| (dB re 75 ohm)"
    assert ax.get_ylim()[0] < 20 * np.log10(0.05)
    # Told apart without colour: only the simulated one is dashed.
    assert (simulated.is_dashed(), measured.is_dashed()) == (True, False)


def test_dips_are_marked_by_mode_hollow_and_full():
    ax = plot_overlay(comparison())
    hollow, full = drawn(ax, mode_style(1).marker)
    assert (hollow.get_xdata()[0], hollow.get_ydata()[0]) == pytest.approx((900.0, -15.0))
    assert hollow.get_markerfacecolor() == "white"
    assert (full.get_xdata()[0], full.get_ydata()[0]) == pytest.approx((870.0, -17.0))
    assert full.get_markerfacecolor() == mode_style(1).colour
    (alone,) = drawn(ax, mode_style(3).marker)
    assert alone.get_markerfacecolor() == "white"
    assert drawn(ax, mode_style(2).marker) == []
    assert [text.get_text() for text in ax.texts] == ["1/2 wave", "3/2 wave"]


def test_unpaired_dips_are_crosses():
    ax = plot_overlay(comparison(unpaired=(Dip(1.5e9, 2.0, NAN, NAN),)))
    (cross,) = drawn(ax, "x")
    assert (cross.get_xdata()[0], cross.get_ydata()[0]) == pytest.approx((1500.0, -2.0))


def test_title_says_study_file_case_and_what_the_file_says():
    ax = plot_overlay(comparison(comments=("", "INVENTED for $5")))
    assert ax.get_title(loc="left").split("\n") == [
        "Creek gauge link - build_1.s1p",
        "beside case 7 (arm 76 mm)",
        r"the measured file says: INVENTED for \$5",
    ]


def test_legend_is_outside_and_gives_numbers():
    ax = plot_overlay(comparison())
    figure = ax.figure
    figure.draw_without_rendering()
    legend = ax.get_legend()
    assert legend.get_window_extent().x0 >= ax.get_window_extent().x1
    assert legend.get_window_extent().x1 <= figure.bbox.x1
    texts = [text.get_text() for text in legend.get_texts()]
    assert texts[2] == "1/2 wave\nmeasured 870.0 MHz\nsimulated 900.0 MHz\nratio 0.9667"
    assert texts[3] == "3/2 wave\nsimulated 2700.0 MHz"


def test_no_modes_and_a_perfect_match_still_draw():
    plain = comparison(lines=())
    plain.simulated_reflection[:] = 0.0
    ax = plot_overlay(plain)
    assert np.isfinite(ax.lines[0].get_ydata()).all()
    ax.figure.draw_without_rendering()


def test_the_smith_chart_marks_both_dips_of_a_mode():
    ax = plot_overlay_smith(comparison(unpaired=(Dip(1.5e9, 6.0, NAN, NAN),)))
    low = drawn(ax, mode_style(1).marker)
    assert [line.get_markerfacecolor() for line in low] == ["white", mode_style(1).colour]
    assert (low[0].get_xdata()[0], low[0].get_ydata()[0]) == pytest.approx((0.0, 0.05))
    assert (low[1].get_xdata()[0], low[1].get_ydata()[0]) == pytest.approx((0.5, 0.1))
    # The third mode has no measured dip.
    assert len(drawn(ax, mode_style(3).marker)) == 1
    assert len(drawn(ax, "x")) == 1
    ax.figure.canvas.draw()
