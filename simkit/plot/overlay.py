"""Measured and simulated reflection in one picture, the dips of each mode side by side."""

from __future__ import annotations

from typing import TYPE_CHECKING

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
    tidy,
)

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes

    from simkit.measured.comparison import Comparison
    from simkit.measured.measurement import ComplexArray, FloatArray
    from simkit.measured.mode_line import ModeLine

MEASURED_COLOUR = "#8c5a9e"
"""A violet that no mode has; the simulated curve is dashed besides."""
SIMULATED_DASHES = (0, (5, 1.6))
WIDEST_COMMENT = 80
FLOOR_DB = -20.0
"""The picture reaches down to here at least, so that shallow dips are not blown up."""


def plot_overlay(comparison: Comparison, *, ax: Axes | None = None) -> Axes:
    """Draw measured and simulated |reflection| in dB, each pair of dips labelled by its mode.

    Full markers are measured dips, hollow ones simulated; a cross is a measured dip that belongs to
    no mode. The frequency axis shows the band that either curve covers.

    Parameters
    ----------
    comparison : Comparison
        From `simkit.compare`.
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.

    Returns
    -------
    matplotlib.axes.Axes
    """
    ax = new_axes(ax, (10.0, 5.2))
    tidy(ax)
    measurement = comparison.measurement
    unit = frequency_unit([measurement.frequency_hz[-1], comparison.frequency_hz[-1]])
    ax.set_title(_title(comparison), fontsize="medium", loc="left")
    ax.set_xlabel(unit.label("frequency"))
    ax.set_ylabel(f"|reflection| (dB re {measurement.reference_ohm:g} ohm)")
    lowest = min(
        _draw_curve(
            ax, comparison.frequency_hz, comparison.simulated_reflection, unit, measured=False
        ),
        _draw_curve(ax, measurement.frequency_hz, measurement.reflection, unit, measured=True),
    )
    ax.set_ylim(min(FLOOR_DB, 5.0 * np.floor(lowest / 5.0 - 0.6)), 1.0)
    for line in comparison.lines:
        _mark_mode(ax, line, unit)
    for dip in comparison.unpaired:
        ax.plot(
            dip.frequency_hz * unit.factor,
            -dip.return_loss_db,
            marker="x",
            markersize=8,
            markeredgewidth=1.8,
            color=INK,
            linestyle="none",
            zorder=5,
        )
    legend_beside(ax, handles=_explained(comparison, unit))
    return ax


def plot_overlay_smith(comparison: Comparison, *, ax: Axes | None = None) -> Axes:
    """Draw measured and simulated reflection in a Smith chart, their dips marked by mode.

    Full markers are measured dips, hollow ones simulated.

    Parameters
    ----------
    comparison : Comparison
        From `simkit.compare`.
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.

    Returns
    -------
    matplotlib.axes.Axes
    """
    ax = new_axes(ax, (9.4, 7.2))
    ax.set_title(_title(comparison), fontsize="medium", loc="left")
    draw_chart(ax, comparison.measurement.reference_ohm)
    measurement = comparison.measurement
    unit = frequency_unit([measurement.frequency_hz[-1], comparison.frequency_hz[-1]])
    simulated = (comparison.frequency_hz, comparison.simulated_reflection)
    measured = (measurement.frequency_hz, measurement.reflection)
    for (_, gamma), is_measured in ((simulated, False), (measured, True)):
        ax.plot(
            gamma.real,
            gamma.imag,
            color=MEASURED_COLOUR if is_measured else INK,
            linestyle="solid" if is_measured else SIMULATED_DASHES,
            linewidth=1.7 if is_measured else 1.5,
            zorder=3 if is_measured else 2.5,
        )
    for line in comparison.lines:
        style = mode_style(line.half_waves)
        for place, (frequency, gamma), fill in (
            (line.simulated_hz, simulated, "white"),
            (line.measured_hz, measured, style.colour),
        ):
            if np.isfinite(place):
                ax.plot(
                    np.interp(place, frequency, gamma.real),
                    np.interp(place, frequency, gamma.imag),
                    marker=style.marker,
                    markersize=8,
                    markerfacecolor=fill,
                    markeredgecolor=style.colour,
                    markeredgewidth=1.6,
                    linestyle="none",
                    zorder=5,
                )
    for dip in comparison.unpaired:
        at = (np.interp(dip.frequency_hz, measured[0], part) for part in _parts(measured[1]))
        ax.plot(*at, marker="x", markersize=8, color=INK, linestyle="none", zorder=5)
    legend_beside(ax, handles=_explained(comparison, unit))
    return ax


def _parts(gamma: ComplexArray) -> tuple[FloatArray, FloatArray]:
    return np.asarray(gamma.real), np.asarray(gamma.imag)


def _title(comparison: Comparison) -> str:
    from simkit.measured.wording import case_text

    study = f"{comparison.title} - " if comparison.title else ""
    text = f"{study}{comparison.measurement.path.name}\nbeside {case_text(comparison)}"
    said = comparison.file_comment
    if said:
        text += f"\nthe measured file says: {said[:WIDEST_COMMENT]}"
    # A dollar sign would start a formula.
    return text.replace("$", r"\$")


def _draw_curve(
    ax: Axes, frequency_hz: FloatArray, gamma: ComplexArray, unit: DisplayUnit, *, measured: bool
) -> float:
    """Draw one curve and return its lowest level in dB."""
    # A perfect match would be minus infinity; nothing below -80 dB is ever read off a picture.
    level = 20 * np.log10(np.maximum(np.abs(gamma), 1e-4))
    ax.plot(
        frequency_hz * unit.factor,
        level,
        color=MEASURED_COLOUR if measured else INK,
        linestyle="solid" if measured else SIMULATED_DASHES,
        linewidth=1.7 if measured else 1.5,
        zorder=3 if measured else 2.5,
    )
    return float(level.min())


def _mark_mode(ax: Axes, line: ModeLine, unit: DisplayUnit) -> None:
    """Hollow marker in the simulated dip, full one in the measured dip, one name under both."""
    style = mode_style(line.half_waves)
    places = []
    for frequency_hz, loss_db, fill in (
        (line.simulated_hz, line.simulated_return_loss_db, "white"),
        (line.measured_hz, line.measured_return_loss_db, style.colour),
    ):
        if not np.isfinite(frequency_hz):
            continue
        places.append((frequency_hz * unit.factor, -loss_db))
        ax.plot(
            *places[-1],
            marker=style.marker,
            markersize=7.5,
            markerfacecolor=fill,
            markeredgecolor=style.colour,
            markeredgewidth=1.6,
            linestyle="none",
            zorder=5,
        )
    if places:
        ax.annotate(
            line.label,
            (float(np.mean([x for x, _ in places])), min(y for _, y in places)),
            xytext=(0, -9),
            textcoords="offset points",
            ha="center",
            va="top",
            fontsize="small",
            color=INK,
        )


def _explained(comparison: Comparison, unit: DisplayUnit) -> list[Artist]:
    """Legend: the two curves, then each mode with its frequencies, then what is left over."""
    entries: list[Artist] = [
        Line2D([], [], color=MEASURED_COLOUR, linewidth=1.7, label="measured"),
        Line2D([], [], color=INK, linewidth=1.5, linestyle=SIMULATED_DASHES, label="simulated"),
    ]
    for line in comparison.lines:
        if np.isfinite(line.simulated_hz) or np.isfinite(line.measured_hz):
            style = mode_style(line.half_waves)
            entries.append(_marker(style.marker, style.colour, _mode_text(line, unit)))
    for dip in comparison.unpaired:
        place = frequency_text(dip.frequency_hz, unit)
        entries.append(_marker("x", INK, f"measured, of no mode\n{place}"))
    if any(line.is_paired for line in comparison.lines):
        entries.append(_marker("o", QUIET, "dip, measured"))
        entries.append(_marker("o", QUIET, "dip, simulated", fill="white"))
    return entries


def _marker(marker: str, colour: str, label: str, fill: str | None = None) -> Line2D:
    return Line2D(
        [],
        [],
        marker=marker,
        markersize=7.5,
        markerfacecolor=fill or colour,
        markeredgecolor=colour,
        markeredgewidth=1.6,
        linestyle="none",
        label=label,
    )


def _mode_text(line: ModeLine, unit: DisplayUnit) -> str:
    lines = [line.label]
    if np.isfinite(line.measured_hz):
        lines.append(f"measured {frequency_text(line.measured_hz, unit)}")
    if np.isfinite(line.simulated_hz):
        lines.append(f"simulated {frequency_text(line.simulated_hz, unit)}")
    if line.is_paired:
        lines.append(f"ratio {line.ratio:.4f}")
    return "\n".join(lines)
