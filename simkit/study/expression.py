"""Quantities and expressions of the study file: text in, checked dimension and SI number out.

An expression is parsed once into a postfix program, a flat tuple of steps, which is then run for
every case. There is no recursion while running, nothing from outside is ever executed, and only
floating-point numbers occur, so no text can ask for unbounded work.
"""

from __future__ import annotations

import math
import operator
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any, NamedTuple

from simkit.study.units import (
    PURE,
    Dimension,
    combine,
    describe,
    nearest,
    raised,
    usual_unit,
)

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
    hint = nearest(name, list(names)) or nearest(name, [*FUNCTIONS, "pi"])
    advice = f"do you mean `{hint}`?" if hint else "define it in [values]"
    raise ExpressionError(f"`{name}` is not a name of [values]; {advice}")


_REMEDY = "change it or what it depends on"


def _too_large(action: str) -> str:
    return f"the result of `{action}` is too large for a number; {_REMEDY}"


def _apply(action: str, arguments: list[float]) -> float:
    function = _OPERATORS.get(action) or FUNCTIONS[action]
    try:
        result = function(*arguments)
    except ZeroDivisionError:
        raise ExpressionError(f"this divides by zero; {_REMEDY}") from None
    except OverflowError:
        raise ExpressionError(_too_large(action)) from None
    except ValueError:
        shown = ", ".join(f"{argument:.6g}" for argument in arguments)
        raise ExpressionError(f"`{action}` has no real result for {shown}; {_REMEDY}") from None
    if not math.isfinite(result):
        raise ExpressionError(_too_large(action))
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


def constant(number: float) -> Expression:
    """Return the expression of a bare pure number."""
    return Expression(f"{number!r}", (Step("push", number),))
