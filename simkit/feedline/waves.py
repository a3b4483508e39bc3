"""Algebra of two-ports in reflections against one real resistance, finite in every limit."""

from __future__ import annotations

import numpy as np

from simkit.feedline.checks import ComplexArray


def two_port(s11: ComplexArray, s21: ComplexArray, s22: ComplexArray | None = None) -> ComplexArray:
    """Reciprocal two-port; symmetric if `s22` is left out."""
    last = s11 if s22 is None else s22
    return np.stack([np.stack([s11, s21], -1), np.stack([s21, last], -1)], -2)


def shunt(reflection: ComplexArray, part: float = 1.0) -> ComplexArray:
    """Two-port of a one-port across the line; `part` of its admittance."""
    through, across = 1 + reflection, part * (1 - reflection)
    total = 2 * through + across
    # An open one-port has total 4, a short one 2 part: 0 only for no part of a short circuit.
    gone = total == 0
    total = np.where(gone, 1, total)
    return two_port(np.where(gone, 0, -across / total), np.where(gone, 1, 2 * through / total))


def series(reflection: ComplexArray, part: float = 1.0) -> ComplexArray:
    """Two-port of a one-port in the line; `part` of its impedance."""
    dual = shunt(-reflection, part)
    return two_port(-dual[:, 0, 0], dual[:, 1, 0])


def terminated(matrix: ComplexArray, reflection: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    """Return the reflection at port 1, and the wave that goes to the load for 1 into port 1.

    Parameters
    ----------
    matrix : (F, 2, 2) complex
    reflection : (F,) complex
        At port 2.

    Notes
    -----
    1 - S22 reflection is 0 only where a passive port 2 reflects everything, that is, where nothing
    passes: the load is then out of sight.
    """
    below = 1 - matrix[:, 1, 1] * reflection
    blind = below == 0
    inward = matrix[:, 1, 0] / np.where(blind, 1, below)
    inward = np.where(blind, 0, inward)
    return matrix[:, 0, 0] + matrix[:, 0, 1] * reflection * inward, inward


def cascade(first: ComplexArray, second: ComplexArray) -> ComplexArray:
    """Return two reciprocal two-ports in a row, port 2 of the first on port 1 of the second."""
    s11, onward = terminated(first, second[:, 0, 0])
    turned = second[:, ::-1, ::-1]
    s22, _ = terminated(turned, first[:, 1, 1])
    return two_port(s11, onward * second[:, 1, 0], s22)
