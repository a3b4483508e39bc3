"""The wire grid: what the field engine is asked to solve."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]


@dataclass(frozen=True)
class Wire:
    """A straight run of equal segments from `start_m` to `end_m` (x, y, z in metres)."""

    start_m: tuple[float, float, float]
    end_m: tuple[float, float, float]
    segments: int

    @property
    def length_m(self) -> float:
        """Distance between the two ends, metres."""
        return float(np.linalg.norm(np.subtract(self.end_m, self.start_m)))

    @property
    def segment_m(self) -> float:
        """Length of one segment, metres."""
        return self.length_m / self.segments


@dataclass(frozen=True)
class WireGrid:
    """Wires of one radius with the places of the two sources and the way back to the strips.

    Attributes
    ----------
    wires : tuple of Wire
        In engine order; segments are numbered through all wires from 0.
    radius_m : float
    strip_index : (S,) int array
        Strip of each segment, -1 for the wire that bridges the feed.
    strip_position : (S,) float array
        Middle of each segment along the centre line of its strip, 0..1; NaN for corner figures'
        outward pieces.
    strip_sign : (S,) int array
        +1 where the segment runs along its strip's path, -1 against it, 0 where `strip_index` < 0.
    chain : (C,) int array
        Segments of the tip-to-tip path through the feed, in order.
    chain_sign : (C,) int array
        +1 where the segment runs along that path.
    chain_closed : bool
        The path returns to its beginning.
    source, probe : int
        Segments of the feed and of the second, off-centre source.
    model_gap_m, study_gap_m, feed_width_m : float
        Gap the engine's source acts like, gap of the study, strip width there.
    error : float
        Relative standard error of mode frequencies expected of the rules used.
    doubts : tuple of str
        Limits of the rules that this grid exceeds, one sentence each.
    """

    wires: tuple[Wire, ...]
    radius_m: float
    strip_index: IntArray
    strip_position: FloatArray
    strip_sign: IntArray
    chain: IntArray
    chain_sign: IntArray
    chain_closed: bool
    source: int
    probe: int
    model_gap_m: float
    study_gap_m: float
    feed_width_m: float
    error: float
    doubts: tuple[str, ...] = ()

    @property
    def segments(self) -> int:
        """Number of segments, the unknowns of the engine."""
        return sum(wire.segments for wire in self.wires)

    def ends_m(self) -> tuple[FloatArray, FloatArray]:
        """Starts and ends of all segments, two (S, 3) arrays in metres."""
        starts, ends = [], []
        for wire in self.wires:
            nodes = np.linspace(wire.start_m, wire.end_m, wire.segments + 1)
            starts.append(nodes[:-1])
            ends.append(nodes[1:])
        return np.concatenate(starts), np.concatenate(ends)
