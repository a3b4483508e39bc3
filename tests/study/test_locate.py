"""Line numbers of keys in TOML texts."""

from __future__ import annotations

import tomllib
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from simkit.study.locate import KeyPath, locate

TEXT = '''\
# a comment with [brackets] = "and quotes'
title = "a # that is no comment"   # one that is
long = """first
[second]
third = 3 """

[values]
"quoted name" = 'C:\\dir'
when = 1979-05-27 07:32:00
a.b . c = 1.5

[[strip]]
path = [
  ["1 mm", "2 mm"],  # ] not an end
  [
    "3 mm",
    "4 mm",
  ],
]
[strip.extra]
k = 1
[[strip]]
name = "west"
[[strip.part]]
x = 1
[[strip.part]]
x = 2
[sweep]
arm = { from = "70 mm", to = "82 mm", count = 5 }
'''


@pytest.mark.parametrize(
    ("path", "line"),
    [
        (("title",), 2),
        (("long",), 3),
        (("values",), 7),
        (("values", "quoted name"), 8),
        (("values", "when"), 9),
        (("values", "a", "b", "c"), 10),
        (("strip",), 12),
        (("strip", 0), 12),
        (("strip", 0, "path"), 13),
        (("strip", 0, "path", 0, 1), 14),
        (("strip", 0, "path", 1), 15),
        (("strip", 0, "path", 1, 1), 17),
        (("strip", 0, "extra", "k"), 21),
        (("strip", 1), 22),
        (("strip", 1, "name"), 23),
        (("strip", 1, "part", 1, "x"), 27),
        (("sweep", "arm", "count"), 29),
    ],
)
def test_line_of_a_key(path: KeyPath, line: int) -> None:
    assert locate(TEXT)[path] == line


def paths(data: Any, path: KeyPath = ()) -> set[KeyPath]:
    found = {path} if path else set()
    items = data.items() if isinstance(data, dict) else enumerate(data)
    for key, item in items:
        if isinstance(item, dict | list):
            found |= paths(item, (*path, key))
        else:
            found.add((*path, key))
    return found


def test_every_key_is_found_and_nothing_else() -> None:
    assert set(locate(TEXT)) == paths(tomllib.loads(TEXT))


FRAGMENTS = st.sampled_from(
    ["a", "b.c", "'d'", '"e"', " = ", "\n", "[", "]", "[[", "]]", "{", "}", ", ", "1", '"x"', "#"]
) | st.sampled_from(
    ['"""m\nn"""', "'''m\nn'''", "\n[t]\n", "\n[[t]]\n", "\na = 1\n", "\nf = [1, [2]]\n", "1.5"]
)


@settings(max_examples=400, deadline=None, derandomize=True)
@given(st.lists(FRAGMENTS, max_size=9).map("".join))
def test_whatever_the_parser_accepts_is_located(text: str) -> None:
    try:
        data = tomllib.loads(text)
    except ValueError:
        return
    lines = locate(text)
    assert set(lines) == paths(data)
    assert all(1 <= line <= text.count("\n") + 1 for line in lines.values())
