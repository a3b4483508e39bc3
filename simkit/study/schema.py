"""The tables of a study file that describe the antenna, and their keys."""

from __future__ import annotations

from simkit.study.blueprint import (
    Blueprint,
    CutFeedPlan,
    EndFeedPlan,
    FrequencyPlan,
    MetalPlan,
)
from simkit.study.cable_schema import read_cable
from simkit.study.feedline_schema import read_feedline
from simkit.study.fields import known_conductivity, read_switch
from simkit.study.model import ModelKind, StripEnd
from simkit.study.strip_schema import read_strips
from simkit.study.surroundings_schema import read_carrier, read_ground, read_placement
from simkit.study.tables import Quantity, Table
from simkit.study.units import (
    CONDUCTIVITY,
    FREQUENCY,
    LENGTH,
    PURE,
    RESISTANCE,
    nearest,
)

MODEL_KINDS: tuple[ModelKind, ...] = ("auto", "line", "grid")

_ONE_BAND = "all cases of a study share one frequency band"
_ONE_REFERENCE = "all cases of a study share one reference"


def read_blueprint(root: Table) -> Blueprint:
    """Read every table that describes the antenna; problems are left in the notes.

    Parameters
    ----------
    root : Table
        The whole file. Every key of it that belongs here counts as known afterwards.
    """
    strips, names = read_strips(root)
    metal = _read_metal(root.table("metal"))
    feed = _read_feed(root.table("feed", "add [feed] to say where the source sits"), names)
    reference = _read_connector(root.table("connector"))
    frequency = _read_frequency(
        root.table("frequency", "add [frequency] with start, stop and points")
    )
    model, converge = _read_model(root.table("model"))
    return Blueprint(
        strips,
        metal,
        feed,
        reference,
        frequency,
        model,
        converge,
        placement=read_placement(root.table("placement")),
        carrier=read_carrier(root.table("carrier")),
        ground=read_ground(root.table("ground")),
        cable=read_cable(root.table("cable"), feed),
        feedline=read_feedline(root.tables("feedline")),
    )


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
    known_s_per_m = known_conductivity(table, material)
    if known_s_per_m is None:
        return MetalPlan()
    return MetalPlan(material.lower(), known_s_per_m, None, thickness)


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


def _read_model(table: Table | None) -> tuple[ModelKind, bool]:
    if table is None:
        return "auto", False
    kind = table.choice("kind", MODEL_KINDS, "auto")
    converge = read_switch(table, "converge")
    table.close()
    return next((known for known in MODEL_KINDS if known == kind), "auto"), converge
