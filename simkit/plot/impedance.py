"""Resistance and reactance at the feed over frequency."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from simkit.plot.cases import (
    is_solved,
    numbered_modes,
    one_case,
    title_of,
    why_empty,
)
from simkit.plot.style import (
    INK,
    QUIET,
    DisplayUnit,
    frequency_text,
    frequency_unit,
    legend_beside,
    mode_style,
    new_axes,
    put_title,
    say_empty,
    tidy,
)
from simkit.response.features import find_resonances
from simkit.store.read import connector_impedance, has_feedline

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

RESISTANCE_COLOUR = "#000000"
REACTANCE_COLOUR = "#8c5a9e"


def plot_impedance(dataset: xr.Dataset, case: int | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw R and X at the feed over frequency, with natural modes and resonances marked.

    Of a study with a feed line both are drawn at the connector too, thin.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results, or one case of them.
    case : int, optional
        Label of the case; the solved one in the middle of the sweep if left out.
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    StoreError
        If there is no such case.

    Notes
    -----
    The vertical scale follows the resistance: a reactance that runs away below the first mode
    leaves the frame instead of pressing everything else flat.
    """
    chosen = one_case(dataset, case)
    ax = new_axes(ax)
    planes = "impedance at the feed and at the connector"
    put_title(ax, title_of(chosen, planes if has_feedline(chosen) else "impedance at the feed"))
    tidy(ax)
    unit = frequency_unit(chosen["frequency"])
    ax.set_xlabel(unit.label("frequency"))
    ax.set_ylabel("resistance, reactance (ohm)")
    if not is_solved(chosen):
        say_empty(ax, why_empty(chosen))
        return ax
    frequency_hz = np.asarray(chosen["frequency"].values, dtype=float)
    frequency = frequency_hz * unit.factor
    impedance = chosen["impedance"].values
    ax.axhline(0.0, color=QUIET, linewidth=0.8)
    ax.plot(frequency, impedance.real, color=RESISTANCE_COLOUR, label="resistance R")
    ax.plot(
        frequency,
        impedance.imag,
        color=REACTANCE_COLOUR,
        linestyle=(0, (6, 2)),
        label="reactance X",
    )
    if has_feedline(chosen):
        _add_connector(ax, frequency, chosen[connector_impedance(chosen)].values)
    ax.set_xlim(float(frequency[0]), float(frequency[-1]))
    ax.set_ylim(*_limits_ohm(impedance))
    _mark_modes(ax, chosen, unit)
    _mark_resonances(ax, frequency_hz, impedance, unit)
    legend_beside(ax)
    return ax


def _add_connector(
    ax: Axes, frequency: NDArray[np.float64], impedance: NDArray[np.complex128]
) -> None:
    """R and X behind the feed line, thin; an open circuit is a gap."""
    shown = np.where(np.isfinite(impedance), impedance, np.nan)
    for curve, colour, dashes, name in (
        (shown.real, RESISTANCE_COLOUR, "solid", "R"),
        (shown.imag, REACTANCE_COLOUR, (0, (6, 2)), "X"),
    ):
        ax.plot(
            frequency,
            curve,
            color=colour,
            linestyle=dashes,
            linewidth=0.8,
            alpha=0.6,
            label=f"{name} at the connector",
        )


def _limits_ohm(impedance: NDArray[np.complex128]) -> tuple[float, float]:
    """Lower and upper end of the vertical axis: room for R and for X where both are alike."""
    largest = float(np.nanmax(impedance.real))
    reach = max(1.1 * largest, 200.0)
    low = max(-0.8 * reach, 1.1 * float(np.nanmin(impedance.imag)))
    return min(low, -0.1 * reach), reach


def _mark_modes(ax: Axes, case: xr.Dataset, unit: DisplayUnit) -> None:
    """One vertical line per natural mode inside the band."""
    low, high = ax.get_xlim()
    for mode in numbered_modes(case):
        style = mode_style(mode.half_waves)
        place = mode.frequency_hz * unit.factor
        if low <= place <= high:
            ax.axvline(
                place,
                color=style.colour,
                linestyle=style.linestyle,
                linewidth=1.2,
                label=f"natural mode, {mode.label}:\n"
                f"{frequency_text(mode.frequency_hz, unit)}, Q {mode.q:.2f}",
            )
            ax.annotate(
                mode.label,
                (place, 1.0),
                xycoords=("data", "axes fraction"),
                xytext=(-3, -4),
                textcoords="offset points",
                rotation=90,
                ha="right",
                va="top",
                fontsize="small",
                color=INK,
            )


def _mark_resonances(
    ax: Axes,
    frequency_hz: NDArray[np.float64],
    impedance: NDArray[np.complex128],
    unit: DisplayUnit,
) -> None:
    """Full circles at series and open ones at parallel resonances, where they lie: on X = 0."""
    known = np.isfinite(impedance)
    resonances = find_resonances(frequency_hz[known], impedance[known])
    for kind in ("series", "parallel"):
        found = [resonance for resonance in resonances if resonance.kind == kind]
        if not found:
            continue
        listed = "\n".join(
            f"{frequency_text(each.frequency_hz, unit)}, {each.resistance_ohm:.1f} ohm"
            for each in found
        )
        ax.plot(
            [each.frequency_hz * unit.factor for each in found],
            [0.0] * len(found),
            linestyle="none",
            marker="o",
            markersize=7,
            fillstyle="full" if kind == "series" else "none",
            color=INK,
            zorder=4,
            clip_on=False,
            label=f"{kind} resonance:\n{listed}",
        )
