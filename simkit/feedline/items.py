"""A network as the ``[[feedline]]`` items of a study, with sizes a workshop can keep to."""

from __future__ import annotations

import json
import math
from collections.abc import Collection, Iterable, Mapping
from dataclasses import replace
from typing import Any

from simkit.feedline.chain import Chain
from simkit.feedline.checks import FeedlineError
from simkit.feedline.elements import Element, LineSection, Lumped, Stub, TappedLine
from simkit.feedline.line import Line
from simkit.feedline.line_text import FIELDS, kind_of, line_keys
from simkit.study.model import Metal
from simkit.study.units import as_text

STEP_M = 0.1e-3
"""Lengths and widths are written to this: a calliper and a steady hand."""

STEP_OHM = 0.1

PARTS = {"R": ("resistor", "ohm"), "L": ("inductor", "nH"), "C": ("capacitor", "pF")}
"""Kind of item and unit of lumped parts."""

NAMES = {
    LineSection: "match_line",
    Stub: "match_stub",
    TappedLine: "match_tap",
    Lumped: "match_part",
}

Item = dict[str, str | float]


def rounded(chain: Chain, keep: Collection[Line] = ()) -> Chain:
    """Return a chain with lengths, and sizes of lines that were designed, to 0.1 mm and 0.1 ohm.

    Parameters
    ----------
    chain : Chain
    keep : collection of Line
        Lines to be taken as they are: those the user has.
    """
    return replace(chain, elements=tuple(_rounded(element, keep) for element in chain.elements))


def _rounded(element: Element, keep: Collection[Line]) -> Element:
    changes: dict[str, Any] = {}
    for name in ("length_m", "antenna_side_m", "end_side_m"):
        if not (name == "length_m" and isinstance(element, TappedLine)) and hasattr(element, name):
            changes[name] = _to(getattr(element, name), STEP_M, least=0.0)
    line = getattr(element, "line", None)
    if line is not None and line not in keep:
        changes["line"] = _rounded_line(line)
    if isinstance(element, Lumped):
        changes["value"] = float(f"{element.value:.3g}")
    changed: Element = _changed(element, changes)
    return changed


def _rounded_line(line: Line) -> Line:
    """Only what a designer sets: a strip's width, or the impedance of a uniform line."""
    for name, step in (("width_m", STEP_M), ("impedance_ohm", STEP_OHM)):
        if hasattr(line, name) and kind_of(line) in FIELDS:
            other: Line = _changed(line, {name: _to(getattr(line, name), step, least=step)})
            return other
    return line


def _to(value: float, step: float, least: float) -> float:
    # Divided, not multiplied, so that 12.3 mm is the number that 12.3 mm in a file gives.
    return max(least, round(value / step) / round(1 / step))


def _changed(value: Any, changes: dict[str, Any]) -> Any:
    return replace(value, **changes)


def items_of(
    chain: Chain,
    taken: Collection[str] = (),
    known: Mapping[Line, str] | None = None,
    metal: Metal | None = None,
) -> list[Item]:
    """Return one item for each element, from the antenna on.

    Parameters
    ----------
    chain : Chain
    taken : collection of str
        Names that other items have already.
    known : mapping of Line to str, optional
        Lines of other items, with the item's name.
    metal : Metal, optional
        Of the study.

    Returns
    -------
    list of dict
        Keys and values of ``[[feedline]]`` items. A line that an earlier item has is named by
        ``like``, so that both change together.

    Raises
    ------
    FeedlineError
        If the chain holds an element or a line that this does not write.
    """
    used = set(taken)
    lines = dict(known or {})
    found = []
    for element in chain.elements:
        name = _free_name(element, used)
        used.add(name)
        item = _item(element, name)
        line = getattr(element, "line", None)
        if line is not None:
            item |= {"like": lines[line]} if line in lines else line_keys(line, metal)
            lines.setdefault(line, name)
        found.append(item)
    return found


def _free_name(element: Element, used: set[str]) -> str:
    if type(element) not in NAMES:
        raise FeedlineError(f"'{element.about}' is not written into studies: write it by hand")
    name = NAMES[type(element)]
    numbers = (name if n == 1 else f"{name}{n}" for n in range(1, len(used) + 2))
    return next(free for free in numbers if free not in used)


def _item(element: Element, name: str) -> Item:
    if isinstance(element, LineSection):
        return {"kind": "line", "name": name, "length": _mm(element.length_m)}
    if isinstance(element, Stub):
        return {
            "kind": "stub",
            "name": name,
            "end": element.end,
            "connection": element.connection,
            "length": _mm(element.length_m),
        }
    if isinstance(element, TappedLine):
        return {
            "kind": "tapped-line",
            "name": name,
            "from_antenna": _mm(element.antenna_side_m),
            "beyond": _mm(element.end_side_m),
            "end": element.end,
        }
    assert isinstance(element, Lumped)
    kind, unit = PARTS[element.kind]
    item: Item = {
        "kind": kind,
        "name": name,
        "value": as_text(element.value, unit),
        "connection": element.connection,
    }
    if element.kind != "R" and math.isfinite(element.q):
        item["q"] = element.q
    return item


def _mm(length_m: float) -> str:
    return as_text(length_m, "mm")


def toml_text(items: Iterable[Item], comments: Iterable[str] = ()) -> str:
    """Return items as TOML, under comments of one line each."""
    lines = [f"# {comment}" for comment in comments]
    for item in items:
        width = max(len(key) for key in item)
        lines += ["", "[[feedline]]"]
        lines += [f"{key.ljust(width)} = {_toml(value)}" for key, value in item.items()]
    return "\n".join(lines).strip("\n") + "\n"


def _toml(value: str | float) -> str:
    return json.dumps(value, ensure_ascii=False) if isinstance(value, str) else f"{value:.6g}"
