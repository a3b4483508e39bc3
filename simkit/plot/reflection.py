"""Reflection at the connector over frequency, in decibels."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.ticker import MultipleLocator
from numpy.typing import ArrayLike, NDArray

from simkit.plot.cases import (
    is_solved,
    numbered_modes,
    one_case,
    reference_ohm,
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
from simkit.response.features import reflection
from simkit.store.read import connector_impedance, has_feedline

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

WELL_MATCHED_DB = -10.0
"""The usual limit from which on a match counts as good: a tenth of the power comes back."""


LOWEST = 1e-5
"""Smaller reflections are drawn as this: -100 dB."""


@dataclass(frozen=True)
class OwnedDip:
    """A dip of |reflection|, with the number of half waves and the words of its mode."""

    half_waves: int
    frequency_hz: float
    return_loss_db: float
    label: str

    def text(self, unit: DisplayUnit) -> str:
        """Return two lines: ``1/2 wave:`` and ``918.0 MHz, −15.1 dB``."""
        place = frequency_text(self.frequency_hz, unit)
        return f"{self.label}:\n{place}, −{self.return_loss_db:.1f} dB"


def owned_dips(case: xr.Dataset) -> list[OwnedDip]:
    """Return the dips of one case that belong to a mode, lowest frequency first."""
    frequency = np.asarray(case["dip_frequency"].values, dtype=float)
    depth = np.asarray(case["dip_return_loss"].values, dtype=float)
    dips = [
        OwnedDip(mode.half_waves, float(frequency[mode.slot]), float(depth[mode.slot]), mode.label)
        for mode in numbered_modes(case)
        if np.isfinite(frequency[mode.slot])
    ]
    return sorted(dips, key=lambda dip: dip.frequency_hz)


def plot_reflection(
    dataset: xr.Dataset, case: int | None = None, *, ax: Axes | None = None
) -> Axes:
    """Draw |reflection| in dB over frequency, each dip labelled by the mode that causes it.

    Of a study with a feed line both planes are drawn; the dips are those at the connector.

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
    """
    chosen = one_case(dataset, case)
    ax = new_axes(ax)
    reference = reference_ohm(chosen)
    put_title(ax, title_of(chosen, "reflection at the connector"))
    tidy(ax)
    unit = frequency_unit(chosen["frequency"])
    ax.set_xlabel(unit.label("frequency"))
    ax.set_ylabel(f"|reflection| (dB re {reference:g} ohm)")
    if not is_solved(chosen):
        say_empty(ax, why_empty(chosen))
        return ax
    frequency = np.asarray(chosen["frequency"].values, dtype=float) * unit.factor
    level = _level_db(chosen[connector_impedance(chosen)].values, reference)
    if has_feedline(chosen):
        before = _level_db(chosen["impedance"].values, reference)
        ax.plot(
            frequency,
            before,
            color=QUIET,
            linewidth=1.2,
            linestyle=(0, (6, 2)),
            label="at the feed",
        )
    ax.plot(
        frequency,
        level,
        color=INK,
        linewidth=1.6,
        label="at the connector" if has_feedline(chosen) else None,
    )
    ax.axhline(WELL_MATCHED_DB, color=QUIET, linewidth=0.9, linestyle=(0, (4, 3)))
    ax.set_xlim(float(frequency[0]), float(frequency[-1]))
    ax.yaxis.set_major_locator(MultipleLocator(5.0))
    ax.set_ylim(min(-20.0, 5.0 * np.floor(float(np.nanmin(level)) / 5.0 - 0.6)), 0.5)
    dips = owned_dips(chosen)
    for dip in dips:
        _mark_dip(ax, dip, unit)
    legend_beside(ax, "planes and dips" if has_feedline(chosen) else "dips")
    return ax


def _level_db(impedance_ohm: ArrayLike, reference_ohm: float) -> NDArray[np.float64]:
    # An exact match would be minus infinity.
    return np.asarray(
        20.0 * np.log10(np.maximum(np.abs(reflection(impedance_ohm, reference_ohm)), LOWEST))
    )


def _mark_dip(ax: Axes, dip: OwnedDip, unit: DisplayUnit) -> None:
    """A marker in the dip's lowest point and the mode's name under it."""
    style = mode_style(dip.half_waves)
    place = (dip.frequency_hz * unit.factor, -dip.return_loss_db)
    ax.plot(
        *place,
        marker=style.marker,
        markersize=7,
        color=style.colour,
        linestyle="none",
        zorder=4,
        label=dip.text(unit),
    )
    ax.annotate(
        dip.label,
        place,
        xytext=(0, -9),
        textcoords="offset points",
        ha="center",
        va="top",
        fontsize="small",
        color=INK,
    )
