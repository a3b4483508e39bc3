"""Quantities and expressions of the study file: text in, checked dimension and SI number out.

An expression is parsed once into a postfix program, a flat tuple of steps, which is then run for
every case. There is no recursion while running, nothing from outside is ever executed, and only
floating-point numbers occur, so no text can ask for unbounded work.

Grammar::

    sum     = product { ("+" | "-") product }
    product = unary { ("*" | "/") unary }
    unary   = ("-" | "+") unary | power
    power   = atom [ "**" unary ]
    atom    = quantity | name | function "(" sum { "," sum } ")" | "(" sum ")"
    quantity = number [ unit { ("/" | "*") unit } ]
"""

from __future__ import annotations

import math
import operator
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any, Literal, NamedTuple

from simkit.study.units import (
    PURE,
    UNITS,
    Dimension,
    combine,
    describe,
    find_unit,
    nearest,
    raised,
    usual_unit,
)

LONGEST = 1000
"""Characters an expression may have."""

DEEPEST = 40
"""Levels of parentheses, signs and powers an expression may have."""

LARGEST_POWER = 12
"""Largest exponent of a base unit that may come out of an expression."""

FUNCTIONS: dict[str, Callable[..., float]] = {
    "sqrt": math.sqrt,
    "sin": math.sin,
    "cos": math.cos,
    "tan": math.tan,
    "exp": math.exp,
    "log": math.log,
    "min": min,
    "max": max,
}

_OPERATORS: dict[str, Callable[..., float]] = {
    "+": operator.add,
    "-": operator.sub,
    "*": operator.mul,
    "/": operator.truediv,
    "**": math.pow,  # unlike the operator it never turns complex
    "negate": operator.neg,
}

_TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:[0-9]{1,40}(?:\.[0-9]{0,40})?|\.[0-9]{1,40})(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<word>[A-Za-z_µμΩ\u2126][A-Za-z0-9_Ω\u2126]*)"
    r"|(?P<sign>\*\*|[-+*/(),]))"
)


class ExpressionError(ValueError):
    """An expression that cannot be read or evaluated; its text is one sentence."""


class Step(NamedTuple):
    """One step of a postfix program.

    `action` is ``push`` (of `operand`, a number with `dimension`), ``load`` (of the value named
    `operand`), a function or an operator taking `takes` numbers from the stack.
    """

    action: str
    operand: Any = None
    takes: int = 0
    dimension: Dimension = PURE


@dataclass(frozen=True)
class Expression:
    """A parsed expression.

    Attributes
    ----------
    text : str
        As written.
    steps : tuple of Step
    names : frozenset of str
        Names of values it uses.
    units : tuple of str
        Units written in it, in order, chains as one: ``S/m``.
    """

    text: str
    steps: tuple[Step, ...]
    names: frozenset[str] = field(default_factory=frozenset)
    units: tuple[str, ...] = ()

    def dimension(self, names: Mapping[str, Dimension]) -> Dimension:
        """Return the dimension of the result.

        Raises
        ------
        ExpressionError
            If a name is not among `names`, or if dimensions do not fit, as in the sum of a length
            and a pure number.
        """
        stack: list[_Typed] = []
        for step in self.steps:
            if step.action == "push":
                stack.append(_Typed(step.dimension, step.operand))
            elif step.action == "load":
                stack.append(_Typed(_look_up(step.operand, names), None))
            else:
                arguments = stack[-step.takes :]
                del stack[-step.takes :]
                stack.append(_typed_result(step.action, arguments))
        return stack[0].dimension

    def evaluate(self, values: Mapping[str, float]) -> float:
        """Return the result in SI.

        Raises
        ------
        ExpressionError
            If a step has no finite result, as a division by zero.
        """
        stack: list[float] = []
        for action, operand, takes, _ in self.steps:
            if action == "push":
                stack.append(operand)
            elif action == "load":
                stack.append(values[operand])
            else:
                arguments = stack[-takes:]
                del stack[-takes:]
                stack.append(_apply(action, arguments))
        return stack[0]


class _Typed(NamedTuple):
    """Dimension of an intermediate result, and its number if no value's name went into it."""

    dimension: Dimension
    constant: float | None


def _look_up(name: str, names: Mapping[str, Dimension]) -> Dimension:
    if name in names:
        return names[name]
    hint = nearest(name, [*names, *FUNCTIONS, "pi"])
    advice = f"do you mean `{hint}`?" if hint else "define it in [values]"
    raise ExpressionError(f"`{name}` is not a name of [values]; {advice}")


def _apply(action: str, arguments: list[float]) -> float:
    function = _OPERATORS.get(action) or FUNCTIONS[action]
    try:
        result = function(*arguments)
    except ZeroDivisionError:
        raise ExpressionError("this divides by zero") from None
    except OverflowError:
        raise ExpressionError(f"the result of `{action}` is too large for a number") from None
    except ValueError:
        shown = ", ".join(f"{argument:.6g}" for argument in arguments)
        raise ExpressionError(f"`{action}` has no real result for {shown}") from None
    if not math.isfinite(result):
        raise ExpressionError(f"the result of `{action}` is too large for a number")
    return result


def _typed_result(action: str, arguments: list[_Typed]) -> _Typed:
    dimension = _result_dimension(action, arguments)
    if any(abs(power) > LARGEST_POWER for power in dimension):
        raise ExpressionError(f"a unit to a power above {LARGEST_POWER} comes out of this")
    constants = [argument.constant for argument in arguments]
    known = [constant for constant in constants if constant is not None]
    if len(known) < len(constants):
        return _Typed(dimension, None)
    return _Typed(dimension, _apply(action, known))


def _result_dimension(action: str, arguments: list[_Typed]) -> Dimension:
    first = arguments[0].dimension
    if action == "negate":
        return first
    if action in ("*", "/"):
        return combine(first, arguments[1].dimension, 1 if action == "*" else -1)
    if action == "**":
        return _power_dimension(first, arguments[1])
    if action in ("+", "-", "min", "max"):
        for other in arguments[1:]:
            _require_alike(action, first, other.dimension)
        return first
    if action == "sqrt":
        return raised(first, Fraction(1, 2))
    if first != PURE:
        raise ExpressionError(f"`{action}` takes a pure number or an angle, not {describe(first)}")
    return PURE


def _require_alike(action: str, first: Dimension, second: Dimension) -> None:
    if first == second:
        return
    verb = {"+": "added", "-": "subtracted"}.get(action, f"compared by `{action}`")
    message = f"{describe(first)} and {describe(second)} cannot be {verb}"
    if PURE in (first, second):
        other = first if second == PURE else second
        message += f"; give the number a unit, as in 3 {usual_unit(other)}"
    raise ExpressionError(message)


def _power_dimension(base: Dimension, exponent: _Typed) -> Dimension:
    if exponent.dimension != PURE:
        raise ExpressionError(
            f"an exponent must be a pure number, not {describe(exponent.dimension)}"
        )
    if base == PURE:
        return PURE
    if exponent.constant is None:
        raise ExpressionError(
            f"{describe(base)} can only be raised to a plain number, not to a value that may vary"
        )
    if abs(exponent.constant) > LARGEST_POWER:
        raise ExpressionError(f"a unit to a power above {LARGEST_POWER} comes out of this")
    return raised(base, Fraction(exponent.constant).limit_denominator(1000))


def parse(text: str) -> Expression:
    """Parse an expression of the study file.

    Parameters
    ----------
    text : str
        As in ``"gap/2 + 3 mm"``.

    Returns
    -------
    Expression

    Raises
    ------
    ExpressionError
        If the text does not follow the grammar or uses an unknown unit or function.
    """
    if not text.strip():
        raise ExpressionError('this is empty; write a number with its unit, as in "8 mm"')
    if len(text) > LONGEST:
        raise ExpressionError(
            f"this has {len(text)} characters, more than {LONGEST}; split it with [values]"
        )
    return _Parser(text).run()


def constant(number: float) -> Expression:
    """Return the expression of a bare pure number."""
    return Expression(f"{number!r}", (Step("push", number),))


Kind = Literal["number", "word", "sign", "end"]


class _Token(NamedTuple):
    kind: Kind
    text: str
    column: int


def _tokens(text: str) -> list[_Token]:
    tokens: list[_Token] = []
    position, end = 0, len(text.rstrip())
    while position < end:
        match = _TOKEN.match(text, position, end)
        if match is None:
            raise ExpressionError(_bad_character(text, position))
        kind: Kind = "number" if match["number"] else "word" if match["word"] else "sign"
        tokens.append(_Token(kind, match[kind], match.start(kind) + 1))
        position = match.end()
    tokens.append(_Token("end", "the end", end + 1))
    return tokens


def _bad_character(text: str, position: int) -> str:
    while text[position].isspace():
        position += 1
    character = text[position]
    if character == "^":
        return "a power is written **, not ^"
    if character in "'\"":
        return "a quantity takes no quotation marks inside; inches are written 3 in"
    return f"the character {character!r} at place {position + 1} has no meaning here"


class _Parser:
    """Recursive descent with bounded depth; emits postfix steps."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.tokens = _tokens(text)
        self.index = 0
        self.depth = 0
        self.steps: list[Step] = []
        self.names: set[str] = set()
        self.units: list[str] = []

    def run(self) -> Expression:
        self.sum()
        if self.now.kind != "end":
            raise ExpressionError(self._unexpected())
        return Expression(self.text, tuple(self.steps), frozenset(self.names), tuple(self.units))

    @property
    def now(self) -> _Token:
        return self.tokens[self.index]

    def take(self, *signs: str) -> str | None:
        """Step over the present token if it is one of `signs`."""
        if self.now.kind == "sign" and self.now.text in signs:
            self.index += 1
            return self.tokens[self.index - 1].text
        return None

    def _unexpected(self) -> str:
        token = self.now
        before = self.tokens[self.index - 1] if self.index else None
        if token.text == "," and before is not None and before.kind == "number":
            return "the decimal sign is a point, not a comma: write 2.5, not 2,5"
        if token.text == "**" and before is not None and before.kind == "word":
            return "put a quantity in parentheses before raising it: (2 mm)**2"
        if token.kind == "end":
            return "this ends too early; something is missing at its end"
        return f"`{token.text}` at place {token.column} does not belong there"

    def sum(self) -> None:
        self.product()
        while sign := self.take("+", "-"):
            self.product()
            self.steps.append(Step(sign, takes=2))

    def product(self) -> None:
        self.unary()
        while sign := self.take("*", "/"):
            self.unary()
            self.steps.append(Step(sign, takes=2))

    def unary(self) -> None:
        self.depth += 1
        if self.depth > DEEPEST:
            raise ExpressionError(f"this is nested deeper than {DEEPEST} levels; split it")
        if sign := self.take("+", "-"):
            self.unary()
            if sign == "-":
                self.steps.append(Step("negate", takes=1))
        else:
            self.power()
        self.depth -= 1

    def power(self) -> None:
        bare_unit = self.atom()
        if self.now.text == "**" and bare_unit:
            raise ExpressionError(self._unexpected())
        if self.take("**"):
            self.unary()
            self.steps.append(Step("**", takes=2))

    def atom(self) -> bool:
        """Read an atom; return whether it ended with a unit."""
        token = self.now
        if token.kind == "number":
            self.index += 1
            return self.quantity(token.text)
        if token.kind == "word":
            self.index += 1
            self.word(token)
        elif self.take("("):
            self.sum()
            self.close()
        else:
            raise ExpressionError(self._unexpected())
        return False

    def close(self) -> None:
        if not self.take(")"):
            if self.now.kind == "end":
                raise ExpressionError("a closing parenthesis is missing")
            raise ExpressionError(self._unexpected())

    def word(self, token: _Token) -> None:
        name = token.text
        if self.now.text == "(":
            self.call(name)
        elif name == "pi":
            self.steps.append(Step("push", math.pi))
        elif name in FUNCTIONS:
            raise ExpressionError(f"`{name}` is a function: write {name}(...)")
        elif name in UNITS:
            raise ExpressionError(
                f"the unit `{name}` stands without a number: write 1 {name}, or 3 {name}"
            )
        else:
            self.names.add(name)
            self.steps.append(Step("load", name))

    def call(self, name: str) -> None:
        if name not in FUNCTIONS:
            hint = nearest(name, list(FUNCTIONS))
            advice = f"do you mean `{hint}`?" if hint else f"there are {', '.join(FUNCTIONS)}"
            raise ExpressionError(f"`{name}` is not a function; {advice}")
        self.take("(")
        self.sum()
        count = 1
        while self.take(","):
            self.sum()
            count += 1
        self.close()
        if name in ("min", "max"):
            if count < 2:
                raise ExpressionError(f"`{name}` compares two numbers or more")
        elif count > 1:
            raise ExpressionError(f"`{name}` takes one number")
        self.steps.append(Step(name, takes=count))

    def quantity(self, number: str) -> bool:
        """Read the unit after a number, if there is one, and push the quantity in SI."""
        unit = self.unit()
        self.steps.append(Step("push", _scaled(number, unit), dimension=find_unit(unit).dimension))
        if unit != "1":
            self.units.append(unit)
        return unit != "1"

    def unit(self) -> str:
        if self.now.kind != "word":
            return "1"
        unit = self._symbol()
        while self.now.text in ("*", "/") and self._unit_follows():
            unit += self.now.text
            self.index += 1
            unit += self._symbol()
        return unit

    def _unit_follows(self) -> bool:
        after = self.tokens[self.index + 1]
        return after.kind == "word" and after.text in UNITS

    def _symbol(self) -> str:
        symbol = self.now.text
        if symbol not in UNITS:
            raise ExpressionError(_unknown_unit(symbol))
        self.index += 1
        return symbol


def _unknown_unit(symbol: str) -> str:
    hint = nearest(symbol, list(UNITS))
    if hint is None or symbol == "pi" or symbol in FUNCTIONS:
        return f"`{symbol}` is not a unit; a product is written with *, as in 2 * {symbol}"
    return (
        f"`{symbol}` is not a unit of the study file; do you mean `{hint}`? "
        f"(A product is written with *, as in 2 * {symbol}.)"
    )


def _scaled(number: str, unit: str) -> float:
    """Return number times unit, correctly rounded, so that 74.5 mm is exactly 0.0745."""
    value = float(number)
    if not re.search("[1-9]", number.lower().partition("e")[0]):
        return 0.0
    if not 1e-60 < value < 1e60:
        raise ExpressionError(f"the number {number[:50]} is outside 1e-60 to 1e60")
    return float(Fraction(number) * find_unit(unit).factor)
