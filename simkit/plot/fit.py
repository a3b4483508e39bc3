"""A fit in pictures: curves before and after, what is left, and how the modes moved."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.lines import Line2D

from simkit.plot.smith import draw_chart
from simkit.plot.style import (
    INK,
    QUIET,
    DisplayUnit,
    frequency_text,
    frequency_unit,
    legend_beside,
    mode_style,
    new_axes,
    plain,
    put_title,
    say_empty,
    tidy,
)
from simkit.response.labels import half_wave_label

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from simkit.measured.fit_result import FitResult, FittedCurve
    from simkit.measured.measurement import ComplexArray, FloatArray

MEASURED = "#8c5a9e"
AFTER = "#1b6f8a"
BEFORE_DASHES = (0, (4, 2.2))
FLOOR_DB = -20.0
BAND_95 = 1.96


def plot_fit(result: FitResult, curve: FittedCurve, *, ax: Axes | None = None) -> Axes:
    """Draw |reflection| measured, before and after the fit, with the dips of the modes.

    Parameters
    ----------
    result : FitResult
    curve : FittedCurve
        One of its files.
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.
    """
    ax = new_axes(ax, (10.5, 5.2))
    tidy(ax)
    f = curve.measurement.frequency_hz
    unit = frequency_unit(f)
    put_title(ax, _title(result, curve))
    ax.set_xlabel(unit.label("frequency"))
    ax.set_ylabel(f"|reflection| (dB re {curve.measurement.reference_ohm:g} ohm)")
    levels = [_decibels(g) for g in (curve.before, curve.measurement.reflection, curve.after)]
    for level, style in zip(levels, _STYLES, strict=True):
        ax.plot(f * unit.factor, level, **style)
    ax.set_ylim(
        min(FLOOR_DB, 5 * np.floor(min(float(level.min()) for level in levels) / 5 - 0.6)), 1.0
    )
    handles = [Line2D([], [], **style) for style in _STYLES]
    handles += _mark_dips(ax, curve, unit)
    legend_beside(ax, handles=handles)
    return ax


_STYLES: tuple[dict[str, Any], ...] = (
    {
        "color": QUIET,
        "linestyle": BEFORE_DASHES,
        "linewidth": 1.4,
        "label": "study as it is",
        "zorder": 2.4,
    },
    {
        "color": MEASURED,
        "linestyle": "solid",
        "linewidth": 2.6,
        "alpha": 0.75,
        "label": "measured",
        "zorder": 2.5,
    },
    {"color": AFTER, "linestyle": "solid", "linewidth": 1.3, "label": "fitted", "zorder": 3},
)


def _mark_dips(ax: Axes, curve: FittedCurve, unit: DisplayUnit) -> list[Line2D]:
    """Full markers on the measured dips, named by their mode; crosses for those of none."""
    handles = []
    taken = dict(curve.pairs)
    on_plane = curve.modes_after.on_plane
    for half_waves, place in taken.items():
        dip, style = curve.dips[place], mode_style(half_waves)
        label = half_wave_label(half_waves, on_plane)
        ax.plot(
            dip.frequency_hz * unit.factor,
            -dip.return_loss_db,
            marker=style.marker,
            color=style.colour,
            markersize=8,
            linestyle="none",
            zorder=5,
        )
        ax.annotate(
            label,
            (dip.frequency_hz * unit.factor, -dip.return_loss_db),
            xytext=(0, -9),
            textcoords="offset points",
            ha="center",
            va="top",
            fontsize="small",
            color=INK,
        )
        where = curve.modes_after.half_waves.index(half_waves)
        before = curve.modes_before.dip_hz[where]
        after = curve.modes_after.dip_hz[where]
        text = f"{label}\nmeasured {frequency_text(dip.frequency_hz, unit)}"
        if np.isfinite(before) and np.isfinite(after):
            text += f"\nstudy {frequency_text(before, unit)}\nfitted {frequency_text(after, unit)}"
        handles.append(
            Line2D([], [], marker=style.marker, color=style.colour, linestyle="none", label=text)
        )
    f = curve.measurement.frequency_hz
    for place, dip in enumerate(curve.dips):
        if place in taken.values() or not f[0] <= dip.frequency_hz <= f[-1]:
            continue
        ax.plot(dip.frequency_hz * unit.factor, -dip.return_loss_db, "x", color=INK, zorder=5)
        text = f"measured, of no mode\n{frequency_text(dip.frequency_hz, unit)}"
        handles.append(Line2D([], [], marker="x", color=INK, linestyle="none", label=text))
    return handles


def plot_fit_smith(result: FitResult, curve: FittedCurve, *, ax: Axes | None = None) -> Axes:
    """Draw the same three curves in a Smith chart, measured dips marked on the measured one."""
    ax = new_axes(ax, (9.0, 7.2))
    put_title(ax, _title(result, curve))
    draw_chart(ax, curve.measurement.reference_ohm)
    measured = curve.measurement.reflection
    handles = []
    for gamma, style in zip((curve.before, measured, curve.after), _STYLES, strict=True):
        ax.plot(gamma.real, gamma.imag, **style)
        handles.append(Line2D([], [], **style))
    f = curve.measurement.frequency_hz
    unit = frequency_unit(f)
    for half_waves, place in curve.pairs:
        frequency, style_of = curve.dips[place].frequency_hz, mode_style(half_waves)
        label = half_wave_label(half_waves, curve.modes_after.on_plane)
        for gamma, fill in ((measured, style_of.colour), (curve.after, "white")):
            ax.plot(
                np.interp(frequency, f, gamma.real),
                np.interp(frequency, f, gamma.imag),
                marker=style_of.marker,
                markersize=8,
                markerfacecolor=fill,
                markeredgecolor=style_of.colour,
                markeredgewidth=1.5,
                linestyle="none",
                zorder=5,
            )
        handles.append(
            Line2D(
                [],
                [],
                marker=style_of.marker,
                color=style_of.colour,
                linestyle="none",
                label=f"{label}, {frequency_text(frequency, unit)}\n(hollow: fitted, same place)",
            )
        )
    legend_beside(ax, handles=handles)
    return ax


def plot_residuals(result: FitResult, curve: FittedCurve, *, ax: Axes | None = None) -> Axes:
    """Draw measured minus modelled reflection over frequency, before and after the fit."""
    ax = new_axes(ax, (10.5, 4.2))
    tidy(ax)
    f = curve.measurement.frequency_hz
    unit = frequency_unit(f)
    put_title(ax, _title(result, curve))
    ax.set_xlabel(unit.label("frequency"))
    ax.set_ylabel("measured - modelled reflection")
    before = np.abs(curve.measurement.reflection - curve.before)
    off = curve.residual
    x = f * unit.factor
    ax.fill_between(x, -before, before, color=QUIET, alpha=0.16, linewidth=0, label="study, size")
    ax.plot(x, off.real, color=AFTER, linewidth=1.4, label="fitted, real part")
    ax.plot(
        x,
        off.imag,
        color=MEASURED,
        linewidth=1.4,
        linestyle=(0, (6, 2)),
        label="fitted, imaginary part",
    )
    ax.axhline(0, color=INK, linewidth=0.8)
    for half_waves, place in curve.pairs:
        frequency = curve.dips[place].frequency_hz * unit.factor
        style = mode_style(half_waves)
        ax.axvline(frequency, color=style.colour, linewidth=1.0, linestyle=style.linestyle)
        ax.annotate(
            half_wave_label(half_waves, curve.modes_after.on_plane),
            (frequency, 1.0),
            xycoords=("data", "axes fraction"),
            xytext=(3, -3),
            textcoords="offset points",
            va="top",
            fontsize="small",
            color=style.colour,
        )
    legend_beside(ax)
    return ax


def plot_mode_ratios(result: FitResult, *, ax: Axes | None = None) -> Axes:
    """Draw measured over modelled dip frequency for each mode, before and after the fit.

    A level row of points is a wrong length or scale; a slope is a wrong width, carrier or feed.
    The band is the model's own error, 95 %.
    """
    ax = new_axes(ax, (8.6, 4.6))
    tidy(ax)
    said = [
        f"{curve.measurement.path.name} says: {_comment(curve)[:70]}"
        for curve in result.curves
        if _comment(curve)
    ]
    put_title(
        ax, "\n".join([f"{result.study.title}: measured over modelled dip, mode by mode", *said])
    )
    labels: list[str] = []
    for number, curve in enumerate(result.curves):
        for half_waves, place in curve.pairs:
            label = half_wave_label(half_waves, curve.modes_after.on_plane)
            if label not in labels:
                labels.append(label)
            where = curve.modes_after.half_waves.index(half_waves)
            measured, style = curve.dips[place].frequency_hz, mode_style(half_waves)
            x = labels.index(label) + 0.08 * number
            ratios = (
                measured / curve.modes_before.dip_hz[where],
                measured / curve.modes_after.dip_hz[where],
            )
            for ratio, fill in zip(ratios, ("white", style.colour), strict=True):
                ax.plot(
                    x,
                    100 * (ratio - 1),
                    marker=style.marker,
                    markersize=9,
                    markerfacecolor=fill,
                    markeredgecolor=style.colour,
                    markeredgewidth=1.6,
                    linestyle="none",
                    zorder=4,
                )
            ax.annotate(
                "",
                (x, 100 * (ratios[1] - 1)),
                (x, 100 * (ratios[0] - 1)),
                arrowprops={"arrowstyle": "->", "color": QUIET, "shrinkA": 6, "shrinkB": 6},
            )
    if not labels:
        say_empty(ax, "no measured dip could be paired with a mode")
        return ax
    limit = 100 * BAND_95 * np.hypot(result.problem.sizes.model, result.problem.sizes.mode)
    ax.axhspan(-limit, limit, color=QUIET, alpha=0.15, linewidth=0)
    ax.axhline(0, color=INK, linewidth=0.9)
    ax.set_xticks(range(len(labels)), labels)
    ax.set_xlim(-0.5, len(labels) - 0.5)
    ax.set_ylabel("measured / modelled - 1 (%)")
    grey: dict[str, Any] = {"marker": "o", "markeredgecolor": QUIET, "linestyle": "none"}
    legend_beside(
        ax,
        handles=[
            Line2D([], [], markerfacecolor="white", label="study as it is", **grey),
            Line2D([], [], markerfacecolor=QUIET, label="fitted", **grey),
            Line2D([], [], color=QUIET, alpha=0.3, linewidth=8, label="error of the model, 95 %"),
        ],
    )
    return ax


def _decibels(gamma: ComplexArray) -> FloatArray:
    return np.asarray(20 * np.log10(np.maximum(np.abs(gamma), 1e-4)))


def _comment(curve: FittedCurve) -> str:
    """The first line in which the measured file says what it is."""
    return next((line for line in curve.measurement.comments if line), "")


def put_source(ax: Axes, result: FitResult, curve: FittedCurve) -> None:
    """Write above a picture of a trim what it comes from: study, file and what the file says."""
    said = _comment(curve)
    lines = [
        f"{result.study.title} - {curve.measurement.path.name}",
        ax.get_title(loc="left"),
        *([plain(f"the measured file says: {said[:80]}")] if said else []),
    ]
    ax.set_title("\n".join([plain(lines[0]), *lines[1:]]), fontsize="medium", loc="left")


def _title(result: FitResult, curve: FittedCurve) -> str:
    text = result.problem.variation.text
    values = ", ".join(
        f"{v.name} {text(v.name, v.value, 4)} (was {text(v.name, v.nominal, 4)})"
        for v in result.values
    )
    said = _comment(curve)
    return f"{result.study.title} - {curve.measurement.path.name}\n{values}" + (
        f"\nthe measured file says: {said[:80]}" if said else ""
    )
