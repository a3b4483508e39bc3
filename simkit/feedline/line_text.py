"""Lines by the keys a study gives them, read from a short text and written back.

``two-strips, width = 6 mm, separation = 3 mm`` says in one text what a ``[[feedline]]`` item of a
study says in lines of its own; ``75 ohm`` and ``75 ohm, 0.66`` are short for a uniform line by its
impedance and velocity factor.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import MISSING, fields
from typing import Any

from simkit.errors import Problem
from simkit.feedline.build import line_of
from simkit.feedline.checks import FeedlineError
from simkit.feedline.line import Line
from simkit.feedline.lines import CoplanarStrips, StripOverPlate, TwoStrips
from simkit.feedline.round_lines import Coaxial, UniformLine
from simkit.study.evaluate import Evaluator
from simkit.study.feedline_schema import LINES, read_feedline
from simkit.study.model import LineItem, Metal
from simkit.study.resolve_feedline import resolve_feedline
from simkit.study.tables import Notes, Table
from simkit.study.units import as_text

_SHEET = {
    "permittivity": ("permittivity", "1"),
    "loss_tangent": ("loss_tangent", "1"),
}
_STRIPS = {
    **_SHEET,
    "overhang": ("overhang_m", "mm"),
    "thickness": ("thickness_m", "mm"),
    "conductivity": ("conductivity_s_per_m", "S/m"),
}
_WIDTHS = {"width": ("width_m", "mm"), "other_width": ("other_width_m", "mm")}

FIELDS: dict[str, tuple[type[Line], dict[str, tuple[str, str]]]] = {
    "two-strips": (TwoStrips, {**_WIDTHS, "separation": ("separation_m", "mm"), **_STRIPS}),
    "strip-over-plate": (
        StripOverPlate,
        {"width": ("width_m", "mm"), "height": ("height_m", "mm"), **_STRIPS},
    ),
    "coplanar-strips": (
        CoplanarStrips,
        {**_WIDTHS, "gap": ("gap_m", "mm"), "sheet": ("sheet_m", "mm"), **_STRIPS},
    ),
    "coaxial": (
        Coaxial,
        {
            "inner": ("inner_m", "mm"),
            "outer": ("outer_m", "mm"),
            **_SHEET,
            "conductivity": ("conductivity_s_per_m", "S/m"),
        },
    ),
    "uniform": (
        UniformLine,
        {
            "impedance": ("impedance_ohm", "ohm"),
            "velocity_factor": ("velocity_factor", "1"),
            "attenuation": ("attenuation_db_per_m", "dB/m"),
            "at": ("attenuation_at_hz", "MHz"),
            "loss_tangent": ("loss_tangent", "1"),
        },
    ),
}
"""Kinds of line by the names a study has for them, with the field behind each key and its unit."""


def read_line(text: str, what: str = "line", metal: Metal | None = None) -> Line:
    """Return the line that a short text means.

    Parameters
    ----------
    text : str
    what : str
        What the text is, for errors.
    metal : Metal, optional
        Of the study: strips are made of it unless the text says otherwise.

    Raises
    ------
    FeedlineError
        If the text is no line, with all that is wrong in it; or if the line cannot be.
    """
    notes = Notes()
    data = {"kind": "line", "name": "line", "length": "1 mm", **_keys(text, what)}
    plans = read_feedline([Table(data, ("feedline", 0), "", notes)])
    _refuse(notes.problems, text, what)
    evaluator = Evaluator({})
    items = resolve_feedline(evaluator, plans, metal)
    _refuse(evaluator.problems, text, what)
    (item,) = items
    assert isinstance(item, LineItem)
    return line_of(item.line)


def _keys(text: str, what: str) -> dict[str, str]:
    """The text as keys of an item."""
    first, *rest = (part.strip() for part in text.split(","))
    if first not in LINES:
        return _short(first, rest, text, what)
    found = {"line": first}
    for part in rest:
        name, mark, value = (piece.strip() for piece in part.partition("="))
        if not mark or not value:
            raise FeedlineError(f"{what} '{text}': '{part}' is not KEY=VALUE, as in width=6 mm")
        found[name] = value
    return found


def _short(first: str, rest: list[str], text: str, what: str) -> dict[str, str]:
    """An impedance, and perhaps a velocity factor, without their names."""
    if not first[:1].isdigit() or len(rest) > 1 or any("=" in part for part in rest):
        raise FeedlineError(
            f"{what} '{text}': give an impedance and perhaps a velocity factor, as in "
            f"'75 ohm, 0.66', or one of {', '.join(LINES)} with its sizes, as in "
            "'two-strips, width=6 mm, separation=3 mm'"
        )
    factor = {"velocity_factor": rest[0]} if rest else {}
    return {"line": "uniform", "impedance": first, **factor}


def _refuse(problems: Iterable[Problem], text: str, what: str) -> None:
    said = []
    for problem in problems:
        key = problem.key.rpartition(".")[2]
        said.append(f"{key} = {problem.value}: {problem.what}" if problem.value else problem.what)
        if not problem.value and key:
            said[-1] = f"{key} {problem.what}"
    if said:
        raise FeedlineError("\n".join(f"{what} '{text}': {words}" for words in said))


def line_keys(line: Line, metal: Metal | None = None) -> dict[str, str | float]:
    """Return the keys that give a line in a study: pure numbers bare, quantities as text.

    What has its default, or is the study's metal, is left out.

    Raises
    ------
    FeedlineError
        If studies have no such line, or none without loss in a study with a real metal.
    """
    kind = kind_of(line)
    if not kind:
        raise FeedlineError(f"a study has no name for the line '{line.about}'")
    same = _from_metal(line, metal)
    defaults = {f.name: f.default for f in fields(line)}  # type: ignore[arg-type]
    found: dict[str, str | float] = {"line": kind}
    for key, (name, unit) in FIELDS[kind][1].items():
        value = getattr(line, name)
        shown = value is not None and (defaults[name] is MISSING or value != defaults[name])
        if name == "attenuation_at_hz":
            shown = getattr(line, "attenuation_db_per_m", 0.0) != 0
        if metal is not None and name in ("thickness_m", "conductivity_s_per_m"):
            shown = value is not None and name not in same
        if shown:
            found[key] = _written(value, unit)
    return found


def kind_of(line: Line) -> str:
    """Return the name that a study has for such a line; empty without one."""
    return next((kind for kind, (made, _) in FIELDS.items() if type(line) is made), "")


def _from_metal(line: Line, metal: Metal | None) -> set[str]:
    """Fields that a strip line takes from the study's metal."""
    if metal is None or not hasattr(line, "thickness_m"):
        return set()
    conductivity = getattr(line, "conductivity_s_per_m", None)
    if conductivity is None and metal.conductivity_s_per_m is not None:
        raise FeedlineError(
            f"the study's metal has loss, but '{line.about}' has none: give it a conductivity"
        )
    same = {"conductivity_s_per_m"} if conductivity == metal.conductivity_s_per_m else set()
    return same | ({"thickness_m"} if line.thickness_m == metal.thickness_m else set())


def _written(value: Any, unit: str) -> str | float:
    return float(f"{value:.6g}") if unit == "1" else as_text(value, unit)
