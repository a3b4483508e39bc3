"""Pattern cuts through the principal planes, per mode."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, cast

import numpy as np
from matplotlib.figure import Figure
from numpy.typing import NDArray

from simkit.plot.cases import Mode, is_solved, numbered_modes, one_case, title_of, why_empty
from simkit.plot.style import (
    DASH_ROOM,
    DPI,
    GRID,
    ModeStyle,
    frequency_text,
    frequency_unit,
    legend_beside,
    mode_styles,
    new_axes,
    plain,
    say_empty,
)
from simkit.response.mode_pattern import ModePattern

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.projections.polar import PolarAxes

FloatArray = NDArray[np.float64]
Plane = Literal["xy", "xz", "yz"]

PLANES: tuple[Plane, ...] = ("xy", "xz", "yz")
RANGE_DB = 30.0
"""From the rim of the polar scale to its centre; deeper nulls are drawn at the centre."""
LOWEST_MODES = 4
FINE_POINTS = 361
STEP_DEG = 2.0
"""Between directions of a cut worked out from the currents, narrow enough to show its nulls."""

_ANGLES: dict[Plane, str] = {
    "xy": "xy plane: phi at theta = 90°",
    "xz": "xz plane: theta at phi = 0° and 180°",
    "yz": "yz plane: theta at phi = 90° and 270°",
}


@dataclass(frozen=True)
class Cut:
    """Gain around one plane: `angle_deg` runs full circle from the plane's first axis."""

    angle_deg: FloatArray
    gain_dbi: FloatArray


def pattern_cut(gain: xr.DataArray, plane: Plane) -> Cut:
    """Take one plane's full circle out of the gain over theta and phi.

    Parameters
    ----------
    gain : xarray.DataArray
        Gain in dBi over `theta` 0..180 and `phi` 0..360 degrees, both ends included.
    plane : {"xy", "xz", "yz"}
        `xy`: phi from 0 to 360 at theta = 90. `xz`, `yz`: theta from 0 to 180 on the side of
        positive x (y), then back to 0 on the other side.

    Returns
    -------
    Cut
        The stored directions, first and last alike.

    Raises
    ------
    ValueError
        If there is no such plane.
    """
    if plane == "xy":
        row = gain.sel(theta=90.0)
        return Cut(_values(gain["phi"]), _values(row))
    if plane not in PLANES:
        raise ValueError(f"plane must be one of {', '.join(PLANES)}, not '{plane}'")
    near, far = (0.0, 180.0) if plane == "xz" else (90.0, 270.0)
    theta = _values(gain["theta"])
    return Cut(
        np.concatenate([theta, 360.0 - theta[-2::-1]]),
        np.concatenate([_values(gain.sel(phi=near)), _values(gain.sel(phi=far))[-2::-1]]),
    )


def _values(array: xr.DataArray) -> FloatArray:
    return np.asarray(array.values, dtype=np.float64)


def smooth_cut(cut: Cut, points: int = FINE_POINTS) -> Cut:
    """Interpolate a full circle of equally spaced directions by its Fourier series.

    Power radiated by an antenna inside a circle of radius r holds few harmonics beyond 2 k r, so
    a grid of 10 degrees settles the curve between its points for antennas up to about two
    wavelengths across. The stored values themselves are kept. A cut with gaps comes back as it is.
    """
    power = 10.0 ** (cut.gain_dbi[:-1] / 10.0)
    if not np.isfinite(power).all():
        return cut
    spectrum = np.fft.rfft(power) / power.size
    fine = np.linspace(0.0, 360.0, points)
    orders = np.arange(spectrum.size)
    weights = np.where((orders == 0) | (2 * orders == power.size), 1.0, 2.0)
    waves = np.exp(1j * np.outer(np.deg2rad(fine), orders))
    summed = (waves * (weights * spectrum)).real.sum(axis=1)
    floor = 10.0 ** (np.nanmin(cut.gain_dbi) / 10.0) * 1e-2
    return Cut(fine, 10.0 * np.log10(np.maximum(summed, floor)))


def pattern_of(case: xr.Dataset, slot: int) -> ModePattern | None:
    """Return the pattern of a mode worked out from the currents that the results keep.

    None if they keep none, or if the pattern of the currents alone is not the stored one.
    """
    if "current" not in case or not np.isfinite(case["sample_frequency"].values).any():
        return None
    pattern = ModePattern(case, slot)
    return pattern if pattern.trusted else None


def computed_cut(pattern: ModePattern, plane: Plane, step_deg: float = STEP_DEG) -> Cut:
    """Work out one plane's full circle, counted as by `pattern_cut`, every `step_deg` degrees."""
    angle = np.linspace(0.0, 360.0, round(360.0 / step_deg) + 1)
    if plane == "xy":
        return Cut(angle, pattern.gain_dbi(90.0, angle))
    near = 0.0 if plane == "xz" else 90.0
    theta = np.where(angle <= 180.0, angle, 360.0 - angle)
    return Cut(angle, pattern.gain_dbi(theta, np.where(angle <= 180.0, near, near + 180.0)))


def plot_pattern(
    dataset: xr.Dataset,
    case: int | None = None,
    plane: Plane = "xy",
    *,
    half_waves: Sequence[int] | None = None,
    legend: bool = True,
    ax: Axes | None = None,
) -> Axes:
    """Draw one polar pattern cut per mode, in dBi.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results, or one case of them.
    case : int, optional
        Label of the case; the solved one in the middle of the sweep if left out.
    plane : {"xy", "xz", "yz"}
        `xy` is the plane of the strip, cut over phi; the others are cut over theta.
    half_waves : sequence of int, optional
        Modes to draw, by their number of half waves; the lowest four if left out.
    legend : bool
        Name the modes with their peak gains beside the picture.
    ax : matplotlib.axes.Axes, optional
        Polar axes; a new figure is made if left out.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    StoreError
        If there is no such case.
    ValueError
        If there is no such plane or `ax` is not polar.

    Notes
    -----
    The cuts are worked out from the stored currents every 2 degrees; for results without them, or
    where currents alone do not give the stored gain, the stored grid of directions is interpolated.
    """
    if plane not in PLANES:
        raise ValueError(f"plane must be one of {', '.join(PLANES)}, not '{plane}'")
    chosen = one_case(dataset, case)
    polar = cast("PolarAxes", new_axes(ax, (9.4, 6.2), polar=True))
    curves = _curves(chosen, half_waves)
    _fill(polar, chosen, plane, curves)
    if legend and curves:
        legend_beside(polar, "modes", away=1.12)
    return polar


def plot_pattern_cuts(
    dataset: xr.Dataset, case: int | None = None, *, half_waves: Sequence[int] | None = None
) -> Figure:
    """Draw the cuts of all three principal planes side by side, with one legend.

    Parameters
    ----------
    dataset, case, half_waves
        As for `plot_pattern`.

    Returns
    -------
    matplotlib.figure.Figure

    Raises
    ------
    StoreError
        If there is no such case.
    """
    chosen = one_case(dataset, case)
    figure = Figure(figsize=(13.0, 5.8), dpi=DPI, layout="constrained")
    curves = _curves(chosen, half_waves)
    for column, plane in enumerate(PLANES, start=1):
        ax = figure.add_subplot(1, 3, column, projection="polar")
        _fill(cast("PolarAxes", ax), chosen, plane, curves)
        ax.set_title(_ANGLES[plane], fontsize="medium")
    figure.suptitle(plain(title_of(chosen, "gain in dBi")), fontsize="medium")
    handles, labels = figure.axes[0].get_legend_handles_labels()
    if handles:
        figure.legend(
            handles,
            labels,
            loc="outside lower center",
            ncols=len(handles),
            frameon=False,
            handlelength=DASH_ROOM,
        )
    return figure


@dataclass(frozen=True)
class _Curve:
    """A mode to draw; without a pattern of its currents the stored grid serves."""

    mode: Mode
    style: ModeStyle
    pattern: ModePattern | None


def _curves(case: xr.Dataset, half_waves: Sequence[int] | None) -> list[_Curve]:
    modes = _wanted(case, half_waves)
    styles = mode_styles([mode.half_waves for mode in modes])
    return [
        _Curve(mode, style, pattern_of(case, mode.slot))
        for mode, style in zip(modes, styles, strict=True)
    ]


def _fill(ax: PolarAxes, case: xr.Dataset, plane: Plane, curves: list[_Curve]) -> None:
    """Draw one plane, or why there is nothing to draw."""
    ax.set_title(plain(title_of(case, f"gain in dBi, {_ANGLES[plane]}")), fontsize="medium")
    _name_angles(ax, plane)
    if not curves:
        say_empty(ax, why_empty(case) if not is_solved(case) else "no mode has a pattern")
        return
    _set_scale(ax, case, [curve.mode for curve in curves])
    for curve in curves:
        _draw_mode(ax, case, curve, plane)


def _wanted(case: xr.Dataset, half_waves: Sequence[int] | None) -> list[Mode]:
    """Modes that have a pattern, the wanted ones or the lowest."""
    if not is_solved(case):
        return []
    gain = case["gain"].transpose("mode", "theta", "phi").values
    there = np.isfinite(gain).any(axis=(1, 2))
    modes = [mode for mode in numbered_modes(case) if there[mode.slot]]
    if half_waves is None:
        return modes[:LOWEST_MODES]
    return [mode for mode in modes if mode.half_waves in half_waves]


def _name_angles(ax: PolarAxes, plane: Plane) -> None:
    """Label the rim by phi from +x, or by theta from +z on both sides, with the axes named."""
    angles = np.arange(0, 360, 30)
    if plane == "xy":
        names = [f"{angle}°" for angle in angles]
        axes = {0: "+x", 90: "+y", 180: "−x", 270: "−y"}
    else:
        ax.set_theta_zero_location("N")
        ax.set_theta_direction(-1)
        names = [f"{min(angle, 360 - angle)}°" for angle in angles]
        axes = {0: "+z", 90: f"+{plane[0]}", 180: "−z", 270: f"−{plane[0]}"}
    labels = [
        f"{name}\n{axes[angle]}" if angle in axes else name
        for angle, name in zip(angles.tolist(), names, strict=True)
    ]
    ax.set_thetagrids(angles, labels, fontsize="small")
    ax.grid(visible=True, color=GRID, linewidth=0.7)


def _set_scale(ax: PolarAxes, case: xr.Dataset, modes: list[Mode]) -> None:
    """One radial scale for all planes: a rim just above the largest gain, `RANGE_DB` deep."""
    slots = [mode.slot for mode in modes]
    largest = float(case["gain"].isel(mode=slots).max())
    rim = 5.0 * np.ceil((largest + 0.3) / 5.0)
    centre = rim - RANGE_DB
    ax.set_ylim(centre, rim)
    rings = np.arange(10.0 * np.floor(centre / 10.0 + 1.0), rim, 10.0)
    ax.set_yticks(
        [*rings, rim], [f"{ring:g}".replace("-", "−") for ring in rings] + [f"{rim:g} dBi"]
    )
    ax.tick_params(axis="y", labelsize=8)
    ax.set_rlabel_position(52.0)


def _draw_mode(ax: PolarAxes, case: xr.Dataset, curve: _Curve, plane: Plane) -> None:
    if curve.pattern is not None:
        cut = computed_cut(curve.pattern, plane)
    else:
        cut = smooth_cut(pattern_cut(case["gain"].isel(mode=curve.mode.slot), plane))
    ax.plot(
        np.deg2rad(cut.angle_deg),
        np.maximum(cut.gain_dbi, ax.get_ylim()[0]),
        color=curve.style.colour,
        linestyle=curve.style.linestyle,
        linewidth=1.8,
        label=_legend_text(case, curve.mode),
    )


def _legend_text(case: xr.Dataset, mode: Mode) -> str:
    """Three lines: the mode, how its pattern was excited, its largest gain in any direction."""
    unit = frequency_unit(case["frequency"])
    at = case.isel(mode=mode.slot)
    frequency = frequency_text(float(at["pattern_frequency"]), unit)
    how = "mode current alone" if int(at["driven"]) == 0 else "driven at the feed"
    peak = f"peak {float(at['peak_gain']):.1f} dBi"
    return f"{mode.label} at {frequency}\n{how}\n{peak}"
