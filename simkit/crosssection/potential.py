"""Plane electrostatics by boundary elements: potential of conductors among dielectrics.

All charge, free and bound, lies on the panels; between them there is vacuum. Two conditions fix it:
the potential is constant on each conductor, and the normal displacement passes through each
interface unchanged. Both are imposed on the mean over every panel (Galerkin's method with constant
charge), with all integrals over pairs of panels in closed form, so that a thin sheet needs no finer
panels than a thick one. Because the fluxes are exact, the bound charge of every dielectric
body sums to zero without a further condition, whatever the panels; the free charge on the
conductors is then all the charge there is.

The potential of a line charge in the plane has no zero at infinity; -ln(r / r0) needs a distance r0
to refer to. Use differences between arrangements of equal conductors, where that drops out.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.linalg import solve as solve_dense

from simkit.crosssection.panels import INTERFACE, ComplexArray, FloatArray, IntArray, Panels

NEAR = 5.0
"""Pairs nearer than this many lengths of the longer panel are integrated in closed form.

Beyond it a series to the fourth order in length over distance is good to 2e-7; the closed form
would lose digits there, being a difference of large terms.
"""


@dataclass(frozen=True)
class Solution:
    """Charges of a cross-section, one set for each conductor held at potential 1 with others at 0.

    Attributes
    ----------
    panels : Panels
    charge : (K, N) complex
        Total charge per metre of length on every panel, free and bound, over 2 pi eps0, for 1 V
        on one of the K conductors.
    capacitance : (K, K) complex
        Free charge per metre of length on conductor l for 1 V on conductor k, over 2 pi eps0.
    reference_m : float
        Distance at which a line charge has the potential 0 in the two above: twice the extent, so
        that every capacitance is positive.
    """

    panels: Panels
    charge: ComplexArray
    capacitance: ComplexArray
    reference_m: float

    @property
    def coefficients(self) -> ComplexArray:
        """Potential of conductor l per unit line charge on conductor k, times 2 pi eps0, (K, K).

        Refers to a distance of 1 m: an isolated round wire of radius a in air has -ln(a / 1 m).
        """
        return np.asarray(np.linalg.inv(self.capacitance) - np.log(self.reference_m))

    @property
    def common(self) -> complex:
        """Potential per unit line charge, times 2 pi eps0, with all conductors at one potential.

        Refers to a distance of 1 m, as `coefficients`.
        """
        return complex(1 / self.capacitance.sum() - np.log(self.reference_m))

    def potential(self, points_m: ArrayLike, voltages: ArrayLike) -> ComplexArray:
        """Return the potential at `points_m` with the conductors at `voltages`.

        Parameters
        ----------
        points_m : array_like of complex, any shape
            x + j z, metres.
        voltages : array_like of complex, (K,)
            Volt, against the zero of `reference_m`.

        Returns
        -------
        ndarray of complex, shape of `points_m`
            Volt.
        """
        points = np.asarray(points_m, dtype=np.complex128)
        charge = np.asarray(voltages) @ self.charge
        distances = mean_log(points.ravel(), self.panels) - np.log(self.reference_m)
        values = -distances @ charge
        return np.asarray(values.reshape(points.shape), dtype=np.complex128)


def solve(panels: Panels) -> Solution:
    """Return the charges of a cross-section.

    Parameters
    ----------
    panels : Panels
        At least one conductor; permittivities may be complex.

    Raises
    ------
    ValueError
        If there is no conductor.

    Notes
    -----
    Work grows as N^3 beyond some 500 panels, as N^2 below.
    """
    count = panels.conductors
    if count == 0:
        raise ValueError("a cross-section needs a conductor: none of the panels lies on one")
    # With twice the extent as unit, every conductor has a potential of its own charge above 0. With
    # 1 m it would be 0 for a conductor of just that capacity, and the equations singular.
    reference_m = 2 * panels.extent_m
    logs, fluxes = pair_integrals(panels.start_m / reference_m, panels.end_m / reference_m)
    metal = panels.conductor != INTERFACE
    mean = (panels.left + panels.right) / 2
    contrast = (panels.left - panels.right) / mean
    lossless = not np.iscomplex(contrast).any()
    jump = (contrast.real if lossless else contrast)[:, np.newaxis] * fluxes
    np.fill_diagonal(jump, jump.diagonal() + 1)
    held = panels.conductor[:, np.newaxis] == np.arange(count)
    charge = _charges(np.where(metal[:, np.newaxis], -logs, jump), held)
    free = mean * (charge @ jump.T)
    capacitance = np.asarray(free @ held, np.complex128)
    return Solution(panels, charge.astype(np.complex128), capacitance, reference_m)


def _charges(matrix: NDArray[np.inexact], held: NDArray[np.bool_]) -> NDArray[np.inexact]:
    """Charge on every panel, (K, N), for 1 V on one conductor after the other."""
    solved = solve_dense(matrix, held.astype(matrix.dtype), overwrite_a=True, check_finite=False)
    return np.asarray(solved.T)


def pair_integrals(start: ComplexArray, end: ComplexArray) -> tuple[FloatArray, FloatArray]:
    """Mean logarithm and flux between all pairs of N straight panels.

    Parameters
    ----------
    start, end : (N,) complex
        In any unit of length. Panels may touch at their ends and nowhere else.

    Returns
    -------
    logs : (N, N) float
        Mean of ln|z - z'| over both panels.
    fluxes : (N, N) float
        Flux of E to the left through panel i of unit charge (over eps0) spread over panel j; 0 of a
        panel through itself, its two sides apart.

    Notes
    -----
    With u = z - z', both are mixed differences over the ends of the second antiderivatives
    u^2 (2 ln u - 3) / 4 of ln u and u (ln u - 1) of 1/u. The differences u fill a parallelogram
    without zero, so its middle fixes one branch of the logarithm for all of it.
    """
    step = end - start
    length = np.abs(step)
    middle = (start + end) / 2
    apart = middle[:, np.newaxis] - middle
    np.fill_diagonal(apart, 1.0)
    logs, inverses = _far(apart, (step**2)[:, np.newaxis], step**2)
    near = np.abs(apart) < NEAR * np.maximum(length[:, np.newaxis], length)
    np.fill_diagonal(near, val=False)
    i, j = np.nonzero(near)
    logs[i, j], inverses[i, j] = _near(start, end, i, j, apart[i, j])
    np.fill_diagonal(logs, np.log(length) - 1.5)
    fluxes = np.real(1j * step[:, np.newaxis] * inverses) / (2 * np.pi)
    np.fill_diagonal(fluxes, 0.0)
    return logs, fluxes


def _far(
    apart: ComplexArray, first2: ComplexArray, second2: ComplexArray
) -> tuple[FloatArray, ComplexArray]:
    """Means of ln|u| and 1/u over two panels with middles `apart`, by their moments."""
    inverse = 1 / apart
    inverse2 = inverse * inverse
    second = (first2 + second2) / 12 * inverse2
    fourth = ((first2**2 + second2**2) / 80 + first2 * second2 / 24) * inverse2**2
    logs = np.log(np.abs(apart)) - np.real(second / 2 + fourth / 4)
    return logs, np.asarray(inverse * (1 + second + fourth))


def _near(
    start: ComplexArray, end: ComplexArray, i: IntArray, j: IntArray, apart: ComplexArray
) -> tuple[FloatArray, ComplexArray]:
    """Means of ln|u| and 1/u over the pairs (i, j), in closed form."""
    logs = np.zeros(len(i), dtype=np.complex128)
    inverses = np.zeros(len(i), dtype=np.complex128)
    branch = np.log(apart)
    for one, sign_one in ((end, 1), (start, -1)):
        for two, sign_two in ((end, 1), (start, -1)):
            u = one[i] - two[j]
            # Panels that touch: u ln u and u^2 ln u vanish there.
            log_u = np.log(np.where(u == 0, apart, u) / apart) + branch
            logs += sign_one * sign_two * u**2 * (log_u / 2 - 0.75)
            inverses += sign_one * sign_two * u * (log_u - 1)
    area = -(end - start)[i] * (end - start)[j]
    return np.real(logs / area), inverses / area


def mean_log(points: ComplexArray, panels: Panels) -> FloatArray:
    """Return the mean over each panel of ln(distance / 1 m) from each point, (points, N)."""
    step = panels.end_m - panels.start_m
    total: FloatArray = np.zeros((len(points), len(step)))
    for ends, sign in ((panels.end_m, 1), (panels.start_m, -1)):
        along = (ends - points[:, np.newaxis]) * np.conj(step) / np.abs(step)
        x, y = along.real, along.imag
        distance = np.maximum(np.abs(along), np.finfo(float).tiny)
        total += sign * (x * np.log(distance) - x + np.abs(y) * np.arctan2(x, np.abs(y)))
    return total / np.abs(step)
