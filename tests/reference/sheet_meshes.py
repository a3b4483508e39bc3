"""Triangle meshes of flat strips: rows across the width, columns along it, graded to every edge.

Charge and current crowd at the edges of a sheet like one over the square root of the distance, so
rows are cosine-spaced and columns shrink towards open ends and corners. Every count is a whole
multiple of one number, the level: meshes of levels 2, 3, 4 belong to one family and their results
can be extrapolated. Lengths in metres.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

COARSEST = 8e-3
"""Longest cell at level 1: at level 2 about a twentieth of the wavelength at 4 GHz."""

STEP = 1.1
"""Near a marked end the cell at level 1 is STEP (width distance^2)^(1/3).

Ends meet the long edges in corners, where the charge is more singular than along an edge; with the
square root the frequency converges only linearly in the level, with the cube root like its square.
"""


@dataclass(frozen=True)
class Mesh:
    """Corners (V, 2) in metres and triangles (T, 3) of a flat sheet."""

    points: np.ndarray
    triangles: np.ndarray


def graded(
    length: float, width: float, level: int, *, start: bool, stop: bool, coarsest: float = COARSEST
) -> np.ndarray:
    """Places from 0 to length, dense where an end is marked."""
    fine = 2000
    place = length * (1 - np.cos(np.pi * np.linspace(0, 1, fine + 1))) / 2
    middle = (place[1:] + place[:-1]) / 2
    cell = np.full(fine, coarsest)
    for marked, distance in ((start, middle), (stop, length - middle)):
        if marked:
            cell = np.minimum(cell, STEP * np.cbrt(width * distance**2))
    passed = np.concatenate([[0.0], np.cumsum(np.diff(place) / cell)])
    count = level * max(1, int(np.ceil(passed[-1] - 0.15)))
    result = np.interp(np.linspace(0, passed[-1], count + 1), passed, place)
    result[0], result[-1] = 0.0, length
    return result


def across(level: int, rows: int = 2) -> np.ndarray:
    """Cosine-spaced rows between the edges at -1 and 1."""
    return -np.cos(np.pi * np.linspace(0, 1, rows * level + 1))


def triangulate(quads: np.ndarray) -> Mesh:
    """Split quadrilaterals (M, 4, 2) along the shorter diagonal and merge their corners."""
    scale = np.ptp(quads.reshape(-1, 2), axis=0).max()
    keys = np.round(quads.reshape(-1, 2) / scale * 1e8).astype(np.int64)
    _, first, inverse = np.unique(keys, axis=0, return_index=True, return_inverse=True)
    points, corner = quads.reshape(-1, 2)[first], inverse.reshape(-1, 4)
    one = np.linalg.norm(quads[:, 0] - quads[:, 2], axis=1)
    other = np.linalg.norm(quads[:, 1] - quads[:, 3], axis=1)
    flip = other < one * (1 - 1e-6)
    halves = np.where(
        flip[:, None],
        corner[:, [0, 1, 3, 1, 2, 3]],
        corner[:, [0, 1, 2, 0, 2, 3]],
    ).reshape(-1, 3)
    a, b, c = (points[halves[:, k]] for k in range(3))
    area = (b - a)[:, 0] * (c - a)[:, 1] - (b - a)[:, 1] * (c - a)[:, 0]
    if not (np.all(area > 0) or np.all(area < 0)):
        raise ValueError("the mesh folds over itself")
    return Mesh(points, halves)


def _quads(grid: np.ndarray) -> np.ndarray:
    """Cells (.., 4, 2) of a grid of nodes (I, J, 2)."""
    cells = np.stack([grid[:-1, :-1], grid[1:, :-1], grid[1:, 1:], grid[:-1, 1:]], axis=2)
    return cells.reshape(-1, 4, 2)


# Rectangles -------------------------------------------------------------------------------------


def rectangles(boxes: Sequence[tuple[float, float, float, float]], level: int) -> Mesh:
    """Mesh of a union of upright rectangles (x0, y0, x1, y1) by lines through all their sides.

    All lines run through the whole union, hence the mesh conforms at every junction.
    """
    box = np.asarray(boxes, dtype=float)
    narrow = float(np.min([box[:, 2] - box[:, 0], box[:, 3] - box[:, 1]], axis=0).max())
    axes = []
    for low, high in ((0, 2), (1, 3)):
        sides = np.unique(np.round(np.concatenate([box[:, low], box[:, high]]), 9))
        pieces = [a + _between(b - a, narrow, level)[:-1] for a, b in pairwise(sides)]
        axes.append(np.concatenate([*pieces, sides[-1:]]))
    x, y = axes
    cells = _quads(np.stack(np.meshgrid(x, y, indexing="ij"), axis=2))
    middle = cells.mean(axis=1)
    inside = np.zeros(len(cells), dtype=bool)
    for x0, y0, x1, y1 in box:
        inside |= (
            (middle[:, 0] > x0) & (middle[:, 0] < x1) & (middle[:, 1] > y0) & (middle[:, 1] < y1)
        )
    return triangulate(cells[inside])


def _between(length: float, width: float, level: int) -> np.ndarray:
    """Rows where two lines are about a strip's width apart, else columns."""
    if length <= 1.5 * width:
        rows = 2 if length > 0.4 * width else 1
        return length * (1 + across(level, rows)) / 2
    return graded(length, width, level, start=True, stop=True)


# Paths ------------------------------------------------------------------------------------------


def _sheared(
    t: np.ndarray, widths: tuple[float, float], offset: np.ndarray, slopes: tuple[float, float]
) -> tuple[np.ndarray, np.ndarray]:
    """Places along (I, J) and across a leg whose end cuts are slanted.

    Parameters
    ----------
    t : (I,) float array
        Ascending places on the centre line, from 0.
    widths : two floats
        At both ends; the edges stay straight.
    offset : (J,) float array
        Rows from -1/2 to 1/2 of the width.
    slopes : two floats
        How far each end lies before a cut across, per distance to the left of the centre line.
    """
    length = t[-1]
    shear = np.zeros(len(t))
    for slope, distance in zip(slopes, (t, length - t), strict=True):
        reach = min(max(1.5 * max(widths) * abs(slope), 1e-12), length)
        shear -= slope * np.clip(1 - distance / reach, 0, None)
    place = np.broadcast_to(t[:, None], (len(t), len(offset)))
    for _ in range(20 if widths[0] != widths[1] else 2):  # the width where the node ends up
        y = offset * (widths[0] + (widths[1] - widths[0]) * place / length)
        place = t[:, None] + y * shear[:, None]
    return place, y


def slanted_tee(
    bar: tuple[float, float, float],
    branch: tuple[float, float, float, float],
    level: int,
    *,
    rows: int = 2,
) -> Mesh:
    """Bar along x with a branch that leaves it at an angle.

    Parameters
    ----------
    bar : x0, x1, width
    branch : x where its centre line meets that of the bar, length from there, width, angle
        Angle to the x axis in radians, between 0 and pi.
    """
    start, stop, width = bar
    meets, length, branch_width, angle = branch
    offset = across(level, rows) / 2
    middle = meets + width / 2 / np.tan(angle)
    root = middle - branch_width / np.sin(angle) * offset[::-1]
    root = root if root[0] < root[-1] else root[::-1]
    left = start + graded(root[0] - start, width, level, start=True, stop=True)
    right = root[-1] + graded(stop - root[-1], width, level, start=True, stop=True)
    x = np.concatenate([left[:-1], root, right[1:]])
    y = width * offset
    cells = [_quads(np.stack(np.meshgrid(x, y, indexing="ij"), axis=2))]
    away = length - width / 2 / np.sin(angle)
    t = graded(away, branch_width, level, start=True, stop=True)
    place, side = _sheared(t, (branch_width, branch_width), offset, (1 / np.tan(angle), 0.0))
    along = np.array([np.cos(angle), np.sin(angle)])
    normal = np.array([-along[1], along[0]])
    origin = np.array([middle, width / 2])
    cells.append(_quads(origin + place[..., None] * along + side[..., None] * normal))
    return triangulate(np.concatenate(cells))


def path(
    corners: Sequence[tuple[float, float]],
    widths: Sequence[float],
    level: int,
    *,
    rows: int = 2,
    coarsest: float = COARSEST,
    marked: Sequence[int] = (),
) -> Mesh:
    """Mesh of a strip along a polyline with mitred corners.

    Parameters
    ----------
    corners : sequence of points
        Centre line. A first point repeated at the end closes it.
    widths : sequence of float
        At each corner; linear in between. Mitred corners need equal widths on both sides.
    level, rows : int
        ``rows * level`` rows across.
    marked : sequence of int
        Straight-on points of the polyline to which the mesh is to be graded, such as a gap's ends.
    """
    line = np.asarray(corners, dtype=float)
    closed = bool(np.allclose(line[0], line[-1]))
    legs = np.diff(line, axis=0)
    lengths = np.linalg.norm(legs, axis=1)
    along = legs / lengths[:, None]
    after = np.roll(along, -1, axis=0)
    cross = along[:, 0] * after[:, 1] - along[:, 1] * after[:, 0]
    turn = np.arctan2(cross, np.sum(along * after, axis=1))
    if not closed:
        turn[-1] = 0.0
    cells = []
    for k, length in enumerate(lengths):
        before = turn[k - 1] if (k > 0 or closed) else 0.0
        first, last = k == 0 and not closed, k == len(lengths) - 1 and not closed
        marks = {
            "start": first or abs(before) > 0.2 or k in marked,
            "stop": last or abs(turn[k]) > 0.2 or k + 1 in marked,
        }
        middle_width = (widths[k] + widths[k + 1]) / 2
        t = graded(length, middle_width, level, coarsest=coarsest, **marks)
        turned = (-np.tan(before / 2), np.tan(turn[k] / 2))
        ends = (widths[k], widths[k + 1])
        place, y = _sheared(t, ends, across(level, rows) / 2, turned)
        normal = np.array([-along[k, 1], along[k, 0]])
        cells.append(_quads(line[k] + place[..., None] * along[k] + y[..., None] * normal))
    return triangulate(np.concatenate(cells))


def arc(
    radius: float,
    length: float,
    width: float,
    level: int,
    *,
    rows: int = 2,
    coarsest: float = COARSEST,
) -> Mesh:
    """Mesh of a strip along a circular arc about the origin, symmetric about the y axis."""
    t = graded(length, width, level, start=True, stop=True, coarsest=coarsest)
    angle = (t - length / 2)[:, None] / radius + np.pi / 2
    distance = radius + width / 2 * across(level, rows)[None]
    grid = np.stack([distance * np.cos(angle), distance * np.sin(angle)], axis=2)
    return triangulate(_quads(grid))


def profile(
    places: Sequence[float],
    widths: Sequence[float],
    level: int,
    *,
    rows: int = 2,
    coarsest: float = COARSEST,
) -> Mesh:
    """Straight strip along x whose width is given at ascending places and linear in between."""
    cells = []
    offset = across(level, rows) / 2
    for k in range(len(places) - 1):
        length = places[k + 1] - places[k]
        end_width = widths[0] if k == 0 else widths[-1]
        marks = {"start": k == 0, "stop": k == len(places) - 2}
        t = graded(length, end_width, level, coarsest=coarsest, **marks)
        y = np.interp(t, [0, length], [widths[k], widths[k + 1]])[:, None] * offset
        x = np.broadcast_to(places[k] + t[:, None], y.shape)
        cells.append(_quads(np.stack([x, y], axis=2)))
    return triangulate(np.concatenate(cells))
