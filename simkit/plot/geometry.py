"""The antenna to scale: outlines, feed, open ends, overall size, and the wires of its model."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.patches import PathPatch
from matplotlib.path import Path
from numpy.typing import NDArray
from shapely import Polygon, get_parts, union_all
from shapely.geometry.base import BaseGeometry

from simkit.geometry.wires import WireGrid
from simkit.plot.outline import feed_place, metal_of, open_ends
from simkit.plot.style import (
    INK,
    METAL,
    MILLIMETRE,
    QUIET,
    legend_beside,
    new_axes,
    plain,
    put_title,
)
from simkit.study.model import Antenna, Strip

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

FloatArray = NDArray[np.float64]

_MM = MILLIMETRE.factor

FEED_COLOUR = "#d55e00"
WIRE_COLOUR = "#0072b2"
MARGIN = 0.12
"""Room around the metal for dimensions, over the larger overall size."""
PICTURE_IN = 8.0
"""Largest width of the drawing itself, inches."""

Bounds = tuple[float, float, float, float]


def plot_geometry(
    antenna: Antenna,
    wires: WireGrid | xr.Dataset | None = None,
    *,
    title: str = "",
    ax: Axes | None = None,
) -> Axes:
    """Draw the strips to scale in millimetres, with feed, open ends and overall size.

    Parameters
    ----------
    antenna : Antenna
    wires : WireGrid or xarray.Dataset, optional
        The model, or one case of the results: wires and segment ends are drawn on top.
    title : str
        First line above the picture.
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out, as high as the antenna needs.

    Returns
    -------
    matplotlib.axes.Axes
        Equal scales in x and y.
    """
    outlines = metal_of(antenna)
    x1, y1, x2, y2 = union_all(list(outlines.values())).bounds
    bounds = (x1 * _MM, y1 * _MM, x2 * _MM, y2 * _MM)
    ax = new_axes(ax, _figure_size(bounds))
    for number, strip in enumerate(antenna.strips):
        _draw_outline(ax, outlines[strip.name], "metal" if number == 0 else "_")
    if wires is not None:
        _draw_wires(ax, wires)
    _mark_ends_and_feed(ax, antenna)
    for strip in antenna.strips:
        _name_strip(ax, strip)
    _draw_dimensions(ax, bounds)
    ax.set_aspect("equal")
    ax.set_xlabel(MILLIMETRE.label("x"))
    ax.set_ylabel(MILLIMETRE.label("y"))
    put_title(ax, title or "antenna to scale")
    legend_beside(ax)
    return ax


def _figure_size(bounds: Bounds) -> tuple[float, float]:
    """Inches: the drawing as wide as allowed, or as high, with room for labels around it."""
    width, height = bounds[2] - bounds[0], bounds[3] - bounds[1]
    margin = 2 * MARGIN * max(width, height)
    scale = min(PICTURE_IN / (width + margin), 6.5 / (height + margin))
    return scale * (width + margin) + 2.6, max(scale * (height + margin) + 1.2, 3.0)


def _draw_outline(ax: Axes, outline: BaseGeometry, label: str) -> None:
    """Fill the metal; inner rings stay open."""
    for polygon in get_parts(outline):
        ax.add_patch(
            PathPatch(
                _as_path(polygon),
                facecolor=METAL,
                edgecolor=INK,
                linewidth=1.0,
                label=label,
                zorder=2,
            )
        )
        label = "_"


def _as_path(polygon: Polygon) -> Path:
    rings = [polygon.exterior, *polygon.interiors]
    return Path.make_compound_path(
        *(Path(np.asarray(ring.coords) * _MM, closed=True) for ring in rings)
    )


def _draw_wires(ax: Axes, wires: WireGrid | xr.Dataset) -> None:
    """Wires of the model, a dot at each segment end, and the segments that carry the source."""
    segments = _segments(wires)
    label = (
        f"wires of the model,\n{len(segments.starts_mm)} segments,\n"
        f"radius {segments.radius_mm:.3g} mm"
    )
    ax.plot(
        *segments.line(),
        color=WIRE_COLOUR,
        linewidth=1.0,
        marker=".",
        markersize=4,
        label=label,
        zorder=3,
    )
    ax.plot(
        *segments.line(segments.driven),
        color=FEED_COLOUR,
        linewidth=3.0,
        solid_capstyle="butt",
        label="source segment",
        zorder=4,
    )


@dataclass(frozen=True)
class _Segments:
    """Ends of all segments in the plane, (S, 2) in millimetres, and those with the source."""

    starts_mm: FloatArray
    ends_mm: FloatArray
    driven: list[int]
    radius_mm: float

    def line(self, which: list[int] | None = None) -> tuple[FloatArray, FloatArray]:
        """Return x and y of one line through the segments, with gaps between them."""
        chosen = slice(None) if which is None else which
        starts, ends = self.starts_mm[chosen], self.ends_mm[chosen]
        points = np.stack([starts, ends, np.full_like(starts, np.nan)], axis=1).reshape(-1, 2)
        return points[:, 0], points[:, 1]


def _segments(wires: WireGrid | xr.Dataset) -> _Segments:
    """Read segments from a wire grid, or from one case of the results."""
    if isinstance(wires, WireGrid):
        starts, ends = wires.ends_m()
        driven = [segment for segment, _ in wires.source]
        return _Segments(starts[:, :2] * _MM, ends[:, :2] * _MM, driven, wires.radius_m * _MM)
    middles = np.stack([wires["x"].values, wires["y"].values], axis=1)
    directions = np.stack([wires["direction_x"].values, wires["direction_y"].values], axis=1)
    halves = directions * np.asarray(wires["length"].values)[:, np.newaxis] / 2
    there = np.isfinite(middles).all(axis=1)
    return _Segments(
        (middles - halves)[there] * _MM,
        (middles + halves)[there] * _MM,
        [int(wires["source_segment"])],
        float(wires["wire_radius"]) * _MM,
    )


def _mark_ends_and_feed(ax: Axes, antenna: Antenna) -> None:
    place = np.asarray(feed_place(antenna).middle_m) * _MM
    ax.plot(
        *place,
        linestyle="none",
        marker="D",
        markersize=9,
        markeredgewidth=1.8,
        fillstyle="none",
        color=FEED_COLOUR,
        label=f"feed, gap {_gap_m(antenna) * _MM:.3g} mm",
        zorder=5,
    )
    ends = np.asarray(open_ends(antenna), dtype=float).reshape(-1, 2) * _MM
    if len(ends):
        ax.plot(
            ends[:, 0],
            ends[:, 1],
            linestyle="none",
            marker="o",
            markersize=7,
            markeredgewidth=1.4,
            fillstyle="none",
            color=INK,
            label="open end",
            zorder=5,
        )


def _gap_m(antenna: Antenna) -> float:
    """Width of the feed gap."""
    first, second = feed_place(antenna).sides_m
    return float(np.hypot(second[0] - first[0], second[1] - first[1]))


def _name_strip(ax: Axes, strip: Strip) -> None:
    """Name and width along the strip's longest leg, clear of the metal."""
    points = np.asarray(strip.path_m, dtype=np.float64)
    legs = np.diff(points, axis=0)
    longest = int(np.argmax(np.hypot(legs[:, 0], legs[:, 1])))
    angle = float(np.arctan2(legs[longest, 1], legs[longest, 0]))
    # Text is read from below or from the right: turn it into -90 < angle <= 90 degrees.
    angle -= np.pi * np.ceil((angle - np.pi / 2) / np.pi - 1e-9)
    x, y = (points[longest] + points[longest + 1]) / 2
    ax.annotate(
        f"{plain(strip.name)}, {strip.width_m * _MM:.3g} mm wide",
        (
            (x - strip.width_m / 2 * np.sin(angle)) * _MM,
            (y + strip.width_m / 2 * np.cos(angle)) * _MM,
        ),
        xytext=(-5 * np.sin(angle), 5 * np.cos(angle)),
        textcoords="offset points",
        ha="center",
        va="bottom",
        rotation=float(np.rad2deg(angle)),
        rotation_mode="anchor",
        fontsize="small",
        color=INK,
    )


def _draw_dimensions(ax: Axes, bounds: Bounds) -> None:
    """Overall size: a dimension line under the antenna and one to its right."""
    x1, y1, x2, y2 = bounds
    room = MARGIN * max(x2 - x1, y2 - y1)
    ax.set_xlim(x1 - room, x2 + room)
    ax.set_ylim(y1 - room, y2 + room)
    _dimension(ax, (x1, y1 - room / 2), (x2, y1 - room / 2), f"{x2 - x1:.4g} mm", 0)
    _dimension(ax, (x2 + room / 2, y1), (x2 + room / 2, y2), f"{y2 - y1:.4g} mm", 90)


def _dimension(
    ax: Axes, start: tuple[float, float], end: tuple[float, float], text: str, rotation: float
) -> None:
    ax.annotate(
        "",
        end,
        xytext=start,
        arrowprops={"arrowstyle": "<|-|>", "color": QUIET, "shrinkA": 0, "shrinkB": 0},
        zorder=2,
    )
    middle = ((start[0] + end[0]) / 2, (start[1] + end[1]) / 2)
    ax.annotate(
        text,
        middle,
        xytext=(0, -3) if rotation == 0 else (6, 0),
        textcoords="offset points",
        ha="center" if rotation == 0 else "left",
        va="top" if rotation == 0 else "center",
        rotation=rotation,
        fontsize="small",
        color=INK,
    )
