"""The tip-to-tip path through the feed, read back from the stored wire grid of one case.

For results without their study. It knows of ends that meet or lie across the feed gap; strips that
end on the side of another stand apart.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from simkit.response.strip_route import Leg, Route

if TYPE_CHECKING:
    import xarray as xr

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class _Ends:
    """Both ends of one strip, (2, 3) in metres, and its length."""

    places_m: FloatArray
    length_m: float


def routes_from_wires(case: xr.Dataset) -> tuple[Route, ...]:
    """Order the strips of one case from tip to tip through the feed; then those apart.

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
    legs = _lay_out(chain, ends)
    length = legs[-1].begin_m + legs[-1].length_m
    path = Route(tuple(legs), length, feed_m=_feed_place(case, source, feed, legs, ends))
    apart = sorted(set(ends) - {strip for strip, _ in chain})
    lengths = [ends[strip].length_m for strip in apart]
    return (
        path,
        *(
            Route((Leg(strip, length, 0.0, length, 0.0),), length, start="apart")
            for strip, length in zip(apart, lengths, strict=True)
        ),
    )


def _ends_of(case: xr.Dataset, strip: int) -> _Ends:
    """Read a strip's ends and length from the middles of its segments."""
    position = np.asarray(case["strip_position"].values, dtype=float)
    own = np.flatnonzero((case["strip_index"].values == strip) & np.isfinite(position))
    if not own.size:
        return _Ends(np.full((2, 3), np.nan), 0.0)
    # Segments side by side have one place: the middle of all of them lies on the centre line.
    _, number = np.unique(np.round(position[own], 9), return_inverse=True)
    side_by_side = np.bincount(number)
    places = np.bincount(number, position[own]) / side_by_side
    columns = [np.bincount(number, case[axis].values[own]) for axis in ("x", "y", "z")]
    middles = np.stack(columns, axis=1) / side_by_side[:, np.newaxis]
    if places.size == 1:
        along = [float(case[f"direction_{axis}"][own[0]]) for axis in ("x", "y", "z")]
        length = float(case["length"][own[0]])
        half = np.array(along) * length / 2
        return _Ends(np.stack([middles[0] - half, middles[0] + half]), length)
    steps, rises = np.diff(middles, axis=0), np.diff(places)
    tips = np.stack(
        [
            middles[0] - steps[0] * places[0] / rises[0],
            middles[-1] + steps[-1] * (1.0 - places[-1]) / rises[-1],
        ]
    )
    # Straight runs give the length exactly; the median passes over pairs that cut a corner.
    return _Ends(tips, float(np.median(np.linalg.norm(steps, axis=1) / rises)))


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


def _lay_out(chain: list[tuple[int, bool]], ends: dict[int, _Ends]) -> list[Leg]:
    """Strips with their distances along the path, gaps between them included."""
    legs: list[Leg] = []
    place = 0.0
    for number, link in enumerate(chain):
        if number:
            gap = _tip(ends, link, 0) - _tip(ends, chain[number - 1], 1)
            place += float(np.linalg.norm(gap))
        strip, forward = link
        length = ends[strip].length_m
        first, last = (0.0, length) if forward else (length, 0.0)
        legs.append(Leg(strip, length, first, last, place))
        place += length
    return legs


def _feed_place(
    case: xr.Dataset, source: int, feed: FloatArray, legs: list[Leg], ends: dict[int, _Ends]
) -> float:
    """Distance along the path of the gap the source bridges, or of its segment inside a strip."""
    near = 0.6 * float(case["length"][source]) + float(case["study_gap"])
    for before, after in pairwise(legs):
        sides = (
            _tip(ends, (before.strip, before.sign > 0), 1),
            _tip(ends, (after.strip, after.sign > 0), 0),
        )
        if np.linalg.norm((sides[0] + sides[1]) / 2 - feed) <= near:
            return (before.begin_m + before.length_m + after.begin_m) / 2
    position = float(case["strip_position"][source])
    for leg in legs:
        if leg.strip == int(case["strip_index"][source]) and np.isfinite(position):
            return float(leg.distance_m(np.array(position * leg.strip_length_m)))
    return float("nan")
