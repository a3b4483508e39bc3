"""Dimensions and evaluation of parsed expressions."""

from __future__ import annotations

import pickle

import pytest

from simkit.study import units
from simkit.study.expression import ExpressionError, constant
from simkit.study.parser import parse

NAMES = {
    "arm": units.LENGTH,
    "band": units.FREQUENCY,
    "n": units.PURE,
    "sheet": units.RESISTANCE,
}


@pytest.mark.parametrize(
    ("text", "dimension"),
    [
        ("arm/2 + 3 mm", units.LENGTH),
        ("min(arm, 3 mm)", units.LENGTH),
        ("-arm", units.LENGTH),
        ("arm*n", units.LENGTH),
        ("arm/arm", units.PURE),
        ("sqrt(arm*arm)", units.LENGTH),
        ("sqrt(arm)*sqrt(arm)", units.LENGTH),
        ("(arm**2)**0.5", units.LENGTH),
        ("arm**(1/3)*arm**(2/3)", units.LENGTH),
        ("n**n", units.PURE),
        ("1/band", units.TIME),
        ("1/(sheet*arm)", units.CONDUCTIVITY),
        ("299792458 m/s / band / 4", units.LENGTH),
        ("sin(30 deg)*arm", units.LENGTH),
        ("exp(-arm/(5 mm))", units.PURE),
    ],
)
def test_dimension_of_a_result(text: str, dimension: units.Dimension) -> None:
    assert parse(text).dimension(NAMES) == dimension


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ("arm + 3", "a length and a pure number cannot be added; .* as in 3 mm"),
        ("3 - band", "a pure number and a frequency cannot be subtracted; .* as in 3 MHz"),
        ("arm + band", "a length and a frequency cannot be added$"),
        ("max(arm, 3)", "cannot be compared by `max`"),
        ("min(arm, arm, band)", "a length and a frequency cannot be compared"),
        ("sin(arm)", "`sin` takes a pure number or an angle, not a length"),
        ("exp(3 mm)", "`exp` takes a pure number"),
        ("2**arm", "an exponent must be a pure number, not a length"),
        ("arm**n", "a length can only be raised to a plain number"),
        ("arm**13", "a unit to a power above 12"),
        ("(arm**12)*arm", "a unit to a power above 12"),
        ("arm**1e30", "a unit to a power above 12"),
        ("arn", r"`arn` is not a name of \[values\]; do you mean `arm`"),
        ("qqq", r"`qqq` is not a name of \[values\]; define it"),
        ("arm**(1/0)", "divides by zero"),
    ],
)
def test_dimensions_that_do_not_fit(text: str, sentence: str) -> None:
    with pytest.raises(ExpressionError, match=sentence):
        parse(text).dimension(NAMES)


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ("1/(n - n)", "divides by zero"),
        ("log(0)", "`log` has no real result for 0"),
        ("sqrt(-n)", "`sqrt` has no real result for -3"),
        ("(-8)**(1/3)", r"`\*\*` has no real result for -8"),
        ("0**-1", r"`\*\*` has no real result for 0, -1"),
        ("exp(10000)", "`exp` is too large"),
        ("10.0**10**10", r"`\*\*` is too large"),
        ("1e59*1e59*1e59*1e59*1e59*1e59", r"`\*` is too large"),
        ("1/(1e59**5*1e59)", r"`\*` is too large"),
    ],
)
def test_steps_without_a_finite_result(text: str, sentence: str) -> None:
    with pytest.raises(ExpressionError, match=sentence):
        parse(text).evaluate({"n": 3.0})


def test_an_expression_survives_pickling() -> None:
    parsed = parse("gap/2 + 3 mm")
    assert pickle.loads(pickle.dumps(parsed)) == parsed


def test_constant_is_a_pure_number() -> None:
    assert constant(2.5).evaluate({}) == 2.5
    assert constant(2.5).dimension({}) == units.PURE
