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

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from simkit.measured.measurement import FloatArray
    from simkit.measured.trim import Trim

BAND_95 = 1.96
LOSS = "#8c5a9e"
"""Return loss, on the axis to the right; a violet that no mode has."""


def plot_trim(trim: Trim, *, ax: Axes | None = None) -> Axes:
    """Draw how the dip goes with the dimension by the fitted model and by plain scaling.

    Parameters
    ----------
    trim : Trim
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.
    """
    from simkit.measured.trim_words import change_text, length_text, unit_si

    ax = new_axes(ax, (9.6, 5.0))
    tidy(ax)
    style = mode_style(trim.half_waves)
    unit = frequency_unit(trim.dips_hz)
    scale = 1 / unit_si(trim.unit)
    x, y = trim.values * scale, trim.dips_hz * unit.factor
    spread = BAND_95 * trim.dip_sigmas_hz * unit.factor
    change, low, high = (
        change_text(value, trim.unit) for value in (trim.change, trim.low, trim.high)
    )
    best = ", best match over the band," if len(trim.losses_db) else ""
    unsupported = "" if trim.is_measured else f"\nUNSUPPORTED: no measured {trim.label} dip"
    put_title(
        ax,
        f"{trim.label} dip to {frequency_text(trim.target_hz, unit)}{best} by {trim.name}: "
        f"{change} (95 %: {low} to {high}){unsupported}",
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
        label=f"95 % interval of {trim.name}",
    )
    ax.plot(
        now,
        trim.present_hz * unit.factor,
        marker="o",
        color=INK,
        linestyle="none",
        markersize=8,
        zorder=5,
        label=f"now: {length_text(trim.present, trim.unit)},\n"
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
        label=f"after: {length_text(trim.present + trim.change, trim.unit)},\n"
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
    legend_beside(ax, away=1.09 if _draw_losses(ax, trim, x) else 1.01)
    return ax


def _draw_losses(ax: Axes, trim: Trim, x: FloatArray) -> bool:
    """Least return loss in the band on an axis of its own, for a trim that aims at one."""
    if not len(trim.losses_db):
        return False
    right = ax.twinx()
    right.plot(x, trim.losses_db, color=LOSS, linewidth=1.5, linestyle=(0, (1, 1)))
    right.set_ylabel("least return loss in the band (dB)", color=LOSS)
    right.tick_params(axis="y", colors=LOSS)
    for side in ("top", "left"):
        right.spines[side].set_visible(False)
    low, high = ax.get_xlim()
    inside = (x >= low) & (x <= high)
    if inside.any():
        shown = trim.losses_db[inside]
        right.set_ylim(float(shown.min()) - 0.5, float(shown.max()) + 1.5)
    ax.plot([], [], color=LOSS, linewidth=1.5, linestyle=(0, (1, 1)),
            label=f"least return loss in the band:\n{trim.band_return_loss_now_db:.1f} dB now, "
            f"{trim.band_return_loss_db:.1f} dB after")  # fmt: skip
    return True


def _mark_target(ax: Axes, trim: Trim, factor: float) -> None:
    low, high = trim.band_hz
    if high > low:
        ax.axhspan(low * factor, high * factor, color=QUIET, alpha=0.2, linewidth=0, label="band")
    ax.axhline(trim.target_hz * factor, color=INK, linewidth=0.9, linestyle=(0, (2, 2)))
