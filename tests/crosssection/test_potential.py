"""Boundary elements against closed forms, and what must hold whatever the panels."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from simkit.crosssection.panels import INTERFACE, Panels, chain, circle, graded, join
from simkit.crosssection.potential import Solution, mean_log, pair_integrals, solve
from simkit.crosssection.section import CrossSection, FlatConductor, Layer, cut, single_strip

EPSILONS = [1.5, 2.7, 10.0, 2.7 - 0.1j, 4.4 - 1.3j]


def _fall(panels: Panels) -> complex:
    return solve(panels.in_air()).common - solve(panels).common


def _lopsided(count: int = 9) -> Panels:
    """Two strips, one thick, on and in a carrier of three layers: nothing about it is symmetric."""
    strips = (FlatConductor(-2.0, 1.3, 0.2), FlatConductor(0.9, 2.1))
    layers = (Layer(0.5, 3.1), Layer(0.4, 1.4), Layer(0.3, 2.2 - 0.05j))
    return cut(CrossSection(strips, -3.5, 2.6, layers, depth_m=0.3), count)


@pytest.mark.parametrize("eps", EPSILONS)
@pytest.mark.parametrize("ratio", [1.05, 1.5, 2.0, 10.0])
def test_coated_round_wire(eps: complex, ratio: float) -> None:
    """(1 - 1/eps_r) ln(b/a), exact; off centre in the plane, to give symmetry no chance."""
    centre = 0.3 - 0.2j
    wire = chain(circle(centre, 1.0, 48), conductor=0, left=eps, right=eps)
    coat = chain(circle(centre, ratio, 48), left=eps, right=1.0)
    exact = (1 - 1 / eps) * np.log(ratio)
    # Polygons for circles: 2e-4 at the thinnest coat, less beyond; 0.3 % is what is asked.
    assert _fall(join([wire, coat])) == pytest.approx(exact, rel=3e-4)


@pytest.mark.parametrize("eps", EPSILONS)
@pytest.mark.parametrize("height", [0.1, 0.6, 2.0])
def test_strip_in_a_confocal_ellipse(eps: complex, height: float) -> None:
    """A strip from -1 to 1 in an ellipse with its ends as foci: (1 - 1/eps_r) artanh(b/a).

    x + jz = cosh(mu + j nu) maps the strip to mu = 0 and the ellipse to a constant mu.
    """
    mu = np.arcsinh(height)
    nodes = np.cosh(mu + 2j * np.pi * np.linspace(0, 1, 161))
    nodes[-1] = nodes[0]
    strip = chain(graded(-1, 1, 40), conductor=0, left=eps, right=eps)
    # The ellipse is a polygon here, its area 2e-4 too small; the strip's own error is alike.
    assert _fall(join([strip, chain(nodes, left=eps, right=1.0)])) == pytest.approx(
        (1 - 1 / eps) * mu, rel=2e-3
    )


@pytest.mark.parametrize("count", [3, 9, 20])
def test_free_charge_is_all_charge_whatever_the_panels(count: int) -> None:
    """Dielectrics are neutral: the bound charges sum to zero even where panels are coarse."""
    solution = solve(_lopsided(count))
    every = solution.charge.sum(axis=1)
    # Distant panels act by a series that is good to 2e-7.
    np.testing.assert_allclose(solution.capacitance.sum(axis=1), every, rtol=3e-7)


def test_a_body_without_metal_is_neutral() -> None:
    wire = chain(circle(0.0, 1.0, 24), conductor=0)
    rod = chain(circle(4.0 + 1j, 1.5, 24), left=6.0, right=1.0)
    solution = solve(join([wire, rod]))
    on_rod = solution.charge[0, solution.panels.conductor == INTERFACE]
    # Distant panels act by a series that is good to 2e-7.
    assert abs(on_rod.sum()) < 3e-7 * np.abs(on_rod).sum()
    assert np.abs(on_rod).sum() > 0.1 * abs(solution.charge.sum())


def test_capacitance_is_symmetric() -> None:
    matrix = solve(_lopsided(24)).capacitance
    assert matrix[0, 0] != pytest.approx(matrix[1, 1], rel=0.02)
    # Reciprocity holds to the error of the panels, 1e-4 here.
    assert matrix[0, 1] == pytest.approx(matrix[1, 0], rel=5e-4)


@pytest.mark.parametrize("scale", [1e-3, 0.25, 0.5, 1.0, 2.0, 4.0])
def test_scaling_moves_the_potential_by_the_logarithm_only(scale: float) -> None:
    """Also through the sizes at which a plane conductor's capacity is 1 and its P vanishes."""
    section = _lopsided()
    scaled = Panels(
        section.start_m * scale,
        section.end_m * scale,
        section.conductor,
        section.left,
        section.right,
    )
    expected = solve(section).coefficients - np.log(scale)
    # Rounding decides which of two formulas, equal to 2e-7, serves a pair at their border.
    np.testing.assert_allclose(solve(scaled).coefficients, expected, atol=3e-7)


def test_a_conductor_whose_potential_vanishes() -> None:
    """One panel of this length has a mean logarithm of exactly 0: no charge can be told from it."""
    solution = solve(chain(np.array([0.0, np.exp(1.5)]), conductor=0))
    assert solution.common == pytest.approx(0.0, abs=1e-12)
    assert solution.capacitance.real > 0


def test_turning_and_shifting_change_nothing() -> None:
    section, turn = _lopsided(), np.exp(0.7j)
    moved = Panels(
        turn * section.start_m + 3,
        turn * section.end_m + 3,
        section.conductor,
        section.left,
        section.right,
    )
    np.testing.assert_allclose(solve(moved).coefficients, solve(section).coefficients, atol=3e-7)


def test_pair_integrals_against_brute_force() -> None:
    """Near, far, touching, collinear and parallel pairs against plain quadrature."""
    start = np.array([0.0, 1.0, 1.3 + 0.4j, -0.5 - 0.8j, 9.0 + 7j, 0.0 - 0.05j])
    end = np.array([1.0, 1.5, 1.1 + 1.2j, 0.7 - 0.3j, 10.0 + 7.5j, 1.0 - 0.05j])
    logs, fluxes = pair_integrals(start, end)
    s, weight = np.polynomial.legendre.leggauss(400)
    at = start[:, np.newaxis] + (end - start)[:, np.newaxis] * (s + 1) / 2
    normal = 1j * (end - start)
    for i, j in [(0, 1), (1, 0), (0, 2), (2, 3), (0, 4), (4, 2), (0, 5), (5, 0), (3, 5)]:
        u = at[i][:, np.newaxis] - at[j]
        both = np.outer(weight, weight) / 4
        # 400 points resolve all but the integrable singularities of touching pairs, to 1e-4.
        assert logs[i, j] == pytest.approx(np.sum(both * np.log(np.abs(u))), abs=1e-4)
        flux = np.sum(both * (normal[i] / u).real) / (2 * np.pi)
        assert fluxes[i, j] == pytest.approx(flux, abs=1e-4)


def test_flux_through_a_closed_line_is_exact() -> None:
    """All of a charge inside, half of one on the line, none of one outside."""
    around = chain(circle(0.0, 2.0, 7))
    inside = chain(np.array([0.1, 0.5 + 0.2j]))
    outside = chain(np.array([3.0, 3.0 + 0.1j]))
    panels = join([around, inside, outside])
    _, fluxes = pair_integrals(panels.start_m, panels.end_m)
    leaving = -fluxes[:7].sum(axis=0)
    np.testing.assert_allclose(leaving, [0.5] * 7 + [1.0, 0.0], atol=1e-9)


def test_equal_permittivities_are_no_interface() -> None:
    wire = chain(circle(0.0, 1.0, 12), conductor=0)
    ghost = chain(circle(0.0, 2.0, 12), left=1.0, right=1.0)
    assert _fall(join([wire, ghost])) == pytest.approx(0, abs=1e-12)


def test_polygon_of_a_circle_has_its_capacity() -> None:
    corners = circle(0.2j, 1.0, 5)
    sides = [graded(a, b, 40)[:-1] for a, b in pairwise(corners)]
    pentagon = chain(np.concatenate([*sides, corners[:1]]), conductor=0)
    # The formula for regular polygons against the elements, which are good to 1e-6 here.
    assert solve(pentagon).common == pytest.approx(0.0, abs=3e-6)


class TestPotentialElsewhere:
    def _solution(self) -> Solution:
        return solve(cut(single_strip(1.0, [Layer(0.4, 2.7)], (0.2, 0.7)), 24))

    def test_is_one_on_the_strip(self) -> None:
        values = self._solution().potential([-0.31, 0.0, 0.12, 0.44], [1.0])
        # The mean over each panel is 1; between, the potential ripples with the panels.
        np.testing.assert_allclose(values.real, 1.0, atol=3e-3)

    def test_falls_with_the_logarithm_far_away(self) -> None:
        solution = self._solution()
        charge = solution.capacitance[0, 0].real
        near, far = solution.potential([80j, 160j], [1.0]).real
        # The dipole of the off-centre carrier is still seen at 1e-3.
        assert near - far == pytest.approx(charge * np.log(2), rel=2e-3)

    def test_keeps_the_shape_of_the_points(self) -> None:
        assert self._solution().potential(np.full((3, 5), 2j), [1.0]).shape == (3, 5)


def test_mean_log_against_quadrature() -> None:
    panels = chain(np.array([0.0, 1.0 + 0.5j, 1.0 + 2.0j]))
    points = np.array([0.4 - 0.3j, 2.0 + 2.0j, 0.9 + 3.0j])
    s, weight = np.polynomial.legendre.leggauss(60)
    step = panels.end_m - panels.start_m
    at = panels.start_m[:, np.newaxis] + step[:, np.newaxis] * (s + 1) / 2
    away = np.abs(points[:, np.newaxis, np.newaxis] - at)
    expected = (np.log(away) * weight / 2).sum(axis=-1)
    np.testing.assert_allclose(mean_log(points, panels), expected, atol=1e-10)


def test_a_cross_section_without_metal_is_refused() -> None:
    with pytest.raises(ValueError, match="needs a conductor"):
        solve(chain(circle(0.0, 1.0, 8), left=2.0))
