"""What a cross-section may be, and into which lines it falls."""

from __future__ import annotations

import numpy as np
import pytest

from simkit.crosssection import CrossSection, FlatConductor, Layer, single_strip
from simkit.crosssection.panels import INTERFACE, Panels
from simkit.crosssection.section import cut
from simkit.errors import GeometryError

STRIP = FlatConductor(0.0, 6e-3)
PLASTIC = Layer(3e-3, 2.7)


def _length(panels: Panels, chosen: np.ndarray) -> float:
    return float(panels.length_m[chosen].sum())


@pytest.mark.parametrize(
    ("arguments", "match"),
    [
        (((), -5e-3, 5e-3, (PLASTIC,)), "at least one strip and one carrier layer"),
        (((STRIP,), -5e-3, 5e-3, ()), "at least one strip and one carrier layer"),
        (((FlatConductor(0.0, 0.0),), -1.0, 1.0, (PLASTIC,)), "strip width is 0 mm"),
        (((STRIP,), -5e-3, 5e-3, (Layer(-1e-3, 2.0),)), "layer thickness is -1 mm"),
        (((STRIP,), -5e-3, 5e-3, (Layer(np.nan, 2.0),)), "layer thickness is nan mm"),
        (((STRIP,), -3e-3, 2.9e-3, (PLASTIC,)), "x = -3 to 2.9 mm, is narrower than the strip"),
        (((STRIP,), -5e-3, 5e-3, (Layer(1e-3, 0.9),)), r"permittivity is 0\.9"),
        (((STRIP,), -5e-3, 5e-3, (Layer(1e-3, 2 + 0.1j),)), "imaginary part 0 or negative"),
        (((STRIP,), -5e-3, 5e-3, (PLASTIC,), -1e-3), "strip depth is -1 mm"),
        (((STRIP,), -5e-3, 5e-3, (PLASTIC,), 3.1e-3), r"thickness of 3 mm \(underneath\)"),
        (
            ((FlatConductor(0.0, 6e-3, -1e-5),), -5e-3, 5e-3, (PLASTIC,)),
            r"metal thickness is -0\.01 mm",
        ),
        (
            ((STRIP, FlatConductor(5e-3, 4e-3)), -9e-3, 9e-3, (PLASTIC,)),
            "meet or overlap at x = 3 mm",
        ),
    ],
)
def test_impossible_sections(arguments: tuple[object, ...], match: str) -> None:
    with pytest.raises(GeometryError, match=match):
        CrossSection(*arguments)  # type: ignore[arg-type]


def test_rounding_is_forgiven() -> None:
    """0.1 + 0.2 is not 0.3: a flush carrier may miss the strip's edge by rounding."""
    single_strip(6e-3, [PLASTIC], -1e-15)
    single_strip(6e-3, [Layer(0.1e-3, 2.0), Layer(0.2e-3, 3.0)], 0.0, depth_m=0.3e-3)


def test_lines_of_a_strip_on_top() -> None:
    panels = cut(single_strip(6.0, [Layer(3.0, 2.7)], (1.0, 2.0)), 8)
    metal = panels.conductor == 0
    assert _length(panels, metal) == pytest.approx(6.0)
    # Top beside the strip, bottom, two sides.
    assert _length(panels, ~metal) == pytest.approx(1 + 2 + 9 + 2 * 3)
    np.testing.assert_array_equal(panels.left[metal], 1.0)
    np.testing.assert_array_equal(panels.right[metal], 2.7)


def test_lines_of_a_flush_thick_strip_in_layers() -> None:
    section = single_strip(
        2.0, [Layer(1.0, 2.0), Layer(0.5, 3.0)], 0.0, depth_m=0.5, metal_thickness_m=0.5
    )
    panels = cut(section, 8)
    metal = panels.conductor == 0
    # The metal fills the upper layer: of the plastic only the lower one is left.
    assert _length(panels, metal) == pytest.approx(2 * (2.0 + 0.5))
    assert _length(panels, ~metal) == pytest.approx(2.0 + 2 * 1.0)


def test_levels_are_cut_alike() -> None:
    """Both faces of a thin sheet carry matching panels, the strip's edges told by both."""
    panels = cut(single_strip(1.0, [Layer(1e-3, 2.7)], 4.0), 8)
    level = np.abs((panels.end_m - panels.start_m).imag) == 0
    top = panels.start_m[level & (panels.start_m.imag > -5e-4)]
    bottom = panels.start_m[level & (panels.start_m.imag < -5e-4)]
    np.testing.assert_array_equal(np.sort(top.real), np.sort(bottom.real))


def test_permittivity_of_places() -> None:
    section = single_strip(1.0, [Layer(1.0, 2.0), Layer(0.5, 3.0)], 0.1, depth_m=0.2)
    assert section.levels_m == pytest.approx((-1.3, -0.3, 0.2))
    assert [section.permittivity(0.0, z) for z in (-2.0, -1.0, 0.1, 0.3)] == [1, 2, 3, 1]
    assert section.permittivity(0.61, 0.0) == 1


def test_interfaces_only_where_permittivity_changes() -> None:
    panels = cut(single_strip(1.0, [Layer(0.5, 1.0)], 0.3), 8)
    assert not (panels.conductor == INTERFACE).any()
