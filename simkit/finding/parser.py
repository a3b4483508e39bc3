"""The grammar of conditions.

Grammar::

    condition = all { "or" all }
    all       = part { "and" part }
    part      = "not" part | "(" condition ")" | test
    test      = term ( sign value | "within" range | "is" ( "missing" | "known" ) )
    sign      = "<" | "<=" | ">" | ">=" | "=" | "!="
    range     = value ".." value | value "+-" value
    term      = name [ "of" mode | "in" value ".." value ]
    mode      = number [ "/" number ] [ "wave" | "waves" ] | "uniform" [ "current" ]
    value     = [ "-" | "+" ] number [ unit ] | status
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from simkit.errors import ConditionError
from simkit.finding.condition import (
    Comparison,
    Condition,
    Every,
    Not,
    Presence,
    Some,
    Term,
    Within,
)
from simkit.finding.quantities import OF, QUANTITIES, Quantity
from simkit.finding.tokens import KEYWORDS, Token, tokens
from simkit.finding.units import DECIBEL, dimension, example, in_words, unit_names
from simkit.response.labels import half_wave_label
from simkit.store.schema import Status
from simkit.study.expression import ExpressionError
from simkit.study.parser import parse as parse_quantity
from simkit.study.units import find_unit, nearest

DEEPEST = 40
"""Levels of parentheses and negations a condition may have."""

_SIGNS = ("<", "<=", ">", ">=", "=", "!=")


@dataclass(frozen=True)
class Known:
    """What a condition on some results may name.

    Attributes
    ----------
    swept : mapping of str to Quantity
        The swept values of the study.
    band_hz : tuple of two float
        First and last frequency of the results.
    """

    swept: Mapping[str, Quantity]
    band_hz: tuple[float, float]

    def names(self) -> list[str]:
        """Every name, the study's own first."""
        return [*self.swept, *QUANTITIES]


@dataclass(frozen=True)
class _Value:
    """A number in SI with the unit it was written in, and its place."""

    number: float
    unit: str
    start: int
    stop: int


def parse_condition(text: str, known: Known) -> Condition:
    """Parse a condition.

    Parameters
    ----------
    text : str
        As in ``dip of 1/2 wave within 868 MHz +- 1 % and arm < 80 mm``.
    known : Known

    Raises
    ------
    ConditionError
        The text does not follow the grammar, names what is not there, or compares a quantity with
        a value of another dimension.
    """
    return _Parser(text, known).condition_alone()


def parse_term(text: str, known: Known) -> Term:
    """Parse one quantity, as ``dip of 1/2 wave``; raises like `parse_condition`."""
    return _Parser(text, known).term_alone()


class _Parser:
    """Recursive descent with bounded depth."""

    def __init__(self, text: str, known: Known) -> None:
        self.text = "".join(" " if character.isspace() else character for character in text)
        self.known = known
        self.tokens = tokens(self.text)
        self.index = 0
        self.depth = 0

    # -- tokens --------------------------------------------------------------------------------

    @property
    def now(self) -> Token:
        return self.tokens[self.index]

    def step(self) -> Token:
        self.index += 1
        return self.tokens[self.index - 1]

    def take_sign(self, *signs: str) -> str:
        """Step over the present token if it is one of `signs`; empty if it is not."""
        return self.step().text if self.now.kind == "sign" and self.now.text in signs else ""

    def take_word(self, *words: str) -> str:
        return self.step().text.lower() if self.now.is_word(*words) else ""

    def error(
        self, what: str, start: Token | int, stop: Token | int | None = None
    ) -> ConditionError:
        """An error that points at a token, or at everything between two places."""
        first = start.start if isinstance(start, Token) else start
        last = start if stop is None else stop
        return ConditionError(
            self.text, first, last.stop if isinstance(last, Token) else last, what
        )

    def wanted(self, what: str) -> ConditionError:
        """An error saying what should stand in place of the present token."""
        found = "the condition ends" if self.now.kind == "end" else f"`{self.now.text}` stands"
        return self.error(f"{found} where {what} is needed", self.now)

    # -- the grammar ---------------------------------------------------------------------------

    def condition_alone(self) -> Condition:
        found = self.condition()
        self.finish("and, or, or the end")
        return found

    def term_alone(self) -> Term:
        found = self.term()
        self.finish("the end of the quantity")
        return found

    def finish(self, what: str) -> None:
        if self.now.kind != "end":
            raise self.wanted(what)

    def condition(self) -> Condition:
        parts = [self.all()]
        while self.take_word("or"):
            parts.append(self.all())
        return parts[0] if len(parts) == 1 else Some(tuple(parts))

    def all(self) -> Condition:
        parts = [self.part()]
        while self.take_word("and"):
            parts.append(self.part())
        return parts[0] if len(parts) == 1 else Every(tuple(parts))

    def part(self) -> Condition:
        self.depth += 1
        if self.depth > DEEPEST:
            raise self.error(f"this is nested deeper than {DEEPEST} levels", self.now)
        if self.take_word("not"):
            found: Condition = Not(self.part())
        elif self.take_sign("("):
            found = self.condition()
            if not self.take_sign(")"):
                raise self.wanted("a closing parenthesis, and, or or")
        else:
            found = self.test()
        self.depth -= 1
        return found

    def test(self) -> Condition:
        term = self.term()
        if self.take_word("within"):
            self._require_number(term, self.tokens[self.index - 1])
            return self.range(term)
        if self.take_word("is"):
            self._require_number(term, self.tokens[self.index - 1])
            if not (word := self.take_word("missing", "known")):
                raise self.wanted("missing or known")
            return Presence(term, wanted=word == "known")
        place = self.now
        sign = self.take_sign(*_SIGNS)
        if not sign:
            raise self.wanted(f"a comparison of `{term.text}` (< <= > >= =, within, is missing)")
        if term.quantity.unit == "":
            return self.status(term, sign, place)
        return Comparison(term, sign, self.value_for(term))

    def _require_number(self, term: Term, place: Token) -> None:
        if term.quantity.unit == "":
            raise self.error(f"`{term.text}` is a word: compare it by = or !=", place)

    def status(self, term: Term, sign: str, place: Token) -> Condition:
        if sign not in ("=", "!="):
            raise self.error(f"`{term.text}` is a word: compare it by = or !=", place)
        labels = {status.label: float(status) for status in Status}
        word = self.now.text.lower().replace("_", "-")
        if self.now.kind not in ("word", "name") or word not in labels:
            hint = nearest(word, list(labels))
            advice = f"do you mean {hint}?" if hint else f"there are {', '.join(labels)}"
            raise self.error(f"`{self.now.text}` is not a status; {advice}", self.now)
        self.step()
        return Comparison(term, sign, labels[word])

    # -- quantities ----------------------------------------------------------------------------

    def term(self) -> Term:
        token = self.now
        if token.kind not in ("word", "name") or token.is_word(*KEYWORDS):
            raise self.wanted("a quantity, as in dip of 1/2 wave < 880 MHz,")
        self.step()
        quantity = self.quantity(token)
        if quantity.kind == "mode":
            return self.of_mode(quantity, token)
        if quantity.kind == "band":
            return self.in_band(quantity, token)
        if self.now.is_word("of"):
            raise self.error(f"`{quantity.name}` belongs to no mode: leave this out", self.now)
        return Term(quantity, None, None, quantity.name)

    def quantity(self, token: Token) -> Quantity:
        swept = self.known.swept.get(token.text)
        own = QUANTITIES.get(token.text) if token.kind == "word" else None
        # A study may sweep a value called `dip`; it is the one that is not asked of a mode.
        if own is not None and (swept is None or self.now.is_word("of")):
            return own
        if swept is not None:
            return swept
        hint = nearest(token.text, self.known.names())
        advice = f"do you mean `{hint}`?" if hint else "`simkit query --quantities` lists them"
        named = ", ".join(self.known.swept) or "nothing"
        raise self.error(
            f"`{token.text}` is neither a quantity nor a swept value (this study sweeps {named}); "
            f"{advice}",
            token,
        )

    def of_mode(self, quantity: Quantity, token: Token) -> Term:
        if not self.take_word("of"):
            raise self.error(
                f"`{quantity.name}` belongs to a mode: say of which, "
                f"as in {quantity.name}{OF['mode']}",
                token,
            )
        wavelengths, label = self.mode()
        return Term(quantity, wavelengths, None, f"{quantity.name} of {label}")

    def mode(self) -> tuple[Fraction, str]:
        first = self.now
        if self.take_word("uniform"):
            self.take_word("current")
            return Fraction(0), "uniform current"
        if first.kind != "number":
            raise self.wanted("a mode (1/2 wave, 1 wave, 3/2 wave ...)")
        number = Fraction(self.step().text)
        if self.take_sign("/"):
            if self.now.kind != "number" or not Fraction(self.now.text):
                raise self.wanted("a number other than 0")
            number /= Fraction(self.step().text)
        last = self.tokens[self.index - 1]
        if not self.take_word("wave", "waves") and nearest(self.now.text, ["wave", "waves"]):
            raise self.error(f"`{self.now.text}` is not a word for a mode; write wave", self.now)
        quarters = number * 4
        if quarters.denominator != 1 or quarters > 400:
            raise self.error(
                "modes are counted in half waves (1/2 wave, 1 wave, 3/2 wave ...), "
                "on a ground plane in quarter waves",
                first,
                last,
            )
        if quarters % 2:
            return number, half_wave_label(int(quarters), on_plane=True)
        return number, half_wave_label(int(number * 2))

    def in_band(self, quantity: Quantity, token: Token) -> Term:
        if not self.take_word("in"):
            raise self.error(
                f"`{quantity.name}` belongs to a band: say which, "
                f"as in {quantity.name}{OF['band']}",
                token,
            )
        low = self.value()
        if not self.take_sign(".."):
            raise self.wanted("`..` and the upper end of the band")
        high = self.value()
        for value in (low, high):
            self._require_alike("the end of a band", "Hz", value)
        self._require_order(low, high)
        first, last = self.known.band_hz
        if low.number < first * (1 - 1e-9) or high.number > last * (1 + 1e-9):
            raise self.error(
                f"the results reach from {first / 1e6:g} MHz to {last / 1e6:g} MHz; "
                "the band must lie inside",
                low.start,
                high.stop,
            )
        text = " ".join(self.text[low.start : high.stop].split())
        band = (max(first, low.number), min(last, high.number))
        return Term(quantity, None, band, f"{quantity.name} in {text}")

    # -- values --------------------------------------------------------------------------------

    def range(self, term: Term) -> Condition:
        first = self.value()
        if self.take_sign(".."):
            second = self.value()
            for value in (first, second):
                self._require_alike(f"`{term.text}`", term.quantity.unit, value)
            self._require_order(first, second)
            return Within(term, first.number, second.number)
        if not self.take_sign("+-", "±"):
            raise self.wanted("`..` and the upper end, or `+-` and a tolerance,")
        self._require_alike(f"`{term.text}`", term.quantity.unit, first)
        spread = self.value()
        tolerance = spread.number
        if spread.unit == "%":
            tolerance *= abs(first.number)
        elif not (term.quantity.unit in DECIBEL and spread.unit in DECIBEL):
            self._require_alike("this tolerance", term.quantity.unit, spread)
        if tolerance < 0:
            raise self.error("a tolerance must not be negative", spread.start, spread.stop)
        return Within(term, first.number - tolerance, first.number + tolerance)

    def value_for(self, term: Term) -> float:
        value = self.value()
        self._require_alike(f"`{term.text}`", term.quantity.unit, value)
        return value.number

    def value(self) -> _Value:
        start = self.now.start
        sign = self.take_sign("+", "-")
        if self.now.kind != "number":
            raise self.wanted("a number with its unit")
        number, stop = self.now.text, self.step().stop
        unit, stop = self._unit(stop)
        factor = {"%": 0.01, "dB": 1.0, "dBi": 1.0}.get(unit)
        try:
            plain = number if factor is not None or unit == "1" else f"{number} {unit}"
            size = parse_quantity(plain).evaluate({}) * (factor or 1.0)
        except ExpressionError as error:
            raise self.error(str(error), start, stop) from None
        return _Value(-size if sign == "-" else size, unit, start, stop)

    def _unit(self, stop: int) -> tuple[str, int]:
        """The unit after a number, "1" for none, and where it ends."""
        if self.take_sign("%"):
            return "%", self.tokens[self.index - 1].stop
        if self.now.kind != "word" or self.now.is_word("and", "or", "of", "not"):
            return "1", stop
        unit = self._symbol()
        while self.now.text in ("*", "/") and self.tokens[self.index + 1].kind == "word":
            unit += self.step().text + self._symbol()
        return unit, self.tokens[self.index - 1].stop

    def _symbol(self) -> str:
        token = self.step()
        if token.text not in DECIBEL:
            try:
                find_unit(token.text)
            except KeyError:
                hint = nearest(token.text, unit_names())
                advice = f"; do you mean {hint}?" if hint else ""
                raise self.error(f"`{token.text}` is not a unit{advice}", token) from None
        return token.text

    def _require_alike(self, what: str, unit: str, value: _Value) -> None:
        if dimension(unit) == dimension(value.unit):
            return
        written = self.text[value.start : value.stop]
        raise self.error(
            f"{what} is {in_words(unit)}, but {written} is {in_words(value.unit)}; "
            f"write it as in {example(unit)}",
            value.start,
            value.stop,
        )

    def _require_order(self, low: _Value, high: _Value) -> None:
        if low.number > high.number:
            raise self.error("the lower end comes first: this range is empty", low.start, high.stop)
