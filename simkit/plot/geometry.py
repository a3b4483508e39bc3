"""The antenna to scale: outlines, feed, ends, sizes, and the wires of its model."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.patches import PathPatch
from numpy.typing import NDArray
from shapely import get_parts, union_all
from shapely.geometry.base import BaseGeometry

from simkit.geometry.outlines import developed_length_m
from simkit.geometry.paths import arc_lengths, point_at
from simkit.geometry.wires import WireGrid
from simkit.plot.metal import (
    as_path,
    feed_place,
    in_plane,
    metal_of,
    strip_ends,
    widths_text,
)
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
from simkit.study.model import Antenna, Cable, Placement, Strip

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

FloatArray = NDArray[np.float64]

_MM = MILLIMETRE.factor

FEED_COLOUR = "#d55e00"
WIRE_COLOUR = "#0072b2"
CABLE_COLOUR = "#cc79a7"
MARGIN = 0.12
"""Room around the metal for dimensions, over the larger overall size."""
PICTURE_IN = 8.0
"""Largest width of the drawing itself, inches."""
MANY_SEGMENTS = 120
"""From here up wires are drawn thin, with small dots at their joints."""

Bounds = tuple[float, float, float, float]


def plot_geometry(
    antenna: Antenna,
    wires: WireGrid | xr.Dataset | None = None,
    *,
    title: str = "",
    ax: Axes | None = None,
) -> Axes:
    """Draw the strips to scale in millimetres, with feed, ends, joints and overall size.

    Parameters
    ----------
    antenna : Antenna
    wires : WireGrid or xarray.Dataset, optional
        The model, or one case of the results: wires and segment ends are drawn on top.
    title : str
        First line above the picture; the last one gives length, area and overall size.
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out, as high as the antenna needs.

    Returns
    -------
    matplotlib.axes.Axes
        Equal scales in x and y, in the plane of the strips before any placement.

    Raises
    ------
    GeometryError
        A strip's path has no sane outline.
    """
    outlines = metal_of(antenna)
    metal = union_all(list(outlines.values()))
    x1, y1, x2, y2 = metal.bounds
    bounds = (x1 * _MM, y1 * _MM, x2 * _MM, y2 * _MM)
    view = _with_cable(bounds, antenna.cable)
    ax = new_axes(ax, _figure_size(view))
    for number, strip in enumerate(antenna.strips):
        _draw_outline(ax, outlines[strip.name], "metal" if number == 0 else "_")
    if wires is not None:
        _draw_wires(ax, wires, antenna.placement)
    if antenna.cable is not None:
        _draw_cable(ax, antenna.cable)
    _mark_ends_and_feed(ax, antenna)
    for strip in antenna.strips:
        _name_strip(ax, strip)
    _draw_dimensions(ax, bounds, view)
    ax.set_aspect("equal")
    ax.set_xlabel(MILLIMETRE.label("x"))
    ax.set_ylabel(MILLIMETRE.label("y"))
    put_title(ax, f"{title or 'antenna to scale'}\n{_facts(antenna, metal.area, bounds)}")
    legend_beside(ax)
    return ax


def _facts(antenna: Antenna, area_m2: float, bounds: Bounds) -> str:
    """Length along the centre lines, metal and overall size, for who cuts the sheet."""
    length = sum(developed_length_m(strip) for strip in antenna.strips) * _MM
    facts = (
        f"{length:.4g} mm along the centre lines, {area_m2 * 1e4:.3g} cm² of metal, "
        f"fits into {bounds[2] - bounds[0]:.4g} × {bounds[3] - bounds[1]:.4g} mm"
    )
    if antenna.placement != Placement():
        facts += "; drawn flat, before it is placed"
    return facts


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
                as_path(polygon, _MM),
                facecolor=METAL,
                edgecolor=INK,
                linewidth=1.0,
                label=label,
                zorder=2,
            )
        )
        label = "_"


def _draw_wires(ax: Axes, wires: WireGrid | xr.Dataset, placement: Placement) -> None:
    """Wires of the model, a dot at each segment end, and the segments that carry the source."""
    segments = _segments(wires, placement)
    count = len(segments.starts_mm)
    many = count > MANY_SEGMENTS
    label = f"wires of the model,\n{count} segments,\nradius {segments.radius_mm:.3g} mm"
    ax.plot(
        *segments.line(),
        color=WIRE_COLOUR,
        linewidth=0.6 if many else 1.0,
        marker=".",
        markersize=2.0 if many else 4.0,
        label=label,
        zorder=3,
    )
    ax.plot(
        *segments.line(segments.driven),
        color=FEED_COLOUR,
        linewidth=2.0 if many else 3.0,
        solid_capstyle="butt",
        label="source segment" if len(segments.driven) == 1 else "source segments",
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


def _segments(wires: WireGrid | xr.Dataset, placement: Placement) -> _Segments:
    """Read segments from a wire grid, or from one case of the results."""
    if isinstance(wires, WireGrid):
        starts, ends = wires.ends_m()
        driven = [segment for segment, _ in wires.source]
        radius = wires.radius_m
    else:
        middles = np.stack([wires[axis].values for axis in "xyz"], axis=1)
        along = np.stack([wires[f"direction_{axis}"].values for axis in "xyz"], axis=1)
        halves = along * np.asarray(wires["length"].values)[:, np.newaxis] / 2
        there = np.isfinite(middles).all(axis=1)
        starts, ends = (middles - halves)[there], (middles + halves)[there]
        driven = np.flatnonzero(np.nan_to_num(wires["source_weight"].values[there])).tolist()
        radius = float(wires["wire_radius"])
    return _Segments(
        in_plane(starts, placement) * _MM, in_plane(ends, placement) * _MM, driven, radius * _MM
    )


def _mark_ends_and_feed(ax: Axes, antenna: Antenna) -> None:
    feed = feed_place(antenna)
    ends = strip_ends(antenna)
    marks = (
        ("D", 9, 1.8, FEED_COLOUR, f"feed, gap {feed.gap_m * _MM:.3g} mm", [feed.middle_m]),
        ("o", 7, 1.4, INK, "open end", ends.open_m),
        ("s", 6, 1.4, INK, "strips joined", ends.joined_m),
        ("v", 9, 1.4, INK, "on the ground plane", ends.grounded_m),
    )
    for marker, size, edge, colour, label, places in marks:
        shown = np.asarray(places, dtype=float).reshape(-1, 2) * _MM
        if len(shown):
            ax.plot(
                shown[:, 0],
                shown[:, 1],
                linestyle="none",
                marker=marker,
                markersize=size,
                markeredgewidth=edge,
                fillstyle="none",
                color=colour,
                label=label,
                zorder=5,
            )


def _name_strip(ax: Axes, strip: Strip) -> None:
    """Name and width along the strip, clear of the metal."""
    points = np.asarray(strip.path_m, dtype=np.float64)
    arcs = arc_lengths(points)
    legs = np.diff(arcs)
    longest = int(np.argmax(legs))
    at = float(arcs[longest] + arcs[longest + 1]) / 2
    if legs[longest] < 0.2 * arcs[-1]:
        at = float(arcs[-1]) / 2  # a curve of many short legs: none of them is the place
    leg = min(int(np.searchsorted(arcs, at, side="right")) - 1, len(legs) - 1)
    along = points[leg + 1] - points[leg]
    half = float(np.interp(at, arcs, strip.widths)) / 2
    angle = float(np.arctan2(along[1], along[0]))
    # Text is read from below or from the right: turn it into -90 < angle <= 90 degrees.
    angle -= np.pi * np.ceil((angle - np.pi / 2) / np.pi - 1e-9)
    x, y = point_at(points, at)
    ax.annotate(
        f"{plain(strip.name)}, {widths_text(strip.widths)} wide",
        ((x - half * np.sin(angle)) * _MM, (y + half * np.cos(angle)) * _MM),
        xytext=(-5 * np.sin(angle), 5 * np.cos(angle)),
        textcoords="offset points",
        ha="center",
        va="bottom",
        rotation=float(np.rad2deg(angle)),
        rotation_mode="anchor",
        fontsize="small",
        color=INK,
    )


def _with_cable(bounds: Bounds, cable: Cable | None) -> Bounds:
    """What the picture must show: the metal and the cable as seen from above."""
    if cable is None:
        return bounds
    seen = np.array(cable.points_m)[:, :2] * _MM
    low, high = np.minimum(seen.min(axis=0), bounds[:2]), np.maximum(seen.max(axis=0), bounds[2:])
    return float(low[0]), float(low[1]), float(high[0]), float(high[1])


def _draw_cable(ax: Axes, cable: Cable) -> None:
    """The cable seen along the normal, a ring where it leaves towards the viewer or away."""
    points = np.array(cable.points_m) * _MM
    low, high = points[:, 2].min(), points[:, 2].max()
    heights = f"z from {low:.4g} to {high:.4g} mm" if high - low > 1e-6 else "in the strips' plane"
    label = f"feed cable, {cable.length_m * _MM:.4g} mm,\n{heights}"
    ax.plot(
        points[:, 0],
        points[:, 1],
        color=CABLE_COLOUR,
        linewidth=2.5,
        alpha=0.8,
        marker="o",
        markersize=15,
        markerfacecolor="none",
        markeredgewidth=1.8,
        markevery=_leaving(points),
        label=label,
        zorder=6,
    )


def _leaving(points_mm: FloatArray) -> list[int]:
    """Points at which a leg leaves the picture's plane within its own width of the drawing."""
    steps = np.diff(points_mm, axis=0)
    flat = np.linalg.norm(steps[:, :2], axis=1)
    return [int(k) for k in np.flatnonzero(flat < 0.05 * abs(steps[:, 2]))]


def _draw_dimensions(ax: Axes, bounds: Bounds, view: Bounds) -> None:
    """Overall size: a dimension line under the antenna and one to its right."""
    x1, y1, x2, y2 = bounds
    room = MARGIN * max(x2 - x1, y2 - y1)
    ax.set_xlim(min(x1, view[0]) - room, max(x2, view[2]) + room)
    ax.set_ylim(min(y1, view[1]) - room, max(y2, view[3]) + room)
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
