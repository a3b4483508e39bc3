"""Integrals over flat triangles: closed forms for 1/R and R, quadrature rules.

Everything lies in the plane z = 0, so the closed forms need no solid-angle terms.

References
----------
Wilton, Rao, Glisson, Schaubert, Al-Bundak, Butler, "Potential integrals for uniform and linear
source distributions on polygonal and polyhedral domains", IEEE T-AP 32(3), 1984,
doi:10.1109/TAP.1984.1143304. The integrals of R follow in the same way from the divergence theorem.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

THREE = np.array([[4, 1, 1], [1, 4, 1], [1, 1, 4]]) / 6
"""Barycentric points of the rule of degree 2 with equal weights 1/3."""


def collapsed_rule(order: int) -> tuple[np.ndarray, np.ndarray]:
    """Barycentric points (order^2, 3) and weights of sum 1 of Gauss products on a triangle."""
    node, weight = np.polynomial.legendre.leggauss(order)
    node, weight = (node + 1) / 2, weight / 2
    u, v = np.meshgrid(node, node, indexing="ij")
    points = np.stack([1 - u, u * (1 - v), u * v], axis=-1).reshape(-1, 3)
    return points, (2 * u * weight[:, None] * weight[None]).ravel()


@dataclass(frozen=True)
class Potentials:
    """Integrals over a source triangle seen from (P,) points; vectors are (r' - r) weighted.

    Attributes
    ----------
    one_inverse, one_linear : (P,) float array
        Of 1/R and of R.
    arm_inverse, arm_linear : (P, 2) float array
        Of (r' - r)/R and of (r' - r) R.
    """

    one_inverse: np.ndarray
    arm_inverse: np.ndarray
    one_linear: np.ndarray
    arm_linear: np.ndarray


def potentials(points: np.ndarray, corners: np.ndarray) -> Potentials:
    """Closed forms at points (P, 2) in the plane of triangles (P, 3, 2) of positive turn."""
    total = Potentials(*(np.zeros(s) for s in _shapes(len(points))))
    for k in range(3):
        start, stop = corners[:, k] - points, corners[:, (k + 1) % 3] - points
        edge = stop - start
        edge = edge / np.linalg.norm(edge, axis=1, keepdims=True)
        outward = np.stack([edge[:, 1], -edge[:, 0]], axis=1)
        height = np.sum(start * outward, axis=1)
        l0, l1 = np.sum(start * edge, axis=1), np.sum(stop * edge, axis=1)
        r0, r1 = np.linalg.norm(start, axis=1), np.linalg.norm(stop, axis=1)
        log = _log(height, l0, l1, r0, r1)
        length_r = (l1 * r1 - l0 * r0 + height**2 * log) / 2  # integral of R along the edge
        length_r3 = (l1 * r1**3 - l0 * r0**3 + 3 * height**2 * length_r) / 4
        total.one_inverse[:] += height * log
        total.arm_inverse[:] += outward * length_r[:, None]
        total.one_linear[:] += height * length_r / 3
        total.arm_linear[:] += outward * length_r3[:, None] / 3
    return total


def _shapes(count: int) -> tuple[tuple[int, ...], ...]:
    return (count,), (count, 2), (count,), (count, 2)


def _log(
    height: np.ndarray, l0: np.ndarray, l1: np.ndarray, r0: np.ndarray, r1: np.ndarray
) -> np.ndarray:
    """Integral of 1/R along an edge, asinh(l1/|h|) - asinh(l0/|h|); 0 on its line (weight h)."""
    size = np.abs(height)
    floor = 1e-13 * (r0 + r1)
    safe = np.maximum(size, floor)
    log = np.arcsinh(l1 / safe) - np.arcsinh(l0 / safe)
    return np.where(size > floor, log, 0.0)
