"""kappa of strips on carriers: limits, monotony, symmetry, independence of the panels, cache."""

from __future__ import annotations

import numpy as np
import pytest

from simkit.crosssection import (
    CrossSection,
    FlatConductor,
    Kappa,
    Layer,
    kappa,
    kappa_matrix,
    single_strip,
)
from simkit.crosssection.carrier_kappa import (
    LEAST_ERROR,
    series_inductance_h_per_m,
    unextrapolated,
    wire_radius_m,
)


def _kappa(
    thickness: float,
    overhang: float | tuple[float, float],
    eps: complex,
    depth: float = 0.0,
    metal: float = 0.0,
) -> complex:
    """kappa of a strip 1 m wide; only ratios matter."""
    return kappa(
        single_strip(1.0, [Layer(thickness, eps)], overhang, depth_m=depth, metal_thickness_m=metal)
    )


SHAPES = [
    (0.5, 0.0, 2.7, 0.0),
    (0.02, 0.0, 2.7, 0.0),
    (0.02, 3.0, 4.4, 0.0),
    (0.1, (0.0, 1.2), 2.7 - 0.05j, 0.0),
    (4.0, 0.3, 2.0, 0.0),
    (0.5, 30.0, 2.7, 0.0),
    (0.4, 0.3, 2.7, 0.15),
    (0.5, 0.002, 10.0, 0.0),
    (0.6, 0.4, 2.7, 0.6),
]


@pytest.mark.parametrize("shape", SHAPES, ids=str)
def test_does_not_depend_on_the_panels(
    shape: tuple[float, float | tuple[float, float], complex, float],
) -> None:
    """Against panels up to four times finer, extrapolated."""
    thickness, overhang, eps, depth = shape
    section = single_strip(1.0, [Layer(thickness, eps)], overhang, depth_m=depth)
    coarse, fine = (unextrapolated(section, count)[0, 0] for count in (32, 64))
    result = kappa_matrix(section)
    # Half a per cent is asked, a tenth is what the doubling of panels is tuned to.
    assert result.matrix[0, 0] == pytest.approx(fine + (fine - coarse) / 3, rel=1e-3)
    assert LEAST_ERROR <= result.error < 3e-3


def test_no_plastic_no_kappa() -> None:
    assert _kappa(0.5, 0.3, 1.0) == pytest.approx(0.0, abs=1e-9)


def test_weak_plastic_is_linear_in_its_susceptibility() -> None:
    # The next term is of the order of the susceptibility itself.
    assert _kappa(0.5, 0.3, 1.002) == pytest.approx(2 * _kappa(0.5, 0.3, 1.001), rel=2e-3)


@pytest.mark.parametrize("eps", [1.3, 2.7, 9.0])
def test_grows_with_thickness_overhang_and_permittivity(eps: float) -> None:
    thicknesses = [_kappa(t, 0.2, eps).real for t in (0.005, 0.05, 0.2, 0.7, 2.0, 9.0)]
    overhangs = [_kappa(0.3, o, eps).real for o in (0.0, 0.01, 0.1, 0.5, 2.0, 9.0)]
    permittivities = [_kappa(0.3, 0.1, e).real for e in (1.0, 1.1, eps, eps + 1, 30.0)]
    for series in (thicknesses, overhangs, permittivities):
        assert np.all(np.diff(series) > 0), series


def test_left_and_right_are_alike() -> None:
    one, other = _kappa(0.4, (0.1, 0.9), 2.7), _kappa(0.4, (0.9, 0.1), 2.7)
    assert one == pytest.approx(other, rel=1e-9)
    assert one != pytest.approx(_kappa(0.4, (0.5, 0.5), 2.7), rel=1e-3)


def test_top_and_bottom_are_alike() -> None:
    assert _kappa(0.4, 0.3, 2.7) == pytest.approx(_kappa(0.4, 0.3, 2.7, depth=0.4), rel=1e-9)


def test_both_sides_take_less_than_twice_one_side() -> None:
    one, both = _kappa(0.3, 0.2, 2.7).real, _kappa(0.6, 0.2, 2.7, depth=0.3).real
    assert one < both < 2 * one


@pytest.mark.parametrize("depth", [0.1, 0.25, 0.5])
def test_embedding_deeper_adds_until_the_middle(depth: float) -> None:
    assert _kappa(1.0, 0.2, 2.7, depth - 0.05).real < _kappa(1.0, 0.2, 2.7, depth).real


@pytest.mark.parametrize("eps", [2.0, 2.7, 6.0])
def test_large_carriers_grow_by_the_logarithm(eps: float) -> None:
    """On a half space the field sees the mean of air and plastic, inside one plastic alone.

    kappa has no limit, but each doubling of the carrier replaces a logarithm's worth of air.
    """
    on_top = _kappa(320.0, 320.0, eps) - _kappa(160.0, 160.0, eps)
    inside = _kappa(640.0, 320.0, eps, depth=320.0) - _kappa(320.0, 160.0, eps, depth=160.0)
    # What the strip's width over the carrier's still leaves falls in proportion: 1.3e-3 here.
    assert on_top == pytest.approx((eps - 1) / (eps + 1) * np.log(2), rel=3e-3)
    assert inside == pytest.approx((1 - 1 / eps) * np.log(2), rel=3e-3)


def test_loss_is_the_slope_in_permittivity() -> None:
    """kappa is an analytic function: a small loss acts like a small step of permittivity."""
    slope = (_kappa(0.5, 0.5, 2.71) - _kappa(0.5, 0.5, 2.69)).real / 0.02
    lossy = _kappa(0.5, 0.5, 2.7 - 0.027j)
    assert lossy.imag == pytest.approx(-0.027 * slope, rel=2e-3)
    assert lossy.real == pytest.approx(_kappa(0.5, 0.5, 2.7).real, rel=1e-4)


def test_size_does_not_matter_and_is_not_solved_again() -> None:
    in_metres = kappa_matrix(single_strip(1.0, [Layer(0.31, 2.7)], (0.1, 0.2)))
    in_millimetres = kappa_matrix(single_strip(7e-3, [Layer(0.31 * 7e-3, 2.7)], (0.7e-3, 1.4e-3)))
    assert in_millimetres is in_metres


def test_cached_matrix_cannot_be_spoiled() -> None:
    matrix = kappa_matrix(single_strip(1.0, [Layer(0.31, 2.7)], 0.1)).matrix
    with pytest.raises(ValueError, match="read-only"):
        matrix[0, 0] = 1.0


def test_layers_of_one_plastic_are_one_layer() -> None:
    split = single_strip(1.0, [Layer(0.2, 2.7), Layer(0.3, 2.7)], 0.2)
    assert kappa(split) == pytest.approx(_kappa(0.5, 0.2, 2.7), rel=1e-9)


def test_the_skin_under_the_strip_counts_most() -> None:
    def with_skins(bottom: float, top: float) -> float:
        layers = [Layer(bottom, 2.7), Layer(2.0 - bottom - top, 1.3), Layer(top, 2.7)]
        return kappa(single_strip(6.0, layers, 1.0)).real

    assert with_skins(0.2, 0.8) > 1.1 * with_skins(0.8, 0.2)


@pytest.mark.parametrize(("metal", "fall"), [(0.005, 0.019), (0.025, 0.071), (0.1, 0.200)])
def test_thick_metal_takes_less_of_the_plastic(metal: float, fall: float) -> None:
    """Charge moves to the sides, away from the plastic: a sheet is thinner than it seems.

    0.15 mm of metal on a strip 6 mm wide is 0.025 widths and costs 7 % of kappa. The values are
    those of this solution with panels four times finer.
    """
    thin, thick = _kappa(0.5, 0.3, 2.7).real, _kappa(0.5, 0.3, 2.7, metal=metal).real
    assert thick == pytest.approx((1 - fall) * thin, rel=1.5e-3)


class TestSeveralStrips:
    def _pair(self, gap: float, thickness: float = 0.5) -> Kappa:
        strips = (FlatConductor(-0.5 - gap / 2, 1.0), FlatConductor(gap / 2 + 0.75, 1.5))
        return kappa_matrix(
            CrossSection(strips, -1.3 - gap / 2, gap / 2 + 2.0, (Layer(thickness, 2.7),))
        )

    def test_matrix_is_symmetric(self) -> None:
        matrix = self._pair(0.3).matrix
        # Reciprocity, to the error of the panels.
        assert matrix[0, 1] == pytest.approx(matrix[1, 0], rel=2e-3)
        assert matrix[0, 0].real != pytest.approx(matrix[1, 1].real, rel=0.05)

    def test_neighbours_on_a_thick_carrier_share_its_plastic(self) -> None:
        assert self._pair(0.2, thickness=3.0).matrix[0, 1].real > 0.2

    def test_far_apart_only_a_dipole_is_left(self) -> None:
        """Bound charge is neutral, so its potential at the other strip falls as 1/distance."""
        near, far = (self._pair(gap).matrix[0, 1].real for gap in (20.0, 40.0))
        # The dipole itself still grows a little with the carrier.
        assert 0.45 < far / near < 0.65

    def test_one_strip_only_for_kappa(self) -> None:
        strips = (FlatConductor(-1.0, 1.0), FlatConductor(1.0, 1.0))
        with pytest.raises(ValueError, match="2 strips on one carrier: use kappa_matrix"):
            kappa(CrossSection(strips, -2.0, 2.0, (Layer(0.5, 2.7),)))


def test_door_to_the_wire_model() -> None:
    """Coated wire, b/a = 2, eps_r = 2.7: 1.5472 a and 87.29 nH/m (Popovic & Nesic 1984)."""
    coated = (1 - 1 / 2.7) * np.log(2)
    assert wire_radius_m(2e-3, coated) == pytest.approx(1.5472 * 2e-3, rel=1e-4)
    assert series_inductance_h_per_m(coated) == pytest.approx(87.29e-9, rel=1e-4)
    # The loss is not part of either.
    assert wire_radius_m(2e-3, coated - 0.01j) == wire_radius_m(2e-3, coated)
