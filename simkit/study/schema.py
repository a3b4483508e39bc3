"""The tables of a study file that describe the antenna, and their keys."""

from __future__ import annotations

from typing import Any

from simkit.study.blueprint import (
    Blueprint,
    CutFeedPlan,
    EndFeedPlan,
    FrequencyPlan,
    MetalPlan,
    MirrorPlan,
    PathPlan,
)
from simkit.study.metals import METALS
from simkit.study.model import StripEnd
from simkit.study.tables import NAME, Quantity, Table, toml_kind
from simkit.study.units import (
    CONDUCTIVITY,
    FREQUENCY,
    LENGTH,
    PURE,
    RESISTANCE,
    nearest,
)

MOST_POINTS = 2000
"""Points a strip's path may have."""

LATER_TABLES = {
    "carrier": "leave the table out; the strips are simulated in air",
    "ground": "leave the table out; the antenna is simulated in free space",
    "placement": "leave the table out; the strips lie in the plane z = 0",
    "feedline": "leave it out; the connector then sits at the feed",
}
_ONE_BAND = "all cases of a study share one frequency band"
_ONE_REFERENCE = "all cases of a study share one reference"


def read_blueprint(root: Table) -> Blueprint:
    """Read strips, metal, feed, connector, frequency and model; problems are left in the notes.

    Parameters
    ----------
    root : Table
        The whole file. Every key of it that belongs here counts as known afterwards.
    """
    strips, names = _read_strips(root)
    metal = _read_metal(root.table("metal"))
    feed = _read_feed(root.table("feed", "add [feed] to say where the source sits"), names)
    reference = _read_connector(root.table("connector"))
    frequency = _read_frequency(
        root.table("frequency", "add [frequency] with start, stop and points")
    )
    model = _read_model(root.table("model"))
    for name, instead in LATER_TABLES.items():
        root.later(name, instead)
    return Blueprint(strips, metal, feed, reference, frequency, model)


def _read_strips(root: Table) -> tuple[tuple[PathPlan | MirrorPlan, ...], set[str]]:
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
    table.later("curve", "write the curve as points of `path`")
    table.later("smooth", "write more points of `path` along the curve")
    table.later("arc", "write the arc as points of `path`, turning less than 20 degrees at each")
    if table.has("mirror"):
        return _read_mirror(table, name)
    if table.has("axis"):
        table.report("axis", "belongs to a strip with `mirror`; leave it out")
    path = _read_path(table)
    width = _read_width(table)
    table.close("a strip")
    return PathPlan(name, path or (), width)


def _read_mirror(table: Table, name: str) -> MirrorPlan | None:
    of = table.text("mirror")
    axis = table.choice("axis", ("y", "x"), "y")
    for key in ("path", "width"):
        if table.has(key):
            table.report(key, "a mirrored strip takes this from its original; leave it out here")
    table.notes.fixed[table.key("width")] = f"a mirrored strip has the width of `{of}`"
    table.close("a mirrored strip")
    if of is None or axis is None:
        return None
    line = table.notes.line((*table.path, "mirror"))
    return MirrorPlan(name, of, "x" if axis == "x" else "y", line)


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


def _read_path(table: Table) -> tuple[tuple[Quantity, Quantity], ...] | None:
    raw = table.raw("path")
    example = 'as in path = [["0 mm", "0 mm"], ["76 mm", "0 mm"]]'
    if "path" not in table.data:
        table.report("path", f"is missing; list the points of the centre line, {example}")
    elif not isinstance(raw, list):
        table.report("path", f"a list of points is needed, {example}, but this is {toml_kind(raw)}")
    elif len(raw) < 2:
        table.report("path", f"has {len(raw)} point; at least 2 are needed, {example}")
    elif len(raw) > MOST_POINTS:
        table.report("path", f"has {len(raw)} points; at most {MOST_POINTS} are allowed")
    else:
        points = [_read_point(table, i, point) for i, point in enumerate(raw)]
        if all(points):
            return tuple(point for point in points if point is not None)
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


def _read_width(table: Table) -> Quantity | None:
    if isinstance(table.raw("width"), list):
        table.report(
            "width",
            "widths that vary along a strip are not available in this version; "
            "give one width for the whole strip",
        )
        return None
    return table.quantity("width", LENGTH, 'write how wide the strip is, as in width = "8 mm"')


def _read_metal(table: Table | None) -> MetalPlan:
    if table is None:
        return MetalPlan()
    material = table.text("material")
    conductivity = table.quantity("conductivity", CONDUCTIVITY)
    real = table.has("material") or table.has("conductivity")
    thickness = table.quantity(
        "thickness",
        LENGTH,
        'the loss of a real metal needs it, as in thickness = "0.15 mm"' if real else "",
    )
    table.close()
    if table.has("material") and table.has("conductivity"):
        table.report("conductivity", "give either `material` or `conductivity`, not both")
    if not real:
        table.notes.fixed["metal.conductivity"] = "this metal is a perfect conductor"
    if material is None:
        name = "given conductivity" if conductivity else "perfect conductor"
        return MetalPlan(name, None, conductivity, thickness)
    table.notes.fixed["metal.conductivity"] = (
        "`material` fixes it; give metal.conductivity instead of the material"
    )
    entry = METALS.get(material.lower())
    if entry is None:
        hint = nearest(material, list(METALS))
        advice = f'do you mean "{hint}"?' if hint else f"known are {', '.join(METALS)}"
        table.report(
            "material",
            f'this metal is not in the table; {advice} Or give conductivity = "1.5e7 S/m".',
        )
        return MetalPlan()
    return MetalPlan(material.lower(), entry.conductivity_s_per_m, None, thickness)


def _read_feed(table: Table | None, strips: set[str]) -> EndFeedPlan | CutFeedPlan | None:
    if table is None:
        return None
    across = [key for key in ("strip", "at", "gap") if table.has(key)]
    ends = [key for key in ("from", "to") if table.has(key)]
    if across and ends:
        table.report(
            ends[0],
            "a feed is either between two ends (from, to) or in a cut (strip, at), not both",
        )
        return None
    if across:
        return _read_cut(table, strips)
    table.notes.fixed["feed.at"] = "this feed sits between two strip ends"
    table.notes.fixed["feed.gap"] = "the gap of this feed is the distance of its two strip ends"
    start = _read_end(table, "from", strips)
    stop = _read_end(table, "to", strips)
    table.close()
    if start is None or stop is None:
        return None
    if start == stop:
        table.report("to", "a feed needs two different ends")
        return None
    lines = [table.notes.line((*table.path, key)) for key in ("from", "to")]
    return EndFeedPlan(*start, *stop, *lines)


def _read_cut(table: Table, strips: set[str]) -> CutFeedPlan | None:
    strip = table.text("strip", "name the strip the cut goes across")
    at = table.quantity("at", LENGTH, 'write where along the strip the cut is, as in at = "12 mm"')
    gap = table.quantity("gap", LENGTH)
    table.close()
    if strip is not None and strip not in strips:
        table.report("strip", f"no strip has this name; {_strip_advice(strip, strips)}")
        return None
    return CutFeedPlan(strip, at, gap) if strip is not None else None


def _read_end(table: Table, key: str, strips: set[str]) -> tuple[str, StripEnd] | None:
    text = table.text(key, 'write a strip and its end, as in "east.start"')
    if text is None:
        return None
    strip, _, end = text.partition(".")
    if end not in ("start", "end"):
        table.report(key, 'write a strip and its end, as in "east.start" or "east.end"')
    elif strip not in strips:
        table.report(key, f"no strip is called `{strip}`; {_strip_advice(strip, strips)}")
    else:
        return strip, "start" if end == "start" else "end"
    return None


def _strip_advice(name: str, strips: set[str]) -> str:
    hint = nearest(name, sorted(strips))
    if hint:
        return f"do you mean `{hint}`?"
    return f"there are {', '.join(sorted(strips))}" if strips else "no strip could be read"


def _read_connector(table: Table | None) -> Quantity | None:
    if table is None:
        return None
    reference = table.quantity("reference", RESISTANCE, fixed=_ONE_REFERENCE)
    table.close()
    return reference


def _read_frequency(table: Table | None) -> FrequencyPlan | None:
    if table is None:
        return None
    start = table.quantity("start", FREQUENCY, 'as in start = "300 MHz"', fixed=_ONE_BAND)
    stop = table.quantity("stop", FREQUENCY, 'as in stop = "3 GHz"', fixed=_ONE_BAND)
    points = table.quantity("points", PURE, "as in points = 1351", fixed=_ONE_BAND)
    table.close()
    return FrequencyPlan(start, stop, points)


def _read_model(table: Table | None) -> Any:
    if table is None:
        return "auto"
    if table.raw("kind") == "grid":
        table.report(
            "kind",
            'the model "grid" is not available in this version; write "line" or leave it out',
        )
        return "auto"
    kind = table.choice("kind", ("auto", "line"), "auto")
    table.close()
    return kind or "auto"
