"""Reading TOML tables key by key while collecting every problem, each with its line.

A reader asks a `Table` for the keys it knows; whatever has not been asked for when the table is
closed is a problem, with the nearest known key suggested. So a key can never be ignored in silence,
and adding a key to the study file is one more call.
"""

from __future__ import annotations

import json
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from simkit.errors import Problem
from simkit.study.expression import Expression, ExpressionError, constant
from simkit.study.locate import KeyPath
from simkit.study.parser import parse
from simkit.study.units import LENGTH, PURE, Dimension, describe, find_unit, nearest, usual_unit

NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,59}")

_MISSING: Any = object()


@dataclass(frozen=True)
class Quantity:
    """An expression with its place in the study file.

    Attributes
    ----------
    key : str
        Dotted key as users name it: ``strip.east.width``.
    line : int or None
    written : str
        Value as it stands in the file.
    expression : Expression
    dimension : Dimension
    """

    key: str
    line: int | None
    written: str
    expression: Expression
    dimension: Dimension

    def evaluate(self, values: Mapping[str, float]) -> float:
        """Return the value in SI; an entry of `values` under the key itself takes precedence."""
        swept = values.get(self.key)
        return swept if swept is not None else self.expression.evaluate(values)


def written_unit(quantity: Quantity) -> str | None:
    """Return the first unit written in a quantity that has its dimension, or None."""
    for unit in quantity.expression.units:
        if find_unit(unit).dimension == quantity.dimension:
            return unit
    return None


@dataclass
class Notes:
    """What reading one file has found so far.

    Attributes
    ----------
    lines : dict
        From `locate`.
    names : dict of str to Dimension
        Dimensions of the names of [values] that could be understood.
    broken : set of str
        Names of [values] with a problem of their own; what uses them is not reported again.
    slots : dict of str to Dimension
        Dotted keys that a sweep may vary.
    fixed : dict of str to str
        Dotted keys that a sweep may not vary, and why.
    angles : set of str
        Dotted keys of angles, whose numbers must not stand without a unit.
    quantities : dict of str to Quantity
        Every quantity understood so far, by its dotted key.
    problems : list of Problem
    """

    lines: Mapping[KeyPath, int] = field(default_factory=dict)
    names: dict[str, Dimension] = field(default_factory=dict)
    broken: set[str] = field(default_factory=set)
    slots: dict[str, Dimension] = field(default_factory=dict)
    fixed: dict[str, str] = field(default_factory=dict)
    angles: set[str] = field(default_factory=set)
    quantities: dict[str, Quantity] = field(default_factory=dict)
    problems: list[Problem] = field(default_factory=list)

    def line(self, path: KeyPath) -> int | None:
        """Return the line of the nearest enclosing key that is written in the file."""
        for length in range(len(path), 0, -1):
            if path[:length] in self.lines:
                return self.lines[path[:length]]
        return None

    def report(self, path: KeyPath, key: str, what: str, value: Any = _MISSING) -> None:
        """Add a problem."""
        written = "" if value is _MISSING else as_written(value)
        self.problems.append(Problem(what, key, written, self.line(path)))

    def expression(
        self,
        raw: Any,
        dimension: Dimension | None,
        path: KeyPath,
        key: str,
        parameter: str = "",
    ) -> Quantity | None:
        """Parse a quantity and check its dimension (any, if None); None after a problem.

        `parameter` is a pure number that runs along a curve and may be used besides [values].
        """
        names = {**self.names, parameter: PURE} if parameter else self.names
        try:
            parsed = self._parse(raw, dimension)
            if parsed.names & self.broken:
                return None
            found = parsed.dimension(names)
            if dimension is not None and found != dimension:
                raise ExpressionError(_misfit(dimension, found, parsed, parameter))
        except ExpressionError as error:
            self.report(path, key, str(error), raw)
        else:
            quantity = Quantity(key, self.line(path), as_written(raw), parsed, found)
            self.quantities[key] = quantity
            return quantity
        return None

    @staticmethod
    def _parse(raw: Any, dimension: Dimension | None) -> Expression:
        if isinstance(raw, str):
            return parse(raw)
        if isinstance(raw, bool) or not isinstance(raw, int | float):
            raise ExpressionError(
                f"this is {toml_kind(raw)}; a quantity is text with a unit, as in "
                f'"8 {usual_unit(dimension or LENGTH)}"'
                if dimension != PURE
                else f"this is {toml_kind(raw)}; a number is needed"
            )
        if not -1e60 < raw < 1e60:  # also false for nan
            raise ExpressionError("a number must be finite and within 1e60; write a usual one")
        return constant(float(raw))


def _misfit(wanted: Dimension, found: Dimension, parsed: Expression, parameter: str) -> str:
    single = len(parsed.steps) == 1
    subject = f"`{parsed.text.strip()}`" if single and parsed.names else "this"
    message = f"{describe(wanted)} is needed, but {subject} is {describe(found)}"
    unit = usual_unit(wanted)
    names = sorted(parsed.names - {parameter})
    if names:
        return f"{message}; check the units of {_listed(names)} in [values]"
    if parsed.names and found == PURE:
        return f"{message}; multiply it by one, as in {parameter} * 8 {unit}"
    if wanted == PURE:
        return f"{message}; write it without a unit"
    if found == PURE and not parsed.units:
        example = _plain(parsed.text.strip()) if single else "8"
        return f'{message}; write the unit too, as in "{example} {unit}"'
    return f'{message}; write it as in "8 {unit}"'


def _listed(names: list[str]) -> str:
    return ", ".join(f"`{name}`" for name in names)


def _plain(number: str) -> str:
    return number.removesuffix(".0")


def as_written(value: Any) -> str:
    """Return a TOML value roughly as it would be written, shortened to one line."""
    if isinstance(value, str):
        text = json.dumps(value, ensure_ascii=False)
    elif isinstance(value, bool):
        text = str(value).lower()
    elif isinstance(value, list):
        text = "[" + ", ".join(as_written(item) for item in value[:4])
        text += ", ...]" if len(value) > 4 else "]"
    elif isinstance(value, dict):
        pairs = [f"{key} = {as_written(item)}" for key, item in list(value.items())[:4]]
        text = "{ " + ", ".join(pairs) + " }" if pairs else "{ }"
    elif isinstance(value, int) and not isinstance(value, bool) and abs(value) > 10**30:
        text = "an integer of very many digits"
    else:
        text = str(value)
    return text if len(text) <= 80 else text[:77] + "..."


def toml_kind(value: Any) -> str:
    """Return what kind of TOML value this is, in words."""
    if isinstance(value, bool):
        return "true or false"
    if isinstance(value, str):
        return "text"
    if isinstance(value, int | float):
        return "a bare number"
    if isinstance(value, list):
        return "an array of tables" if value and isinstance(value[0], dict) else "a list"
    if isinstance(value, dict):
        return "a table"
    return "a date or time"


class Table:
    """One table of the file, read key by key.

    Parameters
    ----------
    data : dict
        As `tomllib` gives it.
    path : tuple
        Its place in the file, for lines.
    label : str
        Its dotted name for users, empty for the root.
    notes : Notes
    """

    def __init__(self, data: dict[str, Any], path: KeyPath, label: str, notes: Notes) -> None:
        self.data = data
        self.path = path
        self.label = label
        self.notes = notes
        self.known: list[str] = []

    def key(self, name: str) -> str:
        """Return the dotted key of an entry."""
        return f"{self.label}.{name}" if self.label else name

    def has(self, name: str) -> bool:
        """Whether the file writes this key; the key counts as known from here on."""
        self._know(name)
        return name in self.data

    def raw(self, name: str) -> Any:
        """Return the TOML value or None; the key counts as known from here on."""
        self._know(name)
        return self.data.get(name)

    def report(self, name: str, what: str) -> None:
        """Add a problem with the entry `name`, or with the table itself if that is empty."""
        path = (*self.path, name) if name else self.path
        value = self.data.get(name, _MISSING) if name else _MISSING
        self.notes.report(path, self.key(name) if name else self.label, what, value)

    def text(self, name: str, missing: str = "") -> str | None:
        """Return a text of one line; a missing one is a problem if `missing` says what to do."""
        raw = self.raw(name)
        if name not in self.data:
            if missing:
                self.report(name, f"is missing; {missing}")
        elif not isinstance(raw, str):
            self.report(name, f'text is needed, as in "...", but this is {toml_kind(raw)}')
        elif not raw.strip() or len(raw) > 200 or not raw.isprintable():
            self.report(name, "one line of 1 to 200 printable characters is needed")
        else:
            return raw.strip()
        return None

    def choice(self, name: str, options: Sequence[str], default: str) -> str | None:
        """Return one of `options`; None after a problem."""
        raw = self.raw(name)
        if name not in self.data:
            return default
        if isinstance(raw, str) and raw in options:
            return raw
        hint = nearest(raw, list(options)) if isinstance(raw, str) else None
        listed = ", ".join(f'"{option}"' for option in options)
        self.report(name, f"must be one of {listed}" + (f'; do you mean "{hint}"?' if hint else ""))
        return None

    def quantity(
        self,
        name: str,
        dimension: Dimension,
        missing: str = "",
        fixed: str = "",
        parameter: str = "",
    ) -> Quantity | None:
        """Return a quantity.

        Parameters
        ----------
        name : str
        dimension : Dimension
        missing : str
            What to do if the key is missing, which then is a problem; empty if it may be missing.
        fixed : str
            Why a sweep may not vary it; empty if it may.
        parameter : str
            As for `Notes.expression`.
        """
        raw = self.raw(name)
        if fixed or name not in self.data:
            self.notes.fixed[self.key(name)] = (
                fixed or "the study does not give it; write it there first"
            )
        else:
            self.notes.slots[self.key(name)] = dimension
        if name in self.data:
            path, key = (*self.path, name), self.key(name)
            return self.notes.expression(raw, dimension, path, key, parameter)
        if missing:
            self.report(name, f"is missing; {missing}")
        return None

    def later(self, name: str, instead: str) -> None:
        """Refuse a key that belongs to the study file but not to this version."""
        if self.has(name):
            self.report(name, f"is not available in this version; {instead}")

    def close(self, where: str = "") -> None:
        """Report every key nobody asked for."""
        place = where or (f"[{self.label}]" if self.label else "a study file")
        for name in self.data:
            if name in self.known:
                continue
            hint = nearest(name, self.known)
            listed = ", ".join(self.known)
            advice = f"do you mean `{hint}`?" if hint else f"there are {listed}"
            self.report(name, f"is not a key of {place}; {advice}")

    def table(self, name: str, missing: str = "") -> Table | None:
        """Return a table below this one; None if there is none or after a problem."""
        raw = self.raw(name)
        if name not in self.data:
            if missing:
                self.report(name, f"is missing; {missing}")
            return None
        if not isinstance(raw, dict):
            self.report(name, f"must be a table, written [{self.key(name)}]")
            return None
        return Table(raw, (*self.path, name), self.key(name), self.notes)

    def tables(self, name: str, missing: str = "") -> list[Table]:
        """Return an array of tables, labelled ``strip[1]`` and so on."""
        raw = self.raw(name)
        if name not in self.data:
            if missing:
                self.report(name, f"is missing; {missing}")
            return []
        if not isinstance(raw, list) or not all(isinstance(item, dict) for item in raw):
            self.report(name, f"must be an array of tables, each written [[{name}]]")
            return []
        return [
            Table(item, (*self.path, name, i), f"{name}[{i + 1}]", self.notes)
            for i, item in enumerate(raw)
        ]

    def _know(self, name: str) -> None:
        if name not in self.known:
            self.known.append(name)
