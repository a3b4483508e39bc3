"""Mode currents along the strip, tip to tip."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from simkit.plot.along import (
    Axis,
    axis_of,
    dress,
    joined,
    mark_extrema,
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


def plot_current(
    dataset: xr.Dataset,
    case: int | None = None,
    *,
    antenna: Antenna | None = None,
    half_waves: Sequence[int] | None = None,
    ax: Axes | None = None,
) -> Axes:
    """Draw the current of each natural mode along the path from tip to tip through the feed.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results, or one case of them.
    case : int, optional
        Label of the case; the solved one in the middle of the sweep if left out.
    antenna : Antenna, optional
        Of that case, ``study.case(number).antenna``. Strips joined in a T or over their edges are
        known from it; without it only ends that meet are.
    half_waves : sequence of int, optional
        Modes to draw, by their number of half waves; the lowest five if left out.
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
    The strong line is the real part, the faint one of the same colour the magnitude. All strips
    count positive in the direction of the path, whichever way they were described, so each change
    of sign is a phase reversal of the mode. Branches follow after the path, each counted from its
    joint and positive away from it. A filled marker stands at each maximum of the current, a cross
    at each node.
    """
    chosen = one_case(dataset, case)
    ax = new_axes(ax, (9.0, 5.0))
    put_title(ax, title_of(chosen, "mode currents"))
    tidy(ax)
    ax.set_ylabel("mode current, real part (largest = 1)")
    ax.set_xlabel(MILLIMETRE.label("distance along the strip"))
    if not is_solved(chosen):
        say_empty(ax, why_empty(chosen))
        return ax
    axis = axis_of(chosen, antenna)
    ax.axhline(0.0, color=QUIET, linewidth=0.8)
    modes = wanted_modes(numbered_modes(chosen), half_waves)
    styles = mode_styles([mode.half_waves for mode in modes])
    for mode, style in zip(modes, styles, strict=True):
        _draw_mode(ax, chosen, mode, style, axis)
    dress(ax, chosen, axis, top=1.3, bottom=-1.12)
    legend_beside(ax, "natural modes\n(faint: magnitude)")
    return ax


def _draw_mode(ax: Axes, case: xr.Dataset, mode: Mode, style: ModeStyle, axis: Axis) -> None:
    current, position = strip_currents(case, mode)
    current = steadied(current, axis.routes[0], position)
    place, along = joined(axis, [route.current(current, position) for route in axis.routes])
    ax.plot(
        place,
        along.real,
        color=style.colour,
        linestyle=style.linestyle,
        linewidth=1.8,
        label=mode_label(case, mode),
    )
    ax.plot(place, np.abs(along), color=style.colour, linewidth=0.8, alpha=0.35)
    mark_extrema(ax, axis, style, current, position)
