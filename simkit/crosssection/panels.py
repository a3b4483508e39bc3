"""Straight panels that carry charge: lines of a cross-section cut up, finest where lines end.

A cross-section lies in the complex plane, x + j z, in metres. Charge is singular at metal edges and
at the corners of plastic, so a line is cut by the map u^p / (u^p + (1 - u)^p), which crowds the
cuts at both ends: near an edge the charge of the panels then grows evenly, and the error of
constant charge per panel falls with the square of the number of panels.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaln

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
IntArray = NDArray[np.int64]

INTERFACE = -1
"""Stands for "no conductor": the panel separates two dielectrics."""

GRADING = 3.0
"""Exponent p of the map. 2.5 to 4 give the same error to a factor of two; 2 twice as much."""


@dataclass(frozen=True)
class Panels:
    """N straight panels, each with one constant charge density.

    Attributes
    ----------
    start_m, end_m : (N,) complex
        Ends, x + j z, metres.
    conductor : (N,) int
        Number of the conductor the panel lies on, `INTERFACE` between two dielectrics.
    left, right : (N,) complex
        Relative permittivity to the left and to the right of the way from start to end. Inside a
        solid conductor it may be anything, but one value all around.
    """

    start_m: ComplexArray
    end_m: ComplexArray
    conductor: IntArray
    left: ComplexArray
    right: ComplexArray

    @property
    def length_m(self) -> FloatArray:
        """Lengths, (N,), metres."""
        return np.abs(self.end_m - self.start_m)

    @property
    def conductors(self) -> int:
        """Number of conductors."""
        return int(self.conductor.max(initial=INTERFACE)) + 1

    @property
    def extent_m(self) -> float:
        """Diagonal of the smallest upright rectangle around all panels, metres."""
        ends = np.concatenate([self.start_m, self.end_m])
        return float(np.hypot(np.ptp(ends.real), np.ptp(ends.imag)))

    def only(self, chosen: NDArray[np.bool_]) -> Panels:
        """Return the chosen panels."""
        return Panels(
            self.start_m[chosen],
            self.end_m[chosen],
            self.conductor[chosen],
            self.left[chosen],
            self.right[chosen],
        )

    def in_air(self) -> Panels:
        """Return the conductors alone, cut in the same way, without any dielectric."""
        metal = self.only(self.conductor != INTERFACE)
        air = np.ones(len(metal.start_m), dtype=np.complex128)
        return Panels(metal.start_m, metal.end_m, metal.conductor, air, air)


def join(parts: Sequence[Panels]) -> Panels:
    """Return all panels of `parts` in one set."""
    return Panels(
        np.concatenate([part.start_m for part in parts]),
        np.concatenate([part.end_m for part in parts]),
        np.concatenate([part.conductor for part in parts]),
        np.concatenate([part.left for part in parts]),
        np.concatenate([part.right for part in parts]),
    )


def chain(
    nodes_m: ComplexArray,
    conductor: int = INTERFACE,
    left: complex = 1.0,
    right: complex = 1.0,
) -> Panels:
    """Return the panels from node to node.

    Parameters
    ----------
    nodes_m : (N + 1,) complex
        x + j z, metres; equal first and last nodes close the chain.
    conductor : int
    left, right : complex
        Relative permittivity on either side of the way along the nodes.
    """
    count = len(nodes_m) - 1
    nodes = np.asarray(nodes_m, dtype=np.complex128)
    return Panels(
        nodes[:-1],
        nodes[1:],
        np.full(count, conductor, dtype=np.int64),
        np.full(count, left, dtype=np.complex128),
        np.full(count, right, dtype=np.complex128),
    )


def graded(start_m: complex, end_m: complex, count: int) -> ComplexArray:
    """Return `count` + 1 nodes on a straight line, crowded at both ends.

    Computed from the nearer end, so that the small panels there keep their digits.
    """
    u = np.linspace(0.0, 1.0, count + 1)
    part = u**GRADING / (u**GRADING + (1 - u) ** GRADING)
    length = end_m - start_m
    return np.where(u <= 0.5, start_m + part * length, end_m - part[::-1] * length)


def circle(centre_m: complex, radius_m: float, count: int) -> ComplexArray:
    """Return `count` + 1 nodes, counter-clockwise, of a regular polygon that stands for a circle.

    The polygon is as large as has the same logarithmic capacity as the circle, so that an isolated
    wire has its exact potential.

    References
    ----------
    G. Polya, G. Szego, Isoperimetric Inequalities in Mathematical Physics, 1951: outer radius of
    the regular polygon (from memory; tested against the boundary elements themselves).
    """
    n = count
    log_outer = gammaln(1 / n) - gammaln(0.5 + 1 / n) - (1 + 2 / n) * np.log(2) - np.log(np.pi) / 2
    side_m = radius_m / np.exp(log_outer)
    turn = np.exp(2j * np.pi * np.arange(n + 1) / n)
    turn[-1] = turn[0]
    return np.asarray(centre_m + side_m / (2 * np.sin(np.pi / n)) * turn, dtype=np.complex128)
