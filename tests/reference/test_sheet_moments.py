"""The full-wave reference against closed forms, conservation laws and published modes."""

from __future__ import annotations

import numpy as np
import pytest
from sheet_integrals import collapsed_rule, potentials
from sheet_meshes import arc, path, profile, rectangles
from sheet_moments import FREE_SPACE_OHM, SPEED_OF_LIGHT, Sheet

pytestmark = pytest.mark.long

TRIANGLE = np.array([[0.2, -0.1], [3.1, 0.4], [0.9, 0.8]])
ALONG = np.array([1.0, 0.0])


def brute(point: np.ndarray, power: int) -> np.ndarray:
    """Integrals of (1, x' - x, y' - y) R^power by fans from the point, whose Jacobian tames R."""
    rule, weight = collapsed_rule(80)
    total = np.zeros(3)
    for k in range(3):
        fan = np.array([point, TRIANGLE[k], TRIANGLE[(k + 1) % 3]])
        (ax, ay), (bx, by) = fan[1] - fan[0], fan[2] - fan[0]
        arm = rule @ fan - point
        value = np.linalg.norm(arm, axis=1) ** power * weight * (ax * by - ay * bx) / 2
        total += [value.sum(), *(value @ arm)]
    return total


@pytest.mark.parametrize(
    "point",
    [(1.3, 0.4), (1.0, 0.3), (-0.7, 1.9), (3.0, 0.1), tuple(TRIANGLE[1]), (6.0, 0.9)],
    ids=["inside", "middle", "outside", "close", "corner", "on an edge's line"],
)
def test_closed_forms_agree_with_brute_quadrature(point: tuple[float, float]) -> None:
    place = np.array(point)
    if point == (6.0, 0.9):
        place = TRIANGLE[0] + 2.0 * (TRIANGLE[1] - TRIANGLE[0])
    seen = potentials(place[None], TRIANGLE[None])
    inverse = [seen.one_inverse[0], *seen.arm_inverse[0]]
    linear = [seen.one_linear[0], *seen.arm_linear[0]]
    # 80 x 80 Gauss points on thin fans: better than 1e-7.
    np.testing.assert_allclose(inverse, brute(place, -1), rtol=1e-6, atol=1e-7)
    np.testing.assert_allclose(linear, brute(place, 1), rtol=1e-6, atol=1e-7)


@pytest.fixture(scope="module")
def tee() -> Sheet:
    """Unequal widths and arms: no symmetry to hide behind."""
    return Sheet(rectangles([(-0.05, -0.003, 0.03, 0.003), (0.0, 0.0, 0.004, 0.03)], 1))


def test_matrix_is_symmetric_and_entire(tee: Sheet) -> None:
    frequency = 1.3e9 + 0.1e9j
    matrix = tee.matrix(frequency)
    assert np.max(abs(matrix - matrix.T)) < 1e-12 * np.max(abs(matrix))
    step = 1e5  # hertz: the difference quotient is good to 1e-8 along any direction
    rng = np.random.default_rng(3)
    current = rng.standard_normal(tee.unknowns) + 1j * rng.standard_normal(tee.unknowns)
    slope = tee.slope(frequency, current)
    for direction in (1.0, 1j):
        change = tee.matrix(frequency + step * direction) - tee.matrix(frequency - step * direction)
        quotient = change @ current / (2 * step * direction) * SPEED_OF_LIGHT / (2 * np.pi)
        np.testing.assert_allclose(slope, quotient, atol=1e-6 * np.max(abs(slope)))


def test_entries_of_neighbours_agree_with_brute_quadrature(tee: Sheet) -> None:
    """Functions that lie close, so that closed forms serve them, but share no corner."""
    frequency = 1.3e9 + 0.1e9j
    static, matrix = tee.matrix(1.0), tee.matrix(frequency)
    middles = tee.points[tee.edges].mean(axis=1)
    corners = [
        set(tee.triangles[[a, b]].ravel())
        for a, b in zip(tee.from_triangle, tee.to_triangle, strict=True)
    ]
    rng = np.random.default_rng(8)
    checked = 0
    for m in rng.permutation(tee.unknowns)[:24]:
        apart = [n for n in range(tee.unknowns) if not corners[m] & corners[n]]
        n = min(apart, key=lambda k: float(np.linalg.norm(middles[k] - middles[m])))
        # 18 x 18 points on either side resolve a gap of a cell to 1e-4. What frequency adds holds
        # the currents' part, small beside that of the charges.
        at_rest = brute_entry(tee, m, n, 1.0)
        assert static[m, n] == pytest.approx(at_rest, rel=1e-3)
        added = brute_entry(tee, m, n, frequency) - at_rest
        assert matrix[m, n] - static[m, n] == pytest.approx(added, rel=1e-3)
        checked += 1
    assert checked == 24


def brute_entry(sheet: Sheet, m: int, n: int, frequency_hz: complex) -> complex:
    k = 2 * np.pi * frequency_hz / SPEED_OF_LIGHT
    (here, flow, charge), (there, flow_2, charge_2) = (sampled(sheet, e) for e in (m, n))
    distance = np.linalg.norm(here[:, None] - there[None], axis=2)
    kernel = np.exp(-1j * k * distance) / distance
    vector = sum(flow[:, c] @ kernel @ flow_2[:, c] for c in range(2))
    return complex(k**2 * vector - charge @ kernel @ charge_2)


def sampled(sheet: Sheet, edge: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Points of one edge function with weighted current and charge, from its definition."""
    rule, weight = collapsed_rule(18)
    parts = []
    for triangle, sign in ((sheet.from_triangle[edge], 1), (sheet.to_triangle[edge], -1)):
        free = next(v for v in sheet.triangles[triangle] if v not in sheet.edges[edge])
        points = rule @ sheet.corners[triangle]
        area = weight * sheet.area[triangle]
        density = sign * sheet.edge_length[edge] / (2 * sheet.area[triangle])
        arm = points - sheet.points[free]
        parts.append((points, density * arm * area[:, None], 2 * density * area))
    points, flow, charge = (np.concatenate(part) for part in zip(*parts, strict=True))
    return points, flow, charge


def test_reciprocity_and_power_balance(tee: Sheet) -> None:
    frequency = 2.1e9
    feeds = np.stack(
        [
            tee.gap_source(np.array([0.0, 0.0]), ALONG, 0.003),
            tee.gap_source(np.array([0.004, 0.0]), ALONG, 0.003),
        ],
        axis=1,
    )
    currents = tee.currents(frequency, feeds)
    admittance = feeds.T @ currents
    assert admittance[0, 1] == pytest.approx(admittance[1, 0], rel=1e-9)
    # Lossless metal: the input power is radiated. The limit is the three-point rule of the matrix.
    radiated = radiated_power(tee, frequency, currents[:, 0])
    assert radiated == pytest.approx(admittance[0, 0].real / 2, rel=2e-3)


def radiated_power(sheet: Sheet, frequency_hz: float, current: np.ndarray) -> float:
    """Power through a large sphere, watts."""
    k = 2 * np.pi * frequency_hz / SPEED_OF_LIGHT
    node, weight = np.polynomial.legendre.leggauss(14)
    phi = (np.arange(24) + 0.5) * 2 * np.pi / 24
    cosine, angle = (a.ravel() for a in np.meshgrid(node, phi, indexing="ij"))
    sine = np.sqrt(1 - cosine**2)
    side = np.stack([sine * np.cos(angle), sine * np.sin(angle)], axis=1)
    rule, rule_weight = collapsed_rule(3)
    points = np.einsum("qk,tkc->tqc", rule, sheet.corners).reshape(-1, 2)
    flow = sheet.current_density(points, current)
    flow *= (sheet.area[:, None] * rule_weight).reshape(-1, 1)
    vector = np.exp(1j * k * side @ points.T) @ flow
    theta = cosine * (vector[:, 0] * np.cos(angle) + vector[:, 1] * np.sin(angle))
    turned = -vector[:, 0] * np.sin(angle) + vector[:, 1] * np.cos(angle)
    intensity = FREE_SPACE_OHM * k**2 / (32 * np.pi**2) * (abs(theta) ** 2 + abs(turned) ** 2)
    return float(np.sum(np.repeat(weight, 24) * intensity) * 2 * np.pi / 24)


@pytest.mark.parametrize(
    ("level", "guess_ghz", "frequency_ghz", "q", "tolerance", "q_tolerance"),
    [
        (1, 0.90 + 0.09j, 0.8921, 4.76, 3e-3, 0.04),  # two rows only
        (1, 2.80 + 0.18j, 2.8266, 7.95, 5e-3, 0.06),
        (2, 0.89 + 0.09j, 0.8921, 4.76, 4e-4, 0.01),
    ],
)
def test_straight_strip_150_by_6_mm(
    level: int,
    guess_ghz: complex,
    frequency_ghz: float,
    q: float,
    tolerance: float,
    q_tolerance: float,
) -> None:
    """Modes of the independent reference; what is left is the coarse mesh."""
    sheet = Sheet(profile([-0.075, 0.075], [0.006, 0.006], level))
    mode = sheet.mode(guess_ghz * 1e9)
    assert mode.frequency_hz / 1e9 == pytest.approx(frequency_ghz, rel=tolerance)
    assert mode.q == pytest.approx(q, rel=q_tolerance)
    residual = np.max(abs(sheet.matrix(mode.pole_hz) @ mode.current))
    one_per_mille = 1e-3 * 2 * np.pi * mode.frequency_hz / SPEED_OF_LIGHT
    change = np.max(abs(sheet.slope(mode.pole_hz, mode.current))) * one_per_mille
    assert residual < 1e-3 * change  # the pole is found to a millionth


def test_a_mode_scales_with_the_sheet() -> None:
    small = Sheet(path([(0, 0), (0.04, 0), (0.06, 0.03)], [0.004] * 3, 1, coarsest=6e-3))
    large = Sheet(path([(0, 0), (0.08, 0), (0.12, 0.06)], [0.008] * 3, 1, coarsest=12e-3))
    one, two = small.mode(1.9e9 + 0.15e9j), large.mode(0.95e9 + 0.075e9j)
    assert two.pole_hz * 2 == pytest.approx(one.pole_hz, rel=1e-8)


def test_mitred_path_covers_what_crossing_boxes_cover() -> None:
    """Both outer edges run on to the tip, so a bend has the area of its developed length."""
    bend = Sheet(path([(0, 0), (0.05, 0), (0.05, 0.03)], [0.008] * 3, 2))
    boxes = Sheet(rectangles([(0, -0.004, 0.054, 0.004), (0.046, -0.004, 0.054, 0.03)], 2))
    assert bend.area.sum() == pytest.approx(0.08 * 0.008, rel=1e-12)
    assert boxes.area.sum() == pytest.approx(0.08 * 0.008, rel=1e-12)
    ring = Sheet(arc(0.05, 0.15, 0.006, 3))
    assert ring.area.sum() == pytest.approx(0.15 * 0.006, rel=1e-3)  # chords, not arcs


def test_a_mesh_that_folds_is_refused() -> None:
    with pytest.raises(ValueError, match="folds"):
        path([(0, 0), (0.05, 0), (0.05, 0.01), (0, 0.01)], [0.02] * 4, 1)
