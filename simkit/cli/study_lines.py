"""Where in the study file something about the metal was written."""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

from simkit.errors import GeometryError

if TYPE_CHECKING:
    from simkit.study import Study
    from simkit.study.model import Antenna, Placement, Strip

_NAMED = re.compile(r"\bstrips? '([^']+)'")
_PLACE = re.compile(r"\(([-+.\de]+), ([-+.\de]+)(?:, ([-+.\de]+))?\) mm")


def with_line(reason: str, study: Study | None, antenna: Antenna | None = None) -> str:
    """Return a reason with the line of the study that it is about.

    Parameters
    ----------
    reason : str
        Why an antenna cannot be built.
    study : Study or None
        None leaves the reason as it is.
    antenna : Antenna, optional
        The one it is about: a reason that names a place only is about the strip nearest to it.

    Returns
    -------
    str
        With ``(STUDY.toml:LINE)`` at its end, or as it was if no line can be told.
    """
    if study is None or not reason or f"{study.path.name}:" in reason:
        return reason
    line = _line(reason, study, antenna)
    return reason if line is None else f"{reason} ({study.path.name}:{line})"


def _line(reason: str, study: Study, antenna: Antenna | None) -> int | None:
    if reason.startswith("feed: "):
        return study.line_of("feed")
    if re.search(r"^cable: |\bthe cable\b|\[cable\]", reason):
        return study.line_of("cable")
    named = _NAMED.search(reason)
    if named is not None:
        return study.line_of(f"strip.{named[1]}")
    place = _PLACE.search(reason)
    if place is None or antenna is None:
        return None
    point_mm = [float(value) for value in place.groups() if value is not None]
    return study.line_of(f"strip.{_nearest(antenna, point_mm).name}")


def _nearest(antenna: Antenna, point_mm: list[float]) -> Strip:
    """The strip nearest to a place, which may be given in the drawing or where it is placed."""
    import numpy as np
    from shapely.geometry import LineString, Point

    drawn = [value / 1e3 for value in point_mm]
    places = [drawn, _unplaced(drawn, antenna.placement)] if len(drawn) == 3 else [[*drawn, 0.0]]

    def away(strip: Strip) -> float:
        line = LineString(strip.path_m)
        return min(float(np.hypot(line.distance(Point(x, y)), z)) for x, y, z in places)

    return min(antenna.strips, key=away)


def _unplaced(point_m: list[float], placement: Placement) -> list[float]:
    """The point of the strips' plane that the placement puts there."""
    away = [value - shift for value, shift in zip(point_m, placement.shift_m, strict=True)]
    rows = placement.rotation  # its inverse is its transpose
    return [sum(rows[row][k] * away[row] for row in range(3)) for k in range(3)]


@contextmanager
def lines_named(study: Study) -> Iterator[None]:
    """Name the line of the study in geometry errors that leave this context."""
    try:
        yield
    except GeometryError as error:
        raise GeometryError(with_line(str(error), study, study.nominal())) from error
