"""The tables [[strip]]: paths, curves, arcs and mirrors, with their widths."""

from __future__ import annotations

from typing import Any

from simkit.study.blueprint import (
    ArcPlan,
    CurvePlan,
    MirrorPlan,
    MovePlan,
    PathPlan,
    PolylinePlan,
)
from simkit.study.fields import read_angle, read_switch, read_vector
from simkit.study.paths import SPLINE_POINTS
from simkit.study.tables import NAME, Notes, Quantity, Table, toml_kind
from simkit.study.units import LENGTH, PURE, nearest

MOST_POINTS = 2000
"""Points a strip's path may have."""

MOST_SMOOTH_POINTS = MOST_POINTS // SPLINE_POINTS
"""Points a path may have that a spline is drawn through."""

PARAMETER = "t"
"""What a curve's expressions call the number that runs along it."""

_CURVE = 'as in curve = { x = "t*reach", y = "sag*t**2", t = [0, 1], points = 60 }'
_ARC = 'as in arc = { centre = ["0 mm", "0 mm"], radius = "50 mm", from = "0 deg", to = "90 deg" }'
_PATH = 'as in path = [["0 mm", "0 mm"], ["76 mm", "0 mm"]]'
_ONE_MESH = "all cases of a study share one number of points, so that lengths only stretch"


def read_strips(root: Table) -> tuple[tuple[PathPlan | MirrorPlan, ...], set[str]]:
    """Return the strips that could be read, and the names of all."""
    advice = "describe the metal by at least one [[strip]]"
    tables = root.tables("strip", advice)
    if root.data.get("strip") == []:
        root.report("strip", f"is empty; {advice}")
    strips: list[PathPlan | MirrorPlan] = []
    named: dict[str, Table] = {}
    for table in tables:
        name = _strip_name(table, named)
        if name is not None:
            named[name] = table
            table.label = f"strip.{name}"
        strip = _read_strip(table, name or table.label)
        if strip is not None and name is not None:
            strips.append(strip)
    return tuple(_without_lost_mirrors(strips, named)), set(named)


def _strip_name(table: Table, taken: dict[str, Table]) -> str | None:
    name = table.text("name", 'give every strip a name, as in name = "east"')
    if name is None:
        return None
    if not NAME.fullmatch(name):
        table.report("name", "a name is a letter, then up to 59 letters, digits or underscores")
    elif name in taken:
        table.report("name", "another strip has this name already; names must differ")
    else:
        return name
    return None


def _read_strip(table: Table, name: str) -> PathPlan | MirrorPlan | None:
    move = MovePlan(read_angle(table, "rotate"), read_vector(table, "shift", "xy"))
    if table.has("mirror"):
        return _read_mirror(table, name, move)
    if table.has("axis"):
        table.report("axis", "belongs to a strip with `mirror`; leave it out")
    written = [key for key in ("path", "curve", "arc") if table.has(key)]
    for key in written[1:]:
        table.report(key, f"a strip has either `path`, `curve` or `arc`, and `{written[0]}` stands")
    kind = written[0] if written else "path"
    smooth = read_switch(table, "smooth")
    path: PolylinePlan | CurvePlan | ArcPlan | None
    if kind == "curve":
        path = _read_curve(table)
    elif kind == "arc":
        path = _read_arc(table)
    else:
        path = _read_path(table, smooth)
    if smooth and kind != "path":
        table.report("smooth", f"`{kind}` is smooth already; leave it out")
    width = _read_widths(table, kind)
    along = any(PARAMETER in w.expression.names for w in width) and kind == "curve"
    table.close("a strip")
    return PathPlan(name, path, width, along, move, _first_line(table, kind))


def _first_line(table: Table, kind: str) -> int | None:
    place = (*table.path, kind, 0) if kind == "path" else (*table.path, kind)
    return table.notes.line(place)


def _read_mirror(table: Table, name: str, move: MovePlan) -> MirrorPlan | None:
    of = table.text("mirror")
    axis = table.choice("axis", ("y", "x"), "y")
    for key in ("path", "curve", "arc", "smooth", "width"):
        if table.has(key):
            table.report(key, "a mirrored strip takes this from its original; leave it out here")
    table.notes.fixed[table.key("width")] = f"a mirrored strip has the width of `{of}`"
    table.close("a mirrored strip")
    if of is None or axis is None:
        return None
    line = table.notes.line((*table.path, "mirror"))
    return MirrorPlan(name, of, "x" if axis == "x" else "y", line, move)


def _without_lost_mirrors(
    strips: list[PathPlan | MirrorPlan], named: dict[str, Table]
) -> list[PathPlan | MirrorPlan]:
    """Report mirrors of nothing and circles of mirrors; keep what leads to a path."""
    plans = {strip.name: strip for strip in strips}
    kept = []
    for strip in strips:
        plan: PathPlan | MirrorPlan | None = strip
        seen: set[str] = set()
        while isinstance(plan, MirrorPlan) and plan.name not in seen:
            seen.add(plan.name)
            plan = plans.get(plan.of)
        if isinstance(plan, PathPlan):
            kept.append(strip)
        elif plan is not None:
            named[strip.name].report(
                "mirror", "these mirrors lead round in a circle; give one of them a path"
            )
        elif isinstance(strip, MirrorPlan) and strip.of not in named:
            hint = nearest(strip.of, [name for name in named if name != strip.name])
            advice = f'do you mean "{hint}"?' if hint else "name a strip that has a path"
            named[strip.name].report("mirror", f"no strip has this name; {advice}")
    return kept


# -- paths -----------------------------------------------------------------------------------------


def _read_path(table: Table, smooth: bool) -> PolylinePlan | None:
    raw = table.raw("path")
    most = MOST_SMOOTH_POINTS if smooth else MOST_POINTS
    fewest = 3 if smooth else 2
    through = " to draw a smooth line through" if smooth else ""
    if "path" not in table.data:
        table.report(
            "path",
            f"is missing; list the points of the centre line, {_PATH}, "
            "or give `curve`, `arc` or `mirror`",
        )
    elif not isinstance(raw, list):
        table.report("path", f"a list of points is needed, {_PATH}, but this is {toml_kind(raw)}")
    elif len(raw) < fewest:
        points = "point" if len(raw) == 1 else "points"
        table.report(
            "path", f"has {len(raw)} {points}; at least {fewest} are needed{through}, {_PATH}"
        )
    elif len(raw) > most:
        table.report("path", f"has {len(raw)} points; at most {most} are allowed{through}")
    else:
        points_read = [_read_point(table, i, point) for i, point in enumerate(raw)]
        if all(points_read):
            return PolylinePlan(tuple(point for point in points_read if point), smooth)
    return None


def _read_point(table: Table, i: int, raw: Any) -> tuple[Quantity, Quantity] | None:
    path = (*table.path, "path", i)
    key = f"{table.key('path')}[{i + 1}]"
    if not isinstance(raw, list) or len(raw) != 2:
        table.notes.report(path, key, 'a point is a pair [x, y], as in ["76 mm", "0 mm"]', raw)
        return None
    x = table.notes.expression(raw[0], LENGTH, (*path, 0), f"{key}.x")
    y = table.notes.expression(raw[1], LENGTH, (*path, 1), f"{key}.y")
    return (x, y) if x and y else None


def _below(table: Table, name: str, example: str) -> Table | None:
    if not isinstance(table.raw(name), dict):
        what = f"must be a table in braces, {example}, but this is {toml_kind(table.raw(name))}"
        table.report(name, what)
        return None
    return table.table(name)


def _read_curve(table: Table) -> CurvePlan | None:
    curve = _below(table, "curve", _CURVE)
    if curve is None:
        return None
    _check_parameter(table.notes)
    found = []
    for axis in ("x", "y"):
        why = "it is an expression along the curve; sweep a name of [values] used in it"
        missing = f"write the coordinate along the curve, {_CURVE}"
        found.append(curve.quantity(axis, LENGTH, missing, why, PARAMETER))
    ends = _read_ends(curve)
    points = curve.quantity("points", PURE, fixed=_ONE_MESH)
    curve.close("a curve")
    x, y = found
    if x is None or y is None or ends is None:
        return None
    return CurvePlan(x, y, *ends, points, table.notes.line(curve.path))


def _check_parameter(notes: Notes) -> None:
    """Report, once, a name of [values] that curves have another use for."""
    what = "in a curve t runs along it; give this value another name"
    if PARAMETER in notes.names and not any(problem.what == what for problem in notes.problems):
        notes.report(("values", PARAMETER), f"values.{PARAMETER}", what)


def _read_ends(curve: Table) -> tuple[Quantity | None, Quantity | None] | None:
    """Return where t begins and ends, both None if the curve does not say; None after a problem."""
    raw = curve.raw(PARAMETER)
    if PARAMETER not in curve.data:
        return None, None
    if not isinstance(raw, list) or len(raw) != 2:
        curve.report(PARAMETER, "write where t begins and ends, as in t = [0, 1]")
        return None
    path, key = (*curve.path, PARAMETER), curve.key(PARAMETER)
    first, last = (
        curve.notes.expression(item, PURE, (*path, i), f"{key}[{i + 1}]")
        for i, item in enumerate(raw)
    )
    return None if first is None or last is None else (first, last)


def _read_arc(table: Table) -> ArcPlan | None:
    arc = _below(table, "arc", _ARC)
    if arc is None:
        return None
    centre = read_vector(arc, "centre", "xy", _ARC)
    radius = arc.quantity("radius", LENGTH, _ARC)
    start = read_angle(arc, "from", f"write the angle of the arc's start, seen from +x, {_ARC}")
    stop = read_angle(arc, "to", f"write the angle of the arc's end, seen from +x, {_ARC}")
    points = arc.quantity("points", PURE, fixed=_ONE_MESH)
    arc.close("an arc")
    if centre is None or radius is None or start is None or stop is None:
        return None
    line = table.notes.line(arc.path)
    return ArcPlan((centre[0], centre[1]), radius, start, stop, points, line)


# -- widths ----------------------------------------------------------------------------------------


def _read_widths(table: Table, kind: str) -> tuple[Quantity, ...]:
    raw = table.raw("width")
    if isinstance(raw, list):
        return _read_taper(table, kind, raw)
    parameter = PARAMETER if kind == "curve" else ""
    missing = 'write how wide the strip is, as in width = "8 mm"'
    width = table.quantity("width", LENGTH, missing, parameter=parameter)
    if width is not None and parameter in width.expression.names:
        key = table.key("width")
        table.notes.fixed[key] = "it changes along the curve; sweep a name of [values] used in it"
    return () if width is None else (width,)


def _read_taper(table: Table, kind: str, raw: list[Any]) -> tuple[Quantity, ...]:
    path, key = (*table.path, "width"), table.key("width")
    table.notes.fixed[key] = "the widths are a list; sweep a name of [values] used in it"
    points = table.data.get("path")
    if kind == "path" and isinstance(points, list) and len(raw) != len(points):
        table.report(
            "width",
            f"there are {len(raw)} widths for {len(points)} points; write one width per point, or "
            "a single one for the whole strip",
        )
        return ()
    if kind != "path" and not 2 <= len(raw) <= MOST_POINTS:
        table.report("width", f"write the widths at the start and the end of the {kind} at least")
        return ()
    widths = [
        table.notes.expression(item, LENGTH, (*path, i), f"{key}[{i + 1}]")
        for i, item in enumerate(raw)
    ]
    complete = tuple(width for width in widths if width is not None)
    return complete if len(complete) == len(widths) else ()
