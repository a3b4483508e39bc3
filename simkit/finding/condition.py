"""Conditions as trees of tests, and how they are judged over many cases at once.

A test on a quantity a case does not have, such as the dip of a mode without one, is neither true
nor false, and neither is its negation: such a case is selected by ``is missing`` alone.
"""

from __future__ import annotations

import operator
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from simkit.finding.quantities import Quantity

BoolArray = NDArray[np.bool_]
Verdict = tuple[BoolArray, BoolArray]
"""Where a condition is true and where it is false; a case may be in neither."""

SAME = 1e-9
"""Relative difference below which two numbers count as equal: 76 mm, however it was computed."""


@dataclass(frozen=True)
class Term:
    """A quantity as it stands in a condition, with the mode or band it is asked of.

    Attributes
    ----------
    quantity : Quantity
    wavelengths : Fraction or None
        Length of the mode's current in wavelengths, 0 for a uniform one.
    band_hz : tuple of two float or None
    text : str
        As one would write it: ``dip of 1/2 wave``.
    """

    quantity: Quantity
    wavelengths: Fraction | None
    band_hz: tuple[float, float] | None
    text: str


Values = Mapping[Term, NDArray[Any]]
"""(N,) array of each term over the same cases; NaN where a case does not have it."""


@dataclass(frozen=True)
class Comparison:
    """``term sign value``."""

    term: Term
    sign: str
    value: float

    def judge(self, values: Values) -> Verdict:
        """Where it is true, and where it is false."""
        array = values[self.term]
        return known(array, compared(array, self.sign, self.value))


@dataclass(frozen=True)
class Within:
    """``term within low .. high``, ends included."""

    term: Term
    low: float
    high: float

    def judge(self, values: Values) -> Verdict:
        """Where it is true, and where it is false."""
        array = values[self.term]
        inside = compared(array, ">=", self.low) & compared(array, "<=", self.high)
        return known(array, inside)


@dataclass(frozen=True)
class Presence:
    """``term is missing`` or ``term is known``; never undecided."""

    term: Term
    wanted: bool

    def judge(self, values: Values) -> Verdict:
        """Where it is true, and where it is false."""
        there = ~np.isnan(values[self.term])
        return (there, ~there) if self.wanted else (~there, there)


@dataclass(frozen=True)
class Not:
    """The opposite of a condition."""

    part: Condition

    def judge(self, values: Values) -> Verdict:
        """Where it is true, and where it is false."""
        true, false = self.part.judge(values)
        return false, true


@dataclass(frozen=True)
class Every:
    """Conditions that must all hold."""

    parts: tuple[Condition, ...]

    def judge(self, values: Values) -> Verdict:
        """Where it is true, and where it is false."""
        verdicts = [part.judge(values) for part in self.parts]
        true, false = zip(*verdicts, strict=True)
        return np.logical_and.reduce(true), np.logical_or.reduce(false)


@dataclass(frozen=True)
class Some:
    """Conditions one of which must hold."""

    parts: tuple[Condition, ...]

    def judge(self, values: Values) -> Verdict:
        """Where it is true, and where it is false."""
        verdicts = [part.judge(values) for part in self.parts]
        true, false = zip(*verdicts, strict=True)
        return np.logical_or.reduce(true), np.logical_and.reduce(false)


Condition = Comparison | Within | Presence | Not | Every | Some

_SIGNS: dict[str, Callable[[Any, Any], Any]] = {"<": operator.lt, ">": operator.gt}


def compared(array: NDArray[Any], sign: str, value: float) -> BoolArray:
    """Compare numbers with one value; those that differ by rounding alone count as equal."""
    same = np.isclose(array, value, rtol=SAME, atol=0.0)
    if sign in ("=", "!="):
        return np.asarray(same if sign == "=" else ~same)
    beyond = _SIGNS[sign[0]](array, value)
    return np.asarray(beyond | same if sign.endswith("=") else beyond & ~same)


def known(array: NDArray[Any], true: BoolArray) -> Verdict:
    """The verdict on a test that is undecided where the quantity is missing."""
    there = ~np.isnan(array)
    return true & there, ~true & there


def terms_of(condition: Condition | None) -> list[Term]:
    """Return every term of a condition once, in the order in which they stand there."""
    if condition is None:
        return []
    if isinstance(condition, Not):
        return terms_of(condition.part)
    if isinstance(condition, Every | Some):
        found = [term for part in condition.parts for term in terms_of(part)]
        return list(dict.fromkeys(found))
    return [condition.term]
