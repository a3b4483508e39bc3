"""Reflection at the connector in a Smith chart."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.patches import Circle
from numpy.typing import NDArray

from simkit.plot.cases import (
    is_solved,
    one_case,
    reference_ohm,
    title_of,
    why_empty,
)
from simkit.plot.reflection import owned_dips
from simkit.plot.style import (
    INK,
    QUIET,
    frequency_unit,
    legend_beside,
    mode_style,
    new_axes,
    put_title,
    say_empty,
)
from simkit.response.features import reflection
from simkit.store.read import connector_impedance, has_feedline

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

CHART = "#b9c4cc"
RESISTANCES = (0.2, 0.5, 1.0, 2.0, 5.0)
REACTANCES = (0.2, 0.5, 1.0, 2.0, 5.0)
"""Circles and arcs that are drawn, over the reference resistance."""
VSWR_CIRCLE = 2.0
ARROWS = 6


def plot_smith(dataset: xr.Dataset, case: int | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw the complex reflection over a Smith chart, with arrows towards higher frequency.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results, or one case of them.
    case : int, optional
        Label of the case; the solved one in the middle of the sweep if left out.
    ax : matplotlib.axes.Axes, optional
        Rectilinear axes; a new figure is made if left out.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    StoreError
        If there is no such case.

    References
    ----------
    P. H. Smith, "Transmission line calculator", Electronics 12(1), 1939: circles of constant
    resistance r have centre r/(1 + r) and radius 1/(1 + r), those of constant reactance x centre
    (1, 1/x) and radius 1/x, in the plane of the reflection coefficient.
    """
    chosen = one_case(dataset, case)
    ax = new_axes(ax, (8.4, 7.2))
    reference = reference_ohm(chosen)
    put_title(ax, title_of(chosen, "reflection at the connector"))
    draw_chart(ax, reference)
    if not is_solved(chosen):
        say_empty(ax, why_empty(chosen))
        return ax
    gamma = reflection(chosen[connector_impedance(chosen)].values, reference)
    if has_feedline(chosen):
        before = reflection(chosen["impedance"].values, reference)
        ax.plot(
            before.real,
            before.imag,
            color=QUIET,
            linewidth=1.1,
            linestyle=(0, (6, 2)),
            label="at the feed",
        )
    label = "at the connector" if has_feedline(chosen) else None
    ax.plot(gamma.real, gamma.imag, color=INK, linewidth=1.6, zorder=3, label=label)
    _show_direction(ax, gamma)
    _mark_ends(ax, np.asarray(chosen["frequency"].values, dtype=float), gamma)
    _mark_dips(ax, chosen, gamma)
    legend_beside(ax, "sweep and its dips")
    return ax


def draw_chart(ax: Axes, reference_ohm: float) -> None:
    """Draw the circles of constant resistance and reactance, labelled in ohm, and VSWR = 2."""
    ax.set_aspect("equal")
    ax.set_xlim(-1.16, 1.16)
    ax.set_ylim(-1.16, 1.16)
    ax.set_axis_off()
    rim = Circle((0, 0), 1.0, facecolor="none", edgecolor=QUIET, linewidth=1.2)
    ax.add_patch(rim)
    ax.plot([-1, 1], [0, 0], color=CHART, linewidth=0.9, zorder=1)
    for resistance in RESISTANCES:
        _add_circle(ax, resistance / (1 + resistance), 1 / (1 + resistance), rim)
        edge = complex((resistance - 1) / (resistance + 1))
        # Far enough for a mark in the middle of the chart, which is where a match ends.
        _label(ax, edge + 0.03, f"{resistance * reference_ohm:g}", ha="left", va="bottom")
    for reactance in (*REACTANCES, *(-x for x in REACTANCES)):
        _add_circle(ax, 1 + 1j / reactance, 1 / abs(reactance), rim)
        edge = (1j * reactance - 1) / (1j * reactance + 1)
        sign = "+" if reactance > 0 else "−"
        _label(ax, 1.08 * edge, f"{sign}j{abs(reactance) * reference_ohm:g}")
    _label(ax, -1.05, "0")
    _label(ax, 1.05, "∞")
    _draw_vswr(ax)
    ax.text(-1.15, -1.14, f"circles in ohm, reference {reference_ohm:g} ohm", fontsize=8)


def _add_circle(ax: Axes, centre: complex, radius: float, rim: Circle) -> None:
    """One line of the chart, cut off at its rim."""
    circle = Circle(
        (centre.real, centre.imag), radius, facecolor="none", edgecolor=CHART, linewidth=0.9
    )
    ax.add_patch(circle)
    circle.set_clip_path(rim)


def _label(ax: Axes, place: complex, text: str, ha: str = "center", va: str = "center") -> None:
    ax.text(place.real, place.imag, text, ha=ha, va=va, fontsize=8, color=QUIET, zorder=2)


def _draw_vswr(ax: Axes) -> None:
    """The circle within which the match is at least as good as `VSWR_CIRCLE`."""
    radius = (VSWR_CIRCLE - 1) / (VSWR_CIRCLE + 1)
    ax.add_patch(
        Circle((0, 0), radius, facecolor="none", edgecolor=QUIET, linewidth=0.9, linestyle="--")
    )
    ax.text(
        0.0,
        -radius - 0.015,
        f"VSWR {VSWR_CIRCLE:g}",
        ha="center",
        va="top",
        fontsize=8,
        color=QUIET,
        zorder=2,
    )


def _show_direction(ax: Axes, gamma: NDArray[np.complex128]) -> None:
    """Arrow heads at equal distances along the curve, pointing to higher frequency."""
    along = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(gamma)))])
    wanted = along[-1] * (np.arange(ARROWS) + 0.5) / ARROWS
    for place in np.clip(np.searchsorted(along, wanted), 1, gamma.size - 1):
        tail, head = gamma[place - 1], gamma[place]
        ax.annotate(
            "",
            (head.real, head.imag),
            xytext=(tail.real, tail.imag),
            arrowprops={"arrowstyle": "-|>", "color": INK, "mutation_scale": 14},
            zorder=3,
        )


def _mark_ends(ax: Axes, frequency_hz: NDArray[np.float64], gamma: NDArray[np.complex128]) -> None:
    """Open square at the first frequency, full one at the last."""
    unit = frequency_unit(frequency_hz)
    for index, word in ((0, "start"), (-1, "end")):
        ax.plot(
            gamma[index].real,
            gamma[index].imag,
            marker="s",
            fillstyle="none" if index == 0 else "full",
            markersize=6,
            color=INK,
            linestyle="none",
            zorder=4,
            label=f"{word}: {frequency_hz[index] * unit.factor:g} {unit.text}",
        )


def _mark_dips(ax: Axes, case: xr.Dataset, gamma: NDArray[np.complex128]) -> None:
    """Each dip in the colour and with the marker of the mode that owns it."""
    frequency = np.asarray(case["frequency"].values, dtype=float)
    unit = frequency_unit(frequency)
    for dip in owned_dips(case):
        style = mode_style(dip.half_waves)
        ax.plot(
            np.interp(dip.frequency_hz, frequency, gamma.real),
            np.interp(dip.frequency_hz, frequency, gamma.imag),
            marker=style.marker,
            markersize=9,
            color=style.colour,
            linestyle="none",
            zorder=5,
            label=dip.text(unit),
        )
