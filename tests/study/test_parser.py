"""The grammar: what can be written, and the sentence for what cannot."""

from __future__ import annotations

import math
from contextlib import suppress

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from simkit.study.expression import ExpressionError
from simkit.study.parser import DEEPEST, LONGEST, parse
from simkit.study.units import LENGTH, PURE

VALUES = {"arm": 0.076, "gap": 0.002, "n": 3.0}


def number(text: str) -> float:
    return parse(text).evaluate(VALUES)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("76 mm", 0.076),
        ("74.5mm", 0.0745),
        ("0.1 in", 0.00254),
        ("3e-1 m", 0.3),
        (".5 cm", 0.005),
        ("5. cm", 0.05),
        ("12 µm", 12e-6),
        ("90 deg", math.pi / 2),
        ("1.5e7 S/m", 1.5e7),
        ("3 kohm", 3000.0),
        ("2.2 pF", 2.2e-12),
        ("gap/2 + 3 mm", 0.004),
        ("gap / 2 + arm", 0.077),
        ("\n gap /\t2", 0.001),
    ],
)
def test_quantities_come_out_in_si_correctly_rounded(text: str, expected: float) -> None:
    assert number(text) == expected


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("2 + 3*4", 14),
        ("(2 + 3)*4", 20),
        ("10 - 4 - 3", 3),
        ("48/4/3", 4),
        ("2**3**2", 512),
        ("-2**2", -4),
        ("2**-1", 0.5),
        ("--3", 3),
        ("+-+3", -3),
        ("1/2 * n", 1.5),
        ("3 / 2 mm * 2 mm", 3),
        ("6 S / 3 S/m * 1 m/s * 1 s", 2),
        ("min(n, 7, 2)", 2),
        ("max(n, min(9, 5))", 5),
        ("sqrt(16)", 4),
        ("log(exp(2))", 2),
    ],
)
def test_operators_bind_as_in_python(text: str, expected: float) -> None:
    # exp and log round once each
    assert number(text) == pytest.approx(expected, rel=1e-15)


def test_functions_and_pi() -> None:
    assert number("sin(pi/6)") == math.sin(math.pi / 6)
    assert number("cos(60 deg)") == pytest.approx(0.5, rel=1e-15)  # pi/180 is rounded
    assert number("tan(0.3)") == math.tan(0.3)


def test_names_and_units_are_listed() -> None:
    parsed = parse("gap/2 + arm*n + 3 mm + 1.5e7 S/m * 2 in")
    assert parsed.names == {"gap", "arm", "n"}
    assert parsed.units == ("mm", "S/m", "in")


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ("", "this is empty"),
        ("   ", "this is empty"),
        ("3 Mm", "`Mm` is not a unit of the study file; do you mean `mm`"),
        ("3 arm", r"`arm` is not a unit.*a product is written with \*, as in 2 \* arm"),
        ("3 qqqq", r"`qqqq` is not a unit; a product is written with \*"),
        ("2 pi", r"`pi` is not a unit; a product is written with \*, as in 2 \* pi"),
        ("mm", "the unit `mm` stands without a number"),
        ("3 + mm", "the unit `mm` stands without a number"),
        ("2,5 mm", "decimal sign is a point"),
        ("2^3", r"a power is written \*\*"),
        ("2 mm**2", r"in parentheses before raising it: \(2 mm\)\*\*2"),
        ("3 '", "no quotation marks inside; inches"),
        ('3 "', "no quotation marks inside; inches"),
        ("3 $", r"the character '\$' at place 3"),
        ("gap +", "ends too early"),
        ("(gap", "closing parenthesis is missing"),
        ("gap)", r"`\)` at place 4 does not belong there"),
        ("gap gap", "`gap` at place 5 does not belong there"),
        ("1 2", "`2` at place 3 does not belong there"),
        ("1.2.3", r"`\.3` at place 4 does not belong there"),
        ("* 3", r"`\*` at place 1 does not belong there"),
        ("sqrt", r"`sqrt` is a function: write sqrt\(\.\.\.\)"),
        ("sqrt(1, 2)", "`sqrt` takes one number"),
        ("min(1)", "`min` compares two numbers or more"),
        ("sqr(1)", "`sqr` is not a function; do you mean `sqrt`"),
        ("eval(1)", "`eval` is not a function"),
        ("__import__(1)", "`__import__` is not a function"),
        ("gap.real", r"the character '\.' at place 4"),
        ("gap[0]", r"the character '\[' at place 4"),
        ("0x10", "`x10` is not a unit"),
        ("1e999 mm", "the number 1e999 is outside 1e-60 to 1e60"),
        ("1e-999 mm", "the number 1e-999 is outside 1e-60 to 1e60"),
        ("1e99999999999999999999", "is outside 1e-60 to 1e60"),
        ("9" * 41, "does not belong there"),
    ],
)
def test_a_sentence_for_what_cannot_be_read(text: str, sentence: str) -> None:
    with pytest.raises(ExpressionError, match=sentence):
        parse(text)


@pytest.mark.parametrize("word", ["nan", "inf", "NaN", "infinity"])
def test_not_a_number_is_just_an_unknown_name(word: str) -> None:
    with pytest.raises(ExpressionError, match=f"`{word}` is not a name of"):
        parse(word).dimension({})
    with pytest.raises(ExpressionError, match=f"`{word}` is not a unit"):
        parse(f"3 {word}")


def test_length_and_depth_are_bounded() -> None:
    assert number("+".join("1" * 400)) == 400
    with pytest.raises(ExpressionError, match=f"has {LONGEST + 1} characters, more than {LONGEST}"):
        parse("1" * (LONGEST + 1))
    for opening, closing in (("(", ")"), ("-", ""), ("2**", ""), ("sqrt(", ")")):
        nested = opening * (DEEPEST - 10) + "1" + closing * (DEEPEST - 10)
        if opening != "2**":  # a tower of powers is deep enough but has no finite result
            assert math.isfinite(number(nested))
        with pytest.raises(ExpressionError, match=f"nested deeper than {DEEPEST} levels"):
            parse(opening * (DEEPEST + 1) + "1" + closing * (DEEPEST + 1))


FRAGMENTS = st.sampled_from(
    ["arm", "gap", "n", "(", ")", "+", "-", "*", "/", "**", ",", " ", "2", "0.5", "7e3", "1e59"]
) | st.sampled_from(
    ["mm", "GHz", "S/m", "deg", "pi", "sqrt(", "log(", "min(", "exp(", "µm", "^", ".", "e", "é"]
)


@settings(max_examples=400, deadline=None, derandomize=True)
@given(st.lists(FRAGMENTS, max_size=14).map("".join) | st.text(max_size=30))
def test_any_text_gives_a_finite_number_or_an_expression_error(text: str) -> None:
    result = 0.0
    with suppress(ExpressionError):
        parsed = parse(text)
        parsed.dimension({"arm": LENGTH, "gap": LENGTH, "n": PURE})
        result = parsed.evaluate(VALUES)
    assert isinstance(result, float)
    assert math.isfinite(result)


@settings(max_examples=200, deadline=None, derandomize=True)
@given(
    st.recursive(
        st.integers(1, 9).map(str) | st.sampled_from(["arm", "n"]),
        lambda inner: st.tuples(inner, st.sampled_from(["+", "-", "*", "/"]), inner).map(
            lambda parts: "(" + " ".join(parts) + ")"
        ),
        max_leaves=12,
    )
)
def test_arithmetic_agrees_with_pythons_own(text: str) -> None:
    try:
        expected = eval(text, {"__builtins__": {}}, VALUES)
    except ZeroDivisionError:
        with pytest.raises(ExpressionError, match="divides by zero"):
            parse(text).evaluate(VALUES)
    else:
        assert parse(text).evaluate(VALUES) == expected
