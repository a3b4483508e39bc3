"""The tables [[feedline]]: what lies between the feed and the connector, item by item."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

from simkit.study.blueprint import FeedLinePlan, LinePlan
from simkit.study.fields import known_conductivity
from simkit.study.model import Connection, LineEnd
from simkit.study.resolve_feedline import PARTS
from simkit.study.tables import NAME, Quantity, Table
from simkit.study.units import (
    ATTENUATION,
    CAPACITANCE,
    CONDUCTIVITY,
    FREQUENCY,
    INDUCTANCE,
    LENGTH,
    PURE,
    RESISTANCE,
    TIME,
    Dimension,
    nearest,
)


@dataclass(frozen=True)
class _Key:
    """A quantity of an item; `missing` says what to do without it, empty if it may be left out."""

    dimension: Dimension
    missing: str = ""


_LENGTH = _Key(LENGTH, 'write how long the line is, as in length = "42 mm"')
_WIDTH = _Key(LENGTH, 'write how wide the strips are, as in width = "6 mm"')
_ANY_LENGTH, _NUMBER = _Key(LENGTH), _Key(PURE)

_SHEET = {"permittivity": _NUMBER, "loss_tangent": _NUMBER, "overhang": _ANY_LENGTH}
_METAL = {"conductivity": _Key(CONDUCTIVITY), "thickness": _ANY_LENGTH}

LINES: dict[str, dict[str, _Key]] = {
    "two-strips": {
        "width": _WIDTH,
        "separation": _Key(LENGTH, 'write how far the strips are apart, as in separation = "3 mm"'),
        "other_width": _ANY_LENGTH,
        **_SHEET,
        **_METAL,
    },
    "strip-over-plate": {
        "width": _WIDTH,
        "height": _Key(LENGTH, 'write how high the strip is over the plate, as in height = "2 mm"'),
        **_SHEET,
        **_METAL,
    },
    "coplanar-strips": {
        "width": _WIDTH,
        "gap": _Key(LENGTH, 'write the gap between the strips\' edges, as in gap = "1 mm"'),
        "other_width": _ANY_LENGTH,
        "sheet": _ANY_LENGTH,
        **_SHEET,
        **_METAL,
    },
    "coaxial": {
        "inner": _Key(LENGTH, 'write the diameter of the inner conductor, as in inner = "0.51 mm"'),
        "outer": _Key(
            LENGTH, 'write the inside diameter of the outer conductor, as in outer = "1.68 mm"'
        ),
        "permittivity": _NUMBER,
        "loss_tangent": _NUMBER,
        "conductivity": _Key(CONDUCTIVITY),
    },
    "uniform": {
        "impedance": _Key(RESISTANCE, 'write the line\'s impedance, as in impedance = "75 ohm"'),
        "velocity_factor": _NUMBER,
        "attenuation": _Key(ATTENUATION),
        "at": _Key(FREQUENCY),
        "loss_tangent": _NUMBER,
    },
}
"""What a line may be made of, with the keys of each."""


def _part(dimension: Dimension, example: str) -> dict[str, _Key]:
    return {"value": _Key(dimension, f'write how large it is, as in value = "{example}"')}


ITEMS: dict[str, dict[str, _Key]] = {
    "line": {"length": _LENGTH},
    "stub": {"length": _LENGTH},
    "tapped-line": {
        "from_antenna": _Key(
            LENGTH, 'write the length from antenna to tap, as in from_antenna = "30 mm"'
        ),
        "beyond": _Key(LENGTH, 'write the length from the tap to the end, as in beyond = "12 mm"'),
    },
    "resistor": _part(RESISTANCE, "10 ohm"),
    "inductor": {**_part(INDUCTANCE, "3.3 nH"), "q": _NUMBER},
    "capacitor": {**_part(CAPACITANCE, "1.8 pF"), "q": _NUMBER},
    "transformer": {
        "ratio": _Key(
            PURE,
            "write the antenna's impedance over the connector's, as in ratio = 4 for 200 ohm "
            "to 50 ohm",
        ),
        "loss": _NUMBER,
        "nominal": _Key(RESISTANCE),
    },
    "port-extension": {"delay": _Key(TIME), "length": _ANY_LENGTH, "permittivity": _NUMBER},
}
"""Kinds of items, with the quantities of each besides those of its line."""

WITH_LINE = ("line", "stub", "tapped-line")
WITH_END = ("stub", "tapped-line")
MOST_ITEMS = 50

_LINE_KEYS = {key for keys in LINES.values() for key in keys} | {"line", "material"}


def read_feedline(tables: list[Table]) -> tuple[FeedLinePlan, ...]:
    """Read every [[feedline]], from the antenna to the connector.

    Returns
    -------
    tuple of FeedLinePlan
        Items that could not be read at all are left out.
    """
    if len(tables) > MOST_ITEMS:
        tables[0].report("", f"is one of {len(tables)} items; at most {MOST_ITEMS} are allowed")
        return ()
    names = _names(tables)
    found: dict[str, FeedLinePlan] = {}
    alike: dict[str, tuple[Table, str]] = {}
    for table, name in zip(tables, names, strict=True):
        table.label = f"feedline.{name}"
        item = _read_item(table, name, alike)
        if item is not None:
            found[name] = item
    return tuple(_with_lines_of_others(found, alike, names))


def _names(tables: list[Table]) -> list[str]:
    """Return a name for every item: its own, or its kind, numbered where that is taken."""
    taken: set[str] = set()
    given: list[str | None] = []
    for table in tables:
        name = table.text("name")
        if name is not None and not NAME.fullmatch(name):
            table.report("name", "a name is a letter, then up to 59 letters, digits or underscores")
            name = None
        elif name is not None and name in taken:
            table.report("name", "another item has this name already; names must differ")
            name = None
        given.append(name)
        taken |= {name} if name else set()
    names = []
    for table, own in zip(tables, given, strict=True):
        kind = table.data.get("kind")
        name = own or _free_name(kind if isinstance(kind, str) and kind in ITEMS else "item", taken)
        taken.add(name)
        names.append(name)
    return names


def _free_name(kind: str, taken: set[str]) -> str:
    number, name = 1, kind
    while name in taken:
        number += 1
        name = f"{kind}{number}"
    return name


def _read_item(table: Table, name: str, alike: dict[str, tuple[Table, str]]) -> FeedLinePlan | None:
    listed = ", ".join(f'"{kind}"' for kind in ITEMS)
    if not table.has("kind"):
        table.report("kind", f"is missing; choose one of {listed}")
        return None
    kind = table.choice("kind", tuple(ITEMS), "")
    if kind is None:
        return None
    sizes = _read_quantities(table, ITEMS[kind])
    end: LineEnd = "short"
    connection: Connection = "shunt"
    if kind in WITH_END:
        end = "open" if table.choice("end", ("short", "open"), "short") == "open" else "short"
    if kind in PARTS and not table.has("connection"):
        table.report(
            "connection", 'is missing; write "shunt" (across the line) or "series" (in it)'
        )
    elif kind == "stub" or kind in PARTS:
        chosen = table.choice("connection", ("shunt", "series"), "shunt")
        connection = "series" if chosen == "series" else "shunt"
    if kind == "port-extension":
        _check_extension(table)
    line = _read_line(table, name, alike) if kind in WITH_LINE else None
    table.close(f'a feed-line item of kind "{kind}"')
    return FeedLinePlan(name, kind, sizes, line, end, connection)


def _check_extension(table: Table) -> None:
    if table.has("delay") == table.has("length"):
        state = "are both given" if table.has("delay") else "are both missing"
        table.report(
            "delay",
            f'delay and length {state}; write either delay = "120 ps" or length = "25 mm", the '
            "latter with the permittivity of the line",
        )
    elif table.has("delay") and table.has("permittivity"):
        table.report("permittivity", "belongs to `length`; a delay holds it already, leave it out")


def _read_quantities(table: Table, keys: Mapping[str, _Key]) -> tuple[tuple[str, Quantity], ...]:
    found = []
    for key, wanted in keys.items():
        quantity = table.quantity(key, wanted.dimension, wanted.missing)
        if quantity is not None:
            found.append((key, quantity))
    return tuple(found)


# -- what a line is made of ------------------------------------------------------------------------


def _read_line(table: Table, name: str, alike: dict[str, tuple[Table, str]]) -> LinePlan | None:
    if table.has("like"):
        _read_like(table, name, alike)
        return None
    listed = ", ".join(f'"{kind}"' for kind in LINES)
    kind = None
    if not table.has("line"):
        table.report(
            "line",
            f"is missing; say what the line is made of, one of {listed}, or name an item that has "
            'it already, as in like = "pair"',
        )
    else:
        kind = table.choice("line", tuple(LINES), "")
    if kind is None:
        for key in _LINE_KEYS:  # known somewhere, so not to be complained of one by one
            table.has(key)
        return None
    sizes = _read_quantities(table, LINES[kind])
    conductivity = None
    if kind != "uniform":
        conductivity = _read_material(table)
    _check_line(table, kind)
    return LinePlan(table.label, kind, sizes, conductivity, table.notes.line(table.path))


def _read_like(table: Table, name: str, alike: dict[str, tuple[Table, str]]) -> None:
    other = table.text("like")
    for key in sorted(_LINE_KEYS):
        if table.has(key):
            table.report(key, "an item with `like` takes this from the other one; leave it out")
        if other is not None:
            table.notes.fixed[table.key(key)] = f"this item takes it from feedline.{other}.{key}"
    if other is not None:
        alike[name] = (table, other)


def _read_material(table: Table) -> float | None:
    material = table.text("material")
    if material is None:
        return None
    if table.has("conductivity"):
        table.report("conductivity", "give either `material` or `conductivity`, not both")
    table.notes.fixed[table.key("conductivity")] = (
        f"`material` fixes it; give {table.key('conductivity')} instead of the material"
    )
    return known_conductivity(table, material)


def _check_line(table: Table, kind: str) -> None:
    """Report keys that mean nothing without another one."""
    needs: list[tuple[str, str, str]] = []
    if kind in ("two-strips", "strip-over-plate", "coplanar-strips"):
        sheet = "describes the sheet between or under the strips, which needs `permittivity` too"
        needs = [(key, "permittivity", sheet) for key in ("loss_tangent", "overhang", "sheet")]
        if kind == "coplanar-strips":
            what = 'needs how thick the sheet under the strips is, as in sheet = "1.5 mm"'
            needs.append(("permittivity", "sheet", what))
    if kind == "uniform":
        what = 'needs the frequency it holds at, as in at = "900 MHz"'
        needs = [("attenuation", "at", what), ("at", "attenuation", "belongs to `attenuation`")]
    for key, other, what in needs:
        if key in table.data and other not in table.data:
            table.report(key, what)


def _with_lines_of_others(
    found: dict[str, FeedLinePlan], alike: dict[str, tuple[Table, str]], names: Sequence[str]
) -> list[FeedLinePlan]:
    """Give items with `like` the line of the item they name, or report why there is none."""
    items = []
    for name, item in found.items():
        if name in alike:
            item = replace(item, line=_line_of(name, found, alike, names))
        items.append(item)
    return items


def _line_of(
    name: str,
    found: dict[str, FeedLinePlan],
    alike: dict[str, tuple[Table, str]],
    names: Sequence[str],
) -> LinePlan | None:
    table, _ = alike[name]
    seen = {name}
    while name in alike:
        other = alike[name][1]
        if other in seen:
            table.report("like", "these items lead round in a circle; give one of them a `line`")
            return None
        if other not in names:
            hint = nearest(other, [known for known in names if known not in seen])
            advice = f'do you mean "{hint}"?' if hint else "name one that has a `line`"
            if len(seen) == 1:
                table.report("like", f"no item of the feed line has this name; {advice}")
            return None
        seen.add(other)
        name = other
    item = found.get(name)
    if item is not None and item.kind not in WITH_LINE:
        table.report("like", f'the item "{name}" is a {item.kind} and has no line; name another')
    return None if item is None else item.line
