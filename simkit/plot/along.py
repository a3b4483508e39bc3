"""What pictures along the strips share: the axis from tip to tip, branches after it, the feed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.ticker import FixedFormatter, FixedLocator, MaxNLocator, NullLocator
from numpy.typing import NDArray
from scipy.interpolate import PchipInterpolator

from simkit.plot.cable_route import NAME, cable_route, has_cable, segments_of, with_cable
from simkit.plot.cases import Mode
from simkit.plot.strip_path import routes_from_wires
from simkit.plot.style import (
    INK,
    MILLIMETRE,
    QUIET,
    ModeStyle,
    frequency_text,
    frequency_unit,
    plain,
)
from simkit.response.charge import charge_along_route
from simkit.response.extrema import find_extrema
from simkit.response.strip_route import Leg, Route, routes_of, turns_m
from simkit.study.model import Antenna

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

LOWEST_MODES = 5
"""More curves than this cannot be told apart in one picture."""
FINE_POINTS = 200
"""Places at which charges, known between segments, are drawn."""
BLANK = 0.08
"""Blank before each branch, over the length of the path."""
NARROW = 0.045
"""Names of strips shorter than this part of the axis take turns in height."""
_MM = MILLIMETRE.factor


@dataclass(frozen=True)
class Axis:
    """Routes in a row along one axis: the path, then each branch from its joint on.

    Attributes
    ----------
    routes : tuple of Route
    offsets_m : tuple of float
        Where each begins on the axis.
    """

    routes: tuple[Route, ...]
    offsets_m: tuple[float, ...]

    @property
    def length_m(self) -> float:
        """End of the last route."""
        return self.offsets_m[-1] + self.routes[-1].length_m


def axis_of(case: xr.Dataset, antenna: Antenna | None) -> Axis:
    """Lay the routes of a case along one axis.

    Parameters
    ----------
    case : xarray.Dataset
    antenna : Antenna, optional
        Without it only ends that meet are known to be joined, so branches stand apart.
    """
    routes = routes_of(antenna) if antenna is not None else routes_from_wires(case)
    if has_cable(case):
        routes = (*routes, cable_route(case))
    offsets, place = [], 0.0
    for route in routes:
        offsets.append(place)
        place += route.length_m + BLANK * routes[0].length_m
    return Axis(tuple(routes), tuple(offsets))


def wanted_modes(
    modes: list[Mode], half_waves: Sequence[int] | None, lowest: int = LOWEST_MODES
) -> list[Mode]:
    """Modes asked for by their number of half waves, or the lowest ones."""
    if half_waves is None:
        return modes[:lowest]
    return [mode for mode in modes if mode.half_waves in half_waves]


def strip_currents(case: xr.Dataset, mode: Mode) -> tuple[ComplexArray, FloatArray]:
    """Current of a mode along each strip, (strip, position), and the positions 0..1.

    The feed cable, where there is one, is one strip more.
    """
    stored = case["mode_current"].isel(mode=mode.slot).transpose("strip", "position").values
    current = np.asarray(stored, dtype=np.complex128)
    position = np.asarray(case["position"].values, dtype=float)
    if has_cable(case):
        current = with_cable(case, mode, current, position)
    return current, position


def steadied(current: ComplexArray, route: Route, position: FloatArray) -> ComplexArray:
    """The same current with its first half wave along the path positive, from case to case."""
    _, along = route.current(current, position)
    size = np.abs(along)
    known = np.isfinite(size)
    clear = np.flatnonzero(known & (size >= 0.5 * np.max(size, where=known, initial=0.0)))
    return -current if clear.size and along[clear[0]].real < 0 else current


def pole_hz(mode: Mode) -> complex:
    """Complex natural frequency of a mode."""
    return mode.frequency_hz * (1 + 0.5j / mode.q)


def mode_charge(
    case: xr.Dataset, mode: Mode, route: Route, current: ComplexArray, position: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Line charge of a mode along a route, a quarter of a period after its current's peak.

    Returns
    -------
    distance_m : (K,) float array
    charge_c_per_m : (K,) float array
        For a largest strip current of 1 A.
    """
    at, charge = charge_along_route(route, current, position, segments_of(case), pole_hz(mode))
    later = (1j * charge).real
    if at.size < 3:
        return at, later
    fine = np.union1d(at, np.linspace(at[0], at[-1], FINE_POINTS))
    return fine, np.asarray(PchipInterpolator(at, later)(fine))


def joined(
    axis: Axis, rows: Sequence[tuple[FloatArray, NDArray[Any]]]
) -> tuple[FloatArray, NDArray[Any]]:
    """Curves of all routes as one in millimetres along the axis, NaN between routes."""
    places, values = [], []
    for offset, (distance, value) in zip(axis.offsets_m, rows, strict=True):
        places += [(distance + offset) * _MM, np.array([np.nan])]
        values += [value, np.array([np.nan])]
    return np.concatenate(places[:-1]), np.concatenate(values[:-1])


def mode_label(case: xr.Dataset, mode: Mode) -> str:
    """Two lines for the legend: the mode, its frequency and Q."""
    unit = frequency_unit(case["frequency"])
    return f"{mode.label}:\n{frequency_text(mode.frequency_hz, unit)}, Q {mode.q:.2f}"


def mark_extrema(
    ax: Axes, axis: Axis, style: ModeStyle, current: ComplexArray, position: FloatArray
) -> None:
    """The mode's own marker at each maximum of its current, a cross at each node."""
    largest = float(np.nanmax(abs(current)))
    for offset, route in zip(axis.offsets_m, axis.routes, strict=True):
        at, along = route.current(current, position)
        known = np.isfinite(along)
        period = route.length_m if route.closed else None
        found = find_extrema(at[known], along[known], period_m=period, largest=largest)
        for one in found:
            place = (one.distance_m + offset) * _MM
            if one.kind == "node":
                ax.plot(place, 0.0, marker="x", markersize=6, color=style.colour, zorder=4)
            elif route.start != "joint" or one.distance_m > route.joinings[0].reach_m:
                height = float(np.interp(one.distance_m, at[known], along[known].real))
                ax.plot(
                    place, height, marker=style.marker, markersize=5, color=style.colour, zorder=4
                )


def dress(ax: Axes, case: xr.Dataset, axis: Axis, top: float, bottom: float) -> None:
    """Set the limits; name strips, mark joints and the feed, and count each branch from zero."""
    ax.set_ylim(bottom, top)
    names = [*(plain(str(name)) for name in case["strip"].values), NAME]
    _name_strips(ax, axis, names)
    _number_distances(ax, axis)
    first = names[axis.routes[0].legs[0].strip]
    if axis.routes[0].closed:
        words = "distance around the loop from the place opposite to the feed"
    else:
        words = f"distance along the strip from the tip of '{first}'"
    if any(route.start == "joint" for route in axis.routes):
        words += "; branches from their joint"
    ax.set_xlabel(MILLIMETRE.label(words))
    feed = axis.routes[0].feed_m
    if np.isfinite(feed):
        ax.axvline(feed * _MM, color=INK, linewidth=1.0, linestyle=(0, (1, 2)))
        ax.annotate(
            "feed",
            (feed * _MM, bottom),
            xytext=(3, 3),
            textcoords="offset points",
            fontsize="small",
            color=INK,
        )


def _name_strips(ax: Axes, axis: Axis, names: Sequence[str]) -> None:
    """Names over the axes' upper edge, and faint lines at joints and turns."""
    low = False
    for offset, route in zip(axis.offsets_m, axis.routes, strict=True):
        joints = [joint.distance_m for joint in route.joinings]
        for at in {*joints, *turns_m(route)} - {0.0}:
            ax.axvline((at + offset) * _MM, color=QUIET, linewidth=0.8, linestyle=(0, (4, 3)))
        note = {"apart": " (apart)", "joint": " (branch)"}.get(route.start, "")
        for leg in _named_once(route):
            # Short strips side by side would write their names over each other.
            low = not low and leg.length_m < NARROW * 2 * axis.length_m and len(route.legs) > 1
            ax.annotate(
                names[leg.strip] + note,
                ((leg.begin_m + leg.length_m / 2 + offset) * _MM, 1.0),
                xycoords=("data", "axes fraction"),
                xytext=(0, -16 if low else -4),
                textcoords="offset points",
                ha="center",
                va="top",
                fontsize="small",
                color=QUIET,
            )


def _named_once(route: Route) -> list[Leg]:
    """The longest leg on each strip."""
    longest: dict[int, Leg] = {}
    for leg in route.legs:
        if leg.strip not in longest or leg.length_m > longest[leg.strip].length_m:
            longest[leg.strip] = leg
    return sorted(longest.values(), key=lambda leg: leg.begin_m)


def _number_distances(ax: Axes, axis: Axis) -> None:
    """Ticks at round distances along each route, each counted from its own beginning."""
    if len(axis.routes) == 1:
        return
    step = float(np.diff(MaxNLocator(nbins=9).tick_values(0.0, axis.length_m * _MM))[0])
    places, words = [], []
    for offset, route in zip(axis.offsets_m, axis.routes, strict=True):
        for at in np.arange(0.0, route.length_m * _MM + 1e-9, step):
            places.append(offset * _MM + at)
            words.append(f"{at:g}")
    ax.xaxis.set_major_locator(FixedLocator(places))
    ax.xaxis.set_major_formatter(FixedFormatter(words))
    ax.xaxis.set_minor_locator(NullLocator())
