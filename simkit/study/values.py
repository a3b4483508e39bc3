"""The table [values]: names for numbers that may depend on each other."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from graphlib import CycleError, TopologicalSorter

from simkit.study.expression import FUNCTIONS, ExpressionError
from simkit.study.parser import parse
from simkit.study.tables import NAME, Notes, Quantity, Table, toml_kind
from simkit.study.units import UNITS, as_text, describe

MOST_VALUES = 500
"""Names [values] may hold."""

WIDEST = 1e15
"""Largest magnitude in SI a value may take."""


@dataclass(frozen=True)
class Values:
    """Named quantities, in an order in which each only needs those before it."""

    quantities: tuple[Quantity, ...] = ()

    def names(self) -> set[str]:
        """Return the names of all."""
        return {value_name(quantity) for quantity in self.quantities}

    def affected_by(self, names: Iterable[str]) -> tuple[Quantity, ...]:
        """Return those that change with any of `names`, without these themselves."""
        swept = set(names)
        moving = set(swept)
        found = []
        for quantity in self.quantities:
            name = value_name(quantity)
            if name not in swept and quantity.expression.names & moving:
                moving.add(name)
                found.append(quantity)
        return tuple(found)


def value_name(quantity: Quantity) -> str:
    """Return the name under which expressions refer to an entry of [values]."""
    return quantity.key.removeprefix("values.")


def read_values(table: Table | None, notes: Notes) -> tuple[Values, dict[str, float]]:
    """Read [values] and evaluate it; names and broken names are left in `notes`.

    Parameters
    ----------
    table : Table or None
    notes : Notes

    Returns
    -------
    values : Values
    numbers : dict of str to float
        Each name's number in SI.
    """
    if table is None:
        return Values(), {}
    if len(table.data) > MOST_VALUES:
        table.report("", f"has {len(table.data)} names; at most {MOST_VALUES} are allowed")
        notes.broken.update(table.data)
        return Values(), {}
    raw = {name: table.raw(name) for name in table.data}
    notes.broken.update(name for name in raw if not _usable(table, name))
    uses = {name: _names_used(raw[name]) & set(raw) for name in raw}
    quantities: list[Quantity] = []
    numbers: dict[str, float] = {}
    for name in _ordered(table, uses):
        if name in notes.broken:
            continue
        quantity = notes.expression(raw[name], None, (*table.path, name), table.key(name))
        number = None if quantity is None else _number(table, name, quantity, numbers)
        if quantity is None or number is None:
            notes.broken.add(name)
            continue
        notes.names[name] = quantity.dimension
        numbers[name] = number
        quantities.append(quantity)
    return Values(tuple(quantities)), {name: numbers[name] for name in raw if name in numbers}


def _usable(table: Table, name: str) -> bool:
    if isinstance(table.data[name], dict):
        table.report(name, f"a value is text with a unit or a number, but this is {toml_kind({})}")
    elif not NAME.fullmatch(name):
        table.report(name, "a name is a letter, then up to 59 letters, digits or underscores")
    elif name in UNITS:
        table.report(name, f"this name is a unit; choose another, as {name}_strip")
    elif name == "pi" or name in FUNCTIONS:
        table.report(name, f"this name has a meaning in expressions; choose another, as {name}_1")
    else:
        return True
    return False


def _names_used(raw: object) -> set[str]:
    if not isinstance(raw, str):
        return set()
    try:
        return set(parse(raw).names)
    except ExpressionError:
        return set()


def _ordered(table: Table, uses: dict[str, set[str]]) -> list[str]:
    """Return names so that each only uses earlier ones; those in a circle are reported."""
    remaining = dict(uses)
    while True:
        try:
            return list(TopologicalSorter(remaining).static_order())
        except CycleError as error:
            # graphlib lists the circle from used to user, with the first name repeated
            circle = list(reversed(error.args[1]))
            table.report(circle[0], f"these values go round in a circle: {' -> '.join(circle)}")
            table.notes.broken.update(circle)
            remaining = {
                name: used - set(circle) for name, used in remaining.items() if name not in circle
            }


def _number(
    table: Table, name: str, quantity: Quantity, numbers: Mapping[str, float]
) -> float | None:
    try:
        number = quantity.expression.evaluate(numbers)
    except ExpressionError as error:
        table.report(name, str(error))
        return None
    if abs(number) > WIDEST:
        table.report(
            name,
            f"{describe(quantity.dimension)} of {as_text(number, '1')} in SI units is beyond "
            f"{WIDEST:g}; check its unit",
        )
        return None
    return number
