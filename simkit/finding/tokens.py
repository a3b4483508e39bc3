"""Words, numbers and signs of a condition, each with its place."""

from __future__ import annotations

import re
from typing import Literal, NamedTuple

from simkit.errors import ConditionError

LONGEST = 2000
"""Characters a condition may have."""

KEYWORDS = ("and", "or", "not", "of", "in", "within", "is", "missing", "known")

_TOKEN = re.compile(
    r"\s*(?:(?P<quoted>\"[^\"]*\"|'[^']*')"
    r"|(?P<sign><=|>=|!=|\.\.|\+-|±|[<>=()/*%+-])"
    # A point that begins "863..870" is not part of the number.
    r"|(?P<number>(?:[0-9]{1,40}(?:\.(?!\.)[0-9]{0,40})?|\.[0-9]{1,40})(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<word>[^\W\d](?:\w|[-.](?=\w))*))"
)

_SLIPS = {
    "==": "equality is written = once",
    "&&": "two tests are joined by the word and",
    "||": "two tests are joined by the word or",
    "≤": "write <=",
    "≥": "write >=",
    "≠": "write !=",
    "!": "write not, or != between a quantity and a value",
    ",": "the decimal sign is a point, and tests are joined by and or or",
}


class Token(NamedTuple):
    """One word, number or sign; `start` and `stop` are its place in the condition."""

    kind: Literal["name", "sign", "number", "word", "end"]
    text: str
    start: int
    stop: int

    def is_word(self, *words: str) -> bool:
        """Whether it is one of these keywords, in any case of letters."""
        return self.kind == "word" and self.text.lower() in words


def tokens(condition: str) -> list[Token]:
    """Split a condition into tokens; the last one is ``end``.

    Raises
    ------
    ConditionError
        A character has no meaning here, or the text is too long.
    """
    if len(condition) > LONGEST:
        raise ConditionError(
            condition, 0, 0, f"this condition has {len(condition)} characters, more than {LONGEST}"
        )
    found: list[Token] = []
    position, end = 0, len(condition.rstrip())
    while position < end:
        match = _TOKEN.match(condition, position, end)
        if match is None:
            raise _stranger(condition, position)
        group = str(match.lastgroup)
        text, start = match[group], match.start(group)
        position = match.end()
        if condition[start : start + 2] == "==":
            raise _stranger(condition, start)
        if group == "quoted":
            found.append(Token("name", text[1:-1], start, position))
        else:
            found.append(Token(group, text, start, position))  # type: ignore[arg-type]
    found.append(Token("end", "the end", end, end + 1))
    return found


def _stranger(condition: str, position: int) -> ConditionError:
    while condition[position].isspace():
        position += 1
    for length in (2, 1):
        slip = condition[position : position + length]
        if slip in _SLIPS:
            return ConditionError(condition, position, position + length, _SLIPS[slip])
    what = f"the character {condition[position]!r} has no meaning here"
    if condition[position] in "'\"":
        what = "this quotation mark is not closed"
    return ConditionError(condition, position, position + 1, what)
