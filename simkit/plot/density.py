"""Current and charge density of the modes as colour on the metal."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from matplotlib.collections import QuadMesh
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch
from matplotlib.path import Path
from numpy.typing import NDArray
from shapely import get_parts, union_all
from shapely.geometry.base import BaseGeometry

from simkit.geometry.paths import arc_lengths
from simkit.plot.along import mode_charge, mode_label, steadied, strip_currents, wanted_modes
from simkit.plot.cases import Mode, is_solved, numbered_modes, one_case, title_of, why_empty
from simkit.plot.geometry import FEED_COLOUR
from simkit.plot.metal import as_path, feed_place, metal_of, strip_ends
from simkit.plot.sheet import Sheet, on_strip, sheet_of, without_overlap
from simkit.plot.style import (
    DPI,
    INK,
    MILLIMETRE,
    new_axes,
    plain,
    put_title,
    say_empty,
)
from simkit.response.extrema import Place, find_extrema, mode_places
from simkit.response.strip_route import Route, routes_of
from simkit.study.model import Antenna

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
What = Literal["current", "charge"]

COLOUR_MAP = "viridis"
"""Even steps of lightness, and the same to the eye with and without a colour weakness."""
LOWEST_MODES = 3
_MM = MILLIMETRE.factor

_ABOUT: dict[What, str] = {
    "current": "current density of the modes",
    "charge": "charge density of the modes",
}
_BAR: dict[What, str] = {"current": "current density", "charge": "charge density"}
_EXTEND: dict[What, str] = {"current": "neither", "charge": "max"}
_KEY: dict[What, str] = {
    "current": "density: 1 is the largest of each mode; diamond: feed\n"
    "triangle: largest current of a half wave and its direction; cross: node; "
    "numbers: mm along the strip from its start",
    "charge": "density: 1 is the largest of each mode away from open ends; diamond: feed\n"
    "+ and −: most charge of either sign, a quarter period after the current",
}


def plot_current_map(
    dataset: xr.Dataset,
    antenna: Antenna,
    case: int | None = None,
    *,
    half_waves: int | None = None,
    colour_bar: bool = True,
    ax: Axes | None = None,
) -> Axes:
    """Draw the current density of one mode as colour on the metal.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results, or one case of them.
    antenna : Antenna
        Of that case, ``study.case(number).antenna``.
    case : int, optional
        Label of the case; the solved one in the middle of the sweep if left out.
    half_waves : int, optional
        The mode, by its number of half waves; the lowest one if left out.
    colour_bar : bool
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
    The strip's total current is spread over its width w as the static solution of a long thin
    strip has it, ``(2 I/(pi w)) / sqrt(1 - (2y/w)^2)``, averaged over a sixth of the width; both
    faces together. How the current crowds on the inside of a bend or at a joint is not shown.
    """
    return _plot_one(dataset, antenna, case, half_waves, "current", colour_bar, ax)


def plot_charge_map(
    dataset: xr.Dataset,
    antenna: Antenna,
    case: int | None = None,
    *,
    half_waves: int | None = None,
    colour_bar: bool = True,
    ax: Axes | None = None,
) -> Axes:
    """Draw the charge density of one mode as colour on the metal.

    Parameters, returns and raises as for `plot_current_map`.

    Notes
    -----
    The line charge of `plot_charge`, in magnitude, spread over the width as the current is.
    """
    return _plot_one(dataset, antenna, case, half_waves, "charge", colour_bar, ax)


def plot_current_maps(
    dataset: xr.Dataset,
    antenna: Antenna,
    case: int | None = None,
    *,
    half_waves: Sequence[int] | None = None,
) -> Figure:
    """Draw `plot_current_map` of several modes, the lowest three if not said otherwise."""
    return _plot_several(dataset, antenna, case, half_waves, "current")


def plot_charge_maps(
    dataset: xr.Dataset,
    antenna: Antenna,
    case: int | None = None,
    *,
    half_waves: Sequence[int] | None = None,
) -> Figure:
    """Draw `plot_charge_map` of several modes, the lowest three if not said otherwise."""
    return _plot_several(dataset, antenna, case, half_waves, "charge")


def _plot_one(
    dataset: xr.Dataset,
    antenna: Antenna,
    case: int | None,
    half_waves: int | None,
    what: What,
    colour_bar: bool,
    ax: Axes | None,
) -> Axes:
    chosen = one_case(dataset, case)
    ax = new_axes(ax, _figure_size(antenna, 1))
    put_title(ax, title_of(chosen, _ABOUT[what]))
    number = None if half_waves is None else [half_waves]
    modes = wanted_modes(numbered_modes(chosen), number) if is_solved(chosen) else []
    if not modes:
        say_empty(ax, why_empty(chosen) if not is_solved(chosen) else "there is no such mode")
        return ax
    mesh = _Scene(chosen, antenna).draw(ax, modes[0], what)
    put_title(ax, f"{title_of(chosen, _ABOUT[what])}\n{_one_line(chosen, modes[0])}")
    ax.set_xlabel(f"{MILLIMETRE.label('x')}\n{_KEY[what]}")
    if colour_bar:
        ax.figure.colorbar(mesh, ax=ax, label=_BAR[what], extend=_EXTEND[what], aspect=15)
    return ax


def _plot_several(
    dataset: xr.Dataset,
    antenna: Antenna,
    case: int | None,
    half_waves: Sequence[int] | None,
    what: What,
) -> Figure:
    chosen = one_case(dataset, case)
    modes = (
        wanted_modes(numbered_modes(chosen), half_waves, LOWEST_MODES) if is_solved(chosen) else []
    )
    count = max(len(modes), 1)
    rows, columns = (count, 1) if _lies(antenna) else (1, count)
    figure = Figure(figsize=_figure_size(antenna, count), dpi=DPI, layout="compressed")
    figure.suptitle(plain(title_of(chosen, _ABOUT[what])), fontsize="medium", x=0.01, ha="left")
    if not modes:
        say_empty(figure.add_subplot(), why_empty(chosen))
        return figure
    scene = _Scene(chosen, antenna)
    for number, mode in enumerate(modes):
        ax = figure.add_subplot(rows, columns, number + 1)
        mesh = scene.draw(ax, mode, what)
        put_title(ax, _one_line(chosen, mode))
        if rows == 1 or number == rows - 1:
            ax.set_xlabel(MILLIMETRE.label("x"))
        if rows == 1 and number:
            ax.set_ylabel("")
    figure.colorbar(
        mesh, ax=figure.axes, label=_BAR[what], extend=_EXTEND[what], aspect=30, fraction=0.04
    )
    figure.supxlabel(_KEY[what], fontsize="small")
    return figure


def _one_line(case: xr.Dataset, mode: Mode) -> str:
    return mode_label(case, mode).replace("\n", " ")


def _bounds_mm(antenna: Antenna) -> tuple[float, float, float, float]:
    x1, y1, x2, y2 = union_all(list(metal_of(antenna).values())).bounds
    return x1 * _MM, y1 * _MM, x2 * _MM, y2 * _MM


def _lies(antenna: Antenna) -> bool:
    """The antenna is much wider than high: its pictures are set one above the other."""
    x1, y1, x2, y2 = _bounds_mm(antenna)
    return x2 - x1 > 2.0 * (y2 - y1)


def _figure_size(antenna: Antenna, count: int) -> tuple[float, float]:
    x1, y1, x2, y2 = _bounds_mm(antenna)
    ratio = (y2 - y1) / (x2 - x1)
    if _lies(antenna):
        return 10.0, min(1.3 + count * (8.4 * ratio + 1.15), 13.0)
    width = 4.4 if count > 1 else 6.0
    return width * count + 1.0, min(max(width * ratio, 2.5) + 1.6, 11.0)


class _Scene:
    """Metal and routes of one case, on which its modes are drawn one by one."""

    def __init__(self, case: xr.Dataset, antenna: Antenna) -> None:
        self.case = case
        self.antenna = antenna
        self.routes = routes_of(antenna)
        self.bounds_mm = _bounds_mm(antenna)
        self.shown = without_overlap(metal_of(antenna), self._order())

    def _order(self) -> list[str]:
        """Names of strips, those on the path before their branches."""
        numbers = [leg.strip for route in self.routes for leg in route.legs]
        return [self.antenna.strips[n].name for n in dict.fromkeys(numbers)]

    def draw(self, ax: Axes, mode: Mode, what: What) -> QuadMesh:
        """Draw one mode; return what the colour bar belongs to."""
        current, position = strip_currents(self.case, mode)
        current = steadied(current, self.routes[0], position)
        sheets = []
        charges = [
            mode_charge(self.case, mode, route, current, position)
            for route in (self.routes if what == "charge" else ())
        ]
        for number, strip in enumerate(self.antenna.strips):
            if what == "current":
                places, size = position, np.abs(current[number])
            else:
                places, size = on_strip(number, self.routes, charges)
            sheets.append(sheet_of(strip, places, size))
        ends = np.asarray(strip_ends(self.antenna).open_m, dtype=float).reshape(-1, 2) * _MM
        # The charge at an open end is the higher the closer one looks; it must not dim the rest.
        largest = max(sheet.largest(ends) for sheet in sheets) or 1.0
        for strip, sheet in zip(self.antenna.strips, sheets, strict=True):
            mesh = _paint(ax, sheet, self.shown[strip.name], largest)
        self._finish(ax)
        if what == "current":
            self._mark_places(ax, current, position)
        else:
            self._mark_signs(ax, charges)
        return mesh

    def _finish(self, ax: Axes) -> None:
        x1, y1, x2, y2 = self.bounds_mm
        # Pictures side by side have less room for numbers left and right of the metal.
        room = (0.08 if _lies(self.antenna) else 0.14) * max(x2 - x1, y2 - y1)
        ax.set_xlim(x1 - room, x2 + room)
        ax.set_ylim(y1 - room, y2 + room)
        ax.set_aspect("equal")
        ax.set_ylabel(MILLIMETRE.label("y"))
        for side in ("top", "right"):
            ax.spines[side].set_visible(False)
        place = np.asarray(feed_place(self.antenna).middle_m) * _MM
        ax.plot(
            *place,
            linestyle="none",
            marker="D",
            markersize=9,
            markeredgewidth=1.6,
            fillstyle="none",
            color=FEED_COLOUR,
            zorder=5,
        )

    def _mark_places(self, ax: Axes, current: ComplexArray, position: FloatArray) -> None:
        """Triangles at maxima, pointing the current's way, and crosses at nodes, with places."""
        strips = self.antenna.strips
        for place in mode_places(current, position, self.routes, strips):
            route = self.routes[place.route]
            along = self._direction(route, place.distance_m)
            at, flow = route.current(current, position)
            if np.interp(place.distance_m, at, flow.real) < 0:
                along = -along
            angle = float(np.rad2deg(np.arctan2(along[1], along[0])))
            marker: Any = (3, 0, angle - 90.0) if place.kind == "maximum" else "x"
            ax.plot(
                place.x_m * _MM,
                place.y_m * _MM,
                marker=marker,
                markersize=9 if place.kind == "maximum" else 7,
                markerfacecolor="white",
                markeredgecolor=INK if place.kind == "maximum" else "white",
                markeredgewidth=1.0 if place.kind == "maximum" else 2.0,
                zorder=6,
            )
            self._write(ax, place)

    def _direction(self, route: Route, distance_m: float) -> FloatArray:
        step = 1e-4 * route.length_m
        ends = [route.point_m(distance_m + side * step, self.antenna.strips) for side in (-1, 1)]
        along = np.subtract(ends[1], ends[0])
        return np.asarray(along / max(float(np.hypot(*along)), 1e-12))

    def _write(self, ax: Axes, place: Place) -> None:
        """The place's number beside the metal: maxima to the left of the route, nodes right."""
        if place.strip < 0:
            return
        strip = self.antenna.strips[place.strip]
        along = self._direction(self.routes[place.route], place.distance_m)
        normal = np.array([-along[1], along[0]]) * (1 if place.kind == "maximum" else -1)
        arcs = arc_lengths(np.asarray(strip.path_m, dtype=float))
        half = float(np.interp(place.along_m, arcs, strip.widths)) / 2
        ax.annotate(
            f"{place.along_m * _MM:.1f}",
            ((place.x_m + normal[0] * half) * _MM, (place.y_m + normal[1] * half) * _MM),
            xytext=tuple(5 * normal),
            textcoords="offset points",
            ha="center" if abs(normal[1]) > 0.7 else ("left" if normal[0] > 0 else "right"),
            va="center" if abs(normal[0]) > 0.7 else ("bottom" if normal[1] > 0 else "top"),
            fontsize="small",
            color=INK,
            annotation_clip=False,
            bbox={"boxstyle": "square,pad=0.1", "fc": "white", "ec": "none", "alpha": 0.75},
            zorder=5,
        )

    def _mark_signs(self, ax: Axes, charges: Sequence[tuple[FloatArray, FloatArray]]) -> None:
        largest = max(float(np.max(np.abs(q), initial=0.0)) for _, q in charges)
        for route, (at, charge) in zip(self.routes, charges, strict=True):
            period = route.length_m if route.closed else None
            for one in find_extrema(at, charge.astype(complex), period_m=period, largest=largest):
                if one.kind == "maximum":
                    x, y = route.point_m(one.distance_m, self.antenna.strips)
                    sign = "+" if np.interp(one.distance_m, at, charge) > 0 else "−"
                    ax.annotate(
                        sign,
                        (x * _MM, y * _MM),
                        ha="center",
                        va="center_baseline",
                        color=INK,
                        fontsize="medium",
                        fontweight="bold",
                        zorder=6,
                        annotation_clip=False,
                        bbox={"boxstyle": "circle,pad=0.12", "fc": "white", "ec": INK, "lw": 0.8},
                    )


def _paint(ax: Axes, sheet: Sheet, metal: BaseGeometry, largest: float) -> QuadMesh:
    mesh = ax.pcolormesh(
        sheet.x_mm,
        sheet.y_mm,
        np.ma.masked_invalid(sheet.density / largest),
        cmap=COLOUR_MAP,
        vmin=0.0,
        vmax=1.0,
        rasterized=True,
        zorder=2,
    )
    paths = [as_path(part, _MM) for part in get_parts(metal) if part.area > 0]
    if paths:
        outline = Path.make_compound_path(*paths)
        mesh.set_clip_path(outline, ax.transData)
        ax.add_patch(PathPatch(outline, facecolor="none", edgecolor=INK, linewidth=0.8, zorder=3))
    return mesh
