"""Entries of a study file that several tables have: angles, points and vectors, switches."""

from __future__ import annotations

import json

from simkit.study.metals import METALS
from simkit.study.tables import Quantity, Table, toml_kind
from simkit.study.units import LENGTH, PURE, nearest


def read_angle(table: Table, name: str, missing: str = "") -> Quantity | None:
    """Return an angle, which to expressions is a pure number in radians."""
    table.notes.angles.add(table.key(name))
    angle = table.quantity(name, PURE, missing)
    complaint = "" if angle is None else bare_angle(angle)
    if not complaint:
        return angle
    table.report(name, complaint)
    return None


def bare_angle(angle: Quantity) -> str:
    """Return what is wrong with an angle written as a number alone: who writes 30 means degrees."""
    text = angle.expression.text.strip()
    try:
        if float(text) == 0:
            return ""
    except ValueError:
        return ""
    return f'an angle takes its unit, as in "{text.removesuffix(".0")} deg" or "0.5 rad"'


def read_vector(
    table: Table, name: str, axes: str, missing: str = ""
) -> tuple[Quantity, ...] | None:
    """Return one length per letter of `axes`, written as a list."""
    raw = table.raw(name)
    table.notes.fixed[table.key(name)] = "it is a list; sweep a name of [values] used in it"
    if name not in table.data:
        if missing:
            table.report(name, f"is missing; {missing}")
        return None
    if not isinstance(raw, list) or len(raw) != len(axes):
        example = json.dumps([f"{10 * (i + 1)} mm" for i in range(len(axes))])
        table.report(name, f"write one length each for {', '.join(axes)}, as in {name} = {example}")
        return None
    found = [
        table.notes.expression(item, LENGTH, (*table.path, name, i), f"{table.key(name)}.{axis}")
        for i, (item, axis) in enumerate(zip(raw, axes, strict=True))
    ]
    complete = tuple(quantity for quantity in found if quantity is not None)
    return complete if len(complete) == len(axes) else None


def read_switch(table: Table, name: str) -> bool:
    """Return true or false; false if the key is left out or after a problem."""
    raw = table.raw(name)
    if name in table.data and not isinstance(raw, bool):
        table.report(name, f"must be true or false, without quotes, not {toml_kind(raw)}")
        return False
    return raw is True


def known_conductivity(table: Table, material: str) -> float | None:
    """Return the conductivity of the metal under the key `material`, S/m; None after a problem."""
    entry = METALS.get(material.lower())
    if entry is not None:
        return entry.conductivity_s_per_m
    hint = nearest(material, list(METALS))
    advice = f'do you mean "{hint}"?' if hint else f"known are {', '.join(METALS)}"
    what = f'this metal is not in the table; {advice} Or give conductivity = "1.5e7 S/m".'
    table.report("material", what)
    return None
