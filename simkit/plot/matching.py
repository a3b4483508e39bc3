"""What a matching network does: its way through the Smith chart, and the reflection it leaves."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.ticker import MultipleLocator

from simkit.feedline.checks import FeedlineError, quantity
from simkit.plot.smith import draw_chart
from simkit.plot.style import (
    INK,
    QUIET,
    frequency_unit,
    legend_beside,
    mode_style,
    new_axes,
    put_title,
    tidy,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.lines import Line2D
    from matplotlib.text import Text
    from numpy.typing import NDArray

    from simkit.feedline.chain import Chain
    from simkit.feedline.oneport import OnePort

BAND = "#e8eef2"
BESIDE = (0.06, 0.09, 0.13)
"""How far from its way an element's number stands, in reflection, the best first."""
ROOM = 0.11
"""How far from other texts."""
CURVE_ROOM = 0.05
"""How far from curves and marks."""
NUMBER_AT = (0.5, 0.4, 0.6, 0.3, 0.7, 0.2, 0.8)
"""Parts of a way at which its number may stand, the best first."""

DEEPEST_DB = -40.0
"""Deeper than this a curve is cut off: nothing built comes nearer to a match."""


def plot_match_path(
    chain: Chain,
    load: OnePort,
    frequency_hz: float,
    band_hz: tuple[float, float] | None = None,
    *,
    ax: Axes | None = None,
) -> Axes:
    """Draw the way from the terminals to the connector through a Smith chart.

    Parameters
    ----------
    chain : Chain
    load : OnePort
    frequency_hz : float
        Of the way.
    band_hz : (float, float), optional
        Band over which terminals and connector are drawn as curves as well.
    ax : matplotlib.axes.Axes, optional
        Rectilinear axes; a new figure is made if left out.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    FeedlineError
        If the load does not cover the frequency or the band.
    """
    ax = new_axes(ax, (9.2, 6.6))
    put_title(ax, f"from terminals to connector at {quantity(frequency_hz, 'Hz', 6)}")
    draw_chart(ax, chain.reference_ohm)
    if band_hz is not None:
        _draw_curves(ax, chain, load, band_hz)
    start = load.at([frequency_hz]).referred_to(chain.reference_ohm).reflection[0]
    _mark(ax, start, "s", "terminals")
    end = start
    drawn = []
    for number, (element, way) in enumerate(chain.path(load, frequency_hz), start=1):
        style = mode_style(number)
        ax.plot(
            way.real,
            way.imag,
            color=style.colour,
            linestyle=style.linestyle,
            linewidth=2.2,
            zorder=4,
            label=f"{number}  {folded(element.about)}",
        )
        drawn.append((way, style.colour, str(number)))
        end = way[-1]
    _mark(ax, end, "o", "connector")
    for way, colour, text in drawn:  # when all is there that a number must not cover
        _arrow(ax, way, colour, text)
    legend_beside(ax, "from the antenna")
    return ax


def _draw_curves(ax: Axes, chain: Chain, load: OnePort, band_hz: tuple[float, float]) -> None:
    band = load.at(np.linspace(*band_hz, 121))
    seen = band.referred_to(chain.reference_ohm).reflection
    after = chain.reflection(band)
    words = f"{quantity(band_hz[0], 'Hz')} to {quantity(band_hz[1], 'Hz')}"
    for curve, colour, name in ((seen, QUIET, "terminals"), (after, INK, "connector")):
        ax.plot(
            curve.real, curve.imag, color=colour, linewidth=1.2, zorder=3, label=f"{name},\n{words}"
        )


def _mark(ax: Axes, place: complex, marker: str, label: str) -> None:
    ax.plot(
        place.real,
        place.imag,
        marker=marker,
        markersize=7,
        color=INK,
        markerfacecolor="white",
        linestyle="none",
        zorder=6,
        label=label,
    )


def _arrow(ax: Axes, way: NDArray[np.complex128], colour: str, text: str) -> None:
    """An arrow head half way along and the element's number near it; none on a way of no length."""
    along = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(way)))])
    if along[-1] < 1e-3:
        return
    tail, head = _step(way, along, 0.5)
    ax.annotate(
        "",
        (head.real, head.imag),
        xytext=(tail.real, tail.imag),
        arrowprops={"arrowstyle": "-|>", "color": colour, "mutation_scale": 16},
        zorder=5,
    )
    beside = _free_place(ax, [_step(way, along, part) for part in NUMBER_AT])
    ax.text(beside.real, beside.imag, text, color=colour, ha="center", va="center", zorder=5)


def _step(
    way: NDArray[np.complex128], along: NDArray[np.float64], part: float
) -> tuple[complex, complex]:
    """The two points of a way around a part of its length."""
    place = int(np.clip(np.searchsorted(along, part * along[-1]), 1, len(way) - 1))
    return complex(way[place - 1]), complex(way[place])


def _free_place(ax: Axes, steps: list[tuple[complex, complex]]) -> complex:
    """Where beside a way, half way along if that will do, no text, curve or mark is covered."""
    texts = np.array([_middle(text) for text in ax.texts if text.get_text()])
    curves = np.concatenate([_points(line) for line in ax.lines])
    places = []
    for away in BESIDE:
        for tail, head in steps:
            across = 1j * (head - tail) / max(abs(head - tail), 1e-12) * away
            places += sorted((head + across, head - across), key=abs)
    rooms = [
        min(np.abs(place - texts).min() / ROOM, np.abs(place - curves).min() / CURVE_ROOM, 1.0)
        for place in places
    ]
    return places[int(np.argmax(rooms))]


def _points(line: Line2D) -> NDArray[np.complex128]:
    return np.asarray(line.get_xdata(), float) + 1j * np.asarray(line.get_ydata(), float)


def _middle(text: Text) -> complex:
    """Middle of a text in the chart, of letters of the usual size."""
    width, height = 0.03 * len(text.get_text()), 0.05
    right = {"left": 0.5, "right": -0.5}.get(text.get_horizontalalignment(), 0.0)
    up = {"bottom": 0.5, "top": -0.5}.get(text.get_verticalalignment(), 0.0)
    x, y = text.get_position()
    return complex(x + right * width, y + up * height)


def folded(text: str, width: int = 34) -> str:
    """Break a text into lines for a legend."""
    lines = [""]
    for word in re.sub(r"(\d) (?=(?:mm|ohm|MHz|dB|pF|nH|ps)\b)", "\\1\u00a0", text).split(" "):
        if len(lines[-1]) + len(word) > width:
            lines.append("")
        lines[-1] = f"{lines[-1]} {word}".strip()
    return "\n".join(lines)


def plot_match(
    chain: Chain,
    load: OnePort,
    start_hz: float,
    stop_hz: float,
    *,
    span_hz: tuple[float, float] | None = None,
    ax: Axes | None = None,
) -> Axes:
    """Draw |reflection| in dB before and after the network, with the band shaded.

    Parameters
    ----------
    chain : Chain
    load : OnePort
    start_hz, stop_hz : float
        The band.
    span_hz : (float, float), optional
        Frequencies drawn, within those of the load; all if left out.
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    FeedlineError
        If the band has no width or the load does not cover it.
    """
    if not start_hz < stop_hz:
        raise FeedlineError(
            f"the band from {quantity(start_hz, 'Hz')} to {quantity(stop_hz, 'Hz')} has no width"
        )
    band = load.at(np.linspace(start_hz, stop_hz, 201))
    ax = new_axes(ax, (8.6, 4.8))
    unit = frequency_unit(load.frequency_hz)
    tidy(ax)
    put_title(ax, "reflection at the terminals and at the connector")
    ax.set_xlabel(unit.label("frequency"))
    ax.set_ylabel(f"|reflection| (dB re {chain.reference_ohm:g} ohm)")
    ax.axvspan(start_hz * unit.factor, stop_hz * unit.factor, color=BAND, zorder=0, label="band")
    # With the band's own points, so that a narrow band is not stepped over.
    low, high = load.frequency_hz[[0, -1]] if span_hz is None else span_hz
    known = load.frequency_hz[(load.frequency_hz >= low) & (load.frequency_hz <= high)]
    whole = load.at(np.unique(np.concatenate([known, band.frequency_hz, [low, high]])))
    x = whole.frequency_hz * unit.factor
    for curve, inside, colour, dashes, name in (
        (
            whole.referred_to(chain.reference_ohm).reflection,
            band.referred_to(chain.reference_ohm).reflection,
            QUIET,
            (0, (6, 2)),
            "terminals",
        ),
        (chain.reflection(whole), chain.reflection(band), INK, "solid", "connector"),
    ):
        worst = float(_level(inside).max())
        ax.plot(
            x,
            _level(curve),
            color=colour,
            linestyle=dashes,
            linewidth=1.6,
            label=f"{name}:\nat most {_signed(worst)} dB in the band",
        )
    ax.set_xlim(float(x[0]), float(x[-1]) if len(x) > 1 else None)
    ax.yaxis.set_major_locator(MultipleLocator(5.0))
    lowest = min(float(_level(chain.reflection(whole)).min()), -20.0)
    ax.set_ylim(max(DEEPEST_DB, 5 * np.floor(lowest / 5)), 0.5)
    legend_beside(ax)
    return ax


def _level(reflection: NDArray[np.complex128]) -> NDArray[np.float64]:
    return np.asarray(20 * np.log10(np.maximum(np.abs(reflection), 1e-5)))


def _signed(value: float) -> str:
    return f"{value:.1f}".replace("-", "−")
