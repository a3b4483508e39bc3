"""Lines by the keys a study gives them, read from a short text and written back.

``two-strips, width = 6 mm, separation = 3 mm`` says in one text what a ``[[feedline]]`` item of a
study says in lines of its own; ``75 ohm`` and ``75 ohm, 0.66`` are short for a uniform line by its
impedance and velocity factor.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from typing import Any

from simkit.feedline.checks import FeedlineError
from simkit.feedline.line import Line
from simkit.feedline.lines import CoplanarStrips, StripOverPlate, TwoStrips
from simkit.feedline.round_lines import Coaxial, UniformLine
from simkit.study.expression import ExpressionError
from simkit.study.metals import METALS
from simkit.study.parser import parse
from simkit.study.units import (
    CONDUCTIVITY,
    FREQUENCY,
    LENGTH,
    PURE,
    RESISTANCE,
    Dimension,
    as_text,
    describe,
    nearest,
)


@dataclass(frozen=True)
class Key:
    """A key of a line in the study file: the field behind it, and its unit."""

    field: str
    dimension: Dimension
    unit: str


MM = "mm"
_SHEET = {
    "thickness": Key("thickness_m", LENGTH, MM),
    "permittivity": Key("permittivity", PURE, "1"),
    "loss_tangent": Key("loss_tangent", PURE, "1"),
    "overhang": Key("overhang_m", LENGTH, MM),
    "conductivity": Key("conductivity_s_per_m", CONDUCTIVITY, "S/m"),
}
_WIDTH = {"width": Key("width_m", LENGTH, MM)}
_OTHER = {"other_width": Key("other_width_m", LENGTH, MM)}

KEYS: dict[str, tuple[type[Line], dict[str, Key]]] = {
    "two-strips": (
        TwoStrips,
        {**_WIDTH, "separation": Key("separation_m", LENGTH, MM), **_OTHER, **_SHEET},
    ),
    "strip-over-plate": (
        StripOverPlate,
        {**_WIDTH, "height": Key("height_m", LENGTH, MM), **_SHEET},
    ),
    "coplanar-strips": (
        CoplanarStrips,
        {
            **_WIDTH,
            "gap": Key("gap_m", LENGTH, MM),
            "sheet": Key("sheet_m", LENGTH, MM),
            **_OTHER,
            **_SHEET,
        },
    ),
    "coaxial": (
        Coaxial,
        {
            "inner": Key("inner_m", LENGTH, MM),
            "outer": Key("outer_m", LENGTH, MM),
            "permittivity": _SHEET["permittivity"],
            "loss_tangent": _SHEET["loss_tangent"],
            "conductivity": _SHEET["conductivity"],
        },
    ),
    "uniform": (
        UniformLine,
        {
            "impedance": Key("impedance_ohm", RESISTANCE, "ohm"),
            "velocity_factor": Key("velocity_factor", PURE, "1"),
            "attenuation": Key("attenuation_db_per_m", PURE, "1"),
            "at": Key("attenuation_at_hz", FREQUENCY, "MHz"),
            "loss_tangent": _SHEET["loss_tangent"],
        },
    ),
}
"""Kinds of line by the names a study has for them."""


def read_line(text: str, what: str = "line") -> Line:
    """Return the line that a short text means.

    Raises
    ------
    FeedlineError
        If the text is no line, with what is wrong in it; or if the line cannot be.
    """
    kind, *rest = (part.strip() for part in text.split(","))
    if kind not in KEYS:
        return _short(kind, rest, text, what)
    line, keys = KEYS[kind]
    given: dict[str, Any] = {}
    for part in rest:
        name, mark, value = (piece.strip() for piece in part.partition("="))
        if not mark:
            raise FeedlineError(f"{what} '{text}': '{part}' is not KEY=VALUE, as in width=6 mm")
        if name == "material" and "conductivity" in keys:
            given["conductivity_s_per_m"] = _conductivity(value, f"{what} '{text}'")
            continue
        if name not in keys:
            known = [*keys, "material"] if "conductivity" in keys else list(keys)
            hint = nearest(name, known)
            advice = f"do you mean {hint}?" if hint else f"choose from {', '.join(known)}"
            raise FeedlineError(f"{what} '{text}': {kind} has no {name}; {advice}")
        given[keys[name].field] = _number(value, keys[name], f"{what} '{text}': {name}")
    missing = [n for n, key in keys.items() if _needed(line, key.field) and key.field not in given]
    if missing:
        raise FeedlineError(f"{what} '{text}': {kind} needs {' and '.join(missing)}")
    return line(**given)


def _short(first: str, rest: list[str], text: str, what: str) -> Line:
    """An impedance, and perhaps a velocity factor, without their names."""
    keys = KEYS["uniform"][1]
    advice = f"give an impedance, as in '75 ohm', or one of {', '.join(KEYS)} with its sizes"
    try:
        impedance = _number(first, keys["impedance"], f"{what} '{text}'")
        factor = _number(rest[0], keys["velocity_factor"], f"{what} '{text}'") if rest else 1.0
    except FeedlineError as error:
        raise FeedlineError(f"{error}; {advice}") from None
    if len(rest) > 1:
        raise FeedlineError(f"{what} '{text}': too many numbers; {advice}")
    return UniformLine(impedance, factor)


def _number(text: str, key: Key, where: str) -> float:
    try:
        expression = parse(text)
        found, value = expression.dimension({}), expression.evaluate({})
    except ExpressionError as error:
        raise FeedlineError(f"{where}: {error}") from None
    if found != key.dimension:
        raise FeedlineError(
            f"{where}: {describe(key.dimension)} is needed, but {text} is {describe(found)}"
        )
    return value


def _conductivity(material: str, where: str) -> float:
    if material not in METALS:
        hint = nearest(material, list(METALS))
        advice = f"do you mean {hint}?" if hint else f"choose from {', '.join(METALS)}"
        raise FeedlineError(f"{where}: no metal is called '{material}'; {advice}")
    return METALS[material].conductivity_s_per_m


def _needed(line: type[Line], name: str) -> bool:
    from dataclasses import MISSING

    found = {f.name: f for f in fields(line)}  # type: ignore[arg-type]
    return found[name].default is MISSING


def line_keys(line: Line, digits: int = 6) -> dict[str, str | float]:
    """Return the keys that give a line in a study: pure numbers bare, quantities as text.

    What has its default is left out.

    Raises
    ------
    FeedlineError
        If it is a line of a kind that studies do not have.
    """
    for kind, (made, keys) in KEYS.items():
        if type(line) is made:
            return {"line": kind, **_written(line, keys, digits)}
    raise FeedlineError(f"a study has no name for the line '{line.about}'")


def _written(line: Line, keys: Mapping[str, Key], digits: int) -> dict[str, str | float]:
    defaults = {f.name: f.default for f in fields(line)}  # type: ignore[arg-type]
    found: dict[str, str | float] = {}
    for name, key in keys.items():
        value = getattr(line, key.field)
        if value is None or value == defaults[key.field]:
            continue
        pure = key.unit == "1"
        found[name] = float(f"{value:.{digits}g}") if pure else as_text(value, key.unit, digits)
    if isinstance(line, UniformLine) and line.attenuation_db_per_m:
        found["at"] = as_text(line.attenuation_at_hz, "MHz", digits)
    return found
