"""Outlines of strips as polygons, for drawing, checks and cutting."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import shapely
from shapely.geometry import MultiPoint, Polygon
from shapely.ops import nearest_points, unary_union

from simkit.errors import GeometryError
from simkit.geometry.paths import leg_lengths, same_point, unit
from simkit.geometry.wires import FloatArray
from simkit.study.model import Strip

BRIDGE_M = 1e-9


def mitre_rows(points: FloatArray) -> FloatArray:
    """Direction of the cross-section at each vertex, (V, 2).

    At an inner vertex along the mitre line and longer than 1, so that an offset w/2 times the row
    lies w/2 from both legs; square to the leg at an open end.
    """
    steps = np.diff(points, axis=0)
    along = steps / np.linalg.norm(steps, axis=1)[:, None]
    normals = np.stack([-along[:, 1], along[:, 0]], axis=1)
    closed = same_point(points[0], points[-1])
    before = np.vstack([normals[-1:] if closed else normals[:1], normals])
    after = np.vstack([normals, normals[:1] if closed else normals[-1:]])
    stretch = 1 + np.sum(before * after, axis=1)
    # A path that turns right back has no mitre; such a strip is refused as overlapping itself.
    return np.asarray((before + after) / np.maximum(stretch, 1e-3)[:, None])


def outline(strip: Strip) -> Polygon:
    """Outline of a strip with square ends and mitred corners, metres.

    Parameters
    ----------
    strip : Strip
        Of constant or changing width.

    Returns
    -------
    shapely Polygon
        With a hole if the strip is a loop.

    Raises
    ------
    GeometryError
        The strip falls into several pieces, which a sane path does not.
    """
    points = np.asarray(strip.path_m, dtype=float)
    half = np.asarray(strip.widths, dtype=float)[:, None] / 2 * mitre_rows(points)
    left, right = points + half, points - half
    pieces = [
        MultiPoint([left[k], left[k + 1], right[k + 1], right[k]]).convex_hull
        for k in range(len(points) - 1)
    ]
    shape = _united(pieces)
    if isinstance(shape, Polygon):
        return shape
    x, y = _odd_place_mm(shape, points)
    raise GeometryError(
        f"strip {strip.name!r}: its outline falls into several pieces near ({x:.4g}, {y:.4g}) mm, "
        "which is not one piece of metal; look there for points of the path that nearly coincide, "
        "for one at which it turns straight back and for a width near 0, and move or drop them"
    )


def _odd_place_mm(shape: Any, points: FloatArray) -> tuple[float, float]:
    """Where to look: the middle of the smallest piece, or of the path if nothing is left at all."""
    pieces = [piece for piece in getattr(shape, "geoms", ()) if not piece.is_empty]
    if not pieces:
        x, y = points.mean(axis=0)
        return float(x) * 1e3, float(y) * 1e3
    middle = min(pieces, key=lambda piece: piece.area).centroid
    return middle.x * 1e3, middle.y * 1e3


def _united(pieces: Sequence[Any]) -> Any:
    # A nanometre bridges what rounding leaves between pieces, and is taken off again.
    grown = unary_union([piece.buffer(BRIDGE_M, join_style="mitre") for piece in pieces])
    shape = grown.buffer(-BRIDGE_M, join_style="mitre")
    sound = isinstance(shape, Polygon) and shape.is_valid
    if sound and grown.area - shape.area < 2 * BRIDGE_M * grown.length:
        return shape
    # Where corners of pieces lie a few nanometres apart, taking it off can lose the whole strip.
    return shapely.union_all(pieces, grid_size=BRIDGE_M / 10)


def developed_length_m(strip: Strip) -> float:
    """Length of the centre line, metres."""
    return float(leg_lengths(np.asarray(strip.path_m, dtype=float)).sum())


def metal_area_m2(strips: tuple[Strip, ...]) -> float:
    """Area of sheet that all strips cover together, square metres."""
    return float(unary_union([outline(strip) for strip in strips]).area)


def bounding_box_m(strips: tuple[Strip, ...]) -> tuple[float, float, float, float]:
    """Smallest x and y, largest x and y of the metal, metres."""
    box = unary_union([outline(strip) for strip in strips]).bounds
    return (float(box[0]), float(box[1]), float(box[2]), float(box[3]))


def nearest_place_mm(first: Any, second: Any) -> tuple[float, float]:
    """Place on the first shape that is nearest to the second, millimetres."""
    x, y = nearest_points(first, second)[0].coords[0]
    return x * 1e3, y * 1e3


def normal(direction: FloatArray) -> FloatArray:
    """Unit vector to the left of a direction."""
    along = unit(direction)
    return np.array([-along[1], along[0]])
