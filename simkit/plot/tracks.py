"""Natural modes and dips against a swept value."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from simkit.errors import StoreError
from simkit.plot.cases import has_data, nearest_case, on_plane, swept_unit
from simkit.plot.style import (
    INK,
    QUIET,
    DisplayUnit,
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
from simkit.store.read import swept_names
from simkit.store.schema import Status

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

FloatArray = NDArray[np.float64]

DIP_DASHES = (0, (4, 2))
LABEL_ROOM = 0.12
"""Free width to the right of the lines for their names, over the width of the picture."""
MOST_LISTED = 6
"""Values of faint lines named in the legend; a large sweep has too many."""


@dataclass(frozen=True)
class MeasuredBuild:
    """Dips of one measured build: `value` is its swept value in SI units."""

    name: str
    value: float
    dip_frequency_hz: tuple[float, ...]


@dataclass(frozen=True)
class _Group:
    """Cases in the order of the swept value, all else equal unless `values` is empty."""

    cases: NDArray[np.int64]
    values: str
    strong: bool
    joined: bool


def plot_tracks(
    dataset: xr.Dataset,
    by: str | None = None,
    *,
    nominal: Mapping[str, float] | None = None,
    measured: Sequence[MeasuredBuild] = (),
    ax: Axes | None = None,
) -> Axes:
    """Draw the frequencies of natural modes (solid) and dips (dashed) against a swept value.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results with the dimension `case`; select from it to see part of a sweep.
    by : str, optional
        The swept value along the horizontal axis; the first one if left out.
    nominal : mapping of str to float, optional
        Values (SI) that choose, among other swept values, the strongly drawn ones; the rest is
        faint. The middle of each sweep if left out.
    measured : sequence of MeasuredBuild
        Drawn as crosses.
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    StoreError
        If nothing was swept, or nothing of that name.

    Notes
    -----
    A case without a solution, or in which a mode or dip was not found, leaves a gap in its line.
    Samples that differ in all their values at once are drawn as markers without lines.
    """
    by = _checked_name(dataset, by)
    ax = new_axes(ax, (9.0, 5.5))
    title = str(dataset.attrs.get("title", ""))
    what = f"modes and dips against {by}"
    put_title(ax, f"{title}: {what}" if title else what)
    tidy(ax)
    across, up = swept_unit(dataset, by), frequency_unit(dataset["frequency"])
    ax.set_xlabel(across.label(by))
    ax.set_ylabel(up.label("frequency"))
    groups = _groups(dataset, by, nearest_case(dataset, nominal))
    numbers = _mode_numbers(dataset)
    if not numbers:
        say_empty(ax, "no case has a natural mode yet")
        return ax
    for half_waves in numbers:
        for group in groups:
            _draw_group(ax, dataset, by, half_waves, group, (across, up))
    cable_drawn = _draw_cable_modes(ax, dataset, by, (across, up))
    _name_outer_lines(ax, dataset, by, numbers[-1], groups, (across, up))
    for build in measured:
        places = np.asarray(build.dip_frequency_hz, dtype=float) * up.factor
        across_at = np.full(places.size, build.value * across.factor)
        ax.plot(across_at, places, linestyle="none", marker="x", markersize=8, color=INK, zorder=5)
    labels = {n: half_wave_label(n, on_plane(dataset)) for n in numbers}
    if cable_drawn:
        labels = {-1: half_wave_label(-1), **labels}
    _explain(ax, labels, groups, measured, _blemishes(dataset))
    return ax


def _checked_name(dataset: xr.Dataset, by: str | None) -> str:
    names = tuple(swept_names(dataset))
    if not names:
        raise StoreError("nothing was swept in these results, so there are no tracks to draw")
    if by is None:
        return names[0]
    if by not in names:
        raise StoreError(f"'{by}' was not swept in these results; swept: {', '.join(names)}")
    return by


def _mode_numbers(dataset: xr.Dataset) -> list[int]:
    """Half-wave numbers that occur in any solved case, ascending."""
    numbers = dataset["mode_half_waves"].values
    there = np.isfinite(dataset["mode_frequency"].values) & has_data(dataset)[:, np.newaxis]
    return sorted({int(n) for n in numbers[there] if n >= 0})


def _groups(dataset: xr.Dataset, by: str, strong_case: int) -> list[_Group]:
    """Split the cases by their other swept values; the group of `strong_case` is drawn strongly."""
    others = [name for name in swept_names(dataset) if name != by]
    columns = [np.asarray(dataset[name].values, dtype=float) for name in others]
    keys = [tuple(float(column[i]) for column in columns) for i in range(dataset.sizes["case"])]
    joined = True
    if len(keys) > 1 and len(set(keys)) == len(keys):
        joined = _in_step(dataset, by, others)
        keys = [()] * len(keys)
    x = np.asarray(dataset[by].values, dtype=float)
    strong_key = keys[int(np.flatnonzero(dataset["case"].values == strong_case)[0])]
    groups = []
    for key in dict.fromkeys(keys):
        members = np.array([i for i, k in enumerate(keys) if k == key], dtype=np.int64)
        members = members[np.argsort(x[members], kind="stable")]
        text = ", ".join(
            f"{name} {swept_unit(dataset, name).value(value)}"
            for name, value in zip(others, key, strict=False)
        )
        groups.append(_Group(members, text, key == strong_key, joined))
    return groups


def _in_step(dataset: xr.Dataset, by: str, others: list[str]) -> bool:
    """Whether every other swept value only rises or only falls along the one looked at."""
    order = np.argsort(dataset[by].values, kind="stable")
    for name in (by, *others):
        steps = np.diff(np.asarray(dataset[name].values, dtype=float)[order])
        if not ((steps > 0).all() or (steps < 0).all()):
            return False
    return True


def _frequencies(
    dataset: xr.Dataset, variable: str, half_waves: int, cases: NDArray[np.int64]
) -> FloatArray:
    """Frequency in Hz of the first mode with that number per case; NaN for none or no solution."""
    numbers = dataset["mode_half_waves"].values[cases]
    values = np.asarray(dataset[variable].values[cases], dtype=np.float64)
    known = np.isfinite(dataset["mode_frequency"].values[cases])
    match = (numbers == half_waves) & known & has_data(dataset)[cases][:, np.newaxis]
    slot = np.argmax(match, axis=1)
    picked = values[np.arange(cases.size), slot]
    return np.where(match.any(axis=1), picked, np.nan)


def _draw_cable_modes(
    ax: Axes, dataset: xr.Dataset, by: str, units: tuple[DisplayUnit, DisplayUnit]
) -> bool:
    """Markers at the modes of the feed cable, which have no number to follow; False for none."""
    frequency = np.asarray(dataset["mode_frequency"].values, dtype=np.float64)
    own = (dataset["mode_half_waves"].values < 0) & np.isfinite(frequency)
    own &= has_data(dataset)[:, np.newaxis]
    case, slot = np.nonzero(own)
    if not case.size:
        return False
    style = mode_style(-1)
    ax.plot(
        np.asarray(dataset[by].values, dtype=float)[case] * units[0].factor,
        frequency[case, slot] * units[1].factor,
        linestyle="none",
        marker=style.marker,
        markersize=5,
        color=style.colour,
        zorder=2,
    )
    return True


def _draw_group(
    ax: Axes,
    dataset: xr.Dataset,
    by: str,
    half_waves: int,
    group: _Group,
    units: tuple[DisplayUnit, DisplayUnit],
) -> None:
    """Natural mode and dip of one number over one group of cases."""
    style = mode_style(half_waves)
    x = np.asarray(dataset[by].values[group.cases], dtype=float)
    for variable, dashes, filled in (
        ("mode_frequency", "solid", True),
        ("dip_frequency", DIP_DASHES, False),
    ):
        ax.plot(
            x * units[0].factor,
            _frequencies(dataset, variable, half_waves, group.cases) * units[1].factor,
            color=style.colour,
            linestyle=dashes if group.joined else "none",
            linewidth=1.8 if group.strong else 1.0,
            marker=style.marker,
            markersize=5 if group.strong else 3,
            fillstyle="full" if filled else "none",
            alpha=1.0 if group.strong else 0.35,
            zorder=3 if group.strong else 2,
        )


def _name_outer_lines(
    ax: Axes,
    dataset: xr.Dataset,
    by: str,
    half_waves: int,
    groups: list[_Group],
    units: tuple[DisplayUnit, DisplayUnit],
) -> None:
    """Name the lowest and the highest line of the top mode; those between lie in order."""
    ends = []
    for group in groups:
        frequency = _frequencies(dataset, "mode_frequency", half_waves, group.cases)
        last = np.flatnonzero(np.isfinite(frequency))
        if group.values and last.size:
            x = float(dataset[by].values[group.cases[last[-1]]])
            ends.append((float(frequency[last[-1]]), x, group.values))
    if len(ends) < 2:
        return
    left, right = ax.get_xlim()
    ax.set_xlim(left, right + LABEL_ROOM * (right - left))
    for (frequency_hz, x, text), align in ((min(ends), "top"), (max(ends), "bottom")):
        ax.annotate(
            text,
            (x * units[0].factor, frequency_hz * units[1].factor),
            xytext=(6, 0),
            textcoords="offset points",
            ha="left",
            va=align,
            fontsize=8,
            color=QUIET,
        )


def _blemishes(dataset: xr.Dataset) -> str:
    """Say how many of the cases are doubtful or missing, empty if none is."""
    status = dataset["status"].values
    doubtful = int(np.count_nonzero(status == Status.DOUBTFUL))
    missing = int(np.count_nonzero(~has_data(dataset)))
    parts = [f"{doubtful} doubtful"] if doubtful else []
    parts += [f"{missing} without a solution"] if missing else []
    return f"of {status.size} cases: " + ",\n".join(parts) if parts else ""


def _explain(
    ax: Axes,
    labels: dict[int, str],
    groups: list[_Group],
    measured: Sequence[MeasuredBuild],
    blemishes: str,
) -> None:
    """Legend beside the picture: modes, kinds of line, values of the strong and faint lines."""
    handles = []
    for half_waves, label in reversed(labels.items()):
        style = mode_style(half_waves)
        handles.append(
            Line2D(
                [],
                [],
                color=style.colour,
                marker=style.marker,
                linestyle="solid" if half_waves >= 0 else "none",
                label=label,
            )
        )
    handles.append(Line2D([], [], color=INK, marker="o", markersize=5, label="natural mode"))
    handles.append(
        Line2D(
            [],
            [],
            color=INK,
            linestyle=DIP_DASHES,
            marker="o",
            markersize=5,
            fillstyle="none",
            label="dip at the connector",
        )
    )
    strong = [group.values for group in groups if group.strong and group.values]
    faint = [group.values for group in groups if not group.strong]
    if strong and faint:
        handles.append(Line2D([], [], color=INK, linewidth=1.8, label=f"strong: {strong[0]}"))
        listed = "\n".join(faint[:MOST_LISTED]) + ("\n..." if len(faint) > MOST_LISTED else "")
        handles.append(
            Line2D([], [], color=INK, alpha=0.35, linewidth=1.0, label=f"faint:\n{listed}")
        )
    if measured:
        names = "\n".join(plain(build.name) for build in measured[:MOST_LISTED])
        label = f"measured dips:\n{names}"
        handles.append(Line2D([], [], color=INK, linestyle="none", marker="x", label=label))
    if blemishes:
        handles.append(Line2D([], [], linestyle="none", label=blemishes))
    legend_beside(ax, handles=handles)
