"""Full-wave reference for bare strips: zero-thickness perfect conductors in free space.

Electric-field integral equation, Galerkin with the functions of Rao, Wilton and Glisson on flat
triangles. 1/R and R are integrated in closed form over one triangle of a near pair, the smooth rest
of the kernel and all far pairs by quadrature. The matrix is an entire function of the wave number,
so natural modes are found where it is singular, by inverse iteration at complex frequency; nothing
of the wire models is used. Lengths in metres, frequencies in hertz, time factor exp(+j omega t).

References
----------
Rao, Wilton, Glisson, "Electromagnetic scattering by surfaces of arbitrary shape", IEEE T-AP 30(3),
1982, doi:10.1109/TAP.1982.1142818.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import scipy.linalg
import scipy.sparse
from sheet_integrals import THREE, collapsed_rule, potentials
from sheet_meshes import Mesh

SPEED_OF_LIGHT = 299792458.0
FREE_SPACE_OHM = 376.730313668
NEAR = 3.0
"""Pairs closer than this many times the longer triangle are integrated in closed form."""

VERY_NEAR = 1.3
ORDERS = (12, 5)
"""Outer rule of very near and of other near pairs: Gauss products of this order."""

CACHED = 24_000
"""Pairs worked on at a time, to stay in the processor's cache."""

KINDS = ("one", "x", "y", "dot")
"""Pair integrals of G times 1, the first point's x, its y, and r . r'."""


@dataclass(frozen=True)
class NaturalMode:
    """A complex frequency at which a current persists without a source.

    Attributes
    ----------
    pole_hz : complex
        Positive imaginary part: decay.
    current : (N,) complex array
        Edge currents in ampere per metre, largest 1.
    """

    pole_hz: complex
    current: np.ndarray

    @property
    def frequency_hz(self) -> float:
        return self.pole_hz.real

    @property
    def q(self) -> float:
        return self.pole_hz.real / (2 * self.pole_hz.imag)


class Sheet:
    """A meshed sheet: its edge functions and its matrix at any complex frequency."""

    def __init__(self, mesh: Mesh) -> None:
        self.points = mesh.points
        self.triangles = _counterclockwise(mesh)
        self.corners = self.points[self.triangles]
        self.centres = self.corners.mean(axis=1)
        side = self.corners[:, [1, 2, 0]] - self.corners
        self.area = (side[:, 0, 0] * side[:, 1, 1] - side[:, 0, 1] * side[:, 1, 0]) / 2
        self.size = np.linalg.norm(side, axis=2).max(axis=1)
        self._find_edges()

    def _find_edges(self) -> None:
        """Inner edges and, for each, both triangles with their free corners."""
        sides = np.sort(self.triangles[:, [[1, 2], [2, 0], [0, 1]]].reshape(-1, 2), axis=1)
        order = np.lexsort((sides[:, 1], sides[:, 0]))
        same = np.all(sides[order[1:]] == sides[order[:-1]], axis=1)
        first, second = order[:-1][same], order[1:][same]
        if np.any(same[1:] & same[:-1]):
            raise ValueError("three triangles share an edge")
        self.edges = sides[first]
        self.edge_length = np.linalg.norm(
            self.points[self.edges[:, 0]] - self.points[self.edges[:, 1]], axis=1
        )
        count = len(first)
        rows = np.tile(np.arange(count), 2)
        triangle = np.concatenate([first, second]) // 3
        free = self.points[self.triangles.ravel()[np.concatenate([first, second])]]
        sign = np.repeat([1.0, -1.0], count)
        half = sign * np.tile(self.edge_length, 2) / (2 * self.area[triangle])
        shape = (count, len(self.triangles))

        def sparse(value: np.ndarray) -> scipy.sparse.csr_array:
            return scipy.sparse.csr_array((value, (rows, triangle)), shape=shape)

        self.unit = sparse(half)
        self.unit_x, self.unit_y = sparse(half * free[:, 0]), sparse(half * free[:, 1])
        self.from_triangle, self.to_triangle = first // 3, second // 3

    @property
    def unknowns(self) -> int:
        return len(self.edges)

    # Matrix -------------------------------------------------------------------------------------

    @cached_property
    def _places(self) -> np.ndarray:
        """Quadrature points (3, 2, T): of the rule, coordinate, triangle."""
        return np.ascontiguousarray(np.einsum("qk,tkc->qct", THREE, self.corners))

    @cached_property
    def _near(self) -> dict[str, np.ndarray]:
        """What closed forms add to quadrature: per kind (2, T, T) of 1/R and of R."""
        gap = np.linalg.norm(self.centres[:, None] - self.centres[None], axis=2)
        size = np.maximum(self.size[:, None], self.size[None])
        very = gap < VERY_NEAR * size
        near = (gap < NEAR * size) & ~very
        total = {k: np.zeros((2, *gap.shape)) for k in KINDS}
        for chosen, order in ((very, ORDERS[0]), (near, ORDERS[1])):
            test, source = np.nonzero(chosen)
            step = max(1, 400_000 // order**2)
            for start in range(0, len(test), step):
                t, s = test[start : start + step], source[start : start + step]
                self._add_near(total, t, s, order)
        # Each pair was integrated both ways round; x and y are of the first point.
        for kind in ("one", "dot"):
            total[kind] = (total[kind] + total[kind].transpose(0, 2, 1)) / 2
        return total

    def _add_near(
        self, total: dict[str, np.ndarray], t: np.ndarray, s: np.ndarray, order: int
    ) -> None:
        rule, weight = collapsed_rule(order)
        points = np.einsum("qk,pkc->pqc", rule, self.corners[t])
        seen = potentials(points.reshape(-1, 2), np.repeat(self.corners[s], len(weight), axis=0))
        scale = weight[None] * self.area[t][:, None]
        plain = self._places.transpose(2, 0, 1)
        arms = plain[s][:, None] - plain[t][:, :, None]
        distance = np.linalg.norm(arms, axis=3)
        with np.errstate(divide="ignore"):
            inverse = np.where(distance > 0, 1 / distance, 0.0)
        plain_scale = (self.area[t] * self.area[s] / 9)[:, None, None]
        dots = np.einsum("pqc,prc->pqr", plain[t], plain[s])
        pairs = (
            (seen.one_inverse, seen.arm_inverse, inverse),
            (seen.one_linear, seen.arm_linear, distance),
        )
        for k, (one, arm, kernel) in enumerate(pairs):
            one = one.reshape(scale.shape) * scale
            arm = arm.reshape(*scale.shape, 2) * scale[..., None]
            kernel = kernel * plain_scale
            dot = np.einsum("pqc,pqc->p", points, arm + points * one[..., None])
            total["one"][k, t, s] += one.sum(axis=1) - kernel.sum(axis=(1, 2))
            total["dot"][k, t, s] += dot - (kernel * dots).sum(axis=(1, 2))
            for c, kind in enumerate(("x", "y")):
                mine = (points[..., c] * one).sum(axis=1)
                mine -= (kernel * plain[t][:, :, None, c]).sum(axis=(1, 2))
                theirs = (points[..., c] * one + arm[..., c]).sum(axis=1)
                theirs -= (kernel * plain[s][:, None, :, c]).sum(axis=(1, 2))
                # The mean of both orders keeps the matrix symmetric.
                total[kind][k, t, s] += mine / 2
                total[kind][k, s, t] += theirs / 2

    def _pairs(self, k: complex) -> dict[str, np.ndarray]:
        """Triangle-to-triangle integrals (T, T) of exp(-jkR)/R at a complex wave number."""
        count = len(self.triangles)
        place = self._places
        result = {kind: np.empty((count, count), dtype=complex) for kind in KINDS}
        block = max(1, CACHED // count)
        for start in range(0, count, block):
            rows, columns = slice(start, start + block), slice(start, None)
            shape = (len(self.triangles[rows]), count - start)
            one, x, y, dot, other_x, other_y = (np.zeros(shape, dtype=complex) for _ in range(6))
            for a in range(3):
                ax, ay = (place[a, c, rows, None] for c in range(2))
                near_one, near_x, near_y = (np.zeros(shape, dtype=complex) for _ in range(3))
                for b in range(3):
                    bx, by = (place[b, c, columns] for c in range(2))
                    kernel = _kernel(ax - bx, ay - by, k)
                    near_one += kernel
                    near_x += kernel * bx
                    near_y += kernel * by
                one += near_one
                x += ax * near_one
                y += ay * near_one
                dot += ax * near_x + ay * near_y
                other_x += near_x
                other_y += near_y
            scale = self.area[rows, None] * self.area[columns] / 9
            for kind, there, back in (
                ("one", one, one),
                ("dot", dot, dot),
                ("x", x, other_x),
                ("y", y, other_y),
            ):
                result[kind][rows, columns] = there * scale
                result[kind][columns, rows] = (back * scale).T
        for kind in KINDS:
            result[kind] += self._near[kind][0] - k**2 / 2 * self._near[kind][1]
        return result

    def matrix(self, frequency_hz: complex) -> np.ndarray:
        """Matrix Y (N, N), entire in the wave number k; impedances are j eta/(4 pi k) Y."""
        k = 2 * np.pi * frequency_hz / SPEED_OF_LIGHT
        pairs = self._pairs(k)
        unit, ux, uy = self.unit, self.unit_x, self.unit_y
        # f = unit (r - corner): the four products of (r - v) . (r' - v').
        right = [pairs["dot"], pairs["x"], pairs["y"], pairs["one"]]
        dot = unit @ (unit @ right[0]).T
        cross = ux @ (unit @ right[1]).T + uy @ (unit @ right[2]).T  # v' weighted, first r
        ones = unit @ right[3]
        both = ux @ (ux @ right[3]).T + uy @ (uy @ right[3]).T
        charge = 4 * (unit @ ones.T)
        return np.asarray(k**2 * (dot - cross - cross.T + both) - charge)

    # Natural modes ------------------------------------------------------------------------------

    def slope(self, frequency_hz: complex, current: np.ndarray) -> np.ndarray:
        """dY/dk u (N,) for a current u, without forming the derivative matrix."""
        k = 2 * np.pi * frequency_hz / SPEED_OF_LIGHT
        place = self._places
        scale, vx, vy = (m.T @ current for m in (self.unit, self.unit_x, self.unit_y))
        # Source times area at the points, (3, T, 3): x and y of the current, and the charge.
        source = np.stack(
            [scale * place[:, 0] - vx, scale * place[:, 1] - vy, np.stack([2 * scale] * 3)], axis=2
        )
        source = source * (self.area[:, None] / 3 + 0j)
        value, derived = np.zeros_like(source), np.zeros_like(source)
        block = max(1, CACHED // len(self.triangles))
        for a in range(3):
            for start in range(0, len(self.triangles), block):
                rows = slice(start, start + block)
                for b in range(3):
                    dx, dy = (place[a, c, rows, None] - place[b, c] for c in range(2))
                    phase, inverse = _phase(dx, dy, k)
                    derived[a, rows] += -1j * (phase @ source[b])
                    value[a, rows] += _to_kernel(phase, inverse, k) @ source[b]
        near = self._near

        def project(seen: np.ndarray, power: int, weight: complex) -> tuple[np.ndarray, np.ndarray]:
            """Test with every edge function, the near pairs' closed forms added."""
            seen = seen * (self.area[:, None] / 3)
            fx, fy, charge = (seen[..., c] for c in range(3))
            one, x, y, dot = (near[kind][power] for kind in KINDS)
            flow = (place[:, 0] * fx + place[:, 1] * fy).sum(axis=0)
            flow = flow + weight * (dot @ scale - x @ vx - y @ vy)
            sum_x = fx.sum(axis=0) + weight * (x.T @ scale - one @ vx)
            sum_y = fy.sum(axis=0) + weight * (y.T @ scale - one @ vy)
            total = charge.sum(axis=0) + weight * 2 * (one @ scale)
            vector = self.unit @ flow - self.unit_x @ sum_x - self.unit_y @ sum_y
            return vector, 2 * (self.unit @ total)

        vector, _ = project(value, 0, 1.0)
        bent, _ = project(np.zeros_like(value), 1, -(k**2) / 2)
        vector_slope, charge_slope = project(derived, 1, -k)
        return np.asarray(2 * k * (vector + bent) + k**2 * vector_slope - charge_slope)

    def mode(
        self, guess_hz: complex, current: np.ndarray | None = None, *, tolerance: float = 1e-8
    ) -> NaturalMode:
        """Natural mode near a guess: inverse iteration with dY/dk and Newton's step in turn.

        Raises
        ------
        ValueError
            When it does not settle.
        """
        pole = guess_hz
        if current is None:
            current = np.random.default_rng(5).standard_normal(self.unknowns) + 0j
        pushed = self.slope(pole, current)
        pushes = 3  # inverse iterations at the first guess; then the shape is good
        for _ in range(8):
            matrix = self.matrix(pole)
            factors = scipy.linalg.lu_factor(matrix, check_finite=False)
            for _ in range(pushes):
                current = scipy.linalg.lu_solve(factors, pushed, check_finite=False)
                current = current / current[int(np.argmax(abs(current)))]
                pushed = self.slope(pole, current)
            pushes = 1
            step = -(current @ (matrix @ current)) / (current @ pushed)
            step *= SPEED_OF_LIGHT / (2 * np.pi)
            pole = complex(pole + step)
            if abs(step) ** 2 < tolerance * abs(pole) ** 2:  # Newton: the next step is its square
                return NaturalMode(pole, current)
        raise ValueError(f"no natural mode settles near {guess_hz / 1e9:.4f} GHz")

    # Currents and feeds -------------------------------------------------------------------------

    def current_density(self, points: np.ndarray, current: np.ndarray) -> np.ndarray:
        """Surface current (P, 2) at points of the sheet for edge currents (N,)."""
        found = self._containing(points)
        scale, vx, vy = (m.T @ current for m in (self.unit, self.unit_x, self.unit_y))
        return np.stack(
            [
                scale[found] * points[:, 0] - vx[found],
                scale[found] * points[:, 1] - vy[found],
            ],
            axis=1,
        )

    def _containing(self, points: np.ndarray) -> np.ndarray:
        depth = np.full((len(points), len(self.triangles)), np.inf)
        for k in range(3):
            start, stop = self.corners[:, k], self.corners[:, (k + 1) % 3]
            edge = stop - start
            arm = points[:, None] - start[None]
            cross = edge[:, 0] * arm[..., 1] - edge[:, 1] * arm[..., 0]
            depth = np.minimum(depth, cross / np.linalg.norm(edge, axis=1))
        return np.argmax(depth, axis=1)

    def gap_source(self, place: np.ndarray, direction: np.ndarray, reach: float) -> np.ndarray:
        """Right-hand side (N,) of 1 V across the line of edges at a place.

        Parameters
        ----------
        place, direction : (2,) float array
            A point of the line and the unit vector across it, along the strip.
        reach : float
            Half the length of the line, metres.
        """
        ends = self.points[self.edges] - place
        on_line = np.all(abs(ends @ direction) < 1e-7, axis=1)
        on_line &= np.all(np.linalg.norm(ends, axis=2) < reach * (1 + 1e-6), axis=1)
        if not on_line.any():
            raise ValueError("no line of edges at the feed")
        ahead = self.centres[self.to_triangle] - self.centres[self.from_triangle]
        sign = np.sign(ahead @ direction)
        return np.where(on_line, sign * self.edge_length, 0.0)

    def currents(self, frequency_hz: float, sources: np.ndarray) -> np.ndarray:
        """Edge currents (N, M) in ampere per metre for right-hand sides (N, M) in volt metre."""
        k = 2 * np.pi * frequency_hz / SPEED_OF_LIGHT
        scale = 1j * FREE_SPACE_OHM / (4 * np.pi * k)
        return np.asarray(np.linalg.solve(scale * self.matrix(frequency_hz), sources))


def _counterclockwise(mesh: Mesh) -> np.ndarray:
    a, b, c = (mesh.points[mesh.triangles[:, k]] for k in range(3))
    turn = (b - a)[:, 0] * (c - a)[:, 1] - (b - a)[:, 1] * (c - a)[:, 0]
    return np.where((turn > 0)[:, None], mesh.triangles, mesh.triangles[:, ::-1])


def _phase(dx: np.ndarray, dy: np.ndarray, k: complex) -> tuple[np.ndarray, np.ndarray]:
    """exp(-jkR) and 1/R (0 where the points coincide)."""
    distance = np.sqrt(dx * dx + dy * dy)
    phase = np.empty(distance.shape, dtype=complex)
    angle = k.real * distance
    phase.real = np.cos(angle)
    phase.imag = -np.sin(angle)
    if k.imag:
        phase *= np.exp(k.imag * distance)
    with np.errstate(divide="ignore"):
        inverse = 1 / distance
    inverse[distance == 0] = 0.0
    return phase, inverse


def _to_kernel(phase: np.ndarray, inverse: np.ndarray, k: complex) -> np.ndarray:
    """exp(-jkR)/R in place; where R = 0 what is left of it without 1/R."""
    phase *= inverse
    phase[inverse == 0] = -1j * k
    return phase


def _kernel(dx: np.ndarray, dy: np.ndarray, k: complex) -> np.ndarray:
    return _to_kernel(*_phase(dx, dy, k), k)
