"""Where each key of a TOML text stands: dotted path to line number.

The standard parser gives values without places. This scanner reads a text which that parser has
already accepted, so it may take the grammar for granted, and remembers the line on which every key,
array item and table begins.
"""

from __future__ import annotations

import re
import tomllib
from typing import NamedTuple

KeyPath = tuple[str | int, ...]
"""Keys from the root down; items of arrays by their index, counted from 0."""

_TOKEN = re.compile(
    r"(?P<skip>[ \t\r\n]+|\#[^\n]*)"
    r'|(?P<string>"""(?:\\.|[^\\])*?"{3,5}'
    r"|'''.*?'{3,5}"
    r'|"(?:\\.|[^"\\\n])*"'
    r"|'[^'\n]*')"
    r"|(?P<mark>[=,\[\]{}])"
    r"|(?P<bare>[^\s=,\[\]{}#\"']+)",
    re.DOTALL,
)


class _Token(NamedTuple):
    kind: str
    text: str
    line: int


def _tokens(text: str) -> list[_Token]:
    tokens: list[_Token] = []
    line, position = 1, 0
    while position < len(text):
        match = _TOKEN.match(text, position)
        if match is None:  # cannot happen in valid TOML; stop rather than guess
            break
        kind = match.lastgroup or "skip"
        if kind != "skip":
            tokens.append(_Token(kind, match.group(), line))
        line += match.group().count("\n")
        position = match.end()
    tokens.append(_Token("end", "", line))
    return tokens


def locate(text: str) -> dict[KeyPath, int]:
    """Return the line on which every key of a valid TOML text begins.

    Parameters
    ----------
    text : str
        TOML that `tomllib` accepts.

    Returns
    -------
    dict of tuple to int
        ``("strip", 0, "path", 1)`` to the line of the second point of the first strip's path.
    """
    return _Scanner(text).run()


class _Scanner:
    def __init__(self, text: str) -> None:
        self.tokens = _tokens(text)
        self.index = 0
        self.lines: dict[KeyPath, int] = {}
        self.items: dict[KeyPath, int] = {}

    @property
    def now(self) -> _Token:
        return self.tokens[self.index]

    def run(self) -> dict[KeyPath, int]:
        table: KeyPath = ()
        while self.now.kind != "end":
            if self.now.text == "[" and self.now.kind == "mark":
                table = self.header()
            else:
                self.pair(table)
        return self.lines

    def skip(self, mark: str) -> bool:
        if self.now.kind == "mark" and self.now.text == mark:
            self.index += 1
            return True
        return False

    def header(self) -> KeyPath:
        line = self.now.line
        self.skip("[")
        repeated = self.skip("[")
        parts = self.key("]")
        while self.skip("]"):
            pass
        path: KeyPath = ()
        for part in parts[:-1]:
            path = self.inside((*path, part), line)
        path = (*path, parts[-1])
        if repeated:
            self.lines.setdefault(path, line)
            self.items[path] = self.items.get(path, 0) + 1
        return self.inside(path, line)

    def inside(self, path: KeyPath, line: int) -> KeyPath:
        """Remember a table, and return its latest item if it is an array of tables."""
        self.lines.setdefault(path, line)
        if path in self.items:
            path = (*path, self.items[path] - 1)
            self.lines.setdefault(path, line)
        return path

    def key(self, until: str) -> list[str]:
        parts: list[str] = []
        while self.now.kind != "end" and not (self.now.kind == "mark" and self.now.text == until):
            if self.now.kind == "string":
                parts.append(tomllib.loads(f"k = {self.now.text}")["k"])
            else:
                parts.extend(part for part in self.now.text.split(".") if part)
            self.index += 1
        return parts

    def pair(self, table: KeyPath) -> None:
        line = self.now.line
        path = table
        for part in self.key("="):
            path = (*path, part)
            self.lines.setdefault(path, line)
        self.skip("=")
        self.value(path)

    def value(self, path: KeyPath) -> None:
        if self.skip("["):
            self.array(path)
        elif self.skip("{"):
            while self.now.kind != "end" and not self.skip("}"):
                if not self.skip(","):
                    self.pair(path)
        else:
            line = self.now.line
            self.index += self.now.kind != "end"
            # a date and a time with a space between them are two tokens of one value
            while self.now.kind == "bare" and self.now.line == line:
                self.index += 1

    def array(self, path: KeyPath) -> None:
        count = 0
        while self.now.kind != "end" and not self.skip("]"):
            if self.skip(","):
                continue
            item = (*path, count)
            self.lines[item] = self.now.line
            self.value(item)
            count += 1
