"""The grammar of quantities and expressions in a study file.

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
import re
from fractions import Fraction
from typing import Literal, NamedTuple

from simkit.study.expression import FUNCTIONS, Expression, ExpressionError, Step
from simkit.study.units import UNITS, find_unit, nearest

LONGEST = 1000
"""Characters an expression may have."""

DEEPEST = 40
"""Levels of parentheses, signs and powers an expression may have."""

_TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:[0-9]{1,40}(?:\.[0-9]{0,40})?|\.[0-9]{1,40})(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<word>[A-Za-z_µμΩ\u2126][A-Za-z0-9_Ω\u2126]*)"
    r"|(?P<sign>\*\*|[-+*/(),]))"
)


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
