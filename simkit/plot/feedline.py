"""The feed line of a stored case: its items, its way through the Smith chart, what it does."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from simkit.errors import StoreError
from simkit.plot.cases import is_solved, one_case, reference_ohm, title_of, why_empty
from simkit.plot.matching import plot_match, plot_match_path
from simkit.plot.reflection import owned_dips
from simkit.plot.schematic import plot_schematic
from simkit.plot.smith import draw_chart
from simkit.plot.style import new_axes, put_title, say_empty
from simkit.store.read import has_feedline

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

    from simkit.feedline.chain import Chain
    from simkit.feedline.oneport import OnePort

NARROW = 0.02
"""Part of a dip's frequency that is shaded around it where it is too shallow to have a band."""


def plot_feedline(dataset: xr.Dataset, case: int | None = None, *, ax: Axes | None = None) -> Axes:
    """Draw the feed line from the antenna to the connector, lengths to scale.

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
        If there is no such case, or the study has no feed line.
    """
    chosen = _case_with_line(dataset, case, "feedline")
    if not is_solved(chosen):
        return _empty(chosen, "feed line", new_axes(ax, (9.6, 5.2)))
    ax = plot_schematic(_chain(chosen), ax=ax)
    put_title(ax, title_of(chosen, "feed line from the antenna to the connector"))
    return ax


def plot_feedline_path(
    dataset: xr.Dataset,
    case: int | None = None,
    *,
    frequency_hz: float | None = None,
    ax: Axes | None = None,
) -> Axes:
    """Draw the way from the feed to the connector through a Smith chart, item by item.

    Parameters are those of `plot_feedline`, and the frequency of the way: that of the deepest dip
    at the connector if left out.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    StoreError
        As `plot_feedline`.
    FeedlineError
        If the frequency lies outside the band.
    """
    chosen = _case_with_line(dataset, case, "feedline_path")
    if not is_solved(chosen):
        ax = new_axes(ax, (9.2, 6.6))
        draw_chart(ax, reference_ohm(chosen))
        return _empty(chosen, "from feed to connector", ax)
    place, band_hz = _dip(chosen)
    at_hz = place if frequency_hz is None else frequency_hz
    shown = band_hz if band_hz[0] <= at_hz <= band_hz[1] else None
    ax = plot_match_path(_chain(chosen), _load(chosen), at_hz, shown, ax=ax)
    put_title(ax, title_of(chosen, ax.get_title(loc="left")))
    return ax


def plot_feedline_match(
    dataset: xr.Dataset, case: int | None = None, *, ax: Axes | None = None
) -> Axes:
    """Draw |reflection| at the feed and at the connector, the band around the deepest dip shaded.

    Parameters are those of `plot_feedline`; the band is the one with at least 10 dB return loss.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    StoreError
        As `plot_feedline`.
    """
    chosen = _case_with_line(dataset, case, "feedline_match")
    if not is_solved(chosen):
        return _empty(chosen, "reflection at feed and connector", new_axes(ax, (8.6, 4.8)))
    _, band_hz = _dip(chosen)
    ax = plot_match(_chain(chosen), _load(chosen), *band_hz, ax=ax)
    put_title(ax, title_of(chosen, "reflection at the feed (terminals) and at the connector"))
    return ax


def _case_with_line(dataset: xr.Dataset, case: int | None, kind: str) -> xr.Dataset:
    if not has_feedline(dataset):
        raise StoreError(
            f"the picture '{kind}' needs a study with [[feedline]] items; in this one the "
            "connector is the feed"
        )
    return one_case(dataset, case)


def _empty(chosen: xr.Dataset, what: str, ax: Axes) -> Axes:
    put_title(ax, title_of(chosen, what))
    ax.set_axis_off()
    say_empty(ax, why_empty(chosen))
    return ax


def _chain(case: xr.Dataset) -> Chain:
    from simkit.response.evaluate import chain_of_case

    return chain_of_case(case)


def _load(case: xr.Dataset) -> OnePort:
    from simkit.feedline.oneport import OnePort

    f = np.asarray(case["frequency"].values, dtype=float)
    return OnePort.from_impedance(f, case["impedance"].values, reference_ohm(case))


def _dip(case: xr.Dataset) -> tuple[float, tuple[float, float]]:
    """Frequency of the deepest dip of a mode, and the band around it; without a dip, the band's
    middle."""
    f = np.asarray(case["frequency"].values, dtype=float)
    low, high = float(f[0]), float(f[-1])
    dips = owned_dips(case)
    if not dips:
        place = (low + high) / 2
        return place, (max(low, place * (1 - NARROW)), min(high, place * (1 + NARROW)))
    deepest = max(dips, key=lambda dip: dip.return_loss_db)
    place = deepest.frequency_hz
    width = NARROW * place
    slots = np.flatnonzero(case["dip_frequency"].values == place)
    known = float(case["dip_bandwidth"].values[slots[0]])
    width = known if np.isfinite(known) else width
    return place, (max(low, place - width / 2), min(high, place + width / 2))
