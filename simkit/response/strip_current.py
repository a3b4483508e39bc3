"""Currents of strips from currents of segments."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.interpolate import PchipInterpolator

from simkit.geometry.wires import Chain, FloatArray, IntArray, PathPiece, WireGrid
from simkit.response.rational import ComplexArray


def chain_current(current: ComplexArray, chain: Chain) -> tuple[FloatArray, ComplexArray]:
    """Total current of a chain at its distinct places, positive along the chain.

    Parameters
    ----------
    current : (..., S) complex array
        Segment currents.
    chain : Chain

    Returns
    -------
    arc_m : (P,) float array
    total : (..., P) complex array
        Sum over the segments that run side by side.
    """
    arcs, number = chain.places()
    total = np.zeros((len(arcs), *current.shape[:-1]), dtype=np.complex128)
    np.add.at(total, number, (current[..., chain.segments] * chain.signs).T)
    return arcs, total.T


def totals_matrix(grid: WireGrid) -> FloatArray:
    """(P, S) matrix from segment currents to the total currents of all chains in a row.

    Metal across the strips (corner figures, ties) has no part in it.
    """
    rows: list[FloatArray] = []
    for chain in grid.chains:
        arcs, number = chain.places()
        block = np.zeros((len(arcs), grid.segments))
        block[number, chain.segments] = chain.signs
        rows.append(block)
    return np.vstack(rows)


class ChainCurve:
    """Total current along one chain as a smooth curve, for (..., S) currents of segments."""

    def __init__(self, current: ComplexArray, chain: Chain) -> None:
        arc, value = chain_current(current, chain)
        length = chain.length_m
        if chain.closed:
            arc = np.concatenate([arc[-2:] - length, arc, arc[:2] + length])
            value = np.concatenate([value[..., -2:], value, value[..., :2]], axis=-1)
        else:
            first, last = value[..., :1].copy(), value[..., -1:].copy()
            first[...] *= not chain.open_start
            last[...] *= not chain.open_end
            arc = np.concatenate([[min(0.0, arc[0] - 1e-9)], arc, [max(length, arc[-1] + 1e-9)]])
            value = np.concatenate([first, value, last], axis=-1)
        # Shape-preserving cubics: no overshoot at the steps that junctions make.
        self._parts = PchipInterpolator(arc, np.stack([value.real, value.imag]), axis=-1)
        self._chain = chain

    def __call__(self, arc_m: FloatArray) -> ComplexArray:
        """(..., P) current at (P,) arc lengths, ampere, positive along the chain."""
        at = arc_m % self._chain.length_m if self._chain.closed else arc_m
        real, imag = self._parts(at)
        return np.asarray(real + 1j * imag, dtype=np.complex128)


def current_along_strips(
    current: ComplexArray, chains: Sequence[Chain], strips: int, positions: FloatArray
) -> ComplexArray:
    """Currents at places along each strip, positive from its start to its end.

    Parameters
    ----------
    current : (..., S) complex array
    chains : sequence of Chain
    strips : int
    positions : (P,) float array
        0..1 along each strip.

    Returns
    -------
    (..., strips, P) complex array
        NaN for a strip on no chain. Zero at open ends.
    """
    shape = (*current.shape[:-1], strips, len(positions))
    result = np.full(shape, complex(np.nan, np.nan))
    for chain in chains:
        curve = ChainCurve(current, chain)
        for span in chain.spans:
            at = span.start_m + positions * (span.end_m - span.start_m)
            forward = 1 if span.end_m > span.start_m else -1
            result[..., span.strip, :] = forward * curve(at)
    return result


def current_along_path(
    current: ComplexArray, grid: WireGrid, points: int = 301
) -> tuple[FloatArray, ComplexArray]:
    """Current along the tip-to-tip path through the feed, positive in one direction throughout.

    Parameters
    ----------
    current : (..., S) complex array
    grid : WireGrid
    points : int

    Returns
    -------
    distance_m : (points,) float array
        From the first tip.
    current : (..., points) complex array
    """
    lengths = [abs(piece.end_m - piece.start_m) for piece in grid.path]
    starts = np.concatenate([[0.0], np.cumsum(lengths)])
    distance = np.linspace(0.0, starts[-1], points)
    value = np.zeros((*current.shape[:-1], points), dtype=np.complex128)
    for number, piece in enumerate(grid.path):
        last = number == len(grid.path) - 1
        inside = (distance >= starts[number]) & (last | (distance < starts[number + 1]))
        value[..., inside] = _along(current, grid, piece, distance[inside] - starts[number])
    return distance, value


def path_turns_m(grid: WireGrid) -> FloatArray:
    """Distances along the path at which it turns from one chain into another."""
    lengths = [abs(piece.end_m - piece.start_m) for piece in grid.path]
    return np.cumsum(lengths)[:-1]


def _along(
    current: ComplexArray, grid: WireGrid, piece: PathPiece, distance_m: FloatArray
) -> ComplexArray:
    way = 1 if piece.end_m >= piece.start_m else -1
    curve = ChainCurve(current, grid.chains[piece.chain])
    return np.asarray(way * curve(piece.start_m + way * distance_m), dtype=np.complex128)


def coherence(current: ComplexArray, grid: WireGrid) -> float:
    """How far parallel rails carry current in one direction, 0 (against each other) to 1 (alike).

    The ratio of the strips' total current to the sum of magnitudes over their rails, weighted as
    powers.
    """
    total, apart = 0.0, 0.0
    for chain in grid.chains:
        arcs, number = chain.places()
        _, along = chain_current(current, chain)
        size: FloatArray = np.zeros(len(arcs))
        np.add.at(size, number, abs(current[chain.segments]))
        total += float(np.sum(abs(along) ** 2))
        apart += float(np.sum(size**2))
    return float(np.sqrt(total / apart)) if apart > 0 else 0.0


def segment_rows(grid: WireGrid) -> IntArray:
    """Wire of each segment."""
    return np.repeat(np.arange(len(grid.wires)), [wire.segments for wire in grid.wires])
