"""The picture of a cross-section says what is drawn, to scale and in millimetres."""

from __future__ import annotations

import numpy as np
import pytest
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle

from simkit.crosssection import CrossSection, FlatConductor, Layer, kappa, single_strip
from simkit.plot.crosssection import LEVELS_PERCENT, _potential, plot_crosssection

pytestmark = pytest.mark.long

SECTION = single_strip(6e-3, [Layer(2e-3, 2.7), Layer(1e-3, 1.4 - 0.014j)], (3e-3, 1e-3))


def test_says_what_is_drawn() -> None:
    ax = plot_crosssection(SECTION)
    assert ax.get_xlabel() == "across the strip (mm)"
    assert ax.get_ylabel() == "height (mm)"
    assert f"kappa {kappa(SECTION).real:.3f}" in ax.get_title(loc="left")
    legend = ax.get_legend()
    assert legend is not None
    assert [text.get_text() for text in legend.get_texts()] == [
        "strip, 6 mm wide",
        "carrier, 2 mm of permittivity 2.7",
        "carrier, 1 mm of permittivity 1.4, loss tangent 0.01",
    ]
    assert ax.get_aspect() == 1.0


def test_outlines_are_to_scale() -> None:
    ax = plot_crosssection(SECTION)
    boxes = [patch.get_bbox().bounds for patch in ax.patches if isinstance(patch, Rectangle)]
    strip, lower, upper = boxes
    assert strip[0] == pytest.approx(-3)
    assert strip[2] == pytest.approx(6)
    # Metal without thickness is drawn thicker, around its place.
    assert strip[1] == pytest.approx(-strip[3] / 2)
    assert lower == pytest.approx((-6, -3, 10, 2))
    assert upper == pytest.approx((-6, -1, 10, 1))


def test_uses_the_axes_it_is_given() -> None:
    ax = Figure().add_subplot()
    assert plot_crosssection(SECTION, ax=ax) is ax


@pytest.mark.parametrize("size", [1.0, 5.0])
def test_potential_is_highest_at_the_strip_whatever_the_unit(size: float) -> None:
    """Nothing but the lengths may change with the size of the section."""
    strips = (FlatConductor(-1.3 * size, 1.6 * size), FlatConductor(1.2 * size, 2.0 * size))
    section = CrossSection(strips, -3 * size, 2.4 * size, (Layer(0.5 * size, 2.7),))
    x, z, percent = _potential(section, (-5 * size, 5 * size), (-3 * size, 3 * size))
    assert percent.shape == (len(z), len(x))
    highest = np.unravel_index(np.argmax(percent), percent.shape)
    assert percent[highest] > 95
    assert abs(z[highest[0]]) < 0.2 * size
    assert percent.min() == 0
    assert LEVELS_PERCENT[-1] >= percent.max()
