"""What wires must satisfy before the engine sees them.

The engine answers bad wires with an unspecific exception, with nonsense, or not at all; every known
case is caught here and named.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.constants import c as light_speed

from simkit.errors import GeometryError
from simkit.geometry.wires import FloatArray, Wire

SAME_PLACE_M = 1e-9


def check_wires(wires: Sequence[Wire], radius_m: float, top_frequency_hz: float) -> None:
    """Refuse wires the engine cannot solve.

    Raises
    ------
    GeometryError
        Naming the wire by its place in millimetres, with the limit and the remedy.
    """
    if not (np.isfinite(radius_m) and radius_m > 0):
        raise GeometryError(f"wire radius {radius_m} m must be positive and finite")
    if not (np.isfinite(top_frequency_hz) and top_frequency_hz > 0):
        raise GeometryError(f"frequency {top_frequency_hz} Hz must be positive and finite")
    for wire in wires:
        _check_wire(wire, radius_m, light_speed / top_frequency_hz)
    starts = np.array([wire.start_m for wire in wires])
    ends = np.array([wire.end_m for wire in wires])
    joined = _joined(starts, ends)
    _check_meeting(wires, joined, radius_m)
    _check_distances(wires, starts, ends, joined, radius_m)


def _place(point: Sequence[float] | FloatArray) -> str:
    # To a nanometre, so that rounding does not show as 3.5e-15.
    return "(" + ", ".join(f"{round(value * 1e3, 6) + 0.0:.4g}" for value in point) + ") mm"


def _check_wire(wire: Wire, radius_m: float, wavelength_m: float) -> None:
    where = f"the wire from {_place(wire.start_m)} to {_place(wire.end_m)}"
    if not np.all(np.isfinite([*wire.start_m, *wire.end_m])):
        raise GeometryError(f"{where} has a coordinate that is not finite")
    if wire.segments < 1:
        raise GeometryError(f"{where} has {wire.segments} segments; one is the least")
    if wire.length_m < SAME_PLACE_M:
        raise GeometryError(f"{where} has no length")
    least = 2.0 if wire.segments == 1 else 1.3
    if wire.segment_m <= least * radius_m:
        raise GeometryError(
            f"{where} has segments of {wire.segment_m * 1e3:.4g} mm, under {least} radii of "
            f"{radius_m * 1e3:.4g} mm: the strip is too wide for its length; narrow it or lengthen "
            "the leg"
        )
    # Pieces of corner and junction figures may be longer: their rules were found with them.
    part = 10 if wire.segments > 1 else 6
    if wire.segment_m > wavelength_m / part:
        raise GeometryError(
            f"{where} has segments of {wire.segment_m * 1e3:.4g} mm, over 1/{part} of the "
            f"wavelength ({wavelength_m * 1e2:.4g} mm) at the band's top: lower frequency.stop, "
            "or narrow the strip so that segments can be shorter"
        )


def _joined(starts: FloatArray, ends: FloatArray) -> np.ndarray:
    """(W, W) bool: wires that share an end point."""
    both = np.stack([starts, ends], axis=1)
    apart = np.linalg.norm(both[:, None, :, None] - both[None, :, None, :], axis=-1)
    touching: np.ndarray = (apart <= SAME_PLACE_M).any(axis=(2, 3))
    twice = (apart <= SAME_PLACE_M).sum(axis=(2, 3)) >= 2
    np.fill_diagonal(twice, False)
    if twice.any():
        first = int(np.argwhere(twice)[0][0])
        raise GeometryError(
            f"two wires join the same two points {_place(starts[first])} and {_place(ends[first])}"
        )
    return touching


def _check_meeting(wires: Sequence[Wire], joined: np.ndarray, radius_m: float) -> None:
    """Wires that meet need segments over two radii each."""
    for index, wire in enumerate(wires):
        meets = joined[index].sum() > 1
        if meets and wire.segment_m <= 2.0 * radius_m:
            raise GeometryError(
                f"wires meet at {_place(wire.start_m)} or {_place(wire.end_m)} with segments of "
                f"{wire.segment_m * 1e3:.4g} mm, under two radii of {radius_m * 1e3:.4g} mm: the "
                "strip is too wide for this corner; lengthen the legs or narrow it"
            )


def _check_distances(
    wires: Sequence[Wire],
    starts: FloatArray,
    ends: FloatArray,
    joined: np.ndarray,
    radius_m: float,
) -> None:
    """No wire may come within two radii of one it does not join, nor a segment's middle within one.

    Distances are taken from many points along each wire, spaced closer than a radius, so a crossing
    cannot slip between them.
    """
    points, owner, middle = _sample_points(wires, radius_m)
    along = ends - starts
    squared = np.sum(along**2, axis=1)
    offset = points[:, None] - starts[None]
    t = np.clip(np.sum(offset * along[None], axis=2) / squared[None], 0.0, 1.0)
    distance = np.linalg.norm(offset - t[..., None] * along[None], axis=2)
    apart = ~joined[owner]
    near = np.where(apart, distance, np.inf)
    _raise_near(near, 2 * radius_m, points, "come within", radius_m)
    others = joined[owner] & (owner[:, None] != np.arange(len(wires))[None])
    near = np.where(others & middle[:, None], distance, np.inf)
    _raise_near(near, radius_m, points, "fold back to within", radius_m)


def _sample_points(wires: Sequence[Wire], radius_m: float) -> tuple[FloatArray, ...]:
    points, owner, middle = [], [], []
    for index, wire in enumerate(wires):
        per_segment = 2 * max(1, int(np.ceil(wire.segment_m / (1.5 * radius_m)) // 2 + 1))
        t = np.arange(per_segment * wire.segments + 1) / (per_segment * wire.segments)
        points.append(np.array(wire.start_m) + t[:, None] * np.subtract(wire.end_m, wire.start_m))
        owner.append(np.full(len(t), index))
        middle.append(np.arange(len(t)) % per_segment == per_segment // 2)
    return np.concatenate(points), np.concatenate(owner), np.concatenate(middle)


def _raise_near(
    distance: FloatArray, limit_m: float, points: FloatArray, verb: str, radius_m: float
) -> None:
    if not distance.size or distance.min() > limit_m:
        return
    at = points[np.unravel_index(int(np.argmin(distance)), distance.shape)[0]]
    nearest_mm = round(float(distance.min()) * 1e3, 6)
    raise GeometryError(
        f"wires {verb} {nearest_mm:.3g} mm of each other at {_place(at)}; with a radius "
        f"of {radius_m * 1e3:.4g} mm at least {limit_m * 1e3:.4g} mm is needed: move the strips "
        "apart or open the bend"
    )
