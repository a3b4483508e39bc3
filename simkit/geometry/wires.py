"""The wire grid: what the field engine is asked to solve."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

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
        return math.dist(self.start_m, self.end_m)

    @property
    def segment_m(self) -> float:
        """Length of one segment, metres."""
        return self.length_m / self.segments


def segment_lengths_m(wires: Sequence[Wire]) -> FloatArray:
    """Lengths of the segments of all wires in order, (S,) metres."""
    return np.repeat([wire.segment_m for wire in wires], [wire.segments for wire in wires])


@dataclass(frozen=True)
class StripSpan:
    """Where one strip lies on a chain: `start_m` and `end_m` are the arc lengths of the strip's
    own start and end along the chain, so `start_m` > `end_m` for a strip run backwards."""

    strip: int
    start_m: float
    end_m: float


@dataclass(frozen=True)
class Chain:
    """Segments along one run of metal, from end to end (or once round a loop).

    Attributes
    ----------
    segments : (C,) int array
    signs : (C,) int array
        +1 where the segment's positive current flows along the chain.
    arc_m : (C,) float array
        Segment middles as arc length along the centre line, ascending, metres. Segments of equal
        arc length run side by side; the strip's current there is their sum.
    length_m : float
        Arc length from end to end, feed gap included.
    closed : bool
    spans : tuple of StripSpan
    open_start, open_end : bool
        The metal, and so the current, ends there; otherwise it goes on into another chain.
    """

    segments: IntArray
    signs: IntArray
    arc_m: FloatArray
    length_m: float
    closed: bool
    spans: tuple[StripSpan, ...]
    open_start: bool = True
    open_end: bool = True

    def places(self) -> tuple[FloatArray, IntArray]:
        """Distinct arc lengths, and for each segment the number of its own."""
        return self._places

    @cached_property
    def _places(self) -> tuple[FloatArray, IntArray]:
        arcs, number = np.unique(np.round(self.arc_m, 9), return_inverse=True)
        return arcs, number


@dataclass(frozen=True)
class PathPiece:
    """Part of the tip-to-tip path: a chain from one arc length to another, either way."""

    chain: int
    start_m: float
    end_m: float


@dataclass(frozen=True)
class WireGrid:
    """Wires of one radius, with the sources and the way back to the strips.

    Attributes
    ----------
    wires : tuple of Wire
        In engine order; segments are numbered through all wires from 0.
    radius_m : float
        One radius for all wires: where wires of different radius meet the engine errs by per cents.
    conductor_factor_per_m : (W,) float array
        Resistance per metre of each wire over the metal's surface resistance of one face.
    series_inductance_h_per_m, loss_inductance_h_per_m : (W,) float arrays
        The carrier's series inductance of each wire, and its imaginary part times -1.
    chains : tuple of Chain
        The first one carries the feed.
    path : tuple of PathPiece
        The longest way from tip to tip through the feed (once round, if the fed chain is a loop),
        along which half waves are counted.
    strip_index : (S,) int array
        Strip of each segment, -1 for a segment in the feed gap, -2 for one of the feed cable.
    strip_position : (S,) float array
        Middle of each segment along the centre line of its strip, 0..1; NaN for the outward pieces
        of corner figures and for the feed gap.
    source, probe : tuple of (int, float)
        Segments and volts of the feed and of the second, off-centre source. The volts add up to 1
        on every rail, so the terminal current is the sum of volts times segment currents.
    model_gap_m, study_gap_m, feed_width_m : float
        Gap the engine's source acts like, gap of the study, strip width there. A feed between a
        strip's foot and a ground plane counts twice the width: that gap has the charge of two, of
        the strip to its image and back.
    relative_error : float
        Standard error of mode frequencies expected of the rules used.
    doubts : tuple of str
        Limits of the rules that this grid exceeds, one sentence each.
    path_on_plane : (bool, bool)
        The path's start and end stand on a ground plane, where it goes on into its image.
    cable : int
        Number of the feed cable's chain, -1 without one. It runs away from the feed.
    cable_level_error : float
        Relative error of the cable's characteristic impedance by the radius of its wires.
    """

    wires: tuple[Wire, ...]
    radius_m: float
    conductor_factor_per_m: FloatArray
    series_inductance_h_per_m: FloatArray
    loss_inductance_h_per_m: FloatArray
    chains: tuple[Chain, ...]
    path: tuple[PathPiece, ...]
    strip_index: IntArray
    strip_position: FloatArray
    source: tuple[tuple[int, float], ...]
    probe: tuple[tuple[int, float], ...]
    model_gap_m: float
    study_gap_m: float
    feed_width_m: float
    relative_error: float
    doubts: tuple[str, ...] = ()
    path_on_plane: tuple[bool, bool] = (False, False)
    cable: int = -1
    cable_level_error: float = 0.0

    @property
    def segments(self) -> int:
        """Number of segments, the unknowns of the engine."""
        return sum(wire.segments for wire in self.wires)

    @property
    def path_closed(self) -> bool:
        """The path is a loop."""
        return self.chains[0].closed

    def per_segment(self, per_wire: FloatArray) -> FloatArray:
        """Values of wires repeated for their segments, (S,)."""
        return np.repeat(per_wire, [wire.segments for wire in self.wires])

    def ends_m(self) -> tuple[FloatArray, FloatArray]:
        """Starts and ends of all segments, two (S, 3) arrays in metres."""
        starts, ends = [], []
        for wire in self.wires:
            nodes = np.linspace(wire.start_m, wire.end_m, wire.segments + 1)
            starts.append(nodes[:-1])
            ends.append(nodes[1:])
        return np.concatenate(starts), np.concatenate(ends)
