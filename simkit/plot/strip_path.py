"""The tip-to-tip path through the feed, read back from the stored wire grid of one case."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    import xarray as xr

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

BLANK = 0.06
"""Blank between the path and strips that are not on it, over the length of the path."""


@dataclass(frozen=True)
class Piece:
    """One strip on the path.

    Attributes
    ----------
    strip : int
    length_m : float
    forward : bool
        The path runs from the strip's start to its end.
    begin_m : float
        Distance along the path at which the strip begins.
    on_path : bool
        False for a strip apart from the path, which is drawn after it with a blank between.
    """

    strip: int
    length_m: float
    forward: bool
    begin_m: float
    on_path: bool = True

    def place_m(self, position: FloatArray | float) -> FloatArray:
        """Return the distance along the path of places 0..1 along the strip."""
        along = np.asarray(position, dtype=np.float64)
        return self.begin_m + self.length_m * (along if self.forward else 1.0 - along)


@dataclass(frozen=True)
class StripPath:
    """Strips in the order of the path, those apart last; `feed_m` is NaN if the feed is unknown."""

    pieces: tuple[Piece, ...]
    feed_m: float

    @property
    def length_m(self) -> float:
        """Length of the path from tip to tip, without strips apart."""
        return max(p.begin_m + p.length_m for p in self.pieces if p.on_path)

    def join(self, current: ComplexArray, position: FloatArray) -> tuple[FloatArray, ComplexArray]:
        """Return distances in metres and currents along the path, positive along the path.

        Parameters
        ----------
        current : (strip, position) array of complex
            Positive from the start to the end of each strip.
        position : (position,) array of float

        Returns
        -------
        distance_m : (K,) array of float
        current : (K,) array of complex
            NaN stands between the path and each strip apart. The sign is chosen so that the first
            half wave is positive, which holds still from case to case.
        """
        distances, currents = [], []
        for piece in self.pieces:
            order = slice(None) if piece.forward else slice(None, None, -1)
            if not piece.on_path:
                distances.append(np.array([piece.begin_m]))
                currents.append(np.array([complex(np.nan, np.nan)]))
            distances.append(piece.place_m(position)[order])
            currents.append(current[piece.strip][order] * (1.0 if piece.forward else -1.0))
        joined = np.concatenate(currents)
        size = np.abs(joined)
        known = np.isfinite(size)
        clear = np.flatnonzero(known & (size >= 0.5 * np.max(size, where=known, initial=0.0)))
        if clear.size and joined[clear[0]].real < 0:
            joined = -joined
        return np.concatenate(distances), joined


@dataclass(frozen=True)
class _Ends:
    """Both ends of one strip, (2, 3) in metres, and its length."""

    places_m: FloatArray
    length_m: float


def strip_path(case: xr.Dataset) -> StripPath:
    """Order the strips of one case from tip to tip through the feed.

    Strips follow each other where their ends meet or lie across the feed gap; where several meet,
    the path follows the longest. The path begins at its tip with the smaller x.
    """
    ends = {strip: _ends_of(case, strip) for strip in range(case.sizes["strip"])}
    ends = {strip: found for strip, found in ends.items() if found.length_m > 0.0}
    source = int(case["source_segment"])
    feed = np.array([float(case[axis][source]) for axis in ("x", "y", "z")])
    reach = 1.5 * float(case["study_gap"]) + 0.5 * float(case["feed_width"])
    first = _first_strip(case, ends, feed, source)
    chain = _extend([(first, True)], ends, reach)
    chain = [(s, not forward) for s, forward in reversed(chain)]
    chain = _extend(chain, ends, reach)
    if _tip(ends, chain[0], 0)[0] > _tip(ends, chain[-1], 1)[0]:
        chain = [(s, not forward) for s, forward in reversed(chain)]
    pieces = _lay_out(chain, ends)
    return StripPath(tuple(pieces), _feed_place(case, source, feed, pieces, ends))


def _ends_of(case: xr.Dataset, strip: int) -> _Ends:
    """Read a strip's ends and length from the middles of its segments."""
    position = np.asarray(case["strip_position"].values, dtype=float)
    own = np.flatnonzero((case["strip_index"].values == strip) & np.isfinite(position))
    own = own[np.argsort(position[own])]
    if not own.size:
        return _Ends(np.full((2, 3), np.nan), 0.0)
    middles = np.stack([case[axis].values[own] for axis in ("x", "y", "z")], axis=1)
    if own.size == 1:
        along = [float(case[f"direction_{axis}"][own[0]]) for axis in ("x", "y", "z")]
        length = float(case["length"][own[0]])
        half = np.array(along) * length / 2
        return _Ends(np.stack([middles[0] - half, middles[0] + half]), length)
    steps, rises = np.diff(middles, axis=0), np.diff(position[own])
    places = np.stack(
        [
            middles[0] - steps[0] * position[own[0]] / rises[0],
            middles[-1] + steps[-1] * (1.0 - position[own[-1]]) / rises[-1],
        ]
    )
    # Straight runs give the length exactly; the median passes over pairs that cut a corner.
    return _Ends(places, float(np.median(np.linalg.norm(steps, axis=1) / rises)))


def _first_strip(case: xr.Dataset, ends: dict[int, _Ends], feed: FloatArray, source: int) -> int:
    """The strip with the feed on it, or the one with an end nearest to the feed."""
    on_strip = int(case["strip_index"][source])
    if on_strip in ends:
        return on_strip
    return min(ends, key=lambda s: float(np.linalg.norm(ends[s].places_m - feed, axis=1).min()))


def _tip(ends: dict[int, _Ends], link: tuple[int, bool], last: int) -> FloatArray:
    """First (0) or last (1) point of a strip in the direction in which the path takes it."""
    strip, forward = link
    place: FloatArray = ends[strip].places_m[last if forward else 1 - last]
    return place


def _extend(
    chain: list[tuple[int, bool]], ends: dict[int, _Ends], reach: float
) -> list[tuple[int, bool]]:
    """Append strips to the path's end as long as one begins within `reach` of it."""
    chain = list(chain)
    while True:
        used = {strip for strip, _ in chain}
        last = _tip(ends, chain[-1], 1)
        candidates = [
            (ends[strip].length_m, strip, forward)
            for strip in ends
            if strip not in used
            for forward in (True, False)
            if np.linalg.norm(_tip(ends, (strip, forward), 0) - last) <= reach
        ]
        if not candidates:
            return chain
        _, strip, forward = max(candidates)
        chain.append((strip, forward))


def _lay_out(chain: list[tuple[int, bool]], ends: dict[int, _Ends]) -> list[Piece]:
    """Distances along the path, gaps between strips included; then the strips apart."""
    pieces: list[Piece] = []
    place = 0.0
    for number, link in enumerate(chain):
        if number:
            gap = _tip(ends, link, 0) - _tip(ends, chain[number - 1], 1)
            place += float(np.linalg.norm(gap))
        pieces.append(Piece(link[0], ends[link[0]].length_m, link[1], place))
        place += ends[link[0]].length_m
    blank = BLANK * place
    for strip in sorted(set(ends) - {strip for strip, _ in chain}):
        place += blank
        pieces.append(Piece(strip, ends[strip].length_m, True, place, on_path=False))
        place += ends[strip].length_m
    return pieces


def _feed_place(
    case: xr.Dataset, source: int, feed: FloatArray, pieces: list[Piece], ends: dict[int, _Ends]
) -> float:
    """Distance along the path of the gap the source bridges, or of its segment inside a strip."""
    near = 0.6 * float(case["length"][source]) + float(case["study_gap"])
    on_path = [piece for piece in pieces if piece.on_path]
    for before, after in pairwise(on_path):
        sides = (
            _tip(ends, (before.strip, before.forward), 1),
            _tip(ends, (after.strip, after.forward), 0),
        )
        if np.linalg.norm((sides[0] + sides[1]) / 2 - feed) <= near:
            return (before.begin_m + before.length_m + after.begin_m) / 2
    position = float(case["strip_position"][source])
    for piece in on_path:
        if piece.strip == int(case["strip_index"][source]) and np.isfinite(position):
            return float(piece.place_m(position))
    return float("nan")
