"""Charge of the modes along the strip, tip to tip."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from simkit.plot.along import (
    Axis,
    axis_of,
    dress,
    joined,
    mode_charge,
    mode_label,
    steadied,
    strip_currents,
    wanted_modes,
)
from simkit.plot.cases import Mode, is_solved, numbered_modes, one_case, title_of, why_empty
from simkit.plot.style import (
    MILLIMETRE,
    QUIET,
    ModeStyle,
    legend_beside,
    mode_styles,
    new_axes,
    put_title,
    say_empty,
    tidy,
)
from simkit.study.model import Antenna

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

NANO = 1e9


def plot_charge(
    dataset: xr.Dataset,
    case: int | None = None,
    *,
    antenna: Antenna | None = None,
    half_waves: Sequence[int] | None = None,
    ax: Axes | None = None,
) -> Axes:
    """Draw the line charge of each natural mode along the path from tip to tip through the feed.

    Parameters
    ----------
    dataset, case, antenna, half_waves, ax
        As for `plot_current`.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    StoreError
        If there is no such case.

    Notes
    -----
    From the slope of the current, ``q = (j/omega) dI/ds``, for a largest strip current of 1 A, a
    quarter of a period after the current of `plot_current`: where a current ran towards, there is
    positive charge. Where charge is large the voltage is, and a carrier or a support under the
    strip counts most. Across joints the curve is a straight line from side to side.
    """
    chosen = one_case(dataset, case)
    ax = new_axes(ax, (9.0, 5.0))
    put_title(ax, title_of(chosen, "mode charges"))
    tidy(ax)
    ax.set_ylabel("line charge for a largest current of 1 A (nC/m)")
    ax.set_xlabel(MILLIMETRE.label("distance along the strip"))
    if not is_solved(chosen):
        say_empty(ax, why_empty(chosen))
        return ax
    axis = axis_of(chosen, antenna)
    ax.axhline(0.0, color=QUIET, linewidth=0.8)
    largest = 0.0
    modes = wanted_modes(numbered_modes(chosen), half_waves)
    styles = mode_styles([mode.half_waves for mode in modes])
    for mode, style in zip(modes, styles, strict=True):
        largest = max(largest, _draw_mode(ax, chosen, mode, style, axis))
    dress(ax, chosen, axis, top=1.3 * (largest or 1.0), bottom=-1.12 * (largest or 1.0))
    legend_beside(ax, "natural modes\n(charge a quarter period\nafter the current)")
    return ax


def _draw_mode(ax: Axes, case: xr.Dataset, mode: Mode, style: ModeStyle, axis: Axis) -> float:
    """Draw one mode and return its largest charge in nC/m."""
    current, position = strip_currents(case, mode)
    current = steadied(current, axis.routes[0], position)
    rows = [mode_charge(case, mode, route, current, position) for route in axis.routes]
    place, along = joined(axis, rows)
    ax.plot(
        place,
        along * NANO,
        color=style.colour,
        linestyle=style.linestyle,
        linewidth=1.8,
        label=mode_label(case, mode),
    )
    return float(np.nanmax(np.abs(along), initial=0.0)) * NANO
