"""The chain from the antenna to the connector, drawn as one line: lengths of line to scale.

Line sections run to the right and stubs away from them, both in millimetres of their own. Strips
are as wide as they are; cables, lumped parts and transformers have a size of convenience.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, cast

from matplotlib.patches import Circle, Rectangle

from simkit.feedline.checks import quantity
from simkit.feedline.elements import (
    UNITS,
    Element,
    LineSection,
    Lumped,
    PortExtension,
    Stub,
    Transformer,
)
from simkit.plot.matching import folded
from simkit.plot.style import INK, METAL, MILLIMETRE, QUIET, new_axes, plain, put_title

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from simkit.feedline.chain import Chain
    from simkit.feedline.line import Line

_MM = MILLIMETRE.factor

SIZE_IN = (9.6, 5.2)
HEAD_IN, SHARE, LOWEST_IN = 1.5, 0.72, 3.0
"""Height of title and axis, part of the width that the drawing gets beside its list, least height;
inches."""

CABLE = "#cfd8dd"
BOX = 0.10
"""Size of a part that has no length, over the size of the picture."""
GAP = 0.035
"""Wire between elements, over the size of the picture."""
THIN = 0.022
"""Least width that a line is drawn with, over the size of the picture."""


def plot_schematic(chain: Chain, *, ax: Axes | None = None) -> Axes:
    """Draw a chain from the antenna (left) to the connector (right), to scale in millimetres.

    Parameters
    ----------
    chain : Chain
    ax : matplotlib.axes.Axes, optional
        A new figure is made if left out.

    Returns
    -------
    matplotlib.axes.Axes
        Equal scales; numbers at the elements are those of the list beside it.
    """
    parts = [part for element in chain.elements for part in element.parts]
    own = ax is None
    ax = new_axes(ax, SIZE_IN)
    put_title(ax, "feed line from the antenna to the connector")
    sheet = _Sheet(ax, _size_mm(parts))
    sheet.terminal("antenna", "right")
    for number, part in enumerate(parts, start=1):
        sheet.wire()
        sheet.draw(part, number)
    sheet.wire()
    sheet.terminal(f"connector,\n{chain.reference_ohm:g} ohm", "left")
    sheet.finish(parts)
    if own:  # a long line is a low picture
        (left, right), (low, high) = ax.get_xlim(), ax.get_ylim()
        wanted = HEAD_IN + SHARE * SIZE_IN[0] * (high - low) / (right - left)
        cast("Figure", ax.figure).set_size_inches(
            SIZE_IN[0], min(max(wanted, LOWEST_IN), SIZE_IN[1])
        )
    return ax


def _size_mm(parts: list[Element]) -> float:
    """Size of the picture: what the lengths take, and room for the boxes."""
    along = sum(p.length_m for p in parts if isinstance(p, LineSection)) * _MM
    across = max((p.length_m for p in parts if isinstance(p, Stub)), default=0.0) * _MM
    boxes = sum(not isinstance(p, LineSection | Stub) for p in parts)
    lines = max(along + 0.2 * across, across)
    return lines / max(0.3, 1 - (BOX + GAP) * boxes) if lines else 60.0


@dataclass
class _Sheet:
    """Draws along y = 0, from x = 0 to the right; `lowest` and `highest` follow what is drawn."""

    ax: Axes
    size: float
    x: float = 0.0
    lowest: float = 0.0
    highest: float = 0.0
    stubs: list[float] = field(default_factory=list)

    def wire(self) -> None:
        self._line((self.x, self.x + GAP * self.size), (0, 0))
        self.x += GAP * self.size

    def terminal(self, text: str, side: str) -> None:
        radius = 0.008 * self.size
        self._circle(self.x, 0, radius)
        away = -1 if side == "right" else 1
        self.ax.text(
            self.x + away * 0.03 * self.size, 0, text, ha=side, va="center", fontsize=9, color=INK
        )

    def draw(self, part: Element, number: int) -> None:
        if isinstance(part, LineSection):
            self._section(part, number)
        elif isinstance(part, Stub):
            self._stub(part, number)
        elif isinstance(part, Lumped) and part.connection == "shunt":
            self._across(part, number)
        else:
            self._in_line(part, number)

    def _section(self, part: LineSection, number: int) -> None:
        length, width = part.length_m * _MM, self._width(part.line)
        self._bar(self.x, -width / 2, length, width, part.line)
        self._dimension((self.x, self.x + length), width / 2)
        self._number(self.x + length / 2, -width / 2 - 0.04 * self.size, number)
        self.x += length

    def _stub(self, part: Stub, number: int) -> None:
        """Down if across the line, up if in it, with a gap in the line under it."""
        length, width = part.length_m * _MM, self._width(part.line)
        series = part.connection == "series"
        way = 1 if series else -1
        feed = GAP * self.size
        # Room on either side, so that a wide stub does not lie over its neighbours.
        self._on(0 if series else width / 2)
        middle = self.x + (width / 2 if series else 0)
        start = way * feed
        if series:
            self._line((self.x, self.x), (0, start))
            self.x += width
            self._line((self.x, self.x), (0, start))
        else:
            self._dot(self.x)
            self._line((middle, middle), (0, start))
        bottom = start if series else start - length
        self._bar(middle - width / 2, bottom, width, length, part.line)
        end = start + way * length
        if part.end == "short":
            self._line((middle - width, middle + width), (end, end), 3.0)
        else:
            self._circle(middle, end + way * 0.012 * self.size, 0.01 * self.size)
        side = middle + width / 2 + 0.03 * self.size
        self._upright_dimension(side, sorted((start, end)), part)
        # Beyond the end, where no neighbour's number is.
        self._number(middle, end + way * 0.055 * self.size, number)
        self._reach(end + way * 0.09 * self.size)
        self._on(BOX * self.size if series else width / 2)

    def _on(self, length: float) -> None:
        self._line((self.x, self.x + length), (0, 0))
        self.x += length

    def _in_line(self, part: Element, number: int) -> None:
        box = BOX * self.size
        dashed = isinstance(part, PortExtension)
        self.ax.add_patch(
            Rectangle(
                (self.x, -box / 4),
                box,
                box / 2,
                facecolor="white",
                edgecolor=INK,
                linestyle="--" if dashed else "-",
            )
        )
        if isinstance(part, Transformer):
            self._line((self.x + box / 2, self.x + box / 2), (-box / 4, box / 4))
        self._word(self.x + box / 2, 0, _symbol(part))
        if isinstance(part, Lumped):
            self._value(self.x + box / 2, box / 4 + 0.03 * self.size, part)
        self._number(self.x + box / 2, -box / 4 - 0.04 * self.size, number)
        self._reach(box / 4)
        self.x += box

    def _across(self, part: Lumped, number: int) -> None:
        box, feed = BOX * self.size, GAP * self.size
        self._dot(self.x)
        self._line((self.x, self.x), (0, -feed))
        self.ax.add_patch(
            Rectangle(
                (self.x - box / 4, -feed - box), box / 2, box, facecolor="white", edgecolor=INK
            )
        )
        self._word(self.x, -feed - box / 2, _symbol(part))
        bottom = -2 * feed - box
        self._line((self.x, self.x), (-feed - box, bottom))
        self._line((self.x - box / 4, self.x + box / 4), (bottom, bottom), 3.0)
        self._number(self.x - box / 4 - 0.04 * self.size, -feed - box / 2, number)
        self._value(self.x, bottom - 0.03 * self.size, part)
        self._reach(bottom - 0.06 * self.size)

    def finish(self, parts: list[Element]) -> None:
        """Set limits and list the elements."""
        room = 0.12 * self.size
        self.ax.set_aspect("equal")
        self.ax.set_xlim(-2.2 * room, self.x + 2.4 * room)
        self.ax.set_ylim(self.lowest - 0.6 * room, self.highest + room)
        self.ax.set_xlabel("mm; lengths of lines to scale, one line drawn for two conductors")
        if not any(isinstance(part, LineSection | Stub) for part in parts):
            self.ax.set_xlabel("no lines: nothing is to scale; one line drawn for two conductors")
            self.ax.set_xticks([])
        for side in ("top", "right", "left"):
            self.ax.spines[side].set_visible(False)
        self.ax.set_yticks([])
        listed = "\n".join(
            f"{number}  {folded(part.about, 36)}" for number, part in enumerate(parts, start=1)
        )
        self.ax.text(
            1.01,
            1.0,
            plain(listed or "the connector sits at the antenna"),
            transform=self.ax.transAxes,
            ha="left",
            va="top",
            fontsize="small",
            color=INK,
        )

    def _width(self, line: Line) -> float:
        strip = getattr(line, "width_m", 0.0) * _MM
        return max(float(strip), THIN * self.size)

    def _bar(self, x: float, y: float, wide: float, high: float, line: Line) -> None:
        colour = METAL if hasattr(line, "width_m") else CABLE
        self.ax.add_patch(Rectangle((x, y), wide, high, facecolor=colour, edgecolor=INK))
        self._reach(y)
        self._reach(y + high)

    def _line(self, x: tuple[float, float], y: tuple[float, float], linewidth: float = 1.3) -> None:
        self.ax.plot(x, y, color=INK, linewidth=linewidth, solid_capstyle="butt", zorder=1)

    def _dot(self, x: float) -> None:
        self.ax.plot(x, 0, marker="o", markersize=4, color=INK, zorder=3)

    def _circle(self, x: float, y: float, radius: float) -> None:
        self.ax.add_patch(Circle((x, y), radius, facecolor="white", edgecolor=INK, zorder=3))

    def _dimension(self, x: tuple[float, float], over: float) -> None:
        """Length over a section, with arrows at both ends."""
        y = over + 0.05 * self.size
        self._arrows((x[0], y), (x[1], y))
        self.ax.text(
            sum(x) / 2,
            y + 0.01 * self.size,
            f"{x[1] - x[0]:.1f}",
            ha="center",
            va="bottom",
            fontsize=9,
            color=QUIET,
        )
        self._reach(y + 0.05 * self.size)

    def _upright_dimension(self, x: float, y: list[float], part: Stub) -> None:
        self._arrows((x, y[0]), (x, y[1]))
        self.ax.text(
            x + 0.012 * self.size,
            sum(y) / 2,
            f"{part.length_m * _MM:.1f}",
            ha="left",
            va="center",
            fontsize=9,
            color=QUIET,
        )

    def _arrows(self, start: tuple[float, float], end: tuple[float, float]) -> None:
        style = {"arrowstyle": "<|-|>", "color": QUIET, "shrinkA": 0, "shrinkB": 0, "lw": 0.8}
        self.ax.annotate("", end, xytext=start, arrowprops=style)

    def _number(self, x: float, y: float, number: int) -> None:
        self.ax.text(
            x,
            y,
            str(number),
            ha="center",
            va="center",
            fontsize=8,
            color=INK,
            bbox={"boxstyle": "circle,pad=0.25", "facecolor": "white", "edgecolor": INK},
            zorder=4,
        )
        self._reach(y - 0.04 * self.size)

    def _word(self, x: float, y: float, text: str) -> None:
        self.ax.text(x, y, text, ha="center", va="center", fontsize=8, color=INK, zorder=4)

    def _value(self, x: float, y: float, part: Lumped) -> None:
        text = quantity(part.value, UNITS[part.kind])
        self.ax.text(x, y, text, ha="center", va="center", fontsize=9, color=QUIET)
        self._reach(y + 0.03 * self.size)

    def _reach(self, y: float) -> None:
        self.lowest, self.highest = min(self.lowest, y), max(self.highest, y)


def _symbol(part: Element) -> str:
    if isinstance(part, Lumped):
        return part.kind
    if isinstance(part, Transformer):
        return f"{part.impedance_ratio:.3g} : 1"
    return "delay" if isinstance(part, PortExtension) else "?"
