"""Evaluating quantities within their limits, with every problem kept."""

from __future__ import annotations

import math
from collections.abc import Mapping

from simkit.errors import Problem
from simkit.study.expression import ExpressionError
from simkit.study.tables import Quantity
from simkit.study.units import PURE, as_text, usual_unit

FARTHEST_M = 1e5
"""Largest coordinate; beyond it a unit is wrong."""


class Evaluator:
    """Turns quantities into numbers, in SI, for one point of a study.

    Parameters
    ----------
    values : mapping of str to float
        Names of [values], and dotted keys that override the file; all in SI.

    Attributes
    ----------
    problems : list of Problem
        Everything found wrong so far.
    """

    def __init__(self, values: Mapping[str, float]) -> None:
        self.values = values
        self.problems: list[Problem] = []

    def report(
        self, quantity: Quantity, what: str, number: float | None = None, unit: str | None = None
    ) -> None:
        """Add a problem with a quantity; its number is told too if the text does not show it."""
        written = quantity.written
        literal = len(quantity.expression.steps) == 1 and not quantity.expression.names
        if number is not None and (quantity.key in self.values or not literal):
            written += f" (here {_shown(number, quantity, unit)})"
        self.problems.append(Problem(what, quantity.key, written, quantity.line))

    def number(
        self,
        quantity: Quantity | None,
        *,
        above: float | None = None,
        lowest: float = -math.inf,
        highest: float = math.inf,
        unit: str | None = None,
        why: str = "",
    ) -> float | None:
        """Evaluate a quantity within limits; None without one or after a problem.

        Parameters
        ----------
        quantity : Quantity or None
        above, lowest, highest : float
            Limits in SI: the number must be greater than `above`, at least `lowest` and at most
            `highest`.
        unit : str, optional
            For the limits in messages; the usual one of the dimension if left out.
        why : str
            Reason of the limits and remedy, in place of the general remedy.
        """
        if quantity is None:
            return None
        try:
            number = quantity.evaluate(self.values)
        except ExpressionError as error:
            self.report(quantity, str(error))
            return None
        limit = broken_limit(number, quantity, above, lowest, highest, unit, why)
        if not limit:
            return number
        self.report(quantity, limit, number, unit)
        return None

    def coordinate(self, quantity: Quantity) -> float | None:
        """Evaluate a coordinate, metres."""
        return self.number(quantity, lowest=-FARTHEST_M, highest=FARTHEST_M)

    def length(self, quantity: Quantity | None) -> float | None:
        """Evaluate a length that must be positive, metres."""
        return self.number(quantity, above=0.0, highest=FARTHEST_M)

    def angle(self, quantity: Quantity | None, turns: float = 1.0) -> float | None:
        """Evaluate an angle of at most so many turns, radians."""
        most = turns * 2 * math.pi
        return self.number(quantity, lowest=-most, highest=most, unit="deg", why="check its unit")

    def whole(self, quantity: Quantity | None, lowest: int, highest: int) -> int | None:
        """Evaluate a count."""
        number = self.number(quantity, lowest=lowest, highest=highest)
        if quantity is None or number is None:
            return None
        if number != round(number):
            self.report(quantity, "must be a whole number", number)
            return None
        return round(number)


def broken_limit(
    number: float,
    quantity: Quantity,
    above: float | None,
    lowest: float,
    highest: float,
    unit: str | None = None,
    why: str = "",
) -> str:
    """Return which limit a number breaks and what to do, empty if none; as `Evaluator.number`."""
    if above is not None and not number > above:
        limit, remedy = f"above {_shown(above, quantity, unit)}", "a positive number is needed"
    elif number < lowest:
        limit, remedy = f"at least {_shown(lowest, quantity, unit)}", "raise it"
    elif number > highest:
        limit = f"at most {_shown(highest, quantity, unit)}"
        remedy = "lower it" if quantity.dimension == PURE else "check its unit"
    else:
        return ""
    return f"must be {limit}; {why or remedy}"


def _shown(number: float, quantity: Quantity, unit: str | None) -> str:
    return as_text(number, unit or usual_unit(quantity.dimension))
