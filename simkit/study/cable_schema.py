"""The table [cable]: the outer conductor of the feed cable, which joins one end of the feed."""

from __future__ import annotations

from typing import Any

from simkit.study.blueprint import CablePlan, CutFeedPlan, EndFeedPlan
from simkit.study.model import StripEnd
from simkit.study.tables import Quantity, Table, toml_kind
from simkit.study.units import LENGTH, PURE, Dimension

_AXES = ("x", "y", "z")
_ROUTE = '[["0 mm", "0 mm", "80 mm"], ["0 mm", "-200 mm", "80 mm"]]'


def read_cable(table: Table | None, feed: EndFeedPlan | CutFeedPlan | None) -> CablePlan | None:
    """Read [cable]; None without one or after a problem that leaves nothing to check.

    Parameters
    ----------
    table : Table or None
    feed : EndFeedPlan or CutFeedPlan or None
        None after a problem of its own.
    """
    if table is None:
        return None
    place = _read_at(table, feed)
    route = _read_route(table)
    direction = _read_direction(table)
    routed, directed = table.has("route"), table.has("direction")
    missing = "" if routed else 'write how long the cable is, as in length = "300 mm", or its route'
    length = table.quantity("length", LENGTH, missing)
    diameter = table.quantity(
        "diameter", LENGTH, 'write that of the braid, as in diameter = "3 mm"'
    )
    table.close()
    if routed and directed:
        table.report("direction", "give either `route` or `direction`, not both")
    if place is None or (routed and not route):
        return None
    line = table.notes.line(table.path)
    return CablePlan(*place, route, direction, length, diameter, line)


def _read_at(table: Table, feed: EndFeedPlan | CutFeedPlan | None) -> tuple[str, StripEnd] | None:
    example = '"east.start"'
    if isinstance(feed, CutFeedPlan):
        known = [f"{feed.strip}.start", f"{feed.strip}.end"]
        means = "the side of the cut that leads to that end of the strip"
    elif feed is not None:
        known = [f"{feed.from_strip}.{feed.from_end}", f"{feed.to_strip}.{feed.to_end}"]
        means = "one of the two ends named in [feed]"
    else:
        known, means = [], "an end of the feed"
    if known:
        example = f'"{known[0]}" or "{known[1]}"'
    text = table.text("at", f"write which side of the feed the braid is joined to: {example}")
    if text is None or not known:
        return None
    if text not in known:
        table.report("at", f"must be {example}: {means}")
        return None
    strip, _, end = text.partition(".")
    return strip, "start" if end == "start" else "end"


def _read_route(table: Table) -> tuple[tuple[Quantity, ...], ...]:
    raw = table.raw("route")
    table.notes.fixed[table.key("route")] = "it is a list; sweep a name of [values] used in it"
    if "route" not in table.data:
        return ()
    if not isinstance(raw, list) or not raw or not all(isinstance(item, list) for item in raw):
        table.report(
            "route",
            "write the points the cable passes, each with x, y and z from the end it is joined "
            f"to, as in route = {_ROUTE}",
        )
        return ()
    points = []
    for number, item in enumerate(raw):
        point = _read_three(table, "route", item, LENGTH, (number,), f"[{number + 1}]")
        if point:
            points.append(point)
    return tuple(points) if len(points) == len(raw) else ()


def _read_direction(table: Table) -> tuple[Quantity, ...]:
    raw = table.raw("direction")
    table.notes.fixed[table.key("direction")] = "it is a list; sweep a name of [values] used in it"
    return _read_three(table, "direction", raw, PURE) if "direction" in table.data else ()


def _read_three(
    table: Table,
    name: str,
    raw: Any,
    dimension: Dimension,
    place: tuple[int, ...] = (),
    label: str = "",
) -> tuple[Quantity, ...]:
    """Three entries of a list, for x, y and z; empty after a problem."""
    path, key = (*table.path, name, *place), f"{table.key(name)}{label}"
    if not isinstance(raw, list) or len(raw) != 3:
        example = '["0 mm", "0 mm", "80 mm"]' if dimension == LENGTH else "[0, 0, 1]"
        found = f"{len(raw)} numbers" if isinstance(raw, list) else toml_kind(raw)
        table.notes.report(path, key, f"write x, y and z, as in {example}, not {found}", raw)
        return ()
    found_all = [
        table.notes.expression(item, dimension, (*path, k), f"{key}.{axis}")
        for k, (item, axis) in enumerate(zip(raw, _AXES, strict=True))
    ]
    complete = tuple(quantity for quantity in found_all if quantity is not None)
    return complete if len(complete) == 3 else ()
