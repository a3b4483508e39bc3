"""Mode currents along the strip, tip to tip."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from simkit.plot.cases import Mode, is_solved, numbered_modes, one_case, title_of, why_empty
from simkit.plot.strip_path import StripPath, strip_path
from simkit.plot.style import (
    INK,
    MILLIMETRE,
    QUIET,
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

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

LOWEST_MODES = 5
"""More curves than this cannot be told apart in one picture."""


def plot_current(
    dataset: xr.Dataset,
    case: int | None = None,
    *,
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
    of sign is a phase reversal of the mode.
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
    path = strip_path(chosen)
    ax.axhline(0.0, color=QUIET, linewidth=0.8)
    for mode in _wanted(numbered_modes(chosen), half_waves):
        _draw_mode(ax, chosen, mode, path)
    ax.set_ylim(-1.12, 1.22)
    _name_strips(ax, chosen, path)
    legend_beside(ax, "natural modes\n(faint: magnitude)")
    return ax


def _wanted(modes: list[Mode], half_waves: Sequence[int] | None) -> list[Mode]:
    if half_waves is None:
        return modes[:LOWEST_MODES]
    return [mode for mode in modes if mode.half_waves in half_waves]


def _draw_mode(ax: Axes, case: xr.Dataset, mode: Mode, path: StripPath) -> None:
    current = case["mode_current"].isel(mode=mode.slot).transpose("strip", "position").values
    distance_m, joined = path.join(current, np.asarray(case["position"].values, dtype=float))
    style = mode_style(mode.half_waves)
    unit = frequency_unit(case["frequency"])
    ax.plot(
        distance_m * MILLIMETRE.factor,
        joined.real,
        color=style.colour,
        linestyle=style.linestyle,
        linewidth=1.8,
        label=f"{mode.label}:\n{frequency_text(mode.frequency_hz, unit)}, Q {mode.q:.2f}",
    )
    ax.plot(
        distance_m * MILLIMETRE.factor,
        np.abs(joined),
        color=style.colour,
        linewidth=0.8,
        alpha=0.35,
    )


def _name_strips(ax: Axes, case: xr.Dataset, path: StripPath) -> None:
    """Name each strip along the top and mark the feed."""
    names = case["strip"].values
    for piece in path.pieces:
        middle = (piece.begin_m + piece.length_m / 2) * MILLIMETRE.factor
        name = (
            plain(str(names[piece.strip]))
            if piece.on_path
            else f"{plain(str(names[piece.strip]))} (apart)"
        )
        ax.text(middle, 1.15, name, ha="center", va="center", fontsize="small", color=QUIET)
    first = plain(str(names[path.pieces[0].strip]))
    ax.set_xlabel(MILLIMETRE.label(f"distance along the strip from the tip of '{first}'"))
    if np.isfinite(path.feed_m):
        place = path.feed_m * MILLIMETRE.factor
        ax.axvline(place, color=INK, linewidth=1.0, linestyle=(0, (1, 2)))
        ax.annotate(
            "feed",
            (place, -1.12),
            xytext=(3, 3),
            textcoords="offset points",
            fontsize="small",
            color=INK,
        )
