"""Strips cut into cells, on which a current or charge along the strip is spread as colour."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from shapely import union_all
from shapely.geometry.base import BaseGeometry

from simkit.geometry.outlines import mitre_rows
from simkit.geometry.paths import arc_lengths, point_at
from simkit.plot.style import MILLIMETRE
from simkit.response.strip_route import Route
from simkit.study.model import Strip

FloatArray = NDArray[np.float64]

ACROSS = 6
"""Cells across the width; the density is averaged over each, so the edges stay finite."""
ALONG = 160
_MM = MILLIMETRE.factor


@dataclass(frozen=True)
class Sheet:
    """A strip cut into cells: corners, density per cell; middle and width of each row of cells."""

    x_mm: FloatArray
    y_mm: FloatArray
    density: FloatArray
    middle_mm: FloatArray
    width_mm: FloatArray

    def largest(self, ends_mm: FloatArray) -> float:
        """Largest density farther than half a width from open ends."""
        away = np.linalg.norm(self.middle_mm[:, None] - ends_mm[None], axis=2)
        counts = (away > self.width_mm[:, None] / 2).all(axis=1)
        return float(np.nanmax(self.density[counts], initial=0.0))


def sheet_of(strip: Strip, places: FloatArray, size: FloatArray) -> Sheet:
    """Cells of one strip from the magnitude of a line current or charge at places 0..1 along it."""
    points = np.asarray(strip.path_m, dtype=float)
    arcs = arc_lengths(points)
    widths = np.asarray(strip.widths, dtype=float)
    stations, rows = _stations(points, widths)
    edges = np.union1d(np.linspace(0.0, arcs[-1], ALONG + 1), stations)
    half = np.interp(edges, arcs, widths) / 2
    reach = np.stack([half * np.interp(edges, stations, rows[:, k]) for k in (0, 1)], axis=1)
    across = np.linspace(-1.0, 1.0, ACROSS + 1)
    corners = point_at(points, edges)[:, None] + across[None, :, None] * reach[:, None]
    middles = (edges[:-1] + edges[1:]) / 2
    along = np.interp(middles / arcs[-1], places, size)
    per_width = along / np.interp(middles, arcs, widths)
    return Sheet(
        corners[..., 0] * _MM,
        corners[..., 1] * _MM,
        per_width[:, None] * crowding(),
        point_at(points, middles) * _MM,
        np.interp(middles, arcs, widths) * _MM,
    )


def _stations(points: FloatArray, widths: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Arc lengths, and directions of the cross-section there: square but for a width at corners."""
    arcs = arc_lengths(points)
    mitres = mitre_rows(points)
    places, rows = [arcs[:1]], [mitres[:1]]
    for leg in range(len(points) - 1):
        along = (points[leg + 1] - points[leg]) / (arcs[leg + 1] - arcs[leg])
        square = np.array([[-along[1], along[0]]])
        clear = (arcs[leg] + widths[leg], arcs[leg + 1] - widths[leg + 1])
        if clear[1] > clear[0]:
            for end in (0, 1):
                if not np.allclose(mitres[leg + end], square):
                    places.append(np.array([clear[end]]))
                    rows.append(square)
        places.append(arcs[leg + 1 : leg + 2])
        rows.append(mitres[leg + 1 : leg + 2])
    return np.concatenate(places), np.concatenate(rows)


def crowding(cells: int = ACROSS) -> FloatArray:
    """Density over its mean in equal cells across a long thin strip, averaged over each cell."""
    across = np.linspace(-1.0, 1.0, cells + 1)
    return np.asarray(2 / np.pi * np.diff(np.arcsin(across)) / np.diff(across))


def without_overlap(metal: dict[str, BaseGeometry], order: Sequence[str]) -> dict[str, Any]:
    """Metal per strip, less what strips earlier in the order cover."""
    shown: dict[str, Any] = {}
    for name in [*order, *(n for n in metal if n not in order)]:
        covered = union_all(list(shown.values()))
        shown[name] = metal[name].difference(covered)
    return shown


def on_strip(
    strip: int, routes: Sequence[Route], values: Sequence[tuple[FloatArray, FloatArray]]
) -> tuple[FloatArray, FloatArray]:
    """Places 0..1 along one strip and the magnitude there of a quantity known along routes."""
    places, found = [np.zeros(0)], [np.zeros(0)]
    for route, (distance, value) in zip(routes, values, strict=True):
        for leg in route.legs:
            if leg.strip == strip:
                inside = abs(distance - leg.begin_m - leg.length_m / 2) <= leg.length_m / 2 + 1e-9
                along = leg.start_m + leg.sign * (distance[inside] - leg.begin_m)
                places.append(along / leg.strip_length_m)
                found.append(np.abs(value[inside]))
    at, size = np.concatenate(places), np.concatenate(found)
    order = np.argsort(at)
    return (at[order], size[order]) if at.size else (np.array([0.5]), np.array([np.nan]))
