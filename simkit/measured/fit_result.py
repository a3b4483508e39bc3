"""What a fit found."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from simkit.measured.bench_errors import AnalyserErrors
from simkit.measured.fit_problem import FitProblem, To
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.measured.selection import CaseModes
from simkit.measured.variation import Known
from simkit.response.features import Dip

if TYPE_CHECKING:
    from simkit.study import Study

LIMIT_95 = 1.96

LEARNT = 0.8
"""The data have not determined a value whose error they shrink by less than this."""

CONFOUNDED = 1.5
"""Values are called confounded from here on: to know one would make the interval of the other as
many times narrower, ``1 / sqrt(1 - r**2)`` with their correlation ``r``, here 0.75."""


@dataclass(frozen=True, eq=False)
class FittedCurve:
    """One measured file with the model before and after, all at the file's reference plane.

    Attributes
    ----------
    measurement : Measurement
        Within the band that was compared, referred to the study's resistance.
    build : dict of str to float
        Values as cut, SI.
    before, after : (F,) complex array
        Modelled reflection with the values of the study and with the fitted ones; the latter with
        the errors of the bench.
    dips : tuple of Dip
        Measured.
    pairs : tuple of (int, int)
        Half waves of the mode and place in `dips`.
    errors : AnalyserErrors
    """

    measurement: Measurement
    build: dict[str, float]
    before: ComplexArray
    after: ComplexArray
    dips: tuple[Dip, ...]
    pairs: tuple[tuple[int, int], ...]
    errors: AnalyserErrors
    modes_before: CaseModes
    modes_after: CaseModes

    @property
    def residual(self) -> ComplexArray:
        """Measured minus fitted reflection."""
        return np.asarray(self.measurement.reflection - self.after)


@dataclass(frozen=True)
class FittedValue:
    """One free value, SI; `low` and `high` hold 95 %, or are the bounds where those are nearer."""

    name: str
    nominal: float
    value: float
    sigma: float
    bounds: tuple[float, float]
    prior: Known | None
    learnt: float
    """Standard deviation after over before: near 1 if the data say nothing."""

    @property
    def low(self) -> float:
        return max(self.value - LIMIT_95 * self.sigma, self.bounds[0])

    @property
    def high(self) -> float:
        return min(self.value + LIMIT_95 * self.sigma, self.bounds[1])

    @property
    def is_cut(self) -> tuple[bool, bool]:
        """Whether lower and upper end of the interval are the bounds' and not the data's."""
        reach = LIMIT_95 * self.sigma
        return self.value - reach < self.bounds[0], self.value + reach > self.bounds[1]

    @property
    def at_bound(self) -> bool:
        """The search was stopped by a bound."""
        low, high = self.bounds
        return min(self.value - low, high - self.value) < 1e-4 * (high - low)


@dataclass(frozen=True)
class Confounding:
    """Two values of which the data know a combination far better than each, SI.

    Attributes
    ----------
    first, second : str
    correlation : float
        By the data and what is known of other values, what is known of these two left out; so are
        all the following.
    exponent, product, relative_sigma : float
        ``first * second**exponent`` is `product` within `relative_sigma`; NaN where one of them is
        not positive.
    trade : float
        Change of `second` that makes up for a change of `first`, per unit of it.
    alone_sigma : (float, float)
        Standard deviation of each.
    """

    first: str
    second: str
    correlation: float
    exponent: float
    product: float
    relative_sigma: float
    trade: float
    alone_sigma: tuple[float, float]

    @property
    def times_narrower(self) -> float:
        """By how much the interval of one would shrink if the other were known."""
        return times_narrower(self.correlation)


def times_narrower(correlation: float) -> float:
    """Standard deviation of a value over the one it has where its fellow is known, 1 or more."""
    return float(1 / np.sqrt(max(1 - correlation**2, 1e-12)))


@dataclass(frozen=True, eq=False)
class FitResult:
    """What a fit found.

    Attributes
    ----------
    values : tuple of FittedValue
    correlation : (P, P) float array
        Of the free values, priors included.
    confounded : tuple of Confounding
        Pairs of values that can hardly be told apart.
    tied : dict of str to float
        By name: how many times narrower the interval would be if all other values were known.
    curves : tuple of FittedCurve
    capacitance_f : float
        Across the feed, beyond the model's.
    mode_errors : dict of int to float
        By half waves: by how much the measured mode lies below the modelled one, relative, within
        the model's error.
    rms_before, rms_after : float
        Of the difference in reflection.
    surrogate_error : float
        Largest |error| of the interpolated model against a solution at the fitted values; NaN where
        a stored sweep was interpolated and nothing solved.
    """

    study: Study = field(repr=False)
    to: To
    values: tuple[FittedValue, ...]
    correlation: FloatArray
    confounded: tuple[Confounding, ...]
    tied: dict[str, float]
    curves: tuple[FittedCurve, ...]
    capacitance_f: float
    mode_errors: dict[int, float]
    rms_before: float
    rms_after: float
    surrogate_error: float
    solves: int
    notes: tuple[str, ...]
    problem: FitProblem = field(repr=False)
    solution: FloatArray = field(repr=False)
    covariance: FloatArray = field(repr=False)

    def fitted(self) -> dict[str, float]:
        """Fitted numbers by name, SI."""
        return {value.name: value.value for value in self.values}

    def as_text(self) -> str:
        """Values with intervals and what they mean."""
        from simkit.measured.fit_words import fit_text

        return fit_text(self)

    def study_text(self) -> str:
        """The study's text with the fitted values in it."""
        names = ", ".join(str(curve.measurement.path.name) for curve in self.curves)
        head = [f"Fitted to {names}; intervals of 95 %:"]
        variation = self.problem.variation
        head += [
            f"  {v.name} = {variation.text(v.name, v.value)}, "
            f"from {variation.text(v.name, v.low)} to {variation.text(v.name, v.high)}"
            + (" (its bounds: the data do not narrow it)" if all(v.is_cut) else "")
            for v in self.values
        ]
        return variation.rewritten(self.fitted(), head)
