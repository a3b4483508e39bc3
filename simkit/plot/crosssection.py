"""The cross-section of strips on their carrier, with the potential around them."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.patches import Patch, Rectangle
from numpy.typing import NDArray

from simkit.crosssection.carrier_kappa import kappa_matrix
from simkit.crosssection.potential import solve
from simkit.crosssection.section import CrossSection, cut
from simkit.plot.style import INK, METAL, MILLIMETRE, new_axes

if TYPE_CHECKING:
    from matplotlib.axes import Axes

FloatArray = NDArray[np.float64]
Range = tuple[float, float]

_MM = MILLIMETRE.factor

PANELS = 32
"""Panels across a strip for the picture."""

POINTS = 160
"""Points of the picture across its longer side."""

ROOM = 0.5
"""Air around the carrier, over its larger size."""

LEVELS_PERCENT = np.arange(0, 101, 5)
COLOURS = "Blues"
"""One hue, darker towards the strips: the same to every eye, and in black and white."""

THIN = 0.012
"""Metal is drawn at least this thick, over the height of the picture, so that it can be seen."""

HATCHES = ("", "///", "...", "xx", "++")
"""One after the other for each different permittivity."""


def plot_crosssection(section: CrossSection, *, ax: Axes | None = None) -> Axes:
    """Draw strips and carrier to scale in millimetres with the potential around them.

    Parameters
    ----------
    section : CrossSection
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.

    Returns
    -------
    matplotlib.axes.Axes
        Equal scales. All strips are at one potential, 100 %; 0 % is the lowest value in the
        picture, since the potential in the plane has no zero of its own.
    """
    room_m = ROOM * section.extent_m
    levels = section.levels_m
    top_m = max(levels[-1], *(strip.thickness_m for strip in section.strips))
    x_range = (section.left_m - room_m, section.right_m + room_m)
    z_range = (levels[0] - room_m, top_m + room_m)
    ax = new_axes(ax, _figure_size(x_range, z_range))
    x, z, percent = _potential(section, x_range, z_range)
    filled = ax.contourf(x * _MM, z * _MM, percent, levels=LEVELS_PERCENT, cmap=COLOURS)
    ax.contour(
        x * _MM, z * _MM, percent, levels=LEVELS_PERCENT[::2], colors=INK, linewidths=0.4, alpha=0.6
    )
    bar = ax.figure.colorbar(filled, ax=ax, pad=0.02, ticks=LEVELS_PERCENT[::4])
    bar.set_label("potential (% of the way from the picture's edge to the strips)", size="small")
    handles = [*_draw_metal(ax, section, z_range), *_draw_layers(ax, section)]
    ax.set_xlim(x_range[0] * _MM, x_range[1] * _MM)
    ax.set_ylim(z_range[0] * _MM, z_range[1] * _MM)
    ax.set_aspect("equal")
    ax.set_xlabel(MILLIMETRE.label("across the strip"))
    ax.set_ylabel(MILLIMETRE.label("height"))
    ax.set_title(_title(section), fontsize="medium", loc="left")
    ax.legend(
        handles=handles,
        fontsize="small",
        loc="upper left",
        bbox_to_anchor=(0.0, -0.13),
        frameon=False,
        borderaxespad=0.0,
    )
    return ax


def _figure_size(x_range: Range, z_range: Range) -> tuple[float, float]:
    """Inches: as large as fits 7.5 by 6, with room for title, colour bar and legend."""
    width, height = x_range[1] - x_range[0], z_range[1] - z_range[0]
    scale = min(7.5 / width, 6.0 / height)
    return scale * width + 1.8, max(scale * height, 2.6) + 1.6


def _potential(
    section: CrossSection, x_range: Range, z_range: Range
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Grid across and upwards, metres, and the potential on it in per cent, (z, x)."""
    step_m = max(x_range[1] - x_range[0], z_range[1] - z_range[0]) / POINTS
    x, z = (
        np.linspace(*ends, max(int((ends[1] - ends[0]) / step_m), 2)) for ends in (x_range, z_range)
    )
    solution = solve(cut(section, PANELS))
    points = x + 1j * z[:, np.newaxis]
    values = solution.potential(points, np.ones(len(section.strips))).real
    lowest = values.min()
    return x, z, np.clip(100 * (values - lowest) / (1 - lowest), 0, 100)


def _draw_layers(ax: Axes, section: CrossSection) -> list[Patch]:
    """Outline of each layer; a hatch for every permittivity but the first."""
    kinds = list(dict.fromkeys(layer.permittivity for layer in section.layers))
    levels = section.levels_m
    handles: dict[complex, Patch] = {}
    for layer, bottom_m in zip(section.layers, levels, strict=False):
        outline = Rectangle(
            (section.left_m * _MM, bottom_m * _MM),
            (section.right_m - section.left_m) * _MM,
            layer.thickness_m * _MM,
            facecolor="none",
            edgecolor=INK,
            linewidth=1.4,
            hatch=HATCHES[kinds.index(layer.permittivity) % len(HATCHES)],
            zorder=3,
        )
        outline.set_hatch_linewidth(0.4)
        ax.add_patch(outline)
        thick = sum(
            each.thickness_m for each in section.layers if each.permittivity == layer.permittivity
        )
        handles.setdefault(
            layer.permittivity,
            Patch(
                facecolor="none",
                edgecolor=INK,
                hatch=outline.get_hatch(),
                label=f"carrier, {thick * _MM:.3g} mm of permittivity "
                f"{_permittivity_text(layer.permittivity)}",
            ),
        )
    return list(handles.values())


def _draw_metal(ax: Axes, section: CrossSection, z_range: Range) -> list[Patch]:
    """Strips, thin ones thicker than they are and centred on their place."""
    least_m = THIN * (z_range[1] - z_range[0])
    for strip in section.strips:
        drawn_m = max(strip.thickness_m, least_m)
        low_m = 0.0 if strip.thickness_m >= least_m else (strip.thickness_m - drawn_m) / 2
        ax.add_patch(
            Rectangle(
                (strip.left_m * _MM, low_m * _MM),
                strip.width_m * _MM,
                drawn_m * _MM,
                facecolor=METAL,
                edgecolor=INK,
                linewidth=1.0,
                zorder=4,
            )
        )
    widths = ", ".join(
        dict.fromkeys(f"{strip.width_m * _MM:.3g} mm wide" for strip in section.strips)
    )
    return [Patch(facecolor=METAL, edgecolor=INK, label=f"strip, {widths}")]


def _permittivity_text(value: complex) -> str:
    value = complex(value)
    if value.imag == 0:
        return f"{value.real:.3g}"
    return f"{value.real:.3g}, loss tangent {-value.imag / value.real:.2g}"


def _title(section: CrossSection) -> str:
    values = kappa_matrix(section).matrix.diagonal()
    text = ", ".join(f"{value.real:.3f}" for value in values)
    grown = ", ".join(f"{np.exp(value.real):.2f}" for value in values)
    return f"cross-section: kappa {text}; acts on charge as a wire {grown} times as thick"
