"""The study with some of its values changed: what a fit or a trim turns."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from simkit.errors import MeasurementError, Problem, StudyError
from simkit.study.expression import ExpressionError
from simkit.study.model import Antenna
from simkit.study.parser import parse
from simkit.study.resolve import resolve
from simkit.study.tables import Notes, Quantity, Table
from simkit.study.units import Dimension, as_text, describe, from_si, nearest, si_unit
from simkit.study.values import read_values

if TYPE_CHECKING:
    from simkit.study import Study

SCALE = "scale"
"""Name of the factor by which all dimensions of a build exceed the drawn ones."""


@dataclass(frozen=True)
class Known:
    """What the user knows of a value: it lies within `width` of `value` (95 %), SI."""

    name: str
    value: float
    width: float

    @property
    def sigma(self) -> float:
        """Standard deviation."""
        return self.width / 2

    @property
    def bounds(self) -> tuple[float, float]:
        """Three widths to either side: how far a fit may go if nothing else is said."""
        return self.value - 3 * self.width, self.value + 3 * self.width


class Variation:
    """A study whose values can be overridden by name.

    Parameters
    ----------
    study : Study

    Notes
    -----
    A name is one of [values] or a dotted key that is written in the file
    (``carrier.permittivity``). Entries of [values] that depend on an overridden one follow it.
    """

    def __init__(self, study: Study) -> None:
        self.study = study
        self.notes = Notes()
        root = Table(tomllib.loads(study.text), (), "", self.notes)
        self.values = read_values(root.table("values"), self.notes)[0]
        self._slots: dict[str, Quantity] = {
            quantity.key: quantity for quantity in _quantities(study)
        }

    def names(self) -> list[str]:
        """Return every name that can be overridden."""
        return [*self.study.values, *self._slots]

    def check(self, name: str) -> str:
        """Return the name, or raise with the nearest one if the study has none such.

        Raises
        ------
        MeasurementError
        """
        if name in self.study.values or name in self._slots:
            return name
        hint = nearest(name, [*self.names(), SCALE])
        advice = f"do you mean `{hint}`?" if hint else f"choose from {', '.join(self.names())}"
        if "." in name:
            advice += " (a dotted key must be written in the study to be changed)"
        raise MeasurementError(f"{self.study.path}: there is no value `{name}`; {advice}")

    def dimension(self, name: str) -> Dimension:
        """Dimension of a name that `check` lets pass."""
        slot = self._slots.get(name)
        return slot.dimension if slot is not None else self.notes.names[name]

    def unit(self, name: str) -> str:
        """Unit in which the user reads a value, "1" for a pure number."""
        return self.study.units.get(name, "1")

    def text(self, name: str, value_si: float, digits: int = 5) -> str:
        """Return a value as the user would write it."""
        return as_text(value_si, "1" if name == SCALE else self.unit(name), digits)

    def nominal(self, name: str) -> float:
        """Return the value as the file states it, SI."""
        if name == SCALE:
            return 1.0
        if name in self.study.values:
            return self.study.values[name]
        return self._slots[name].evaluate(self.study.values)

    def antenna(self, overrides: Mapping[str, float]) -> Antenna:
        """Return the antenna with some values changed.

        Raises
        ------
        StudyError
            If the values make no antenna.
        """
        numbers = {**self.study.values, **overrides}
        for quantity in self.values.affected_by(overrides):
            name = quantity.key.removeprefix("values.")
            try:
                numbers[name] = quantity.expression.evaluate(numbers)
            except ExpressionError as error:
                problem = Problem(str(error), quantity.key, quantity.written, quantity.line)
                raise StudyError(str(self.study.path), [problem]) from error
        antenna, problems = resolve(self.study.blueprint, numbers)
        if antenna is None:
            raise StudyError(str(self.study.path), problems)
        return antenna

    def quantity(self, name: str, text: str) -> float:
        """Return a text such as ``74.5 mm`` in SI, checked against the dimension of a name.

        Raises
        ------
        MeasurementError
        """
        text = text.strip()
        try:
            expression = parse(text)
            found = expression.dimension({})
            number = expression.evaluate({})
        except ExpressionError as error:
            raise MeasurementError(f"{name} = {text}: {error}") from error
        wanted = self.dimension(name) if name != SCALE else Notes().names.get("", found)
        if found != wanted:
            raise MeasurementError(
                f"{name} = {text}: {describe(wanted)} is needed, but this is {describe(found)}; "
                f"write it in {si_unit(wanted) if si_unit(wanted) != '1' else 'plain numbers'} "
                "or a multiple"
            )
        return number

    def bounds(self, text: str) -> tuple[str, tuple[float, float]]:
        """Return name and bounds of ``carrier.permittivity=2..3.5`` or ``arm=74 mm..77 mm``.

        Raises
        ------
        MeasurementError
        """
        name, mark, rest = text.partition("=")
        low, dots, high = rest.partition("..")
        if not (mark and dots and low.strip() and high.strip()):
            raise MeasurementError(
                f"--free {text}: write NAME=LOW..HIGH, as in carrier.permittivity=2..3.5 or "
                "'arm=74 mm..77 mm'"
            )
        name = self._named(name)
        pair = (self.quantity(name, low), self.quantity(name, high))
        if not pair[0] < pair[1]:
            raise MeasurementError(f"--free {text}: the first bound must be below the second")
        return name, pair

    def known(self, text: str) -> Known:
        """Return what a text such as ``arm = 74.5 mm +- 0.1 mm`` says.

        Raises
        ------
        MeasurementError
        """
        match = re.fullmatch(r"([^=]+)=(.+?)(?:\+-|\+/-|±)(.+)", text)
        if match is None:
            raise MeasurementError(
                f"--known {text}: write NAME = VALUE +- WIDTH, as in 'arm = 74.5 mm +- 0.1 mm'"
            )
        name = self._named(match[1])
        value, width = self.quantity(name, match[2]), self.quantity(name, match[3])
        if not width > 0:
            raise MeasurementError(f"--known {text}: the width after +- must be positive")
        return Known(name, value, width)

    def _named(self, text: str) -> str:
        name = text.strip()
        return name if name == SCALE and SCALE not in self.study.values else self.check(name)

    def rewritten(
        self, values: Mapping[str, float], head: Iterable[str] = (), why: str = "fitted"
    ) -> str:
        """Return the study's text with other values, each with a comment why and of the old one.

        Raises
        ------
        MeasurementError
            If a value does not stand alone on its line as ``name = value``.
        """
        lines = self.study.text.split("\n")
        for name, value in values.items():
            if name == SCALE:
                continue
            key = f"values.{name}" if name in self.study.values else name
            place = self.study.lines.get(key)
            leaf = re.escape(key.rpartition(".")[2])
            pattern = rf"(\s*\"?{leaf}\"?\s*=\s*)(\"[^\"]*\"|'[^']*'|[^\s#]+)\s*(#.*)?"
            match = re.fullmatch(pattern, lines[place - 1].rstrip("\r")) if place else None
            if match is None or place is None:
                raise MeasurementError(
                    f"{self.study.path}: `{name}` does not stand alone on a line as name = value, "
                    "so its new value cannot be written there; write it so"
                )
            unit = self.unit(name)
            number = f"{from_si(value, unit):.6g}"
            new = number if unit == "1" else f'"{number} {unit}"'
            was = match[2].strip("\"'")
            lines[place - 1] = f"{match[1]}{new}  # {why}, was {was}" + (
                f"; {match[3][1:].strip()}" if match[3] else ""
            )
        return "\n".join([*(f"# {line}" for line in head), *lines])


def _quantities(study: Study) -> Iterable[Quantity]:
    from simkit.study.blueprint import _quantities as walk

    shared = {quantity.key for quantity in study.blueprint.shared()}
    return (q for q in walk(study.blueprint) if q.key in study.units and q.key not in shared)
