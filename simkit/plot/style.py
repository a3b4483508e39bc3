"""What all pictures share: colours, line styles, display units, and axes made without pyplot."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.figure import Figure
from numpy.typing import ArrayLike

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes

INK = "#222222"
"""Outlines, markers and text that belong to no mode."""
QUIET = "#767676"
"""Dimensions, notes and reference lines; dark enough to read on white."""
GRID = "#dddddd"
METAL = "#d9b77a"
DPI = 110
DASH_ROOM = 3.2
"""Length of a line in a legend, in font sizes, so that its dashes can be told apart."""

_COLOURS = ("#0072b2", "#009e73", "#d55e00", "#cc79a7", "#e69f00", "#56b4e9")
_DASHES: tuple[str | tuple[int, tuple[int, ...]], ...] = (
    "solid",
    (0, (6, 2)),
    (0, (8, 2, 2, 2)),
    (0, (2, 1)),
    (0, (4, 1, 1, 1, 1, 1)),
    (0, (10, 3)),
)
_MARKERS = ("o", "s", "^", "D", "v", "P")


@dataclass(frozen=True)
class ModeStyle:
    """How one mode looks in every picture.

    The colours stay apart under the common kinds of colour blindness; line style and marker say
    the same once more, for print in black and white.
    """

    colour: str
    linestyle: str | tuple[int, tuple[int, ...]]
    marker: str


def mode_style(half_waves: int) -> ModeStyle:
    """Return colour, line style and marker of the mode with so many half waves."""
    if half_waves < 0:
        return ModeStyle(QUIET, (0, (1, 2)), "x")
    place = (half_waves - 1) % len(_COLOURS)
    return ModeStyle(_COLOURS[place], _DASHES[place], _MARKERS[place])


def mode_styles(half_waves: Sequence[int]) -> list[ModeStyle]:
    """Return the looks of modes drawn together: of one number all but the first are darker.

    Loops and branched antennas have several modes with one number of half waves. Modes of a feed
    cable, which have none, are grey with dashes of their own.
    """
    found = []
    for place, number in enumerate(half_waves):
        if number < 0:
            found.append(_cable_style(list(half_waves[:place]).count(number)))
            continue
        style = mode_style(number)
        for _ in range(list(half_waves[:place]).count(number)):
            style = _darker(style)
        found.append(style)
    return found


def _cable_style(place: int) -> ModeStyle:
    colour = (QUIET, INK, "#a6a6a6")[place % 3]
    return ModeStyle(colour, _DASHES[1 + place % (len(_DASHES) - 1)], "x+*"[place % 3])


def _darker(style: ModeStyle) -> ModeStyle:
    """The same hue at half the light, with the dashes and the marker next in line."""
    channels = [int(style.colour[at : at + 2], 16) for at in (1, 3, 5)]
    colour = "#" + "".join(f"{channel // 2:02x}" for channel in channels)
    dashes = _DASHES[(_DASHES.index(style.linestyle) + 3) % len(_DASHES)]
    marker = _MARKERS[(_MARKERS.index(style.marker) + 3) % len(_MARKERS)]
    return ModeStyle(colour, dashes, marker)


def new_axes(
    ax: Axes | None, size_in: tuple[float, float] = (8.0, 5.0), *, polar: bool = False
) -> Axes:
    """Return `ax`, or the only axes of a new figure that no pyplot session knows of.

    Raises
    ------
    ValueError
        If a given `ax` does not have the projection the picture needs.
    """
    if ax is None:
        # "compressed" also leaves the right room around axes of fixed aspect.
        figure = Figure(figsize=size_in, dpi=DPI, layout="compressed")
        return figure.add_subplot(projection="polar" if polar else None)
    if (ax.name == "polar") != polar:
        wanted = "polar" if polar else "rectilinear"
        raise ValueError(
            f"axes have the projection '{ax.name}', this picture needs '{wanted}': "
            f"make them with figure.add_subplot(projection='{wanted}') or leave ax out"
        )
    return ax


def plain(text: str) -> str:
    """Return text of a study so that a dollar sign in it starts no formula."""
    return text.replace("$", r"\$")


def put_title(ax: Axes, text: str) -> None:
    """Write the title flush left over the axes."""
    ax.set_title(plain(text), fontsize="medium", loc="left")


def tidy(ax: Axes) -> None:
    """Faint grid behind the data, no frame at the top and on the right."""
    ax.set_axisbelow(True)
    ax.grid(visible=True, color=GRID, linewidth=0.7)
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)


def legend_beside(
    ax: Axes, title: str = "", away: float = 1.01, handles: Sequence[Artist] | None = None
) -> None:
    """Put the legend to the right of the axes, where it hides no data.

    `handles` are the lines to explain, all labelled ones if left out; `away` is in axes widths.
    """
    shown = ax.get_legend_handles_labels()[0] if handles is None else list(handles)
    if not shown:
        return
    ax.legend(
        handles=shown,
        title=title,
        alignment="left",
        fontsize="small",
        loc="upper left",
        bbox_to_anchor=(away, 1.0),
        frameon=False,
        handlelength=DASH_ROOM,
    )


def say_empty(ax: Axes, text: str) -> None:
    """Write in the middle of the axes why there is nothing to see."""
    ax.text(
        0.5,
        0.5,
        plain(text),
        transform=ax.transAxes,
        ha="center",
        va="center",
        color=INK,
        wrap=True,
    )


@dataclass(frozen=True)
class DisplayUnit:
    """Multiply an SI value by `factor` to get it in the unit called `text`."""

    factor: float
    text: str

    def label(self, what: str) -> str:
        """Return an axis label such as ``length (mm)``."""
        return f"{what} ({self.text})" if self.text else what

    def value(self, number: float, digits: int = 4) -> str:
        """Return the value in text, as in ``76 mm``."""
        shown = f"{number * self.factor:.{digits}g}"
        return f"{shown} {self.text}" if self.text else shown


def frequency_text(frequency_hz: float, unit: DisplayUnit) -> str:
    """Return a frequency to 0.1 MHz: ``868.3 MHz`` or ``12.4052 GHz``."""
    return f"{frequency_hz * unit.factor:.{1 if unit == MEGAHERTZ else 4}f} {unit.text}"


MILLIMETRE = DisplayUnit(1e3, "mm")
MEGAHERTZ = DisplayUnit(1e-6, "MHz")
GIGAHERTZ = DisplayUnit(1e-9, "GHz")


def frequency_unit(frequency_hz: ArrayLike) -> DisplayUnit:
    """Return megahertz for a band that ends below 10 GHz, else gigahertz."""
    finite = np.asarray(frequency_hz, dtype=float)
    finite = finite[np.isfinite(finite)]
    return GIGAHERTZ if finite.size and finite.max() >= 10e9 else MEGAHERTZ


def display_unit(units: str) -> DisplayUnit:
    """Return the unit in which pictures show a value that the store keeps in `units`."""
    if units == "m":
        return MILLIMETRE
    if units == "Hz":
        return MEGAHERTZ
    return DisplayUnit(1.0, "" if units == "1" else units)


_LENGTHS_PER_METRE = {
    "um": 1e6,
    "mm": 1e3,
    "cm": 1e2,
    "m": 1.0,
    "in": 1 / 25.4e-3,
    "mil": 1e3 / 25.4e-3,
}


def written_unit(units: str, written: str) -> DisplayUnit:
    """Return the unit the user wrote for a length kept in metres; others as `display_unit`."""
    if units == "m" and written in _LENGTHS_PER_METRE:
        return DisplayUnit(_LENGTHS_PER_METRE[written], written)
    return display_unit(units)
