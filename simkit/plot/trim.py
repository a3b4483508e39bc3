"""The trim curve: a mode's dip against a dimension, with its band, now and wanted."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from simkit.plot.style import (
    INK,
    QUIET,
    frequency_text,
    frequency_unit,
    legend_beside,
    mode_style,
    new_axes,
    put_title,
    tidy,
)
from simkit.study.units import as_text, find_unit

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from simkit.measured.trim import Trim

BAND_95 = 1.96


def plot_trim(trim: Trim, *, ax: Axes | None = None) -> Axes:
    """Draw how the dip goes with the dimension by the fitted model and by plain scaling.

    Parameters
    ----------
    trim : Trim
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.
    """
    ax = new_axes(ax, (9.6, 5.0))
    tidy(ax)
    style = mode_style(trim.half_waves)
    unit = frequency_unit(trim.dips_hz)
    scale = 1 / float(find_unit(trim.unit).factor)
    x, y = trim.values * scale, trim.dips_hz * unit.factor
    spread = BAND_95 * trim.dip_sigmas_hz * unit.factor
    put_title(
        ax,
        f"{trim.label} dip to {frequency_text(trim.target_hz, unit)} by {trim.name}: "
        f"{as_text(trim.change, trim.unit, 3)} "
        f"({as_text(trim.low, trim.unit, 3)} to {as_text(trim.high, trim.unit, 3)}, 95 %)",
    )
    ax.fill_between(
        x, y - spread, y + spread, color=style.colour, alpha=0.18, linewidth=0, label="95 % band"
    )
    ax.plot(x, y, color=style.colour, linewidth=1.8, label="fitted model")
    plain = np.full(len(x), np.nan)
    if not trim.of_feedline:
        plain = trim.present_hz * trim.present / trim.values * unit.factor
        ax.plot(x, plain, color=QUIET, linewidth=1.3, linestyle=(0, (4, 2)), label="plain scaling")
    _mark_target(ax, trim, unit.factor)
    now, aim = trim.present * scale, (trim.present + trim.change) * scale
    ax.axvspan(
        (trim.present + trim.low) * scale,
        (trim.present + trim.high) * scale,
        color=INK,
        alpha=0.07,
        linewidth=0,
    )
    ax.plot(
        now,
        trim.present_hz * unit.factor,
        marker="o",
        color=INK,
        linestyle="none",
        markersize=8,
        zorder=5,
        label=f"now: {as_text(trim.present, trim.unit, 5)},\n"
        f"{frequency_text(trim.present_hz, unit)}",
    )
    ax.plot(
        aim,
        trim.target_hz * unit.factor,
        marker="o",
        markerfacecolor="white",
        markeredgecolor=INK,
        linestyle="none",
        markersize=9,
        markeredgewidth=1.8,
        zorder=5,
        label=f"after: {as_text(trim.present + trim.change, trim.unit, 5)},\n"
        f"{frequency_text(trim.target_hz, unit)}",
    )
    if np.isfinite(trim.measured_hz):
        ax.plot(
            now,
            trim.measured_hz * unit.factor,
            "x",
            color=INK,
            zorder=5,
            label=f"measured dip: {frequency_text(trim.measured_hz, unit)}",
        )
    ax.set_xlabel(f"{trim.name} ({trim.unit})" if trim.unit != "1" else trim.name)
    ax.set_ylabel(unit.label("dip"))
    reach = max(abs(aim - now), 2 * BAND_95 * trim.sigma * scale, 0.02 * abs(now))
    ax.set_xlim(max(min(now, aim) - reach, x[0]), min(max(now, aim) + reach, x[-1]))
    inside = (x >= ax.get_xlim()[0]) & (x <= ax.get_xlim()[1])
    if inside.any():
        both = np.concatenate([(y - spread)[inside], (y + spread)[inside], plain[inside]])
        ax.set_ylim(float(np.nanmin(both)), float(np.nanmax(both)))
    legend_beside(ax)
    return ax


def _mark_target(ax: Axes, trim: Trim, factor: float) -> None:
    low, high = trim.band_hz
    if high > low:
        ax.axhspan(low * factor, high * factor, color=QUIET, alpha=0.2, linewidth=0, label="band")
    ax.axhline(trim.target_hz * factor, color=INK, linewidth=0.9, linestyle=(0, (2, 2)))
