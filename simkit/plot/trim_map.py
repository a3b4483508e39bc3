"""Two dimensions for two targets as a map: where each target is met, and where both are."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.ticker import MaxNLocator

from simkit.plot.style import (
    INK,
    legend_beside,
    mode_style,
    new_axes,
    plain,
    put_title,
    tidy,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from simkit.measured.measurement import FloatArray
    from simkit.measured.trim_pair import PairTrim

BAND_95 = 1.96
ELLIPSE_95 = 5.991
"""Chi-square of two degrees of freedom that holds 95 %."""
LEVELS = 9
SECOND_DASHES = (0, (6, 2))
LABEL_HEIGHTS = (0.1, 0.92)
"""Where the faint lines of either target are labelled, so that the two sets stay apart."""

LABEL_ROOM = 0.08
"""Least distance between such labels, in widths of the map."""

SECOND_COLOUR = "#b5651d"
"""For the second target if it is of the same mode as the first."""


def plot_trim_map(trim: PairTrim, *, ax: Axes | None = None) -> Axes:
    """Draw the lines on which either target is met over both dimensions, with their 95 % bands.

    Parameters
    ----------
    trim : PairTrim
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.
    """
    from simkit.measured.trim_words import change_text, length_text, unit_si

    ax = new_axes(ax, (10.2, 6.0))
    tidy(ax)
    scale = np.array([1 / unit_si(unit) for unit in trim.units])
    x, y = (values * s for values, s in zip(trim.map_values, scale, strict=True))
    first, second = trim.names
    changes = ", ".join(
        f"{name} {change_text(float(change), unit)}"
        for name, change, unit in zip(trim.names, trim.change, trim.units, strict=True)
    )
    lost = f"\nUNSUPPORTED: no measured {' nor '.join(trim.unmeasured)} dip"
    unsupported = lost if trim.unmeasured else ""
    put_title(ax, f"{trim.labels[0]}, {trim.labels[1]}:\n{changes}{unsupported}")
    now, then = trim.present * scale, (trim.present + trim.change) * scale
    scaled = now + trim.scaling_change * scale
    ring = _ellipse(trim.covariance * np.outer(scale, scale)) + then
    _look_at(ax, np.vstack([now, then, scaled, ring]), x, y)
    handles: list[Line2D | Patch] = []
    for k, colour in enumerate(_colours(trim)):
        _draw_target(ax, trim, k, x, y, colour)
        style: Any = "solid" if k == 0 else SECOND_DASHES
        handles.append(
            Line2D(
                [], [], color=colour, linewidth=2.2, linestyle=style, label=plain(trim.labels[k])
            )
        )
        handles.append(Patch(facecolor=colour, alpha=0.2, label="95 % band of the model"))
    ax.plot(ring[:, 0], ring[:, 1], color=INK, linewidth=1.3, zorder=4)
    ax.annotate(
        "", then, now, arrowprops={"arrowstyle": "->", "color": INK, "shrinkA": 6, "shrinkB": 6},
        zorder=5,
    )  # fmt: skip
    for place, marker, fill, label in (
        (now, "o", INK, "now"),
        (then, "o", "white", "after, with its 95 % ellipse"),
        (scaled, "x", INK, "plain scaling of both"),
    ):
        style_of: dict[str, Any] = {
            "marker": marker,
            "markersize": 9,
            "linestyle": "none",
            "color": INK,
        }
        ax.plot(*place, markerfacecolor=fill, markeredgewidth=1.6, zorder=6, **style_of)
        said = f"{label}:\n" + ", ".join(
            f"{name} {length_text(float(value / s), unit)}"
            for name, value, s, unit in zip(trim.names, place, scale, trim.units, strict=True)
        )
        handles.append(
            Line2D([], [], markerfacecolor=fill, markeredgewidth=1.6, label=said, **style_of)
        )
    for axis, name, unit in ((ax.set_xlabel, first, trim.units[0]),
                             (ax.set_ylabel, second, trim.units[1])):  # fmt: skip
        axis(name if unit == "1" else f"{name} ({unit})")
    legend_beside(ax, handles=handles)
    return ax


def _look_at(ax: Axes, points: FloatArray, x: FloatArray, y: FloatArray) -> None:
    """Show what lies around the points, at least a fifth of the reach, nothing beyond it."""
    for place, values, limit in ((0, x, ax.set_xlim), (1, y, ax.set_ylim)):
        low, high = float(points[:, place].min()), float(points[:, place].max())
        room = max(0.4 * (high - low), 0.1 * (values[-1] - values[0]))
        limit(max(low - room, float(values[0])), min(high + room, float(values[-1])))


def _colours(trim: PairTrim) -> tuple[str, str]:
    one, two = (mode_style(target.half_waves).colour for target in trim.targets)
    return one, two if two != one else SECOND_COLOUR


def _draw_target(
    ax: Axes, trim: PairTrim, k: int, x: FloatArray, y: FloatArray, colour: str
) -> None:
    """The line on which one target is met, its band, and faint lines of other values."""
    target = trim.targets[k]
    factor, unit = (1.0, "dB") if target.kind == "match" else (1e-6, "MHz")
    table = trim.map_tracked[k].T * factor
    wanted = float(trim.tracked[k]) * factor
    spread = BAND_95 * float(trim.tracked_sigma[k]) * factor
    (left, right), (bottom, top) = ax.get_xlim(), ax.get_ylim()
    seen = table[np.ix_(_beside(y, bottom, top), _beside(x, left, right))]
    known = seen[np.isfinite(seen)]
    if not known.size or np.ptp(known) == 0:
        return
    levels = np.asarray(MaxNLocator(LEVELS).tick_values(known.min(), known.max()))
    faint = ax.contour(x, y, table, levels=levels, colors=colour, linewidths=0.7, alpha=0.5)
    height = bottom + LABEL_HEIGHTS[k] * (top - bottom)
    across = np.linspace(left, right, 200)
    row = np.array([np.interp(height, y, column) for column in table.T])
    places = _label_places(across, np.interp(across, x, row), levels, wanted)
    ax.clabel(faint, fmt=f"%.5g {unit}", fontsize=7.5, manual=[(at, height) for at in places])
    if spread > 0:
        ax.contourf(x, y, table, levels=[wanted - spread, wanted + spread], colors=[colour],
                    alpha=0.2)  # fmt: skip
    if np.nanmin(table) < wanted < np.nanmax(table):
        ax.contour(x, y, table, levels=[wanted], colors=colour, linewidths=2.2,
                   linestyles=["solid" if k == 0 else SECOND_DASHES])  # fmt: skip


def _label_places(
    across: FloatArray, row: FloatArray, levels: FloatArray, wanted: float
) -> list[float]:
    """Where faint lines are labelled along a row of the map: apart from each other and the strong.

    A line that crosses the row twice is labelled at either place.
    """
    room = LABEL_ROOM * (across[-1] - across[0])
    taken = [*_crossings(across, row, wanted), across[0] - room / 2, across[-1] + room / 2]
    kept: list[float] = []
    for level in levels:
        for at in _crossings(across, row, float(level)):
            if min(abs(at - other) for other in taken) >= room:
                kept.append(at)
                taken.append(at)
    return kept


def _crossings(across: FloatArray, row: FloatArray, level: float) -> list[float]:
    """Where a row goes through a level."""
    with np.errstate(invalid="ignore"):
        through = np.flatnonzero((row[:-1] - level) * (row[1:] - level) <= 0)
    return [float(across[k]) for k in through]


def _beside(values: FloatArray, low: float, high: float) -> list[int]:
    """Places of the values within limits, with the next one on either side."""
    first = max(int(np.searchsorted(values, low)) - 1, 0)
    last = min(int(np.searchsorted(values, high)) + 1, len(values))
    return list(range(first, last))


def _ellipse(covariance: FloatArray) -> FloatArray:
    """Points around the region that holds 95 % of both changes, (N, 2)."""
    values, vectors = np.linalg.eigh(covariance)
    turn = np.linspace(0, 2 * np.pi, 121)
    circle = np.stack([np.cos(turn), np.sin(turn)], axis=1)
    return np.asarray((circle * np.sqrt(np.maximum(values, 0) * ELLIPSE_95)) @ vectors.T)
